//! Lines and units that go and come: splits, dark pieces, the synchronism window.

use super::*;
use crate::case::model::{FeederKind, Grid, Happening};
use crate::grid::samples::{add_bus, add_feeder, add_line, add_unit, empty, new_england};

/// A chain B1 - B2 - B3 - B4: machines at both ends, a feeder at B3.
fn chain() -> Grid {
    let mut grid = empty(50.0);
    for load_mw in [40.0, 30.0, 24.0, 46.0] {
        let bus = add_bus(&mut grid, load_mw);
        grid.buses[bus].load_damping = 1.0;
    }
    for bus in 0..3 {
        add_line(&mut grid, bus, bus + 1, 0.2);
    }
    for (bus, base_mw) in [(0, 80.0), (3, 60.0)] {
        let unit = add_unit(&mut grid, bus, 100.0, base_mw);
        grid.units[unit].droop_percent = Some(5.0);
        grid.units[unit].lag_s = 0.4;
        grid.units[unit].damping_pu = 2.0;
    }
    add_feeder(&mut grid, 2, 10.0, FeederKind::Continuous);
    grid
}

fn plant() -> Plant {
    Plant::new(&chain(), 0.01).unwrap()
}

fn run(plant: &mut Plant, seconds: f64) {
    for _ in 0..(seconds * 100.0).round() as usize {
        plant.step();
    }
}

fn trip(line: usize) -> Happening {
    Happening::LineTrip { line }
}

fn close(line: usize) -> Happening {
    Happening::LineClose { line }
}

#[test]
fn a_split_leaves_two_islands_each_at_its_own_frequency() {
    let mut plant = plant();
    let told = plant.apply(&trip(1)).unwrap();
    assert_eq!(told[0], "line L2 opens at 10.0 MW");
    assert_eq!(told[1], "buses B3, B4 are on an island of their own");
    assert_eq!(plant.island_count(), 2);
    assert_eq!(plant.bus_island(), &[Some(0), Some(0), Some(1), Some(1)]);
    assert_eq!(plant.line_flow_mw()[1], 0.0);
    run(&mut plant, 200.0);
    let freq = plant.bus_freq_dev_hz();
    // 10 MW over on the left, on 40 droop + 4 machine + 70/50 load MW/Hz.
    assert!((freq[0] - 10.0 / 45.4).abs() < 1e-9);
    assert!((freq[1] - freq[0]).abs() < 1e-9);
    assert!((freq[3] + 10.0 / 45.4).abs() < 1e-9);
}

#[test]
fn a_piece_without_grid_forming_unit_goes_dark_with_load_and_units() {
    let mut grid = chain();
    let unit = add_unit(&mut grid, 2, 20.0, 4.0);
    grid.units[unit].forms_grid = false;
    grid.units[unit].inertia_s = 0.0;
    grid.units[0].base_mw = 76.0;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    plant.set_feeder_shed_mw(0, 5.0);
    plant.apply(&trip(1)).unwrap();
    let told = plant.apply(&trip(2)).unwrap();
    assert_eq!(told[1], "bus B3 is dark: 19.0 MW lost");
    assert_eq!(told[2], "unit U3 trips at 4.0 MW: bus B3 is dark");
    assert_eq!(plant.bus_island()[2], None);
    assert_eq!(plant.bus_load_mw()[2], 0.0);
    assert_eq!(plant.feeder_shed_mw()[0], 0.0);
    assert_eq!(plant.bus_freq_dev_hz()[2], 0.0);
    assert!(!plant.unit_in_service()[2]);
    assert_eq!(plant.unit_output_mw()[2], 0.0);
    let refused = plant.apply(&Happening::UnitReturn { unit: 2 });
    assert!(matches!(refused, Err(Refused::BusDark { .. })));
    run(&mut plant, 5.0);

    let told = plant.apply(&close(1)).unwrap();
    assert_eq!(told[1], "bus B3 is live again: 19.0 MW back");
    assert_eq!(plant.bus_load_mw()[2], 24.0);
    assert_eq!(plant.feeder_shed_mw()[0], 5.0);
    run(&mut plant, 100.0);
    // Left: 76 MW against 40 + 30 + 19, on 40 droop + 4 machine + 89/50 load MW/Hz.
    assert!((plant.bus_freq_dev_hz()[2] + 13.0 / 45.78).abs() < 1e-9);
    plant.apply(&Happening::UnitReturn { unit: 2 }).unwrap();
    assert!(plant.unit_in_service()[2]);
}

