//! Textbook examples of load-frequency control, through grid file and rehearsal.
//!
//! Contract: only end values are held against the book; they do not depend on
//! how turbine and governor are modelled (here one first-order lag).
//! Data flow: TOML written below -> `parse_grid`, `parse_play` -> `rehearse`.
//! Units: MW and Hz; the book's per-unit figures are on 1000 MVA and 60 Hz.

use hedgerow::case::model::{Grid, Play};
use hedgerow::case::{parse_grid, parse_play};
use hedgerow::judge::{Outcome, judge};
use hedgerow::record::{FinalState, Recording, Scheme};
use hedgerow::rehearsal::rehearse;

/// Nominal frequency of the book, Hz.
const NOMINAL_HZ: f64 = 60.0;
/// Powers may be off by this, MW.
const POWER_MW: f64 = 0.05;
/// Frequency may be off by this, Hz.
const FREQ_HZ: f64 = 1e-4;

/// Two areas, speed regulation 0.05 and 0.0625, D 0.6 and 0.9, H 5 and 4 s on
/// 1000 MVA; synchronising power 2.0 pu, so a tie of 0.5 pu.
/// D of 0.6 pu/pu on 1000 MVA at 60 Hz is 10 MW/Hz, and 0.9 is 15 MW/Hz.
const TWO_AREAS: &str = r#"
format = 1

[grid]
name = "Two areas"
base_mva = 1000.0
nominal_hz = 60.0

[[area]]
name = "One"

[[area]]
name = "Two"

[[bus]]
name = "1"
area = "One"
load_mw = 500.0
load_damping = 0.0
damping_mw_per_hz = 10.0

[[bus]]
name = "2"
area = "Two"
load_mw = 500.0
load_damping = 0.0
damping_mw_per_hz = 15.0

[[line]]
from = "1"
to = "2"
reactance_pu = 0.5
rating_mw = 900.0

[[unit]]
name = "G1"
bus = "1"
kind = "gas"
rating_mva = 1000.0
base_mw = 500.0
max_mw = 1000.0
ramp_mw_per_s = 10.0
inertia_s = 5.0
droop_percent = 5.0
damping_pu = 0.0
lag_s = 0.5

[[unit]]
name = "G2"
bus = "2"
kind = "gas"
rating_mva = 1000.0
base_mw = 500.0
max_mw = 1000.0
ramp_mw_per_s = 10.0
inertia_s = 4.0
droop_percent = 6.25
damping_pu = 0.0
lag_s = 0.6
"#;

/// 187.5 MW more load in the first area.
const LOAD_STEP: &str = r#"
format = 1
title = "187.5 MW more load in the first area"

[run]
duration_s = 400.0

[[event]]
at_s = 1.0
what = "load-step"
bus = "1"
mw = 187.5
"#;

/// Units of 600 MVA at 6 % and 500 MVA at 4 %, sharing 900 MW as 500 and 400.
const SHARING: &str = r#"
format = 1

[grid]
name = "Sharing"
base_mva = 1000.0
nominal_hz = 60.0

[[area]]
name = "One"

[[bus]]
name = "1"
area = "One"
load_mw = 900.0
load_damping = 0.0
damping_mw_per_hz = DAMPING

[[unit]]
name = "G1"
bus = "1"
kind = "gas"
rating_mva = 600.0
base_mw = 500.0
max_mw = 600.0
inertia_s = 4.0
droop_percent = 6.0
damping_pu = 0.0
lag_s = 0.5

[[unit]]
name = "G2"
bus = "1"
kind = "gas"
rating_mva = 500.0
base_mw = 400.0
max_mw = 500.0
inertia_s = 4.0
droop_percent = 4.0
damping_pu = 0.0
lag_s = 0.5
"#;

fn grid(text: &str) -> Grid {
    parse_grid(text, "book.grid.toml").unwrap_or_else(|problems| panic!("{problems}"))
}

fn play(text: &str, grid: &Grid) -> Play {
    parse_play(text, "book.play.toml", grid).unwrap_or_else(|problems| panic!("{problems}"))
}

fn run(grid: &Grid, play: &Play, scheme: Scheme) -> Recording {
    rehearse(grid, play, scheme, &mut |_| true).expect("the play runs")
}

/// End of the two-area example under a scheme.
fn two_areas(scheme: Scheme) -> FinalState {
    let grid = grid(TWO_AREAS);
    run(&grid, &play(LOAD_STEP, &grid), scheme).end
}

#[track_caller]
fn close(value: f64, wanted: f64, tolerance: f64) {
    assert!((value - wanted).abs() <= tolerance, "{value}, the book says {wanted}");
}

