//! The closed-loop sweep against the static one, against `rehearse`, and against the clock.

use std::collections::BTreeMap;
use std::time::Instant;

use hedgerow::case::builtin_grid;
use hedgerow::case::model::Grid;
use hedgerow::grid::graph::components;
use hedgerow::judge::{Outcome, judge};
use hedgerow::record::Scheme;
use hedgerow::rehearsal::rehearse;
use hedgerow::sweep::closed::{ClosedLoop, play, row};
use hedgerow::sweep::files::csv_text;
use hedgerow::sweep::outage::{self, Outage};
use hedgerow::sweep::prepare::{Prepared, divided, prepare};
use hedgerow::sweep::run::{Mode, Plan, sweep};
use hedgerow::sweep::{Balancing, Form};
use hedgerow_tests::table::data_grid;

use super::identities::{cascade, cases};

fn case() -> Prepared {
    cases(&data_grid("39bus_closed_loop.grid.toml"), &[]).remove(0)
}

/// Whether the outage leaves an area in more than one piece.
fn cuts_an_area(grid: &Grid, outage: Outage) -> bool {
    let ends = hedgerow::grid::line_ends(grid);
    let area = |bus: usize| grid.buses[bus].area;
    let inside: Vec<bool> = (0..ends.len())
        .map(|l| {
            grid.lines[l].closed
                && !outage.lines().contains(&l)
                && area(ends[l].0) == area(ends[l].1)
        })
        .collect();
    components(grid.buses.len(), &ends, &inside).1 > grid.areas.len()
}

/// Ends of runs of 300 s; outages that split an area have no single rest point and are left out.
/// Where neighbours help, cost is so flat that ends may lie further apart (1.1 MW after 5-8, 0.03 % of cost): those are held by the judge.
/// Source: own requirement; tolerance 0.5 MW at `keep`.
#[test]
fn the_closed_loop_ends_where_the_static_equilibrium_is() {
    let case = case();
    let setting = ClosedLoop { duration_s: 300.0, ..ClosedLoop::default() };
    let mut far = Vec::new();
    let mut compared = 0;
    for outage in outage::lines(&case.grid).into_iter().step_by(5) {
        let ended = cascade(&case, outage, Balancing::Steward);
        if ended.stages.len() > 1 || ended.beyond || cuts_an_area(&case.grid, outage) {
            continue;
        }
        let play = play(&case, outage, &setting);
        let run = rehearse(&case.grid, &play, Scheme::Steward, &mut |_| true).unwrap();
        let end = &run.end;
        let off =
            |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| (x - y).abs()).fold(0.0, f64::max);
        let worst = off(&end.unit_output_mw, &ended.state.output_mw)
            .max(off(&end.line_flow_mw, &ended.state.flow_mw))
            .max(off(&end.feeder_shed_mw, &ended.state.shed_mw));
        compared += 1;
        println!(
            "{}: {worst:.3} MW, rungs {:?} and {:?}",
            outage.name(&case.grid),
            end.rung,
            ended.rung
        );
        if worst > 0.5 && ended.rung.iter().all(|r| *r == 0) {
            far.push((outage.name(&case.grid), worst));
        } else if worst > 0.5 {
            // Flat cost while neighbours help: apart, and neither end is wrong.
            let said = judge(&case.grid, &play, &run);
            assert_eq!(
                said.outcome,
                Outcome::Kept,
                "{}: {:?}",
                outage.name(&case.grid),
                said.broken_by
            );
        }
    }
    assert!(compared >= 6, "{compared}");
    assert!(far.is_empty(), "{far:?}");
}

/// Source: own requirement; exact.
#[test]
fn one_outage_rehearsed_alone_gives_the_rows_bytes() {
    let case = case();
    let setting = ClosedLoop { duration_s: 30.0, ..ClosedLoop::default() };
    let outages = outage::lines(&case.grid)[10..13].to_vec();
    let plan = Plan {
        cases: vec![case.clone()],
        schemes: vec![Balancing::Steward],
        outages: vec![(Form::AsItIs, outages.clone())],
        mode: Mode::Closed(setting),
    };
    let swept = sweep(&plan, 2, BTreeMap::new(), &|_| true).unwrap();
    let alone =
        rehearse(&case.grid, &play(&case, outages[1], &setting), Scheme::Steward, &mut |_| true);
    let replayed = row(&case, outages[1], Balancing::Steward, &alone.unwrap());
    assert_eq!(csv_text(&[replayed]).unwrap(), csv_text(&swept.rows[1..2]).unwrap());
}