#[test]
fn closing_outside_the_synchronism_window_is_refused_with_the_numbers() {
    let mut plant = plant();
    plant.apply(&trip(1)).unwrap();
    run(&mut plant, 200.0);
    let before = plant.line_flow_mw().to_vec();
    let refused = plant.apply(&close(1)).unwrap_err();
    match &refused {
        Refused::OutOfStep { line, freq_hz, .. } => {
            assert_eq!(line, "L2");
            assert!((freq_hz - 20.0 / 45.4).abs() < 1e-6);
        }
        other => panic!("{other}"),
    }
    assert!(refused.to_string().contains("0.441 Hz"));
    assert!(!plant.line_closed()[1]);
    assert_eq!(plant.line_flow_mw(), before);
}

#[test]
fn islands_close_again_when_in_step_and_meet_the_old_flows() {
    let mut plant = plant();
    let flow_mw = plant.line_flow_mw().to_vec();
    plant.apply(&trip(1)).unwrap();
    run(&mut plant, 50.0);
    // Set-points bring both sides near nominal, 0.01 Hz apart, so they slip past each other.
    plant.set_unit_setpoint_mw(0, 70.0 + 0.01 * 45.4);
    plant.set_unit_setpoint_mw(1, 70.0);
    run(&mut plant, 200.0);
    let mut closed_at = None;
    for second in 0..300 {
        match plant.apply(&close(1)) {
            Ok(told) => {
                assert!(told[1].ends_with("are joined with the rest again"), "{told:?}");
                closed_at = Some(second);
                break;
            }
            Err(Refused::OutOfStep { freq_hz, angle_deg, .. }) => {
                assert!(freq_hz < 0.1 && angle_deg > 30.0 && angle_deg <= 180.0);
            }
            Err(other) => panic!("{other}"),
        }
        run(&mut plant, 1.0);
    }
    assert!(closed_at.is_some());
    assert_eq!(plant.island_count(), 1);
    // The angle across the line is what the window allowed, not a turn off.
    assert!(plant.line_flow_mw()[1].abs() < 500.0 * 31_f64.to_radians());
    plant.set_unit_setpoint_mw(0, 80.0);
    plant.set_unit_setpoint_mw(1, 60.0);
    run(&mut plant, 400.0);
    for (now, then) in plant.line_flow_mw().iter().zip(flow_mw) {
        assert!((now - then).abs() < 1e-7, "{now} {then}");
    }
}

#[test]
fn the_angle_between_islands_is_the_integral_of_their_slip() {
    let mut plant = plant();
    plant.apply(&trip(1)).unwrap();
    run(&mut plant, 200.0);
    let angle_deg = |plant: &mut Plant| match plant.apply(&close(1)) {
        Err(Refused::OutOfStep { angle_deg, .. }) => angle_deg,
        other => panic!("{other:?}"),
    };
    // 20/45.4 Hz apart: a tenth of a second is 15.859 degrees, folded into 0 to 180.
    let first = angle_deg(&mut plant);
    run(&mut plant, 0.1);
    let second = angle_deg(&mut plant);
    let moved = (second - first).abs();
    assert!((moved - 0.1 * 20.0 / 45.4 * 360.0).abs() < 1e-6, "{moved}");
}

#[test]
fn a_tripped_unit_takes_inertia_droop_and_damping_with_it_and_returns_on_its_ramp() {
    let mut grid = chain();
    grid.units[1].ramp_mw_per_s = 2.0;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    let told = plant.apply(&Happening::UnitTrip { unit: 1 }).unwrap();
    assert_eq!(told, vec!["unit U2 trips at 60.0 MW"]);
    assert_eq!(plant.unit_output_mw()[1], 0.0);
    assert_eq!(plant.bus_inertia()[3], 0.0);
    plant.set_unit_setpoint_mw(1, 60.0);
    run(&mut plant, 200.0);
    assert_eq!(plant.unit_reference_mw()[1], 0.0);
    // 60 MW short on 40 droop + 4 machine + 140/50 load MW/Hz.
    assert!((plant.bus_freq_dev_hz()[3] + 60.0 / 46.8).abs() < 1e-9);
    assert!(matches!(
        plant.apply(&Happening::UnitTrip { unit: 1 }),
        Err(Refused::AlreadyOut { .. })
    ));
    plant.apply(&Happening::UnitReturn { unit: 1 }).unwrap();
    assert!(plant.bus_inertia()[3] > 0.0);
    run(&mut plant, 10.0);
    assert!((plant.unit_reference_mw()[1] - 20.0).abs() < 1e-9);
    run(&mut plant, 400.0);
    assert!(plant.bus_freq_dev_hz()[3].abs() < 1e-9);
    assert!((plant.unit_output_mw()[1] - 60.0).abs() < 1e-7);
}

