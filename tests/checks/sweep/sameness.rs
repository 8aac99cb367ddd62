//! The same bytes for any number of threads, after a stop, and for one outage alone.

use std::collections::BTreeMap;
use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

use hedgerow::case::builtin_grid;
use hedgerow::divide::{Settings, divide};
use hedgerow::sweep::closed::ClosedLoop;
use hedgerow::sweep::files::{Document, Partial, csv_text};
use hedgerow::sweep::outage;
use hedgerow::sweep::prepare::{divided, prepare};
use hedgerow::sweep::run::{Mode, Plan, sweep};
use hedgerow::sweep::{Balancing, Form};

fn plan(mode: Mode) -> Plan {
    let grid = builtin_grid();
    let settings = Settings { outages_max: 0, ..Settings::default() };
    let division = divide(&grid, &settings, &mut |_| true).unwrap();
    let tree = divided(&grid, &division.choices.best[0].opened);
    let forms = [(Form::AsItIs, grid), (Form::Divided, tree)];
    let cases = prepare(&forms, &[1.1, 1.4]).unwrap();
    let closed = mode != Mode::Static;
    let of = |g: &hedgerow::case::model::Grid| {
        let mut all = outage::singles(g);
        all.truncate(if closed { 2 } else { all.len() });
        all
    };
    let outages = forms.iter().map(|(form, grid)| (*form, of(grid))).collect();
    let schemes = match closed {
        true => vec![Balancing::Steward, Balancing::Droop],
        false => Balancing::ALL.to_vec(),
    };
    Plan { cases, schemes, outages, mode }
}

fn text(rows: Vec<hedgerow::sweep::row::Row>) -> String {
    csv_text(&rows).unwrap() + &Document::new("grid", "static", vec![], false, rows).json().unwrap()
}

/// Source: own requirement; exact.
#[test]
fn one_and_two_threads_write_the_same_bytes() {
    for mode in [Mode::Static, Mode::Closed(ClosedLoop { duration_s: 12.0, ..Default::default() })]
    {
        let plan = plan(mode);
        let one = sweep(&plan, 1, BTreeMap::new(), &|_| true).unwrap();
        let two = sweep(&plan, 2, BTreeMap::new(), &|_| true).unwrap();
        assert!(one.rows.len() > 8);
        assert_eq!(text(one.rows), text(two.rows));
    }
}

/// Stopped at half, the partial file's last line cut in its middle, and resumed.
/// Source: own requirement; exact.
#[test]
fn a_sweep_killed_at_half_and_resumed_writes_the_same_bytes() {
    let plan = plan(Mode::Static);
    let whole = sweep(&plan, 2, BTreeMap::new(), &|_| true).unwrap();
    let path = std::env::temp_dir().join(format!("hedgerow-resume-{}.partial", std::process::id()));
    let (partial, none) = Partial::open(&path, &plan, false).unwrap();
    assert!(none.is_empty());
    let partial = Mutex::new(partial);
    let half = plan.tasks().len() / 2;
    let killed = sweep(&plan, 2, BTreeMap::new(), &|f| {
        partial.lock().unwrap().append(f.task, f.rows).unwrap();
        f.done < half
    })
    .unwrap();
    assert!(killed.stopped && killed.rows.len() < whole.rows.len());
    let mut kept = std::fs::read_to_string(&path).unwrap();
    kept.truncate(kept.len() - 17);
    std::fs::write(&path, kept).unwrap();
    let (_, done) = Partial::open(&path, &plan, true).unwrap();
    assert!(done.len() + 1 >= half && done.len() < plan.tasks().len(), "{}", done.len());
    let ran = AtomicUsize::new(0);
    let before = done.len();
    let resumed = sweep(&plan, 2, done, &|_| {
        ran.fetch_add(1, Ordering::Relaxed);
        true
    })
    .unwrap();
    std::fs::remove_file(&path).unwrap();
    assert_eq!(ran.into_inner(), plan.tasks().len() - before);
    assert_eq!(text(resumed.rows), text(whole.rows));
}

/// Source: own requirement; exact.
#[test]
fn another_plan_is_not_resumed() {
    let plan = plan(Mode::Static);
    let path = std::env::temp_dir().join(format!("hedgerow-other-{}.partial", std::process::id()));
    drop(Partial::open(&path, &plan, false).unwrap());
    let mut other = plan.clone();
    other.cases[0].grid.lines[0].rating_mw += 1.0;
    let refused = Partial::open(&path, &other, true).map(|_| ()).unwrap_err().to_string();
    std::fs::remove_file(&path).unwrap();
    assert!(refused.contains("another grid"), "{refused}");
}
