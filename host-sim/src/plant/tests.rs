//! Machines, governors, actuators, storages and loads, against closed forms.

use super::*;
use crate::case::model::{FeederKind, Grid, Happening, UnitStatus};
use crate::grid::samples::{add_bus, add_feeder, add_line, add_unit, empty, new_england};

/// One machine of 100 MVA on a load of 60 MW, 50 Hz, no governor.
fn single() -> Grid {
    let mut grid = empty(50.0);
    add_bus(&mut grid, 60.0);
    add_unit(&mut grid, 0, 100.0, 60.0);
    grid
}

fn run(plant: &mut Plant, seconds: f64) {
    let end_s = plant.time_s() + seconds;
    while plant.time_s() < end_s - 1e-9 {
        plant.step();
    }
}

fn step_load(plant: &mut Plant, bus: usize, mw: f64) {
    plant.apply(&Happening::LoadStep { bus, mw }).unwrap();
}

fn assert_close(found: f64, expected: f64, tol: f64) {
    assert!((found - expected).abs() <= tol, "{found} is not {expected}");
}

#[test]
fn stays_at_rest_without_disturbance_and_in_balance() {
    let grid = new_england();
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    run(&mut plant, 60.0);
    for freq_dev_hz in plant.bus_freq_dev_hz() {
        assert!(freq_dev_hz.abs() < 1e-12);
    }
    let output_mw: f64 = plant.unit_output_mw().iter().sum();
    let load_mw: f64 = plant.bus_load_mw().iter().sum();
    assert_close(output_mw, load_mw, 1e-8);
    assert_close(plant.time_s(), 60.0, 1e-9);
}

#[test]
fn two_machines_swing_at_the_frequency_of_the_closed_form() {
    let mut grid = empty(50.0);
    add_bus(&mut grid, 50.0);
    add_bus(&mut grid, 30.0);
    add_line(&mut grid, 0, 1, 0.2);
    add_unit(&mut grid, 0, 200.0, 40.0);
    add_unit(&mut grid, 1, 100.0, 40.0);
    let mut plant = Plant::new(&grid, 0.013).unwrap();
    step_load(&mut plant, 0, 10.0);
    // 2 H S/w0 with H = 4 s; stiffness 100/0.2 MW/rad.
    let omega = std::f64::consts::TAU * 50.0;
    let (first, second) = (2.0 * 4.0 * 200.0 / omega, 2.0 * 4.0 * 100.0 / omega);
    let swing = (500.0 * (1.0 / first + 1.0 / second)).sqrt();
    for _ in 0..500 {
        plant.step();
        let time_s = plant.time_s();
        let freq = plant.bus_freq_dev_hz();
        let apart = (freq[0] - freq[1]) * std::f64::consts::TAU;
        assert_close(apart, -10.0 / first / swing * (swing * time_s).sin(), 1e-9);
        let together = (first * freq[0] + second * freq[1]) * std::f64::consts::TAU;
        assert_close(together, -10.0 * time_s, 1e-8);
    }
}

/// Saadat, Power System Analysis, Example 12.2 (from memory): 600 MVA at 6 %
/// and 500 MVA at 4 %, 900 MW at 60 Hz.
fn two_governors() -> Grid {
    let mut grid = empty(60.0);
    grid.base_mva = 1000.0;
    add_bus(&mut grid, 900.0);
    for (rating_mva, droop_percent, base_mw) in [(600.0, 6.0, 500.0), (500.0, 4.0, 400.0)] {
        let unit = add_unit(&mut grid, 0, rating_mva, base_mw);
        grid.units[unit].droop_percent = Some(droop_percent);
        grid.units[unit].lag_s = 0.5;
    }
    grid
}

#[test]
fn governors_share_a_load_step_by_droop() {
    let mut plant = Plant::new(&two_governors(), 0.01).unwrap();
    step_load(&mut plant, 0, 90.0);
    run(&mut plant, 300.0);
    assert_close(plant.bus_freq_dev_hz()[0], -0.24, 1e-9);
    assert_close(plant.unit_output_mw()[0], 540.0, 1e-7);
    assert_close(plant.unit_output_mw()[1], 450.0, 1e-7);
}

