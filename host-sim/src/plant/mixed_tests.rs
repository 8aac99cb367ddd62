//! Every kind of bus and unit at once, against a Runge-Kutta run of the plain equations.

use super::*;
use crate::case::model::{Grid, Happening};
use crate::grid::samples::{add_bus, add_line, add_unit, empty};

const TAU: f64 = std::f64::consts::TAU;

/// Two machines and two loads with damping; units with and without lag, with
/// droop, at inertial and at damped buses.
fn mixed() -> Grid {
    let mut grid = empty(50.0);
    for (load_mw, damping_mw_per_hz) in [(20.0, 0.0), (50.0, 4.0), (10.0, 1.0), (40.0, 6.0)] {
        let bus = add_bus(&mut grid, load_mw);
        grid.buses[bus].damping_mw_per_hz = damping_mw_per_hz;
        grid.buses[bus].load_damping = 1.5;
    }
    for (from, to, reactance_pu) in
        [(0, 1, 0.3), (1, 2, 0.4), (2, 3, 0.2), (3, 0, 0.5), (0, 1, 0.6)]
    {
        add_line(&mut grid, from, to, reactance_pu);
    }
    // (bus, rating, base, inertia, droop, lag, ramp)
    for (bus, rating_mva, base_mw, inertia_s, droop, lag_s, ramp_mw_per_s) in [
        (0, 100.0, 60.0, 4.0, Some(5.0), 0.8, 3.0),
        (1, 30.0, 5.0, 0.0, Some(4.0), 0.0, f64::INFINITY),
        (2, 80.0, 50.0, 3.0, None, 0.0, 2.0),
        (3, 25.0, 5.0, 0.0, Some(3.0), 0.15, f64::INFINITY),
    ] {
        let unit = add_unit(&mut grid, bus, rating_mva, base_mw);
        let unit = &mut grid.units[unit];
        unit.inertia_s = inertia_s;
        unit.droop_percent = droop;
        unit.lag_s = lag_s;
        unit.ramp_mw_per_s = ramp_mw_per_s;
        unit.damping_pu = 0.5;
        unit.forms_grid = inertia_s > 0.0;
    }
    grid
}

/// State of the check: angles, speeds of buses 0 and 2, outputs of units 0 and 3.
type State = [f64; 8];

/// The equations as one would write them down, with set-points at time t.
fn derivative(grid: &Grid, state: &State, load_mw: &[f64; 4], reference_mw: &[f64; 4]) -> State {
    let angle = &state[..4];
    let gain = |unit: usize| {
        let unit = &grid.units[unit];
        unit.droop_percent.map_or(0.0, |r| unit.rating_mva / (r / 100.0 * 50.0 * TAU))
    };
    let mut net = [0.0; 4];
    for bus in 0..4 {
        net[bus] -= load_mw[bus];
    }
    for line in &grid.lines {
        let flow = 100.0 / line.reactance_pu * (angle[line.from] - angle[line.to]);
        net[line.from] -= flow;
        net[line.to] += flow;
    }
    net[0] += state[6];
    net[1] += reference_mw[1];
    net[2] += reference_mw[2];
    net[3] += state[7];
    let damping = |bus: usize| {
        let own = grid.buses[bus].damping_mw_per_hz + load_mw[bus] * 1.5 / 50.0;
        (own + 0.5 * grid.units[bus].rating_mva / 50.0) / TAU
    };
    let inertia =
        |unit: usize| 2.0 * grid.units[unit].inertia_s * grid.units[unit].rating_mva / (50.0 * TAU);
    let speed = [state[4], net[1] / (damping(1) + gain(1)), state[5], net[3] / damping(3)];
    let lag = |unit: usize, output: f64| {
        (reference_mw[unit] - gain(unit) * speed[unit] - output) / grid.units[unit].lag_s
    };
    [
        speed[0],
        speed[1],
        speed[2],
        speed[3],
        (net[0] - damping(0) * state[4]) / inertia(0),
        (net[2] - damping(2) * state[5]) / inertia(2),
        lag(0, state[6]),
        lag(3, state[7]),
    ]
}

fn runge_kutta(
    grid: &Grid,
    state: &mut State,
    load_mw: &[f64; 4],
    reference_mw: impl Fn(f64) -> [f64; 4],
    time_s: f64,
    step_s: f64,
) {
    let shifted = |by: &State, factor: f64| {
        let mut moved = *state;
        for (moved, by) in moved.iter_mut().zip(by) {
            *moved += factor * by;
        }
        moved
    };
    let middle = reference_mw(time_s + 0.5 * step_s);
    let k1 = derivative(grid, state, load_mw, &reference_mw(time_s));
    let k2 = derivative(grid, &shifted(&k1, 0.5 * step_s), load_mw, &middle);
    let k3 = derivative(grid, &shifted(&k2, 0.5 * step_s), load_mw, &middle);
    let end = reference_mw(time_s + step_s);
    let k4 = derivative(grid, &shifted(&k3, step_s), load_mw, &end);
    for index in 0..state.len() {
        state[index] += step_s / 6.0 * (k1[index] + 2.0 * k2[index] + 2.0 * k3[index] + k4[index]);
    }
}

