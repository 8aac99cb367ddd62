//! Two areas: tie flow and frequency with droop, with area control error, and
//! with stewards.

use super::{Machine, Text, USUAL, close, last, step_load};
use hedgerow::baseline::{AreaControlError, Measured, Settings};
use hedgerow::case::model::Grid;
use hedgerow::record::{Recording, Scheme};

/// Example 11.3 of Kundur: 20 000 and 42 000 MW of capacity at 5 %, loads at 1 % per 1 %.
fn kundur() -> Grid {
    let machine =
        |rating_mva: f64, base_mw: f64| Machine { rating_mva, base_mw, lag_s: 0.2, ..USUAL };
    Text::new(2)
        .bus("B1", 1, 20_000.0, 1.0)
        .bus("B2", 2, 40_000.0, 1.0)
        .line("B1", "B2", 0.005)
        .unit("G1", "B1", machine(20_000.0, 19_000.0))
        .unit("G2", "B2", machine(42_000.0, 41_000.0))
        .grid()
}

/// Source: P. Kundur 1994, example 11.3(a): 1000 MW of load lost in area 1, from memory, recomputed; tolerance 1e-5 Hz on 0.04619 Hz, 0.01 MW on generation and tie.
#[test]
fn load_loss_of_kundur_11_3_without_area_control_rests_where_printed() {
    let grid = kundur();
    let run = step_load(&grid, Scheme::Droop, ("B1", -1000.0), 120.0, "");
    for area in 0..2 {
        close(last(&run.series.area_freq_dev_hz[area]), 0.04619, 1e-5);
    }
    close(last(&run.series.unit_output_mw[0]) - 19_000.0, -307.929, 0.01);
    close(last(&run.series.unit_output_mw[1]) - 41_000.0, -646.651, 0.01);
    close(-last(&run.series.line_flow_mw[0]), 322.556, 0.01);
}

/// Source: P. Kundur 1994, example 11.3, second part as remembered: with area control the disturbed area answers alone; tolerance 1e-4 Hz, 1 MW.
#[test]
fn load_loss_of_kundur_11_3_with_area_control_is_covered_by_its_own_area() {
    let grid = kundur();
    let run = step_load(&grid, Scheme::AreaControlError, ("B1", -1000.0), 400.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), 0.0, 1e-4);
    close(last(&run.series.unit_output_mw[0]), 18_000.0, 1.0);
    close(last(&run.series.unit_output_mw[1]), 41_000.0, 1.0);
    close(-last(&run.series.line_flow_mw[0]), 1000.0, 1.0);
}

/// Example 12.4 of Glover: areas of 700 and 1400 MW/Hz.
fn glover() -> Grid {
    let machine =
        |rating_mva: f64| Machine { rating_mva, base_mw: 0.5 * rating_mva, lag_s: 0.2, ..USUAL };
    Text::new(2)
        .bus("B1", 1, 1050.0, 0.0)
        .bus("B2", 2, 2100.0, 0.0)
        .line("B1", "B2", 0.02)
        .unit("G1", "B1", machine(2100.0))
        .unit("G2", "B2", machine(4200.0))
        .grid()
}

/// Source: Glover, Sarma, Overbye, 5th ed., example 12.4 without load-frequency control, from memory, recomputed; tolerance 1e-4 Hz on -0.0476 Hz, 0.01 MW on 66.67 MW.
#[test]
fn load_step_of_glover_12_4_draws_on_the_tie_as_printed() {
    let run = step_load(&glover(), Scheme::Droop, ("B1", 100.0), 120.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), -0.0476, 1e-4);
    close(last(&run.series.line_flow_mw[0]), -66.67, 0.01);
}

/// Source: Glover, Sarma, Overbye, 5th ed., example 12.4 with load-frequency control, from memory; tolerance 1e-4 Hz, 0.1 MW on zero deviation.
#[test]
fn load_step_of_glover_12_4_leaves_tie_and_frequency_alone_under_area_control() {
    let run = step_load(&glover(), Scheme::AreaControlError, ("B1", 100.0), 400.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), 0.0, 1e-4);
    close(last(&run.series.line_flow_mw[0]), 0.0, 0.1);
    close(last(&run.series.unit_output_mw[0]), 1150.0, 0.1);
}

/// Source: O. Elgerd, C. Fosha 1970, two equal areas, step 0.01 pu, from memory, recomputed; tolerance 5e-6 Hz on -0.01176 Hz, 0.01 MW on 0.005 pu (10 MW).
#[test]
fn two_areas_of_elgerd_and_fosha_help_each_other_by_half() {
    let machine = Machine {
        rating_mva: 2000.0,
        base_mw: 1000.0,
        droop_percent: Some(4.0),
        lag_s: 0.3,
        ..USUAL
    };
    let grid = Text::new(2)
        .bus("B1", 1, 1000.0, 0.0)
        .with_damping(2000.0 / 120.0)
        .bus("B2", 2, 1000.0, 0.0)
        .with_damping(2000.0 / 120.0)
        .line("B1", "B2", 0.1)
        .unit("G1", "B1", machine)
        .unit("G2", "B2", machine)
        .grid();
    let run = step_load(&grid, Scheme::Droop, ("B1", 20.0), 300.0, "");
    close(last(&run.series.area_freq_dev_hz[0]), -0.011_764_7, 5e-6);
    close(-last(&run.series.line_flow_mw[0]), 10.0, 0.01);
}