#[test]
fn load_gives_way_to_frequency_by_its_damping() {
    // Same example, part (b): D = 1.5 pu on 1000 MVA, i.e. 1500/990 of the load.
    let mut grid = two_governors();
    grid.buses[0].load_damping = 1500.0 / 990.0;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    step_load(&mut plant, 0, 90.0);
    run(&mut plant, 300.0);
    assert_close(plant.bus_freq_dev_hz()[0], -0.225, 1e-9);
    assert_close(plant.unit_output_mw()[0], 537.5, 1e-7);
    assert_close(plant.unit_output_mw()[1], 446.875, 1e-7);
}

#[test]
fn a_governor_without_lag_shares_as_one_with() {
    let mut grid = two_governors();
    grid.units[1].lag_s = 0.0;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    step_load(&mut plant, 0, 90.0);
    run(&mut plant, 300.0);
    assert_close(plant.bus_freq_dev_hz()[0], -0.24, 1e-9);
    assert_close(plant.unit_output_mw()[1], 450.0, 1e-7);
}

#[test]
fn frequency_comes_back_to_nominal_when_the_load_does() {
    let grid = new_england();
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    let before_mw = plant.line_flow_mw().to_vec();
    step_load(&mut plant, 19, 100.0);
    run(&mut plant, 100.0);
    step_load(&mut plant, 19, -100.0);
    run(&mut plant, 600.0);
    for freq_dev_hz in plant.bus_freq_dev_hz() {
        assert!(freq_dev_hz.abs() < 1e-12, "{freq_dev_hz}");
    }
    for (flow_mw, before_mw) in plant.line_flow_mw().iter().zip(before_mw) {
        assert_close(*flow_mw, before_mw, 1e-8);
    }
}

#[test]
fn ten_hours_off_nominal_lose_no_digits() {
    let mut grid = new_england();
    grid.buses[2].damping_mw_per_hz = 5.0;
    let mut plant = Plant::new(&grid, 0.02).unwrap();
    step_load(&mut plant, 19, 100.0);
    run(&mut plant, 300.0);
    let (freq, flow) = (plant.bus_freq_dev_hz().to_vec(), plant.line_flow_mw().to_vec());
    assert!(freq[0] < -0.03);
    run(&mut plant, 36_000.0);
    for (now, then) in plant.bus_freq_dev_hz().iter().zip(freq) {
        assert_close(*now, then, 1e-11);
    }
    for (now, then) in plant.line_flow_mw().iter().zip(flow) {
        assert_close(*now, then, 1e-8);
    }
}

#[test]
fn output_follows_a_set_point_at_the_ramp_limit() {
    let mut grid = single();
    grid.units[0].ramp_mw_per_s = 2.0;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    plant.set_unit_setpoint_mw(0, 65.0);
    run(&mut plant, 1.0);
    assert_close(plant.unit_reference_mw()[0], 62.0, 1e-9);
    assert_close(plant.unit_output_mw()[0], 62.0, 1e-9);
    // M w' = 2 t: w = t^2/M, exact for an input linear in time.
    let inertia = 2.0 * 4.0 * 100.0 / (std::f64::consts::TAU * 50.0);
    let expected_hz = 1.0 / inertia / std::f64::consts::TAU;
    assert_close(plant.bus_freq_dev_hz()[0], expected_hz, 1e-10);
    run(&mut plant, 4.0);
    assert_close(plant.unit_output_mw()[0], 65.0, 1e-12);
    plant.set_unit_setpoint_mw(0, 0.0);
    run(&mut plant, 1.0);
    assert_close(plant.unit_output_mw()[0], 63.0, 1e-9);
}

#[test]
fn a_lag_answers_a_jump_and_a_ramp_as_its_closed_form() {
    let mut grid = single();
    grid.units[0].lag_s = 0.7;
    let mut plant = Plant::new(&grid, 0.02).unwrap();
    plant.set_unit_setpoint_mw(0, 70.0);
    run(&mut plant, 1.4);
    assert_close(plant.unit_output_mw()[0], 60.0 + 10.0 * (1.0 - (-2.0_f64).exp()), 1e-10);
    grid.units[0].ramp_mw_per_s = 1.0;
    let mut plant = Plant::new(&grid, 0.02).unwrap();
    plant.set_unit_setpoint_mw(0, 90.0);
    run(&mut plant, 1.4);
    let expected = 60.0 + 1.4 - 0.7 * (1.0 - (-2.0_f64).exp());
    assert_close(plant.unit_output_mw()[0], expected, 1e-10);
}