/// Frequency deviation and what each of two units gives more.
fn answer(end: &FinalState) -> (f64, f64, f64) {
    let more = |unit: usize| end.unit_output_mw[unit] - end.unit_base_mw[unit];
    (end.island_freq_dev_hz[0], more(0), more(1))
}

/// Source: H. Saadat, "Power System Analysis", 1999, example 12.4 (two areas under droop), from memory, recomputed; tolerance 0.1 mHz, 0.05 MW.
#[test]
fn two_areas_under_droop_share_a_load_as_the_book_says() {
    let end = two_areas(Scheme::Droop);
    let (freq_dev_hz, first_mw, second_mw) = answer(&end);
    close(freq_dev_hz, -0.3, FREQ_HZ);
    close(first_mw, 100.0, POWER_MW);
    close(second_mw, 80.0, POWER_MW);
    close(end.line_flow_mw[0], -84.5, POWER_MW);
}

/// Restored: nominal frequency, the first area carries its own load, the tie is on schedule.
#[track_caller]
fn restored(end: &FinalState, power_mw: f64) {
    let (freq_dev_hz, first_mw, second_mw) = answer(end);
    close(freq_dev_hz, 0.0, FREQ_HZ);
    close(first_mw, 187.5, power_mw);
    close(second_mw, 0.0, power_mw);
    close(end.line_flow_mw[0], 0.0, power_mw);
}

/// Source: H. Saadat, "Power System Analysis", 1999, example 12.5 (tie-line bias control), from memory, recomputed; tolerance 0.1 mHz, 0.05 MW.
#[test]
fn area_control_error_restores_frequency_and_tie_as_the_book_says() {
    restored(&two_areas(Scheme::AreaControlError), POWER_MW);
}

/// Source: H. Saadat, "Power System Analysis", 1999, example 12.5 (end values), from memory, recomputed; tolerance 0.1 mHz, 0.05 MW.
#[test]
fn stewards_restore_frequency_and_tie_as_the_book_says() {
    let grid = grid(TWO_AREAS);
    let play = play(LOAD_STEP, &grid);
    let recording = run(&grid, &play, Scheme::Steward);
    restored(&recording.end, POWER_MW);
    assert_eq!(recording.worst_rung, [0, 0], "no area gives ground for its own load");
    assert_eq!(judge(&grid, &play, &recording).outcome, Outcome::Kept);
}

/// Own requirement: the dip under stewards is at most a fifth deeper than under droop alone.
#[test]
fn restoring_does_not_deepen_the_first_dip() {
    let grid = grid(TWO_AREAS);
    let play = play(LOAD_STEP, &grid);
    let dip_hz = |scheme| NOMINAL_HZ - run(&grid, &play, scheme).extremes.lowest_frequency_hz.value;
    let (droop, steward) = (dip_hz(Scheme::Droop), dip_hz(Scheme::Steward));
    assert!(droop > 0.3, "the dip passes the end value: {droop} Hz");
    assert!(steward < 1.2 * droop, "{steward} Hz against {droop} Hz");
}

/// End of the sharing example at a damping.
fn sharing(damping_mw_per_hz: &str) -> (f64, f64, f64) {
    let grid = grid(&SHARING.replace("DAMPING", damping_mw_per_hz));
    let step = LOAD_STEP.replace("187.5", "90.0").replace("400.0", "60.0");
    answer(&run(&grid, &play(&step, &grid), Scheme::Droop).end)
}

/// Source: H. Saadat, "Power System Analysis", 1999, example 12.2 a (governor sharing, D = 0), from memory, recomputed; tolerance 0.1 mHz, 0.05 MW.
#[test]
fn governors_share_a_load_by_their_regulation() {
    let (freq_dev_hz, first_mw, second_mw) = sharing("0.0");
    close(freq_dev_hz, -0.24, FREQ_HZ);
    close(first_mw, 40.0, POWER_MW);
    close(second_mw, 50.0, POWER_MW);
}

/// Source: H. Saadat, "Power System Analysis", 1999, example 12.2 b (governor sharing, D = 1.5), from memory, recomputed; tolerance 0.1 mHz, 0.05 MW.
#[test]
fn damping_of_the_load_takes_its_part() {
    // 1.5 pu/pu on 1000 MVA at 60 Hz.
    let (freq_dev_hz, first_mw, second_mw) = sharing("25.0");
    close(freq_dev_hz, -0.225, FREQ_HZ);
    close(first_mw, 37.5, POWER_MW);
    close(second_mw, 46.875, POWER_MW);
}
