//! Governors and load damping: where the frequency rests after a load step.

use super::{Machine, Text, USUAL, close, last, step_load};
use hedgerow::case::model::Happening;
use hedgerow::plant::Plant;
use hedgerow::record::Scheme;
use hedgerow_tests::table::data_grid;

/// Source: H. Saadat, Power System Analysis, 1999, example 12.1(b), from memory, recomputed; tolerance 0.001 Hz on -0.576 Hz (printed), 1e-6 on -0.5769231 Hz.
#[test]
fn isolated_area_of_saadat_12_1_rests_where_printed() {
    let machine =
        Machine { rating_mva: 250.0, base_mw: 150.0, damping_pu: 0.8, lag_s: 0.5, ..USUAL };
    let grid = Text::new(1).bus("B1", 1, 150.0, 0.0).unit("G1", "B1", machine).grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 50.0), 60.0, "");
    let rest_hz = last(&run.series.area_freq_dev_hz[0]);
    close(rest_hz, -0.576, 0.001);
    close(rest_hz, -0.576_923_077, 1e-6);
}

/// Source: P. Kundur, Power System Stability and Control, 1994, example 11.1, from memory, recomputed; tolerance 1e-6 Hz on 0.8 Hz, time constant 13.33 s.
#[test]
fn load_drop_without_governors_of_kundur_11_1_rises_as_printed() {
    let machine = Machine { rating_mva: 500.0, base_mw: 255.0, droop_percent: None, ..USUAL };
    let mut text = Text::new(1).bus("B1", 1, 1020.0, 1.5);
    for name in ["G1", "G2", "G3", "G4"] {
        text = text.unit(name, "B1", machine);
    }
    let grid = text.grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", -20.0), 300.0, "");
    let freq_hz = &run.series.area_freq_dev_hz[0];
    close(last(freq_hz), 0.8, 1e-6);
    for (time_s, found_hz) in run.series.times_s.iter().zip(freq_hz).skip(10) {
        close(*found_hz, 0.8 * (1.0 - (-(time_s - 1.0) / (40.0 / 3.0)).exp()), 1e-6);
    }
}

/// Source: P. Kundur 1994, example 11.2(a), from memory (medium certainty), recomputed; tolerance 1e-3 Hz on 2 Hz.
#[test]
fn load_loss_without_governors_of_kundur_11_2_rests_at_two_hertz() {
    let machine = Machine { rating_mva: 1500.0, base_mw: 1260.0, droop_percent: None, ..USUAL };
    let grid = Text::new(1).bus("B1", 1, 1260.0, 1.5).unit("G1", "B1", machine).grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", -60.0), 200.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), 2.0, 1e-3);
}

/// Source: P. Kundur 1994, example 11.2(b), from memory (medium certainty), recomputed; tolerance 1e-4 Hz on 0.1395 Hz.
#[test]
fn load_loss_with_most_governors_of_kundur_11_2_rests_where_printed() {
    let acting = Machine { rating_mva: 1200.0, base_mw: 1008.0, ..USUAL };
    let passive = Machine { rating_mva: 300.0, base_mw: 252.0, droop_percent: None, ..USUAL };
    let grid = Text::new(1)
        .bus("B1", 1, 1260.0, 1.5)
        .unit("G1", "B1", acting)
        .unit("G2", "B1", passive)
        .grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", -60.0), 60.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), 0.1395, 1e-4);
    close(last(&run.series.unit_output_mw[1]), 252.0, 1e-9);
}

/// Source: Glover, Sarma, Overbye, Power System Analysis and Design, 5th ed., example 12.2, from memory (medium), recomputed; tolerance 0.001 MW on 1.667 MW.
#[test]
fn output_of_glover_12_2_rises_as_printed_when_frequency_falls() {
    let machine = Machine { rating_mva: 500.0, base_mw: 250.0, ..USUAL };
    let grid = Text::new(1).bus("B1", 1, 250.0, 0.0).unit("G1", "B1", machine).grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 5.0 / 3.0), 60.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), -0.01, 1e-6);
    close(last(&run.series.unit_output_mw[0]) - 250.0, 1.667, 0.001);
}

