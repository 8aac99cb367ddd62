//! Small hand-made grids and runs for the tests of `judge` and `report`.

use nalgebra::{DMatrix, DVector};

use crate::case::model::*;
use crate::record::*;

fn bus(name: &str, area: usize, load_mw: f64, position: (f64, f64)) -> Bus {
    Bus {
        name: name.into(),
        area,
        load_mw,
        load_damping: 1.0,
        damping_mw_per_hz: 0.0,
        position: Some(position),
    }
}

fn line(name: &str, from: usize, to: usize, rating_mw: f64) -> Line {
    Line {
        name: name.into(),
        from,
        to,
        reactance_pu: 0.1,
        rating_mw,
        rating_short_mw: None,
        rating_short_min: None,
        metered: true,
        closed: true,
        schedule_mw: None,
    }
}

fn unit(name: &str, bus: usize, max_mw: f64, cost_per_pu2: f64) -> Unit {
    Unit {
        name: name.into(),
        bus,
        kind: UnitKind::Hydro,
        status: UnitStatus::Available,
        rating_mva: max_mw,
        base_mw: 100.0,
        min_mw: 0.0,
        max_mw,
        emergency_min_mw: 0.0,
        emergency_max_mw: max_mw,
        reserve_up_mw: 10.0,
        reserve_down_mw: 0.0,
        ramp_mw_per_s: 1.5,
        cost_per_pu2,
        inertia_s: 4.0,
        droop_percent: Some(5.0),
        damping_pu: 1.0,
        lag_s: 2.0,
        energy_mwh: None,
        energy_start: 0.0,
        forms_grid: true,
        may_trip: false,
        gain_error: 0.0,
        bias_mw: 0.0,
        on_silence: OnSilence::Last,
    }
}

fn area(name: &str) -> Area {
    Area { name: name.into(), lowest_rung: 3 }
}

/// A play without events.
pub fn play() -> Play {
    Play {
        name: "sample".into(),
        title: "Two areas and a tie".into(),
        run: Run { duration_s: 30.0, tick_s: 0.1, plant_step_s: 0.01, seed: 7 },
        steward: StewardSettings {
            iterations: 50,
            shadow_iterations: 25,
            filter_s: 2.0,
            event_freeze_s: 3.0,
            tie_band_mw: 100.0,
            tie_price_per_pu: 3.0,
            proof_threshold_mw: 0.2,
            assumed_load_damping: 1.0,
            help_hops: 4,
        },
        links: crate::link::FAULTLESS,
        events: vec![Event { at_s: 1.0, what: Happening::LineTrip { line: 0 } }],
    }
}

/// Two areas of two buses: unit A1 feeds load A2, unit B2 feeds load B1, tie A2-B1 at 0 MW.
pub fn two_areas() -> (Grid, Play, Recording) {
    let grid = Grid {
        name: "Two <areas>".into(),
        base_mva: 100.0,
        nominal_hz: 50.0,
        areas: vec![area("Ash"), area("Brack")],
        buses: vec![
            bus("A1", 0, 0.0, (0.0, 0.0)),
            bus("A2", 0, 200.0, (1.0, 0.4)),
            bus("B1", 1, 100.0, (2.0, 0.0)),
            bus("B2", 1, 0.0, (3.0, 0.4)),
        ],
        lines: vec![
            line("A1-A2", 0, 1, 200.0),
            line("A2-B1", 1, 2, 100.0),
            line("B1-B2", 2, 3, 200.0),
        ],
        units: vec![
            unit("A1", 0, 150.0, 1.0),
            unit("A2", 1, 150.0, 3.0),
            unit("B2", 3, 200.0, 2.0),
        ],
        feeders: vec![Feeder {
            name: "A2 mills".into(),
            bus: 1,
            load_mw: 100.0,
            kind: FeederKind::Continuous,
            restore: Restore::Operator,
            price_per_pu: 60.0,
        }],
    };
    let run = recording(&grid);
    (grid, play(), run)
}

/// Three areas of two buses in a ring, each with its unit on the first bus and its load on the second.
pub fn ring() -> (Grid, Play, Recording) {
    let names = ["A", "B", "C"];
    let mut grid = Grid {
        name: "Ring".into(),
        base_mva: 100.0,
        nominal_hz: 50.0,
        areas: names.iter().map(|n| area(n)).collect(),
        buses: vec![],
        lines: vec![],
        units: vec![],
        feeders: vec![],
    };
    for (a, name) in names.iter().enumerate() {
        grid.buses.push(bus(&format!("{name}0"), a, 0.0, (a as f64, 0.0)));
        grid.buses.push(bus(&format!("{name}1"), a, 100.0, (a as f64, 1.0)));
        grid.lines.push(line(&format!("{name} inner"), 2 * a, 2 * a + 1, 200.0));
        grid.lines.push(line(&format!("{name} tie"), 2 * a + 1, (2 * a + 2) % 6, 200.0));
        grid.units.push(unit(name, 2 * a, 200.0, 1.0));
    }
    let run = recording(&grid);
    (grid, play(), run)
}

