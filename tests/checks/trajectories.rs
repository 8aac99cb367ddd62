//! The 39-bus system in motion, held against a run made with other means.
//!
//! Data flow: grid file -> plant, area control error scheme or whole rehearsal,
//! plant step 0.01 s -> every 0.1 s against the tables (`ieee39_droop.csv`,
//! `ieee39_ace_*.csv`), which carry the frequency of the inertia centre and of
//! ten machines, ten outputs and three ties. The tables come from stepping the
//! same equations by matrix exponential, confirmed by a Runge-Kutta solution of
//! order eight at 1e-12.

use hedgerow::baseline::{AreaControlError, Measured, Settings};
use hedgerow::case::model::{Grid, Happening};
use hedgerow::case::parse_play;
use hedgerow::plant::Plant;
use hedgerow::record::{Recording, Scheme};
use hedgerow::rehearsal::rehearse_with_gain;
use hedgerow_tests::table::{data_grid, data_text, rows};

/// Allowed distance of frequencies.
const FREQ_TOL_HZ: f64 = 1e-5;
/// Allowed distance of flows and outputs.
const POWER_TOL_MW: f64 = 0.01;
/// Step of the plant; the motion between events is exact for any.
const STEP_S: f64 = 0.01;
/// Plant steps per sample of 0.1 s.
const STEPS: usize = 10;
/// Machines in the tables, at buses 30 to 39.
const MACHINES: usize = 10;
/// Index of the first machine bus.
const FIRST_MACHINE_BUS: usize = 29;
/// Ties 1-39, 3-4 and 14-15 by place in the file.
const TIES: [usize; 3] = [1, 5, 23];
/// Sample of the event.
const EVENT: usize = 10;

/// One row of a table.
struct Sample {
    centre_hz: f64,
    machine_hz: Vec<f64>,
    output_mw: Vec<f64>,
    tie_mw: Vec<f64>,
}

/// All rows of some tables, in order of time.
fn samples(files: &[&str]) -> Vec<Sample> {
    let mut found = Vec::new();
    for file in files {
        for row in rows(&data_text(file)) {
            assert_eq!(row[0], found.len().to_string(), "{file}: a row is missing");
            let numbers: Vec<f64> = row[1..].iter().map(|cell| cell.parse().unwrap()).collect();
            let scaled = |from: usize, count: usize, factor: f64| -> Vec<f64> {
                numbers[from..from + count].iter().map(|value| value * factor).collect()
            };
            found.push(Sample {
                centre_hz: numbers[0] * 1e-9,
                machine_hz: scaled(1, MACHINES, 1e-9),
                output_mw: scaled(1 + MACHINES, MACHINES, 1e-6),
                tie_mw: scaled(1 + 2 * MACHINES, TIES.len(), 1e-6),
            });
        }
    }
    found
}

fn mean_hz(plant: &Plant) -> f64 {
    let weights: f64 = plant.bus_inertia().iter().sum();
    let pairs = plant.bus_inertia().iter().zip(plant.bus_freq_dev_hz());
    pairs.map(|(weight, hz)| weight * hz).sum::<f64>() / weights
}

fn near(found: f64, expected: f64, tol: f64, what: &str, sample: usize) {
    assert!(
        (found - expected).abs() <= tol,
        "{what} at {:.1} s: {found} against {expected}",
        sample as f64 * 0.1
    );
}

/// Hold the plant against a row.
fn compare(grid: &Grid, plant: &Plant, sample: usize, expected: &Sample) {
    near(mean_hz(plant), expected.centre_hz, FREQ_TOL_HZ, "inertia centre", sample);
    for machine in 0..MACHINES {
        let unit = &grid.units[machine];
        assert_eq!(unit.bus, FIRST_MACHINE_BUS + machine);
        let freq_hz = plant.bus_freq_dev_hz()[unit.bus];
        near(freq_hz, expected.machine_hz[machine], FREQ_TOL_HZ, &unit.name, sample);
        let output_mw = plant.unit_output_mw()[machine] - unit.base_mw;
        near(output_mw, expected.output_mw[machine], POWER_TOL_MW, &unit.name, sample);
    }
    for (&line, &tie_mw) in TIES.iter().zip(&expected.tie_mw) {
        let flow_mw = plant.line_flow_mw()[line];
        near(flow_mw, tie_mw, POWER_TOL_MW, &grid.lines[line].name, sample);
    }
}