/// Source: area control error of NERC BAL-001 form, (NIA - NIS) - 10 B (FA - FS), digits own (120, 100 MW, B -50 MW/0.1 Hz, 59.98 Hz); tolerance 1e-9 MW on 10 MW.
#[test]
fn area_control_error_has_the_sign_and_size_of_the_standard_form() {
    // 500 MW/Hz: 1500 MVA at 5 % of 60 Hz.
    let machine = Machine { rating_mva: 1500.0, base_mw: 500.0, ..USUAL };
    let grid = Text::new(2)
        .bus("B1", 1, 500.0, 0.0)
        .bus("B2", 2, 500.0, 0.0)
        .line("B1", "B2", 0.1)
        .unit("G1", "B1", machine)
        .unit("G2", "B2", machine)
        .grid();
    let mut scheme = AreaControlError::new(&grid, &Settings::default());
    scheme.cycle(&Measured {
        line_flow_mw: &[120.0],
        schedule_mw: &[100.0],
        area_freq_dev_hz: &[-0.02, -0.02],
        unit_in_service: &[true, true],
        unit_base_mw: &[500.0, 500.0],
    });
    close(scheme.ace_mw()[0], 10.0, 1e-9);
    close(scheme.ace_mw()[1], -30.0, 1e-9);
}

/// Source: N. Cohn 1966 with the data of Kundur 11.3, recomputed: with the natural bias the error of the undisturbed area is zero at rest, of the other its own change; tolerance 0.01 MW.
#[test]
fn natural_bias_blames_the_disturbed_area_alone() {
    let grid = kundur();
    let run = step_load(&grid, Scheme::Droop, ("B1", -1000.0), 120.0, "");
    // The bias counts the loads as they stand at the start; area 1 has lost 1000 MW of damping load since.
    let mut scheme = AreaControlError::new(&grid, &Settings::default());
    scheme.cycle(&Measured {
        line_flow_mw: &[last(&run.series.line_flow_mw[0])],
        schedule_mw: &[run.series.line_flow_mw[0][0]],
        area_freq_dev_hz: &[
            last(&run.series.area_freq_dev_hz[0]),
            last(&run.series.area_freq_dev_hz[1]),
        ],
        unit_in_service: &[true, true],
        unit_base_mw: &[19_000.0, 41_000.0],
    });
    close(scheme.ace_mw()[1], 0.0, 0.01);
    let lost_damping_mw = 1000.0 / 60.0 * last(&run.series.area_freq_dev_hz[0]);
    close(scheme.ace_mw()[0], 1000.0 + lost_damping_mw, 0.01);
}

/// Two areas of two units each, on a scale that a board holds.
fn small_pair() -> Grid {
    let machine =
        |rating_mva: f64, base_mw: f64| Machine { rating_mva, base_mw, lag_s: 0.5, ..USUAL };
    Text::new(2)
        .bus("B1", 1, 320.0, 1.0)
        .bus("B2", 2, 400.0, 1.0)
        .line("B1", "B2", 0.1)
        .unit("G1", "B1", machine(200.0, 120.0))
        .unit("G2", "B1", machine(300.0, 180.0))
        .unit("G3", "B2", machine(400.0, 220.0))
        .unit("G4", "B2", machine(300.0, 200.0))
        .grid()
}

/// Run the pair under stewards that assume a damping of the loads.
fn run_stewards(assumed: f64) -> Recording {
    let settings = format!("[steward]\nassumed_load_damping = {assumed:?}\n");
    step_load(&small_pair(), Scheme::Steward, ("B1", 30.0), 180.0, &settings)
}

/// Source: two-area example in the manner of Kundur 11.3: at rest each area covers its own change, whatever the damping is taken for; tolerance 1 mHz, 0.2 MW between the runs.
#[test]
fn stewards_find_the_same_rest_point_with_right_and_wrong_damping() {
    let runs: Vec<Recording> = [1.0, 0.0, 4.0].into_iter().map(run_stewards).collect();
    for run in &runs {
        assert_eq!(run.worst_rung, [0, 0]);
        close(last(&run.series.area_freq_dev_hz[0]), 0.0, 1e-3);
        close(last(&run.series.line_flow_mw[0]), -20.0, 0.2);
        let outputs_mw: Vec<f64> =
            run.series.unit_output_mw.iter().map(|series| last(series)).collect();
        close(outputs_mw[0] + outputs_mw[1], 330.0, 0.2);
        close(outputs_mw[2] + outputs_mw[3], 420.0, 0.2);
        // Costs are equal per share of the nameplate: 200 and 300 MVA share 2 to 3.
        close(outputs_mw[0] - 120.0, 12.0, 0.2);
        for (found, first) in outputs_mw.iter().zip(&runs[0].series.unit_output_mw) {
            close(*found, last(first), 0.2);
        }
    }
}
