//! Grids for unit tests: a builder of small ones, and the 39-bus system.
//!
//! Buses, lines, units and feeders get names `B1`, `L1`, ... by position.

use crate::case::model::*;

/// An empty grid of one area.
pub fn empty(nominal_hz: f64) -> Grid {
    Grid {
        name: "sample".to_string(),
        base_mva: 100.0,
        nominal_hz,
        areas: vec![area("One")],
        buses: Vec::new(),
        lines: Vec::new(),
        units: Vec::new(),
        feeders: Vec::new(),
    }
}

/// An area that may go down to the last rung.
pub fn area(name: &str) -> Area {
    Area { name: name.to_string(), lowest_rung: 3 }
}

/// Add a bus with this load, undamped, in the first area.
pub fn add_bus(grid: &mut Grid, load_mw: f64) -> usize {
    grid.buses.push(Bus {
        name: format!("B{}", grid.buses.len() + 1),
        area: 0,
        load_mw,
        load_damping: 0.0,
        damping_mw_per_hz: 0.0,
        position: None,
    });
    grid.buses.len() - 1
}

/// Add a closed line.
pub fn add_line(grid: &mut Grid, from: usize, to: usize, reactance_pu: f64) -> usize {
    grid.lines.push(Line {
        name: format!("L{}", grid.lines.len() + 1),
        from,
        to,
        reactance_pu,
        rating_mw: 1e4,
        rating_short_mw: None,
        rating_short_min: None,
        metered: true,
        closed: true,
        schedule_mw: None,
    });
    grid.lines.len() - 1
}

/// Add a synchronous unit without governor, damping, lag or ramp limit.
pub fn add_unit(grid: &mut Grid, bus: usize, rating_mva: f64, base_mw: f64) -> usize {
    grid.units.push(Unit {
        name: format!("U{}", grid.units.len() + 1),
        bus,
        kind: UnitKind::Steam,
        status: UnitStatus::Available,
        rating_mva,
        base_mw,
        min_mw: 0.0,
        max_mw: rating_mva,
        emergency_min_mw: -2.0 * rating_mva,
        emergency_max_mw: 2.0 * rating_mva,
        reserve_up_mw: 0.0,
        reserve_down_mw: 0.0,
        ramp_mw_per_s: f64::INFINITY,
        cost_per_pu2: 1.0,
        inertia_s: 4.0,
        droop_percent: None,
        damping_pu: 0.0,
        lag_s: 0.0,
        energy_mwh: None,
        energy_start: 0.5,
        forms_grid: true,
        may_trip: false,
        gain_error: 0.0,
        bias_mw: 0.0,
        on_silence: OnSilence::Last,
    });
    grid.units.len() - 1
}

/// Add a feeder that carries part of its bus's load.
pub fn add_feeder(grid: &mut Grid, bus: usize, load_mw: f64, kind: FeederKind) -> usize {
    grid.feeders.push(Feeder {
        name: format!("F{}", grid.feeders.len() + 1),
        bus,
        load_mw,
        kind,
        restore: Restore::Operator,
        price_per_pu: 100.0,
    });
    grid.feeders.len() - 1
}

/// The New England 39-bus, 10-machine system in two areas, 60 Hz, taps ignored.
///
/// Source: network and inertia as commonly published (Athay, Podmore, Virmani
/// 1979), from memory; ratings, droop 5 %, damping 1 pu and lags are
/// assumptions of the reference runs.
pub fn new_england() -> Grid {
    let mut grid = empty(60.0);
    grid.areas.push(area("Two"));
    for (index, &load_mw) in LOAD_MW.iter().enumerate() {
        add_bus(&mut grid, load_mw);
        grid.buses[index].area = usize::from(SECOND_AREA.contains(&(index + 1)));
    }
    for &(from, to, reactance_pu) in &LINES {
        add_line(&mut grid, from - 1, to - 1, reactance_pu);
    }
    for &(bus, inertia_s, rating_mva, lag_s, base_mw) in &MACHINES {
        let unit = add_unit(&mut grid, bus - 1, rating_mva, base_mw);
        let unit = &mut grid.units[unit];
        // The table gives inertia on 100 MVA.
        unit.inertia_s = inertia_s * 100.0 / rating_mva;
        unit.lag_s = lag_s;
        unit.droop_percent = Some(5.0);
        unit.damping_pu = 1.0;
    }
    grid
}

/// From bus, to bus (numbered from 1), reactance in pu on 100 MVA.
const LINES: [(usize, usize, f64); 46] = [
    (1, 2, 0.0411),
    (1, 39, 0.025),
    (2, 3, 0.0151),
    (2, 25, 0.0086),
    (2, 30, 0.0181),
    (3, 4, 0.0213),
    (3, 18, 0.0133),
    (4, 5, 0.0128),
    (4, 14, 0.0129),
    (5, 6, 0.0026),
    (5, 8, 0.0112),
    (6, 7, 0.0092),
    (6, 11, 0.0082),
    (6, 31, 0.025),
    (7, 8, 0.0046),
    (8, 9, 0.0363),
    (9, 39, 0.025),
    (10, 11, 0.0043),
    (10, 13, 0.0043),
    (10, 32, 0.02),
    (12, 11, 0.0435),
    (12, 13, 0.0435),
    (13, 14, 0.0101),
    (14, 15, 0.0217),
    (15, 16, 0.0094),
    (16, 17, 0.0089),
    (16, 19, 0.0195),
    (16, 21, 0.0135),
    (16, 24, 0.0059),
    (17, 18, 0.0082),
    (17, 27, 0.0173),
    (19, 20, 0.0138),
    (19, 33, 0.0142),
    (20, 34, 0.018),
    (21, 22, 0.014),
    (22, 23, 0.0096),
    (22, 35, 0.0143),
    (23, 24, 0.035),
    (23, 36, 0.0272),
    (25, 26, 0.0323),
    (25, 37, 0.0232),
    (26, 27, 0.0147),
    (26, 28, 0.0474),
    (26, 29, 0.0625),
    (28, 29, 0.0151),
    (29, 38, 0.0156),
];
/// Load by bus in MW.
const LOAD_MW: [f64; 39] = [
    0.0, 0.0, 322.0, 500.0, 0.0, 0.0, 233.8, 522.0, 0.0, 0.0, 0.0, 7.5, 0.0, 0.0, 320.0, 329.0,
    0.0, 158.0, 0.0, 628.0, 274.0, 0.0, 247.5, 308.6, 224.0, 139.0, 281.0, 206.0, 283.5, 0.0, 9.2,
    0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 1104.0,
];
/// Bus (from 1), inertia constant in s on 100 MVA, rating in MVA, lag in s, base point in MW.
const MACHINES: [(usize, f64, f64, f64, f64); 10] = [
    (30, 42.0, 1160.0, 0.5, 250.0),
    (31, 30.3, 720.0, 0.45, 477.1),
    (32, 35.8, 810.0, 0.4, 650.0),
    (33, 28.6, 720.0, 0.55, 632.0),
    (34, 26.0, 560.0, 0.35, 508.0),
    (35, 34.8, 760.0, 0.5, 650.0),
    (36, 26.4, 640.0, 0.45, 560.0),
    (37, 24.3, 630.0, 0.4, 540.0),
    (38, 34.5, 960.0, 0.5, 830.0),
    (39, 500.0, 1220.0, 0.6, 1000.0),
];
/// Buses (from 1) of the second area.
const SECOND_AREA: [usize; 14] = [4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 31, 32, 39];