/// On the divided grid, at `keep`, the rest of the grid does not notice an outage inside an area.
/// Source: own requirement, 5 s on 2 free cores and 0.5 MW; tolerance 4 times the time on a shared machine.
#[test]
fn a_closed_loop_sweep_of_39_buses_takes_seconds_and_stays_inside_the_area() {
    let grid = data_grid("39bus_closed_loop.grid.toml");
    let division = hedgerow::divide::divide(&grid, &Default::default(), &mut |_| true).unwrap();
    let tree = divided(&grid, &division.choices.best[0].opened);
    let cases = prepare(&[(Form::Divided, tree)], &[]).unwrap();
    let outages = vec![(Form::Divided, outage::lines(&cases[0].grid))];
    let mode = Mode::Closed(ClosedLoop::default());
    let plan = Plan { cases, schemes: vec![Balancing::Steward], outages, mode };
    let begun = Instant::now();
    let swept = sweep(&plan, 2, BTreeMap::new(), &|_| true).unwrap();
    let took_s = begun.elapsed().as_secs_f64();
    let total = &hedgerow::sweep::totals::totals(&swept.rows)[0];
    println!("39 buses: {} runs of 60 s in {took_s:.2} s; {total:?}", swept.rows.len());
    assert!(took_s < 20.0, "{took_s}");
    let case = &plan.cases[0];
    let mut at_rest = 0;
    for (r, outage) in swept.rows.iter().zip(&plan.outages[0].1) {
        // Within 0.1 mHz: what droop still moves then is below the tolerance.
        let counts = r.rung == 0 && r.freq_rest_dev_mhz.abs() < 0.1;
        if let (true, false, Some(outside)) =
            (counts, cuts_an_area(&case.grid, *outage), r.outside_flow_change_mw)
        {
            at_rest += 1;
            assert!(outside < 0.5, "{}: {outside} MW", r.outage);
        }
    }
    println!("{at_rest} outages inside an area at rest at keep");
    assert!(at_rest >= 8, "{at_rest}");
}

/// The static end is put in the place of a recording's end and judged by clarabel.
/// Source: the judge's own optimum by clarabel 1e-9; tolerances of the judge (0.5 MW, 0.5 % of cost, same rungs).
#[test]
fn the_judge_finds_nothing_to_say_against_the_static_equilibrium() {
    let setting = ClosedLoop { duration_s: 5.2, ..ClosedLoop::default() };
    let (mut judged, mut rungs) = (0, [0; 4]);
    for case in [case(), cases(&builtin_grid(), &[]).remove(0)] {
        for outage in outage::singles(&case.grid) {
            let ended = cascade(&case, outage, Balancing::Steward);
            let whole = ended.stages.len() == 1 && !ended.beyond && ended.state.islands == 1;
            if !whole || cuts_an_area(&case.grid, outage) {
                continue;
            }
            let play = play(&case, outage, &setting);
            let mut run = rehearse(&case.grid, &play, Scheme::Steward, &mut |_| true).unwrap();
            let state = &ended.state;
            run.end.unit_setpoint_mw.clone_from(&state.output_mw);
            run.end.unit_output_mw.clone_from(&state.output_mw);
            run.end.feeder_shed_mw.clone_from(&state.shed_mw);
            run.end.line_flow_mw.clone_from(&state.flow_mw);
            run.end.agreed_mw.clone_from(&state.flow_mw);
            run.end.island_freq_dev_hz = vec![0.0; run.end.island_freq_dev_hz.len()];
            run.end.rung.clone_from(&ended.rung);
            run.proofs.clear();
            let said = judge(&case.grid, &play, &run);
            assert_eq!(
                said.outcome,
                Outcome::Kept,
                "{}: {:?}",
                outage.name(&case.grid),
                said.broken_by
            );
            judged += 1;
            rungs[usize::from(ended.rung.iter().copied().max().unwrap())] += 1;
        }
    }
    println!("{judged} static ends judged, by deepest rung {rungs:?}");
    assert!(
        judged > 60 && rungs[0] > 10 && rungs[1] + rungs[2] + rungs[3] > 5,
        "{judged} {rungs:?}"
    );
}