#[test]
fn an_island_on_a_converter_alone_lives_on_the_virtual_inertia() {
    let mut grid = chain();
    grid.units[1].inertia_s = 0.0;
    grid.units[1].lag_s = 0.05;
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    assert_eq!(plant.bus_inertia()[3], 0.0);
    plant.apply(&trip(1)).unwrap();
    // 2 * 0.5 s * 100 MVA / w0, on 100 MVA.
    let omega = std::f64::consts::TAU * 50.0;
    assert!((plant.bus_inertia()[3] - 1.0 / omega).abs() < 1e-15);
    run(&mut plant, 100.0);
    assert!((plant.bus_freq_dev_hz()[2] + 10.0 / 45.4).abs() < 1e-9);
}

#[test]
fn losing_the_last_grid_forming_unit_darkens_the_island() {
    let mut plant = plant();
    plant.apply(&trip(1)).unwrap();
    let told = plant.apply(&Happening::UnitTrip { unit: 1 }).unwrap();
    assert!(told.contains(&"bus B4 is dark: 46.0 MW lost".to_string()), "{told:?}");
    assert_eq!(plant.island_count(), 1);
    // In step with nothing: the dark side can always be taken on.
    plant.apply(&close(1)).unwrap();
    assert_eq!(plant.bus_load_mw()[3], 46.0);
    run(&mut plant, 1.0);
    assert!(plant.bus_freq_dev_hz()[3] < -0.1);
}

#[test]
fn events_that_make_no_sense_are_refused_and_change_nothing() {
    let mut plant = plant();
    assert_eq!(plant.apply(&Happening::StewardDies { area: 0 }), Err(Refused::NotForThePlant));
    assert!(matches!(plant.apply(&trip(9)), Err(Refused::Unknown { what: "line", index: 9 })));
    assert!(matches!(plant.apply(&close(0)), Err(Refused::AlreadyClosed { .. })));
    assert!(matches!(
        plant.apply(&Happening::UnitReturn { unit: 0 }),
        Err(Refused::AlreadyIn { .. })
    ));
    assert!(matches!(
        plant.apply(&Happening::LoadStep { bus: 0, mw: f64::NAN }),
        Err(Refused::NotFinite { .. })
    ));
    plant.apply(&trip(0)).unwrap();
    assert!(matches!(plant.apply(&trip(0)), Err(Refused::AlreadyOpen { .. })));
}

#[test]
fn power_balances_in_every_island_at_rest() {
    let mut plant = plant();
    plant.apply(&trip(1)).unwrap();
    plant.set_feeder_shed_mw(0, 7.3);
    run(&mut plant, 300.0);
    let freq = plant.bus_freq_dev_hz();
    for (unit, buses, shed_mw) in [(0, [0, 1], 0.0), (1, [2, 3], 7.3)] {
        let load_mw: f64 = buses.iter().map(|&bus| plant.bus_load_mw()[bus]).sum();
        // Damping counts shedding at the nearest eighth of the feeder: 7.5 of 10 MW.
        let damping_mw = if unit == 0 { load_mw } else { load_mw - 7.5 };
        let relief_mw = freq[buses[0]] * (damping_mw / 50.0 + 4.0);
        let output_mw = plant.unit_output_mw()[unit];
        assert!((output_mw - (load_mw - shed_mw) - relief_mw).abs() < 1e-8);
    }
}

/// The 39-bus system with damping at some buses, a battery and a feeder.
fn busy_grid() -> Grid {
    let mut grid = new_england();
    for (index, bus) in grid.buses.iter_mut().enumerate() {
        bus.load_damping = if index % 3 == 0 { 1.5 } else { 0.0 };
    }
    for (unit, data) in grid.units.iter_mut().enumerate() {
        data.forms_grid = unit % 2 == 0;
        data.emergency_max_mw = data.base_mw + 60.0;
        data.ramp_mw_per_s = 5.0;
    }
    for bus in [3, 14] {
        let unit = add_unit(&mut grid, bus, 150.0, 0.0);
        let battery = &mut grid.units[unit];
        battery.inertia_s = 0.0;
        battery.droop_percent = Some(4.0);
        battery.energy_mwh = Some(0.5);
        battery.emergency_max_mw = 150.0;
    }
    add_feeder(&mut grid, 19, 200.0, FeederKind::Continuous);
    grid
}

