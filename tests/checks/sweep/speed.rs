//! How long sweeps take. Limits are those of two free cores; a busy machine gets slack.

use std::collections::BTreeMap;
use std::time::Instant;

use hedgerow::sweep::run::{Mode, Plan, sweep};
use hedgerow::sweep::{Balancing, Form, outage};
use hedgerow_tests::table::data_grid as grid;

use super::identities::cases;

/// Source: own requirement, 2 s on 2 free cores; tolerance 4 times that on a shared machine.
#[test]
fn a_static_sweep_of_118_buses_takes_seconds() {
    let cases = cases(&grid("ieee118.grid.toml"), &[1.2, 1.5, 2.0]);
    let outages = vec![(Form::AsItIs, outage::singles(&cases[0].grid))];
    let schemes = vec![Balancing::Steward, Balancing::AreaControlError, Balancing::Proportional];
    let plan = Plan { cases, schemes, outages, mode: Mode::Static };
    let begun = Instant::now();
    let swept = sweep(&plan, 2, BTreeMap::new(), &|_| true).unwrap();
    let took_s = begun.elapsed().as_secs_f64();
    println!("118 buses: {} rows in {took_s:.2} s on 2 threads", swept.rows.len());
    for t in hedgerow::sweep::totals::totals(&swept.rows) {
        println!("{t:?}");
    }
    assert!(took_s < 8.0, "{took_s}");
}