#[test]
fn actuator_errors_show_with_the_first_set_point() {
    let mut grid = single();
    grid.buses[0].damping_mw_per_hz = 50.0;
    grid.units[0].gain_error = 0.02;
    grid.units[0].bias_mw = -0.5;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    run(&mut plant, 10.0);
    assert_close(plant.unit_output_mw()[0], 60.0, 1e-12);
    assert_close(plant.bus_freq_dev_hz()[0], 0.0, 1e-12);
    plant.set_unit_setpoint_mw(0, 60.0);
    run(&mut plant, 60.0);
    assert_close(plant.unit_output_mw()[0], 60.7, 1e-9);
    assert_close(plant.bus_freq_dev_hz()[0], 0.7 / 50.0, 1e-9);
}

#[test]
fn a_fixed_unit_does_not_listen_but_its_droop_acts() {
    let mut grid = single();
    grid.units[0].status = UnitStatus::Fixed;
    grid.units[0].droop_percent = Some(5.0);
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    plant.set_unit_setpoint_mw(0, 90.0);
    run(&mut plant, 5.0);
    assert_close(plant.unit_output_mw()[0], 60.0, 1e-9);
    step_load(&mut plant, 0, 4.0);
    run(&mut plant, 120.0);
    // 100 MVA at 5 % of 50 Hz: 40 MW/Hz.
    assert_close(plant.bus_freq_dev_hz()[0], -0.1, 1e-9);
    assert_close(plant.unit_output_mw()[0], 64.0, 1e-7);
}

#[test]
fn orders_that_are_no_numbers_or_no_units_are_ignored() {
    let mut plant = Plant::new(&single(), 0.01).unwrap();
    plant.set_unit_setpoint_mw(0, f64::NAN);
    plant.set_unit_setpoint_mw(7, 10.0);
    plant.set_feeder_shed_mw(0, 10.0);
    plant.set_bus_load_mw(9, 10.0);
    plant.set_bus_load_mw(0, f64::INFINITY);
    run(&mut plant, 1.0);
    assert_close(plant.bus_freq_dev_hz()[0], 0.0, 1e-12);
}

#[test]
fn a_unit_stops_at_its_emergency_limit_and_leaves_it_without_windup() {
    for lag_s in [0.0, 0.5] {
        let mut grid = single();
        grid.buses[0].damping_mw_per_hz = 20.0;
        grid.units[0].droop_percent = Some(2.0);
        grid.units[0].lag_s = lag_s;
        grid.units[0].emergency_max_mw = 70.0;
        let mut plant = Plant::new(&grid, 0.01).unwrap();
        step_load(&mut plant, 0, 20.0);
        run(&mut plant, 120.0);
        assert_close(plant.unit_output_mw()[0], 70.0, 1e-9);
        assert_close(plant.bus_freq_dev_hz()[0], -0.5, 1e-7);
        step_load(&mut plant, 0, -30.0);
        run(&mut plant, 0.9);
        // With windup it would still sit at 70.
        assert!(plant.unit_output_mw()[0] < 69.0, "lag {lag_s}");
        run(&mut plant, 120.0);
        // 10 MW too little load on 100 + 20 MW/Hz.
        assert_close(plant.bus_freq_dev_hz()[0], 10.0 / 120.0, 1e-8);
    }
}

/// The single machine with governor, and a battery of 20 MW, 0.01 MWh, half full.
fn with_battery() -> Grid {
    let mut grid = single();
    grid.units[0].droop_percent = Some(5.0);
    grid.units[0].lag_s = 0.3;
    let unit = add_unit(&mut grid, 0, 20.0, 0.0);
    let battery = &mut grid.units[unit];
    battery.inertia_s = 0.0;
    battery.energy_mwh = Some(0.01);
    battery.emergency_min_mw = -20.0;
    battery.emergency_max_mw = 20.0;
    grid
}

