//! What a sweep says on the terminal, and how one outage is replayed.

use std::fmt::Write as _;

use super::Args;
use crate::report::rung_word;
use crate::sweep::Balancing;
use crate::sweep::files::Document;
use crate::sweep::page::WORST;
use crate::sweep::row::Row;
use crate::sweep::totals::worst;

/// The command that replays one row.
pub(super) fn replay(args: &Args, row: &Row) -> String {
    let mut out = "hedgerow sweep".to_owned();
    if let Some(path) = &args.grid {
        let _ = write!(out, " \"{}\"", path.display());
    }
    if let Some(areas) = args.areas {
        let _ = write!(out, " --areas {areas}");
    }
    if args.feeders > 0.0 {
        let _ = write!(out, " --feeders {}", args.feeders);
    }
    if let Some(factor) = row.factor {
        let _ = write!(out, " --rating-factor {factor}");
    }
    let _ = write!(out, " --form {} --scheme {}", row.form.word(), row.scheme.word());
    if args.pairs {
        out.push_str(" --pairs");
    }
    if args.closed_loop {
        let _ = write!(out, " --closed-loop --seconds {}", args.seconds);
    }
    let _ = write!(out, " --only \"{}\"", row.outage);
    out
}

/// Totals and the ten worst as text.
pub(super) fn summary(args: &Args, d: &Document) -> String {
    let mut out = format!("{}: {} runs, {}\n\n", d.grid, d.rows.len(), d.mode);
    let _ = writeln!(
        out,
        "{:<8} {:<9} {:<19} {:>7} {:>9} {:>9} {:>8} {:>8} {:>8}",
        "ratings",
        "form",
        "scheme",
        "outages",
        "with loss",
        "mean lost",
        "worst",
        "moved",
        "followed"
    );
    for t in &d.totals {
        let _ = writeln!(
            out,
            "{:<8} {:<9} {:<19} {:>7} {:>7.1} % {:>7.3} % {:>6.2} % {:>6.1} % {:>8}",
            t.factor.map_or("file".to_owned(), |f| format!("x {f}")),
            t.form.word(),
            t.scheme.word(),
            t.outages,
            t.with_loss_percent,
            t.mean_lost_percent,
            t.worst_lost_percent,
            t.mean_moved_percent,
            t.lines_followed
        );
    }
    let _ = writeln!(out, "\nThe ten worst");
    for r in worst(&d.rows, WORST) {
        let rung = match r.scheme {
            Balancing::Steward => format!(", rung {}", rung_word(r.rung)),
            _ => String::new(),
        };
        let _ = writeln!(
            out,
            "  {}: {:.1} MW lost, {} lines followed{rung}\n    {}",
            r.outage,
            r.load_lost_mw,
            r.lines_followed,
            replay(args, r)
        );
    }
    let _ = writeln!(out, "\nNotes");
    for note in &d.notes {
        let _ = writeln!(out, "  {note}");
    }
    if d.stopped {
        let _ =
            writeln!(out, "\nStopped before its end: go on with --resume and the same options.");
    }
    out
}