#[test]
fn agrees_with_runge_kutta_on_every_kind_of_bus_and_unit() {
    let grid = mixed();
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    assert_eq!(plant.propagator.size(), 8);
    let angle = plant.bus_angle_rad();
    let mut state: State = [angle[0], angle[1], angle[2], angle[3], 0.0, 0.0, 60.0, 5.0];
    plant.apply(&Happening::LoadStep { bus: 1, mw: 8.0 }).unwrap();
    let load_mw = [20.0, 58.0, 10.0, 40.0];
    for (unit, mw) in [(0, 66.0), (1, 7.0), (2, 47.0), (3, 4.0)] {
        plant.set_unit_setpoint_mw(unit, mw);
    }
    let reference_mw = |t: f64| [60.0 + (3.0 * t).min(6.0), 7.0, 50.0 - (2.0 * t).min(3.0), 4.0];
    let fine_steps = 100;
    for step in 0..400 {
        for fine in 0..fine_steps {
            let time_s = 0.01 * (f64::from(step) + f64::from(fine) / f64::from(fine_steps));
            let fine_s = 0.01 / f64::from(fine_steps);
            runge_kutta(&grid, &mut state, &load_mw, reference_mw, time_s, fine_s);
        }
        plant.step();
        let rates = derivative(&grid, &state, &load_mw, &reference_mw(plant.time_s()));
        for (freq_dev_hz, rate) in plant.bus_freq_dev_hz().iter().zip(rates) {
            assert!((freq_dev_hz - rate / TAU).abs() < 1e-8, "{step}");
        }
        assert!((plant.unit_output_mw()[0] - state[6]).abs() < 1e-6);
        assert!((plant.unit_output_mw()[3] - state[7]).abs() < 1e-6);
        let flow_mw = 100.0 / 0.4 * (state[1] - state[2]);
        assert!((plant.line_flow_mw()[1] - flow_mw).abs() < 1e-6);
    }
}

#[test]
fn a_bus_without_damping_is_the_limit_of_one_with_little() {
    let observe = |damping_mw_per_hz: f64| {
        let mut grid = mixed();
        for bus in [1, 3] {
            grid.buses[bus].load_damping = 0.0;
            grid.buses[bus].damping_mw_per_hz = damping_mw_per_hz;
            grid.units[bus].damping_pu = 0.0;
        }
        // Units there keep still: their own change is not in the frequency of a bus
        // without damping.
        for unit in [1, 3] {
            grid.units[unit].droop_percent = None;
            grid.units[unit].lag_s = 0.0;
        }
        let mut plant = Plant::new(&grid, 0.01).unwrap();
        plant.apply(&Happening::LoadStep { bus: 1, mw: 8.0 }).unwrap();
        for _ in 0..500 {
            plant.step();
        }
        (plant.propagator.size(), plant.bus_freq_dev_hz().to_vec())
    };
    let (size, without) = observe(0.0);
    assert_eq!(size, 5);
    let error_hz = |damping: f64| {
        let (size, with) = observe(damping);
        assert_eq!(size, 7);
        let pairs = with.iter().zip(&without);
        pairs.map(|(a, b)| (a - b).abs()).fold(0.0, f64::max)
    };
    // First order in the damping.
    let (coarse, fine) = (error_hz(1e-2), error_hz(1e-3));
    assert!(coarse < 1e-3, "{coarse}");
    assert!(fine < 0.11 * coarse, "{fine} {coarse}");
}

#[test]
fn meets_governor_limits_alike_at_every_step() {
    // The battery without lag at the damped bus runs into its limit and back.
    let observe = |step_s: f64| {
        let mut grid = mixed();
        grid.units[1].emergency_max_mw = 6.0;
        grid.units[0].emergency_max_mw = 63.0;
        let mut plant = Plant::new(&grid, step_s).unwrap();
        plant.apply(&Happening::LoadStep { bus: 1, mw: 8.0 }).unwrap();
        let mut highest_mw = [0.0_f64; 2];
        let steps = (6.0 / step_s).round() as usize;
        for step in 0..2 * steps {
            if step == steps {
                plant.apply(&Happening::LoadStep { bus: 1, mw: -8.0 }).unwrap();
            }
            plant.step();
            for (unit, highest_mw) in highest_mw.iter_mut().enumerate() {
                *highest_mw = highest_mw.max(plant.unit_output_mw()[unit]);
            }
        }
        (highest_mw, plant.bus_freq_dev_hz()[0])
    };
    let (highest_mw, coarse_hz) = observe(0.02);
    let (_, fine_hz) = observe(0.0025);
    assert_eq!(highest_mw, [63.0, 6.0]);
    assert!((coarse_hz - fine_hz).abs() < 1e-3, "{coarse_hz} {fine_hz}");
}
