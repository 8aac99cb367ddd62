//! A load step on 39 buses under droop, against carried-over samples.

use super::*;
use crate::case::model::Happening;
use crate::grid::samples::new_england;

/// Time in 0.1 s, inertia-centre Hz, machine 36 Hz, machine 36 MW, ties 3-4 and 14-15 MW.
///
/// Source: reference run, +100 MW at bus 20 at 1 s, droop only; matrix
/// exponential against DOP853 at 1e-12.
const SAMPLES: [(usize, f64, f64, f64, f64, f64); 14] = [
    (20, -0.027696948, -0.030976688, 3.073883, 107.203581, 23.67684),
    (36, -0.038303358, -0.044215104, 6.6634, 112.99252, 3.846035),
    (50, -0.03567568, -0.049081594, 8.933708, 103.266937, 23.866559),
    (100, -0.034944786, -0.038990197, 7.435455, 104.164996, 18.666132),
    (150, -0.034873883, -0.028789726, 7.483714, 106.117839, 16.170183),
    (200, -0.03489439, -0.036266951, 7.560089, 107.728474, 14.731772),
    (250, -0.034917866, -0.035245012, 7.381711, 108.408945, 13.975477),
    (300, -0.034928391, -0.034000928, 7.454019, 108.20216, 14.281713),
    (350, -0.034929551, -0.035437986, 7.465459, 107.972618, 14.492681),
    (400, -0.034929057, -0.034951066, 7.433644, 107.873151, 14.532125),
    (450, -0.034928636, -0.034748842, 7.45361, 107.821847, 14.598736),
    (500, -0.03492831, -0.03503454, 7.455145, 107.82991, 14.614598),
    (550, -0.034928352, -0.034926008, 7.449386, 107.845477, 14.613159),
    (600, -0.034928423, -0.034907911, 7.452648, 107.849689, 14.60849),
];

fn centre_hz(plant: &Plant) -> f64 {
    let weights: f64 = plant.bus_inertia().iter().sum();
    let pairs = plant.bus_inertia().iter().zip(plant.bus_freq_dev_hz());
    pairs.map(|(m, f)| m * f).sum::<f64>() / weights
}

/// Run with this many steps per 0.1 s and hold every sample against the reference.
fn follow(steps_per_sample: usize) {
    let grid = new_england();
    let mut plant = Plant::new(&grid, 0.1 / steps_per_sample as f64).unwrap();
    let mut seen = 0;
    for sample in 0..=600 {
        if let Some(expected) = SAMPLES.iter().find(|row| row.0 == sample) {
            // The samples carry nine and six decimals.
            assert!((centre_hz(&plant) - expected.1).abs() < 1e-9, "{sample}");
            assert!((plant.bus_freq_dev_hz()[35] - expected.2).abs() < 1e-9);
            assert!((plant.unit_output_mw()[6] - 560.0 - expected.3).abs() < 1e-6);
            assert!((plant.line_flow_mw()[5] - expected.4).abs() < 1e-6);
            assert!((plant.line_flow_mw()[23] - expected.5).abs() < 1e-6);
            seen += 1;
        }
        if sample == 10 {
            plant.apply(&Happening::LoadStep { bus: 19, mw: 100.0 }).unwrap();
        }
        for _ in 0..steps_per_sample {
            plant.step();
        }
    }
    assert_eq!(seen, SAMPLES.len());
}

#[test]
fn follows_the_reference_run_whatever_the_step() {
    follow(10);
    follow(5);
    follow(1);
}

#[test]
fn shows_the_flows_just_after_a_load_step_at_once() {
    // Reference run: flows just after the event, buses without inertia at their new angles.
    let mut plant = Plant::new(&new_england(), 0.01).unwrap();
    plant.apply(&Happening::LoadStep { bus: 19, mw: 100.0 }).unwrap();
    for (line, flow_mw) in [(0, -128.6611119), (5, 109.2241346), (31, 163.3338443)] {
        assert!((plant.line_flow_mw()[line] - flow_mw).abs() < 1e-6);
    }
}

/// Prints microseconds per step; run with `cargo test -p hedgerow --lib
/// prints_cost_of_a_step -- --ignored --nocapture`.
#[test]
#[ignore = "prints figures, checks none"]
fn prints_cost_of_a_step() {
    for damped in [false, true] {
        let mut grid = new_england();
        for bus in &mut grid.buses {
            bus.damping_mw_per_hz = if damped { 2.0 } else { 0.0 };
        }
        let mut plant = Plant::new(&grid, 0.01).unwrap();
        plant.apply(&Happening::LoadStep { bus: 19, mw: 100.0 }).unwrap();
        let start = std::time::Instant::now();
        for _ in 0..500_000 {
            plant.step();
        }
        let step_us = start.elapsed().as_secs_f64() * 1e6 / 500_000.0;
        println!("{} states: {step_us:.2} us per step", plant.propagator.size());
    }
}
