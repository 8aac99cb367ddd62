use super::*;
use crate::case::model::Happening;
use crate::grid::samples::{add_bus, add_line, add_unit, area, empty, new_england};
use crate::plant::Plant;

/// Two areas of one bus each, one tie; units of 100 and 300 MVA in the first.
fn pair() -> Grid {
    let mut grid = empty(50.0);
    grid.areas.push(area("Two"));
    add_bus(&mut grid, 100.0);
    add_bus(&mut grid, 100.0);
    grid.buses[1].area = 1;
    add_line(&mut grid, 0, 1, 0.1);
    for (bus, rating_mva, base_mw) in [(0, 100.0, 50.0), (0, 300.0, 50.0), (1, 200.0, 100.0)] {
        let unit = add_unit(&mut grid, bus, rating_mva, base_mw);
        grid.units[unit].droop_percent = Some(4.0);
        grid.units[unit].max_mw = base_mw + 30.0;
        grid.units[unit].min_mw = base_mw - 30.0;
    }
    grid
}

fn cycle_with(
    scheme: &mut AreaControlError,
    flow_mw: f64,
    freq_dev_hz: [f64; 2],
    in_service: &[bool],
) -> Vec<f64> {
    scheme.cycle(&Measured {
        line_flow_mw: &[flow_mw],
        schedule_mw: &[0.0],
        area_freq_dev_hz: &freq_dev_hz,
        unit_in_service: in_service,
        unit_base_mw: &[50.0, 50.0, 100.0],
    })
}

const ALL: [bool; 3] = [true; 3];

#[test]
fn bias_is_droop_and_damping_of_the_area() {
    let mut grid = pair();
    grid.buses[0].load_damping = 1.5;
    grid.buses[0].damping_mw_per_hz = 2.0;
    grid.units[1].damping_pu = 0.5;
    let scheme = AreaControlError::new(&grid, &Settings::default());
    // 400 MVA at 4 % of 50 Hz: 200; loads 1.5 * 100/50 = 3, motors 2, unit 0.5 * 300/50 = 3.
    assert!((scheme.beta_mw_per_hz()[0] - 208.0).abs() < 1e-9);
    assert!((scheme.beta_mw_per_hz()[1] - 100.0).abs() < 1e-9);
}

#[test]
fn error_of_an_area_counts_ties_outwards_and_frequency_upwards() {
    let mut scheme = AreaControlError::new(&pair(), &Settings::default());
    let setpoint_mw = cycle_with(&mut scheme, 10.0, [0.02, 0.02], &ALL);
    assert!((scheme.ace_mw()[0] - 14.0).abs() < 1e-9);
    assert!((scheme.ace_mw()[1] + 8.0).abs() < 1e-9);
    // Request -0.05 * 4 * 14 = -2.8, divided 1 to 3.
    assert!((setpoint_mw[0] - 49.3).abs() < 1e-9);
    assert!((setpoint_mw[1] - 47.9).abs() < 1e-9);
    assert!((setpoint_mw[2] - 101.6).abs() < 1e-9);
}

#[test]
fn a_unit_at_its_limit_leaves_its_part_to_the_others_and_nothing_winds_up() {
    let mut scheme = AreaControlError::new(&pair(), &Settings::default());
    // ACE -200 asks 40: 10 and 30 MW, just inside.
    let setpoint_mw = cycle_with(&mut scheme, -200.0, [0.0, 0.0], &ALL);
    assert!((setpoint_mw[0] - 60.0).abs() < 1e-9 && (setpoint_mw[1] - 80.0).abs() < 1e-9);
    // ACE -50 asks 10 more: the large unit is full, the small one takes all of it.
    let setpoint_mw = cycle_with(&mut scheme, -50.0, [0.0, 0.0], &ALL);
    assert!((setpoint_mw[0] - 70.0).abs() < 1e-9 && (setpoint_mw[1] - 80.0).abs() < 1e-9);
    for _ in 0..50 {
        cycle_with(&mut scheme, -500.0, [0.0, 0.0], &ALL);
    }
    assert!((scheme.request_mw()[0] - 60.0).abs() < 1e-9);
    // One sample the other way is felt at once.
    let setpoint_mw = cycle_with(&mut scheme, 50.0, [0.0, 0.0], &ALL);
    assert!((setpoint_mw[0] + setpoint_mw[1] - 150.0).abs() < 1e-9);
}

#[test]
fn units_out_of_service_or_fixed_take_no_part() {
    let mut grid = pair();
    grid.units[0].status = UnitStatus::Fixed;
    let mut scheme = AreaControlError::new(&grid, &Settings::default());
    let setpoint_mw = cycle_with(&mut scheme, -50.0, [0.0, 0.0], &ALL);
    assert_eq!(setpoint_mw[0], 50.0);
    assert!((setpoint_mw[1] - 60.0).abs() < 1e-9);
    let setpoint_mw = cycle_with(&mut scheme, -50.0, [0.0, 0.0], &[true, false, true]);
    assert_eq!(&setpoint_mw[..2], &[50.0, 50.0]);
    assert_eq!(scheme.request_mw()[0], 0.0);
}