#[test]
fn a_battery_counts_its_energy_and_gives_nothing_when_empty() {
    let mut plant = Plant::new(&with_battery(), 0.01).unwrap();
    assert_close(plant.unit_energy_mwh()[1], 0.005, 1e-15);
    plant.set_unit_setpoint_mw(1, 6.0);
    // 0.005 MWh at 6 MW last 3 s.
    run(&mut plant, 2.0);
    assert_close(plant.unit_energy_mwh()[1], 0.005 - 12.0 / 3600.0, 1e-9);
    assert_close(plant.unit_output_mw()[1], 6.0, 1e-12);
    run(&mut plant, 1.1);
    assert_eq!(plant.unit_output_mw()[1], 0.0);
    assert_eq!(plant.unit_energy_mwh()[1], 0.0);
    run(&mut plant, 5.0);
    assert_eq!(plant.unit_output_mw()[1], 0.0);
}

#[test]
fn a_battery_charges_until_full_and_can_discharge_again() {
    let mut plant = Plant::new(&with_battery(), 0.01).unwrap();
    plant.set_unit_setpoint_mw(1, -6.0);
    run(&mut plant, 3.1);
    assert_eq!(plant.unit_output_mw()[1], 0.0);
    assert_eq!(plant.unit_energy_mwh()[1], 0.01);
    assert_eq!(plant.unit_energy_mwh()[0], 0.0);
    plant.set_unit_setpoint_mw(1, 6.0);
    run(&mut plant, 1.0);
    assert_close(plant.unit_output_mw()[1], 6.0, 1e-12);
    assert!(plant.unit_energy_mwh()[1] < 0.0085);
}

#[test]
fn feeders_shed_at_once_in_part_or_as_a_whole() {
    let mut grid = single();
    grid.buses[0].damping_mw_per_hz = 40.0;
    add_feeder(&mut grid, 0, 10.0, FeederKind::Continuous);
    add_feeder(&mut grid, 0, 8.0, FeederKind::Switched);
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    plant.set_feeder_shed_mw(0, 2.5);
    plant.set_feeder_shed_mw(1, 3.9);
    assert_eq!(plant.feeder_shed_mw(), &[2.5, 0.0]);
    plant.set_feeder_shed_mw(0, 11.0);
    plant.set_feeder_shed_mw(1, 4.0);
    assert_eq!(plant.feeder_shed_mw(), &[10.0, 8.0]);
    assert_eq!(plant.bus_load_mw(), &[60.0]);
    run(&mut plant, 60.0);
    assert_close(plant.bus_freq_dev_hz()[0], 18.0 / 40.0, 1e-9);
    plant.set_feeder_shed_mw(0, -1.0);
    plant.set_feeder_shed_mw(1, 0.0);
    run(&mut plant, 60.0);
    assert_close(plant.bus_freq_dev_hz()[0], 0.0, 1e-9);
}

#[test]
fn puts_a_small_residual_on_the_loads_and_refuses_a_large_one() {
    let mut grid = single();
    grid.units[0].base_mw = 60.06;
    let plant = Plant::new(&grid, 0.01).unwrap();
    assert_close(plant.bus_load_mw()[0], 60.06, 1e-12);
    grid.units[0].base_mw = 61.0;
    let refused = Plant::new(&grid, 0.01).err().unwrap();
    assert!(
        matches!(refused, PlantError::Imbalance { imbalance_mw, .. } if (imbalance_mw - 1.0).abs() < 1e-9)
    );
    for step_s in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        assert!(matches!(Plant::new(&single(), step_s), Err(PlantError::Step { .. })));
    }
}

#[test]
fn the_same_calls_give_the_same_bits() {
    let run_once = || {
        let mut plant = Plant::new(&new_england(), 0.01).unwrap();
        step_load(&mut plant, 3, 40.0);
        run(&mut plant, 2.0);
        plant.apply(&Happening::LineTrip { line: 5 }).unwrap();
        run(&mut plant, 2.0);
        plant.apply(&Happening::UnitTrip { unit: 2 }).unwrap();
        run(&mut plant, 2.0);
        let flows = plant.line_flow_mw().iter();
        flows.map(|flow| flow.to_bits()).collect::<Vec<_>>()
    };
    assert_eq!(run_once(), run_once());
}