/// Source: Glover, Sarma, Overbye, example 12.3, from memory, recomputed; tolerance 0.01 MW and 1e-4 Hz (printed -0.2667 Hz, 88.88, 66.66, 44.44 MW).
#[test]
fn three_units_of_glover_12_3_share_the_load_as_printed() {
    let ratings_mva = [1000.0, 750.0, 500.0];
    let mut text = Text::new(1).bus("B1", 1, 1125.0, 0.0);
    for (index, rating_mva) in ratings_mva.into_iter().enumerate() {
        let machine = Machine { rating_mva, base_mw: 0.5 * rating_mva, lag_s: 0.3, ..USUAL };
        text = text.unit(&format!("G{}", index + 1), "B1", machine);
    }
    let grid = text.grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 200.0), 120.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), -0.2667, 1e-4);
    for (unit, printed_mw) in [88.88, 66.66, 44.44].into_iter().enumerate() {
        let rise_mw = last(&run.series.unit_output_mw[unit]) - grid.units[unit].base_mw;
        close(rise_mw, printed_mw, 0.01);
    }
}

/// Source: Grainger, Stevenson, Power System Analysis, 1994, ch. 13 (droop example), from memory, recomputed; tolerance 0.01 MW, 1e-4 Hz on 460, 340 MW, -0.24 Hz.
#[test]
fn two_units_of_grainger_and_stevenson_share_the_load_as_printed() {
    let large = Machine {
        rating_mva: 600.0,
        base_mw: 400.0,
        droop_percent: Some(4.0),
        lag_s: 0.3,
        ..USUAL
    };
    let small = Machine { rating_mva: 500.0, base_mw: 300.0, lag_s: 0.3, ..USUAL };
    let grid = Text::new(1)
        .bus("B1", 1, 700.0, 0.0)
        .unit("G1", "B1", large)
        .unit("G2", "B1", small)
        .grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 100.0), 120.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), -0.24, 1e-4);
    close(last(&run.series.unit_output_mw[0]), 460.0, 0.01);
    close(last(&run.series.unit_output_mw[1]), 340.0, 0.01);
}

/// Base of the area of Elgerd and Fosha in MW; only ratios matter.
const AREA_MW: f64 = 2000.0;

/// Source: O. Elgerd, C. Fosha, IEEE Trans. PAS-89, 1970: Kp 120 Hz/pu, Tp 20 s, R 2.4 Hz/pu, step 0.01 pu, from memory, recomputed; tolerance 5e-5 Hz on -0.0235 Hz.
#[test]
fn one_area_of_elgerd_and_fosha_rests_where_printed() {
    // 2.4 Hz per pu is 4 % of 60 Hz; D = 1/120 pu per Hz; H = D Tp f / 2 = 5 s. One lag of
    // 0.3 s stands for governor and turbine, which the rest point does not feel.
    let machine = Machine {
        rating_mva: AREA_MW,
        base_mw: 1000.0,
        droop_percent: Some(4.0),
        lag_s: 0.3,
        ..USUAL
    };
    let grid = Text::new(1)
        .bus("B1", 1, 1000.0, 0.0)
        .with_damping(AREA_MW / 120.0)
        .unit("G1", "B1", machine)
        .grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 0.01 * AREA_MW), 60.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), -0.0235, 5e-5);
}

/// Source: slope of the inertia centre -dP f / (2 sum H S) with the 39-bus system's published H (782.7 s on 100 MVA), exact; tolerance 1e-5 Hz/s on -0.0383289 Hz/s.
#[test]
fn frequency_of_the_39_bus_system_first_falls_by_the_swing_equation() {
    let grid = data_grid("ieee39_2areas.grid.toml");
    let step_s = 1e-4;
    let mut plant = Plant::new(&grid, step_s).unwrap();
    plant.apply(&Happening::LoadStep { bus: 19, mw: 100.0 }).unwrap();
    plant.step();
    let weights: f64 = plant.bus_inertia().iter().sum();
    let pairs = plant.bus_inertia().iter().zip(plant.bus_freq_dev_hz());
    let centre_hz = pairs.map(|(weight, hz)| weight * hz).sum::<f64>() / weights;
    close(centre_hz / step_s, -0.038_328_86, 1e-5);
}