/// What must hold at any time whatever happened.
fn assert_whole(grid: &Grid, plant: &Plant) {
    let numbers = plant.bus_freq_dev_hz().iter().chain(plant.line_flow_mw());
    assert!(numbers.chain(plant.unit_output_mw()).all(|x| x.is_finite()));
    let mut net_mw: Vec<f64> = plant.bus_load_mw().iter().map(|load| -load).collect();
    net_mw[19] += plant.feeder_shed_mw()[0];
    for (unit, data) in grid.units.iter().enumerate() {
        assert!(plant.unit_in_service()[unit] || plant.unit_output_mw()[unit] == 0.0);
        assert!(plant.unit_output_mw()[unit] < data.emergency_max_mw + 1e-6);
        net_mw[data.bus] += plant.unit_output_mw()[unit];
    }
    for (line, data) in grid.lines.iter().enumerate() {
        let flow_mw = plant.line_flow_mw()[line];
        let is_live = plant.bus_island()[data.from].is_some();
        assert!(flow_mw == 0.0 || (plant.line_closed()[line] && is_live));
        net_mw[data.from] -= flow_mw;
        net_mw[data.to] += flow_mw;
    }
    for (bus, island) in plant.bus_island().iter().enumerate() {
        match island {
            None => assert_eq!(net_mw[bus], 0.0),
            // Neither inertia nor damping: what flows in flows out.
            Some(_) if plant.bus_inertia()[bus] == 0.0 && bus % 3 != 0 && bus != 14 => {
                assert!(net_mw[bus].abs() < 1e-6, "{bus} {}", net_mw[bus]);
            }
            Some(_) => {}
        }
    }
}

#[test]
fn a_thousand_random_events_leave_the_plant_whole() {
    let grid = busy_grid();
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    let mut state = 7_u64;
    let mut draw = |below: usize| {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1);
        (state >> 33) as usize % below
    };
    let (mut done, mut split, mut dark) = (0, false, false);
    for _ in 0..1000 {
        let happening = match draw(9) {
            0 => trip(draw(grid.lines.len())),
            1..4 => close(draw(grid.lines.len())),
            4 => Happening::UnitTrip { unit: draw(12) },
            5 | 6 => Happening::UnitReturn { unit: draw(12) },
            7 => Happening::LoadStep { bus: draw(39), mw: draw(41) as f64 - 20.0 },
            _ => {
                plant.set_feeder_shed_mw(0, draw(300) as f64);
                plant.set_unit_setpoint_mw(draw(12), draw(700) as f64);
                continue;
            }
        };
        done += usize::from(plant.apply(&happening).is_ok());
        run(&mut plant, 0.2);
        assert_whole(&grid, &plant);
        split |= plant.island_count() > 1;
        dark |= plant.bus_island().contains(&None);
    }
    assert!(done > 200 && split && dark, "{done} {split} {dark}");
}

#[test]
fn a_known_topology_is_taken_from_a_bounded_store() {
    let mut plant = plant();
    let first = plant.propagator.clone();
    plant.apply(&trip(1)).unwrap();
    plant.apply(&close(1)).unwrap();
    assert!(std::sync::Arc::ptr_eq(&first, &plant.propagator));
    for mw in 1..200 {
        plant.set_bus_load_mw(0, 40.0 + f64::from(mw) * 0.01);
    }
    assert_eq!(plant.cache.len(), CACHE_LEN);
    // Forgotten meanwhile, and built again to the same figures.
    plant.set_bus_load_mw(0, 40.0);
    assert!(!std::sync::Arc::ptr_eq(&first, &plant.propagator));
    assert_eq!(first.response, plant.propagator.response);
}

#[test]
fn flows_at_rest_after_a_trip_are_the_dc_flows_of_what_is_left() {
    let grid = new_england();
    let mut plant = Plant::new(&grid, 0.02).unwrap();
    plant.apply(&trip(5)).unwrap();
    plant.apply(&Happening::UnitTrip { unit: 3 }).unwrap();
    run(&mut plant, 400.0);
    let freq_hz = plant.bus_freq_dev_hz()[0];
    assert!(freq_hz < -0.1);
    let mut injection_mw: Vec<f64> = plant.bus_load_mw().iter().map(|load| -load).collect();
    for (unit, data) in grid.units.iter().enumerate() {
        if plant.unit_in_service()[unit] {
            // Damping of 1 pu on the nameplate, in pu of 60 Hz.
            injection_mw[data.bus] +=
                plant.unit_output_mw()[unit] - data.rating_mva * freq_hz / 60.0;
        }
    }
    let network = crate::grid::dc::DcNetwork::new(&grid, plant.line_closed()).unwrap();
    let expected_mw = network.flows_mw(&injection_mw).unwrap().flow_mw;
    for (flow_mw, expected_mw) in plant.line_flow_mw().iter().zip(expected_mw) {
        assert!((flow_mw - expected_mw).abs() < 1e-6);
    }
}
