//! Hand-workable cases on two areas of two buses: A1-A2 = B1-B2, tie A2-B1.

use super::least::{Least, least_rungs, short_areas};
use super::setting::{Setting, Sheds};
use super::topology::Topology;
use super::*;
use crate::report::sample;

fn least_of(grid: &Grid, play: &Play, recording: &Recording) -> Least {
    let topology = Topology::of(grid, recording);
    let setting = Setting {
        grid,
        play,
        end: &recording.end,
        topology: &topology,
        rungs: &recording.end.rung,
        sheds: Sheds::Free,
    };
    least_rungs(&setting).expect("solver")
}

/// +40 MW at A2: units of curvature 1 (A1) and 3 (A2) share it 30 to 10.
#[test]
fn dispatches_by_cost_at_keep() {
    let (grid, play, mut run) = sample::two_areas();
    sample::add_load(&mut run, 1, 40.0);
    sample::set_units(&grid, &mut run, &[130.0, 110.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    // 1/2 * 1 * 0.3^2 + 1/2 * 3 * 0.1^2
    assert!((judgement.optimum_cost.unwrap() - 0.06).abs() < 1e-6);
    assert!((judgement.cost - 0.06).abs() < 1e-9);
    assert_eq!(judgement.least_rung, [0, 0]);
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
}

#[test]
fn breaks_on_a_dispatch_that_costs_too_much() {
    let (grid, play, mut run) = sample::two_areas();
    sample::add_load(&mut run, 1, 40.0);
    sample::set_units(&grid, &mut run, &[120.0, 120.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.outcome, Outcome::Broken);
    assert!(judgement.broken_by[0].contains("set-points cost 0.0800"), "{:?}", judgement.broken_by);
}

/// Line A1-A2 carries 100 MW at base and is rated 110: A1 may only add 10 of the 40.
#[test]
fn a_full_line_moves_the_optimum() {
    let (mut grid, play, mut run) = sample::two_areas();
    grid.lines[0].rating_mw = 110.0;
    sample::add_load(&mut run, 1, 40.0);
    sample::set_units(&grid, &mut run, &[110.0, 130.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    // 1/2 * 1 * 0.1^2 + 1/2 * 3 * 0.3^2
    assert!((judgement.optimum_cost.unwrap() - 0.14).abs() < 1e-5);
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
}

#[test]
fn names_the_line_above_its_rating() {
    let (mut grid, play, mut run) = sample::two_areas();
    grid.lines[0].rating_mw = 110.0;
    sample::add_load(&mut run, 1, 40.0);
    sample::set_units(&grid, &mut run, &[130.0, 110.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    assert!(
        judgement.broken_by.iter().any(|s| s.contains("Line A1-A2 carries 130.00 MW, 118.2 %")),
        "{:?}",
        judgement.broken_by
    );
}

/// A's units reach 140 + 140 at keep; 300 MW of load is 20 MW too much for A, not for both.
#[test]
fn an_area_too_short_for_keep_leans() {
    let (grid, play, mut run) = sample::two_areas();
    sample::add_load(&mut run, 1, 100.0);
    assert_eq!(least_of(&grid, &play, &run), Least::Rungs(vec![1, 0]));
    run.end.rung[0] = 1;
    run.end.agreed_mw[1] = -20.0;
    sample::set_units(&grid, &mut run, &[140.0, 140.0, 120.0]);
    let judgement = judge(&grid, &play, &run);
    // Units 2 * 0.16/2 ... A1: 1/2*1*.4^2, A2: 1/2*3*.4^2, B2: 1/2*2*.2^2; tie 2*(3*.2 + .025*.04)
    let by_hand = 0.08 + 0.24 + 0.04 + 2.0 * (0.6 + 0.001);
    assert!((judgement.optimum_cost.unwrap() - by_hand).abs() < 1e-5, "{judgement:?}");
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
}

/// With a tie band of 5 MW, help is not enough; the emergency range of 150 each plus 5 is.
#[test]
fn stretches_where_the_band_is_too_narrow_to_lean() {
    let (grid, mut play, mut run) = sample::two_areas();
    play.steward.tie_band_mw = 5.0;
    sample::add_load(&mut run, 1, 100.0);
    assert_eq!(least_of(&grid, &play, &run), Least::Rungs(vec![2, 0]));
}

/// 350 MW of load against 2 x 150 and 5 from the neighbour: 45 MW must go.
#[test]
fn sheds_exactly_what_is_short() {
    let (grid, mut play, mut run) = sample::two_areas();
    play.steward.tie_band_mw = 5.0;
    sample::add_load(&mut run, 1, 150.0);
    run.end.rung[0] = 3;
    run.end.agreed_mw[1] = -5.0;
    run.end.feeder_shed_mw[0] = 45.0;
    sample::set_units(&grid, &mut run, &[150.0, 150.0, 105.0]);
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.least_rung, [3, 0]);
    assert!((judgement.least_shed_mw - 45.0).abs() < 1e-3, "{judgement:?}");
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
    run.end.feeder_shed_mw[0] = 50.0;
    sample::set_units(&grid, &mut run, &[150.0, 145.0, 105.0]);
    let judgement = judge(&grid, &play, &run);
    assert!(
        judgement.broken_by.iter().any(|s| s.contains("sheds 50.00 MW, the least is 45.00 MW")),
        "{:?}",
        judgement.broken_by
    );
}

/// A breaker takes all of its feeder: 60 MW for 45 is one breaker too coarse, not a fault.
#[test]
fn one_breaker_may_overshoot() {
    let (mut grid, mut play, mut run) = sample::two_areas();
    play.steward.tie_band_mw = 5.0;
    grid.feeders[0].kind = FeederKind::Switched;
    sample::add_load(&mut run, 1, 150.0);
    run.end.rung[0] = 3;
    run.end.feeder_shed_mw[0] = 60.0;
    // 290 left for A: the units at 145 each cost less than tie help at 3 per pu would save.
    sample::set_units(&grid, &mut run, &[150.0, 140.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.breaker_slack_mw, 60.0);
    assert_eq!(judgement.outcome, Outcome::Kept, "{judgement:?}");
}

#[test]
fn a_charter_that_forbids_shedding_leaves_no_reference() {
    let (mut grid, mut play, mut run) = sample::two_areas();
    play.steward.tie_band_mw = 5.0;
    grid.areas[0].lowest_rung = 2;
    sample::add_load(&mut run, 1, 150.0);
    match least_of(&grid, &play, &run) {
        // The worst of balance and tie limit: 45 MW shared over A's balance and the band's row.
        Least::Beyond { short_mw, areas } => {
            assert!(short_mw > 10.0 && short_mw < 46.0, "{short_mw}");
            assert_eq!(areas, ["Ash"]);
        }
        Least::Rungs(rungs) => panic!("found {rungs:?}"),
    }
    assert!(judge(&grid, &play, &run).not_judged[0].contains("Ash"));
}

#[test]
fn names_the_tie_off_schedule() {
    let (grid, play, mut run) = sample::two_areas();
    sample::set_units(&grid, &mut run, &[103.0, 100.0, 97.0]);
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.outcome, Outcome::Broken);
    assert!(
        judgement.broken_by[0].starts_with("Tie A2-B1 carries 3.00 MW, 3.00 MW off the schedule"),
        "{:?}",
        judgement.broken_by
    );
}

#[test]
fn a_frequency_of_one_millihertz_is_not_rest() {
    let (grid, play, mut run) = sample::two_areas();
    run.end.island_freq_dev_hz[0] = 1e-3;
    assert_eq!(judge(&grid, &play, &run).outcome, Outcome::Broken);
    run.end.island_freq_dev_hz[0] = 0.9e-3;
    assert_eq!(judge(&grid, &play, &run).outcome, Outcome::Kept);
}

#[test]
fn a_refused_proof_breaks_the_run() {
    let (grid, play, mut run) = sample::two_areas();
    run.proofs.push(sample::proof(0, 3.0, false));
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.broken_by.len(), 1);
    assert!(judgement.broken_by[0].contains("1 of 1 proofs"));
}

#[test]
fn a_baseline_is_not_held_against_rungs_or_cost() {
    let (grid, play, mut run) = sample::two_areas();
    run.scheme = Scheme::Droop;
    run.end.rung = vec![2, 2];
    sample::set_units(&grid, &mut run, &[150.0, 50.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
    assert_eq!(judgement.optimum_cost, None);
    assert!(judgement.cost > 0.0);
}

#[test]
fn a_dead_steward_leaves_its_area_without_reference_and_the_other_judged() {
    let (grid, play, mut run) = sample::two_areas();
    run.end.steward_alive[1] = false;
    sample::add_load(&mut run, 1, 40.0);
    sample::set_units(&grid, &mut run, &[130.0, 110.0, 100.0]);
    run.end.rung[0] = 1;
    let judgement = judge(&grid, &play, &run);
    assert!(judgement.not_judged[0].contains("Brack"), "{:?}", judgement.not_judged);
    assert!(
        judgement
            .broken_by
            .iter()
            .any(|s| s.contains("Ash ends at rung lean, its least rung is keep")),
        "{:?}",
        judgement.broken_by
    );
}

/// A1 is cut off and lives on: A has no reference, B has.
#[test]
fn a_cut_area_is_not_judged() {
    let (grid, play, mut run) = sample::two_areas();
    sample::add_load(&mut run, 1, -100.0);
    run.end.line_closed[0] = false;
    run.end.line_flow_mw[0] = 0.0;
    run.end.bus_island = vec![Some(1), Some(0), Some(0), Some(0)];
    run.end.island_freq_dev_hz = vec![0.0, 0.0];
    run.end.island_can_regulate = vec![true, false];
    let judgement = judge(&grid, &play, &run);
    assert!(judgement.not_judged[0].contains("Ash: it was cut"), "{:?}", judgement.not_judged);
    assert!(!judgement.facts.iter().any(|f| f.name == "rung" && f.where_ == "Ash"));
    assert!(judgement.facts.iter().any(|f| f.name == "rung" && f.where_ == "Brack"));
}

/// Three areas in a ring: every tie at schedule needs the mid-tie angles, not only the exports.
#[test]
fn a_ring_of_areas_can_keep_its_schedule() {
    let (grid, play, mut run) = sample::ring();
    assert_eq!(judge(&grid, &play, &run).outcome, Outcome::Kept, "{:?}", judge(&grid, &play, &run));
    // +10 MW at the second bus of the first area. The two ties of that area sit on its two
    // buses; with the unit on the first bus only, the angle between them cannot be held.
    sample::add_load(&mut run, 1, 10.0);
    let topology = Topology::of(&grid, &run);
    assert!(topology.meshed.iter().filter(|m| **m).count() == 3);
    let setting = Setting {
        grid: &grid,
        play: &play,
        end: &run.end,
        topology: &topology,
        rungs: &[0, 0, 0],
        sheds: Sheds::Free,
    };
    assert_eq!(short_areas(&setting).unwrap(), [0]);
}

#[test]
fn a_chain_of_areas_has_no_meshed_tie() {
    let (grid, _, run) = sample::two_areas();
    assert!(Topology::of(&grid, &run).meshed.iter().all(|m| !m));
}

/// B2 is black and its unit gone; B1 carries nothing: the rest is judged as if B2 were not there.
#[test]
fn a_dark_bus_is_left_out_and_the_rest_judged() {
    let (grid, play, mut run) = sample::two_areas();
    sample::add_load(&mut run, 2, -100.0);
    run.end.line_closed[2] = false;
    run.end.line_flow_mw[2] = 0.0;
    run.end.bus_island[3] = None;
    run.end.unit_in_service[2] = false;
    run.end.unit_setpoint_mw[2] = 0.0;
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.outcome, Outcome::Kept, "{judgement:?}");
    assert!(judgement.not_judged.is_empty(), "{:?}", judgement.not_judged);
    assert_eq!(judgement.least_rung, [0, 0]);
}

/// 50 MW that nobody needs off wait for the operator: the end is not the least that is possible.
#[test]
fn a_locked_feeder_without_need_is_not_the_least() {
    let (grid, play, mut run) = sample::two_areas();
    run.end.feeder_shed_mw[0] = 50.0;
    run.end.feeder_locked[0] = true;
    run.end.rung = vec![3, 0];
    sample::set_units(&grid, &mut run, &[62.5, 87.5, 100.0]);
    let judgement = judge(&grid, &play, &run);
    assert_eq!(judgement.outcome, Outcome::Broken);
    assert_eq!(judgement.least_rung, [0, 0]);
}

/// A unit the operator fixed is no choice either: A2 alone takes the 40 MW.
#[test]
fn a_fixed_unit_stays_at_its_base_point() {
    let (mut grid, play, mut run) = sample::two_areas();
    grid.units[0].status = crate::case::model::UnitStatus::Fixed;
    sample::add_load(&mut run, 1, 40.0);
    sample::set_units(&grid, &mut run, &[100.0, 140.0, 100.0]);
    let judgement = judge(&grid, &play, &run);
    // 1/2 * 3 * 0.4^2
    assert!((judgement.optimum_cost.unwrap() - 0.24).abs() < 1e-6);
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
}

/// The ring again, with help at `lean`: the optimum's cost is the recording's own when the
/// recording is the optimum, mid-tie angles and all.
#[test]
fn the_cost_of_an_optimal_run_is_the_optimum() {
    let (grid, play, mut run) = sample::ring();
    sample::add_load(&mut run, 1, 10.0);
    run.end.rung = vec![1, 0, 0];
    let topology = Topology::of(&grid, &run);
    let setting = Setting {
        grid: &grid,
        play: &play,
        end: &run.end,
        topology: &topology,
        rungs: &[1, 0, 0],
        sheds: Sheds::Free,
    };
    let point = cost::optimum(&setting).unwrap();
    let best = cost::of_point(&setting, &point);
    let optimum_mw: Vec<f64> = point.unit.iter().map(|u| 100.0 * u.unwrap()).collect();
    sample::set_units(&grid, &mut run, &optimum_mw);
    run.end.agreed_mw.clone_from(&run.end.line_flow_mw);
    let judgement = judge(&grid, &play, &run);
    assert!((judgement.cost - best).abs() < 1e-6, "{} {best}", judgement.cost);
    assert_eq!(judgement.least_rung, [1, 0, 0]);
    assert_eq!(judgement.outcome, Outcome::Kept, "{:?}", judgement.broken_by);
    // Any other dispatch costs more.
    for (a, b) in [(0, 1), (1, 2), (2, 0)] {
        let mut other = optimum_mw.clone();
        other[a] += 2.0;
        other[b] -= 2.0;
        sample::set_units(&grid, &mut run, &other);
        assert!(judge(&grid, &play, &run).cost > best, "{a} {b}");
    }
}