/// Area frequency deviations as the control rooms see them.
fn area_freq_dev_hz(grid: &Grid, plant: &Plant) -> Vec<f64> {
    let mut sums = vec![(0.0, 0.0); grid.areas.len()];
    for (bus, (hz, weight)) in
        grid.buses.iter().zip(plant.bus_freq_dev_hz().iter().zip(plant.bus_inertia()))
    {
        sums[bus.area].0 += weight * hz;
        sums[bus.area].1 += weight;
    }
    sums.into_iter().map(|(sum, weight)| sum / weight).collect()
}

/// Step the plant through a table, with a scheme that is sampled every 4 s or none.
fn follow(expected: &[Sample], mut scheme: Option<AreaControlError>) {
    let grid = data_grid("ieee39_2areas.grid.toml");
    let mut plant = Plant::new(&grid, STEP_S).unwrap();
    let schedule_mw = plant.line_flow_mw().to_vec();
    let base_mw: Vec<f64> = grid.units.iter().map(|unit| unit.base_mw).collect();
    for (sample, row) in expected.iter().enumerate() {
        compare(&grid, &plant, sample, row);
        if let Some(scheme) = scheme.as_mut().filter(|_| sample > 0 && sample % 40 == 0) {
            let setpoint_mw = scheme.cycle(&Measured {
                line_flow_mw: plant.line_flow_mw(),
                schedule_mw: &schedule_mw,
                area_freq_dev_hz: &area_freq_dev_hz(&grid, &plant),
                unit_in_service: plant.unit_in_service(),
                unit_base_mw: &base_mw,
            });
            for (unit, mw) in setpoint_mw.into_iter().enumerate() {
                plant.set_unit_setpoint_mw(unit, mw);
            }
        }
        if sample == EVENT {
            plant.apply(&Happening::LoadStep { bus: 19, mw: 100.0 }).unwrap();
        }
        for _ in 0..STEPS {
            plant.step();
        }
    }
}

/// Source: 39-bus system (Athay, Podmore, Virmani 1979), load step under droop recomputed by matrix exponential and DOP853; 601 samples, step 0.01 s; tolerance 1e-5 Hz, 0.01 MW.
#[test]
fn load_step_under_droop_follows_the_reference_at_every_sample() {
    let expected = samples(&["ieee39_droop.csv"]);
    assert_eq!(expected.len(), 601);
    follow(&expected, None);
}

/// Source: 39-bus system, load step under area control error integrated every 4 s, recomputed by matrix exponential and DOP853; 1801 samples, step 0.01 s; tolerance 1e-5 Hz, 0.01 MW.
#[test]
fn load_step_under_area_control_error_follows_the_reference_at_every_sample() {
    let expected = samples(&["ieee39_ace_1.csv", "ieee39_ace_2.csv"]);
    assert_eq!(expected.len(), 1801);
    let grid = data_grid("ieee39_2areas.grid.toml");
    follow(&expected, Some(AreaControlError::new(&grid, &Settings::default())));
}

/// The load step as a play.
fn record(scheme: Scheme, duration_s: f64, step_s: f64) -> (Grid, Recording) {
    let grid = data_grid("ieee39_2areas.grid.toml");
    let text = format!(
        "format = 1\n[run]\nduration_s = {duration_s}\ntick_s = 0.1\nplant_step_s = {step_s}\n\
         [[event]]\nat_s = 1.0\nwhat = \"load-step\"\nbus = \"B20\"\nmw = 100.0\n"
    );
    let play = parse_play(&text, "step.play.toml", &grid).unwrap();
    let run = rehearse_with_gain(&grid, &play, scheme, 0.05, &mut |_| true).unwrap();
    (grid, run)
}