/// A run of 30 s on a grid whose base case is balanced, at rest at its end.
pub fn recording(grid: &Grid) -> Recording {
    let base: Vec<f64> = grid.units.iter().map(|u| u.base_mw).collect();
    let end = FinalState {
        bus_island: vec![Some(0); grid.buses.len()],
        island_freq_dev_hz: vec![0.0],
        island_can_regulate: vec![true],
        bus_load_mw: grid.buses.iter().map(|b| b.load_mw).collect(),
        line_closed: grid.lines.iter().map(|l| l.closed).collect(),
        unit_in_service: vec![true; grid.units.len()],
        unit_base_mw: base.clone(),
        unit_setpoint_mw: base.clone(),
        unit_output_mw: base.clone(),
        feeder_shed_mw: vec![0.0; grid.feeders.len()],
        feeder_locked: vec![false; grid.feeders.len()],
        line_flow_mw: vec![0.0; grid.lines.len()],
        schedule_mw: vec![0.0; grid.lines.len()],
        agreed_mw: vec![0.0; grid.lines.len()],
        rung: vec![0; grid.areas.len()],
        steward_alive: vec![true; grid.areas.len()],
        black_load_mw: 0.0,
    };
    let mut run = Recording {
        scheme: Scheme::Steward,
        play: "sample".into(),
        title: "Two areas and a tie".into(),
        seed: 7,
        duration_s: 30.0,
        tick_s: 0.1,
        stopped: false,
        series: Series::default(),
        extremes: extremes(),
        worst_rung: vec![0; grid.areas.len()],
        frames: vec![FrameCounts { sent: 600, lost: 0, refused: 0 }; grid.areas.len()],
        proofs: vec![],
        story: vec![Told { at_s: 1.0, text: "line A1-A2 opens".into() }],
        end,
    };
    set_units(grid, &mut run, &base);
    run.end.schedule_mw.clone_from(&run.end.line_flow_mw);
    run.end.agreed_mw.clone_from(&run.end.line_flow_mw);
    run.series = series(grid, &run.end);
    run
}

fn extremes() -> Extremes {
    let at = |value: f64, index: usize, at_s: f64| Extreme { value, index, at_s };
    Extremes {
        lowest_frequency_hz: at(49.812, 1, 2.31),
        highest_frequency_hz: at(50.021, 2, 8.4),
        steepest_hz_per_s: at(-0.31, 0, 1.2),
        worst_loading: at(1.084, 0, 1.4),
        over_rating_s: 2.6,
        settled_s: 14.2,
    }
}

/// 301 samples: a dip that recovers, everything else constant at the end's value.
fn series(grid: &Grid, end: &FinalState) -> Series {
    let times_s: Vec<f64> = (0..=300).map(|i| f64::from(i) * 0.1).collect();
    let dip = |t: f64| {
        if t < 1.0 { 0.0 } else { ((t - 1.0) * 1.3).sin() * (-(t - 1.0) / 4.0).exp() }
    };
    let around = |values: &[f64], swing: f64| -> Vec<Vec<f64>> {
        values.iter().map(|v| times_s.iter().map(|t| v - swing * dip(*t)).collect()).collect()
    };
    Series {
        area_freq_dev_hz: around(&vec![0.0; grid.areas.len()], 0.19),
        line_flow_mw: around(&end.line_flow_mw, 12.0),
        unit_output_mw: around(&end.unit_output_mw, -8.0),
        unit_setpoint_mw: around(&end.unit_setpoint_mw, 0.0),
        feeder_shed_mw: around(&end.feeder_shed_mw, 0.0),
        schedule_mw: around(&end.schedule_mw, 0.0),
        rung: vec![
            times_s.iter().map(|t| u8::from((4.0..20.0).contains(t))).collect();
            grid.areas.len()
        ],
        verdict: vec![
            times_s
                .iter()
                .map(|t| if *t < 12.0 { SaidVerdict::Working } else { SaidVerdict::Settled })
                .collect();
            grid.areas.len()
        ],
        proven_mw: vec![vec![0.0; times_s.len()]; grid.areas.len()],
        times_s,
    }
}

/// A proof of 12 MW.
pub fn proof(area: usize, at_s: f64, accepted: bool) -> CheckedProof {
    CheckedProof {
        area,
        at_s,
        rung: 0,
        claimed_mw: 12.0,
        verified_mw: if accepted { 11.9 } else { -0.1 },
        accepted,
    }
}

/// Raise the final load of a bus.
pub fn add_load(run: &mut Recording, bus: usize, mw: f64) {
    run.end.bus_load_mw[bus] += mw;
}

/// Set final set-points and outputs, and the flows that follow from them.
pub fn set_units(grid: &Grid, run: &mut Recording, setpoint_mw: &[f64]) {
    run.end.unit_setpoint_mw = setpoint_mw.to_vec();
    run.end.unit_output_mw = setpoint_mw.to_vec();
    let n = grid.buses.len();
    let (mut matrix, mut injection) = (DMatrix::<f64>::zeros(n, n), DVector::<f64>::zeros(n));
    let closed = |l: usize| run.end.line_closed[l];
    for (_, l) in grid.lines.iter().enumerate().filter(|(i, _)| closed(*i)) {
        let b = 1.0 / l.reactance_pu;
        matrix[(l.from, l.from)] += b;
        matrix[(l.to, l.to)] += b;
        matrix[(l.from, l.to)] -= b;
        matrix[(l.to, l.from)] -= b;
    }
    for (b, mw) in run.end.bus_load_mw.iter().enumerate() {
        injection[b] -= mw;
    }
    for (u, mw) in grid.units.iter().zip(setpoint_mw) {
        injection[u.bus] += mw;
    }
    for (f, mw) in grid.feeders.iter().zip(&run.end.feeder_shed_mw) {
        injection[f.bus] += mw;
    }
    matrix.row_mut(0).fill(0.0);
    matrix[(0, 0)] = 1.0;
    injection[0] = 0.0;
    let angle = matrix.lu().solve(&injection).expect("connected");
    run.end.line_flow_mw = (0..grid.lines.len())
        .map(|l| match closed(l) {
            true => {
                (angle[grid.lines[l].from] - angle[grid.lines[l].to]) / grid.lines[l].reactance_pu
            }
            false => 0.0,
        })
        .collect();
}