#[test]
fn a_sample_that_is_no_number_changes_nothing() {
    let mut scheme = AreaControlError::new(&pair(), &Settings::default());
    let before = cycle_with(&mut scheme, -50.0, [0.0, 0.0], &ALL);
    let after = cycle_with(&mut scheme, f64::NAN, [0.0, 0.0], &ALL);
    assert_eq!(before, after);
}

#[test]
fn participation_by_ramp_caps_a_battery_at_its_nameplate_per_cycle() {
    let mut grid = pair();
    grid.units[0].ramp_mw_per_s = f64::INFINITY;
    grid.units[1].ramp_mw_per_s = 5.0;
    let settings = Settings { participation: Participation::Ramp, ..Settings::default() };
    let mut scheme = AreaControlError::new(&grid, &settings);
    let setpoint_mw = cycle_with(&mut scheme, -60.0, [0.0, 0.0], &ALL);
    // 100 MVA in 4 s is 25 MW/s against 5: 10 and 2 of 12 MW.
    assert!((setpoint_mw[0] - 60.0).abs() < 1e-9);
    assert!((setpoint_mw[1] - 52.0).abs() < 1e-9);
}

/// Frequency of an area, weighted by inertia.
fn area_freq_dev_hz(grid: &Grid, plant: &Plant, area: usize) -> f64 {
    let (mut sum, mut weights) = (0.0, 0.0);
    for (bus, data) in grid.buses.iter().enumerate() {
        if data.area == area {
            sum += plant.bus_inertia()[bus] * plant.bus_freq_dev_hz()[bus];
            weights += plant.bus_inertia()[bus];
        }
    }
    sum / weights
}

/// (time s, requests of both areas MW)
const REQUESTS: [(usize, f64, f64); 7] = [
    (4, 25.268907, -4.270707),
    (8, 39.943162, -4.865457),
    (12, 50.456711, -2.371585),
    (20, 68.998578, -2.394756),
    (40, 89.781437, -0.902113),
    (84, 99.114987, -0.110559),
    (180, 99.995747, -0.000876),
];

/// (time s, inertia-centre frequency Hz, tie 3-4 MW, tie 14-15 MW)
const SAMPLES: [(usize, f64, f64, f64); 7] = [
    (5, -0.032056422, 107.427623, 17.765722),
    (10, -0.022939435, 109.76566, 11.586153),
    (20, -0.014274868, 114.522411, 6.650205),
    (40, -0.004807082, 117.133688, 3.412903),
    (60, -0.001603635, 117.863428, 2.560041),
    (120, -5.9634e-05, 118.211711, 2.122451),
    (180, -2.215e-06, 118.222406, 2.109209),
];

#[test]
fn follows_the_sampled_reference_run_on_39_buses() {
    // Reference run: +100 MW at bus 20 at 1 s, integration sampled every 4 s,
    // participation 1/R; matrix exponential against DOP853 at 1e-12.
    let grid = new_england();
    let mut plant = Plant::new(&grid, 0.01).unwrap();
    let mut scheme = AreaControlError::new(&grid, &Settings::default());
    let schedule_mw = plant.line_flow_mw().to_vec();
    let base_mw: Vec<f64> = grid.units.iter().map(|unit| unit.base_mw).collect();
    let (mut requests_seen, mut samples_seen) = (0, 0);
    for second in 0..=180 {
        if let Some(sample) = SAMPLES.iter().find(|sample| sample.0 == second) {
            let weights: f64 = plant.bus_inertia().iter().sum();
            let centre = plant.bus_inertia().iter().zip(plant.bus_freq_dev_hz());
            let centre_hz = centre.map(|(m, f)| m * f).sum::<f64>() / weights;
            assert!((centre_hz - sample.1).abs() < 2e-9, "{second} s");
            assert!((plant.line_flow_mw()[5] - sample.2).abs() < 2e-6);
            assert!((plant.line_flow_mw()[23] - sample.3).abs() < 2e-6);
            samples_seen += 1;
        }
        if second > 0 && second % 4 == 0 {
            let area_freq_dev_hz = [0, 1].map(|area| area_freq_dev_hz(&grid, &plant, area));
            let setpoint_mw = scheme.cycle(&Measured {
                line_flow_mw: plant.line_flow_mw(),
                schedule_mw: &schedule_mw,
                area_freq_dev_hz: &area_freq_dev_hz,
                unit_in_service: plant.unit_in_service(),
                unit_base_mw: &base_mw,
            });
            for (unit, mw) in setpoint_mw.into_iter().enumerate() {
                plant.set_unit_setpoint_mw(unit, mw);
            }
        }
        if let Some(request) = REQUESTS.iter().find(|request| request.0 == second) {
            assert!((scheme.request_mw()[0] - request.1).abs() < 2e-6, "{second} s");
            assert!((scheme.request_mw()[1] - request.2).abs() < 2e-6, "{second} s");
            requests_seen += 1;
        }
        if second == 1 {
            plant.apply(&Happening::LoadStep { bus: 19, mw: 100.0 }).unwrap();
        }
        for _ in 0..100 {
            plant.step();
        }
    }
    assert_eq!((requests_seen, samples_seen), (REQUESTS.len(), SAMPLES.len()));
}