/// Hold a rehearsal against a table: area frequencies, outputs and ties.
fn compare_record(grid: &Grid, run: &Recording, expected: &[Sample]) {
    let plant = Plant::new(grid, STEP_S).unwrap();
    for (sample, row) in expected.iter().enumerate().take(run.series.times_s.len()) {
        near(run.series.times_s[sample], sample as f64 * 0.1, 1e-9, "time", sample);
        for area in 0..grid.areas.len() {
            let (mut sum, mut weights) = (0.0, 0.0);
            for (machine, hz) in row.machine_hz.iter().enumerate() {
                let bus = FIRST_MACHINE_BUS + machine;
                if grid.buses[bus].area == area {
                    sum += plant.bus_inertia()[bus] * hz;
                    weights += plant.bus_inertia()[bus];
                }
            }
            let found_hz = run.series.area_freq_dev_hz[area][sample];
            near(found_hz, sum / weights, FREQ_TOL_HZ, &grid.areas[area].name, sample);
        }
        for (machine, expected_mw) in row.output_mw.iter().enumerate() {
            let unit = &grid.units[machine];
            let output_mw = run.series.unit_output_mw[machine][sample] - unit.base_mw;
            near(output_mw, *expected_mw, POWER_TOL_MW, &unit.name, sample);
        }
        // The record shows the flows just after the event, the table those just before it.
        for (&line, &tie_mw) in TIES.iter().zip(&row.tie_mw).filter(|_| sample != EVENT) {
            let flow_mw = run.series.line_flow_mw[line][sample];
            near(flow_mw, tie_mw, POWER_TOL_MW, &grid.lines[line].name, sample);
        }
    }
}

/// Source: 39-bus system, load step under droop recomputed by matrix exponential and DOP853, through grid file, play and record; 600 ticks, step 0.01 s; tolerance 1e-5 Hz, 0.01 MW.
#[test]
fn rehearsal_under_droop_follows_the_reference_at_every_tick() {
    let (grid, run) = record(Scheme::Droop, 60.0, STEP_S);
    assert_eq!(run.series.times_s.len(), 600);
    compare_record(&grid, &run, &samples(&["ieee39_droop.csv"]));
}

/// Source: 39-bus system, load step under area control error recomputed by matrix exponential and DOP853, through grid file, play and record; 1800 ticks, step 0.01 s; tolerance 1e-5 Hz, 0.01 MW.
#[test]
fn rehearsal_under_area_control_error_follows_the_reference_at_every_tick() {
    let (grid, run) = record(Scheme::AreaControlError, 180.0, STEP_S);
    assert_eq!(run.series.times_s.len(), 1800);
    compare_record(&grid, &run, &samples(&["ieee39_ace_1.csv", "ieee39_ace_2.csv"]));
}

/// Source: 39-bus reference run under droop: lowest machine 36 at -0.07482627 Hz and 2.6 s (step 0.1 s), settled at -0.0349283968 Hz (load over sum of 1/R and D); tolerance 1e-5 Hz.
#[test]
fn lowest_machine_and_settled_frequency_are_those_of_the_reference() {
    // The lowest point is that of the samples, so the plant steps from sample to sample.
    let (_, run) = record(Scheme::Droop, 300.0, 0.1);
    let lowest = &run.extremes.lowest_frequency_hz;
    assert_eq!(lowest.index, FIRST_MACHINE_BUS + 6);
    assert!((lowest.at_s - 2.6).abs() < 1e-9, "{}", lowest.at_s);
    assert!((lowest.value - 60.0 + 0.074_826_27).abs() < FREQ_TOL_HZ, "{}", lowest.value);
    let last_hz = run.series.area_freq_dev_hz[0].last().unwrap();
    assert!((last_hz + 0.034_928_396_786).abs() < FREQ_TOL_HZ, "{last_hz}");
}
