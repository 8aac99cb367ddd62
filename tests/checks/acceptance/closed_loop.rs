//! Two closed loops of the 39-bus system with known ends.
//!
//! Data flow: `tests/data/39bus_closed_loop*` through the file reader and
//! `rehearse`; the ends are held against the study's central optimum.

use hedgerow::case::model::{Grid, Play};
use hedgerow::case::{parse_grid, parse_play};
use hedgerow::judge::judge;
use hedgerow::record::{Recording, Scheme};
use hedgerow::rehearsal::rehearse;
use serde::Deserialize;

/// Base of the per-unit figures, MVA.
const BASE_MVA: f64 = 100.0;
/// Set-points may be off by this, pu.
const SETPOINT_PU: f64 = 2e-3;

#[derive(Deserialize)]
struct File {
    base_flows_pu: Vec<f64>,
    runs: Vec<Reference>,
}

/// What a run must end at.
#[derive(Deserialize)]
struct Reference {
    play: String,
    rungs: Vec<u8>,
    setpoints_pu: Vec<f64>,
    flows_pu: Vec<f64>,
    nadir_hz: f64,
}

fn file() -> File {
    let text = include_str!("../../data/39bus_closed_loop_reference.json");
    serde_json::from_str(text).expect("a file of references")
}

fn grid() -> Grid {
    let text = include_str!("../../data/39bus_closed_loop.grid.toml");
    parse_grid(text, "39bus_closed_loop.grid.toml").unwrap_or_else(|problems| panic!("{problems}"))
}

fn play(which: usize, grid: &Grid) -> (Play, Reference) {
    let texts = [
        include_str!("../../data/39bus_closed_loop_load.play.toml"),
        include_str!("../../data/39bus_closed_loop_trip.play.toml"),
    ];
    let reference = file().runs.swap_remove(which);
    let name = format!("{}.play.toml", reference.play);
    let play =
        parse_play(texts[which], &name, grid).unwrap_or_else(|problems| panic!("{problems}"));
    (play, reference)
}

fn run(grid: &Grid, play: &Play) -> Recording {
    rehearse(grid, play, Scheme::Steward, &mut |_| true).expect("the play runs")
}

/// Largest difference in pu, and where.
fn worst(values_mw: &[f64], references_pu: &[f64]) -> (f64, usize) {
    let off = values_mw.iter().zip(references_pu).map(|(mw, pu)| (mw / BASE_MVA - pu).abs());
    off.zip(0..).fold((0.0, 0), |worst, this| if this.0 > worst.0 { this } else { worst })
}

fn check(which: usize) {
    let grid = grid();
    let (play, reference) = play(which, &grid);
    let recording = run(&grid, &play);
    let end = &recording.end;
    let (setpoint, unit) = worst(&end.unit_setpoint_mw, &reference.setpoints_pu);
    let (flow, line) = worst(&end.line_flow_mw, &reference.flows_pu);
    let lowest_hz = recording.extremes.lowest_frequency_hz.value - grid.nominal_hz;
    println!("{}: rungs {:?}", play.name, end.rung);
    println!("  set-points off by {setpoint:.1e} pu at {}", grid.units[unit].name);
    println!("  flows off by {flow:.1e} pu at {}", grid.lines[line].name);
    println!("  lowest {lowest_hz:.4} Hz, study {:.4} Hz", reference.nadir_hz);
    for told in &recording.story {
        println!("  {:>6.1} s  {}", told.at_s, told.text);
    }
    assert_eq!(end.rung, reference.rungs);
    assert!(setpoint <= SETPOINT_PU, "{}: {setpoint} pu", grid.units[unit].name);
    assert!(flow <= SETPOINT_PU, "{}: {flow} pu", grid.lines[line].name);
    for dev_hz in &end.island_freq_dev_hz {
        assert!(dev_hz.abs() < 1e-3, "{dev_hz} Hz");
    }
    let judgement = judge(&grid, &play, &recording);
    assert!(judgement.broken_by.is_empty(), "{:#?}", judgement.broken_by);
    assert_eq!(judgement.least_rung, reference.rungs);
}

/// Source: own study, 39-bus base flows of the reference answers; tolerance 1e-5 pu.
#[test]
fn the_39_bus_base_case_has_the_flows_of_the_study() {
    let grid = grid();
    let (mut play, _) = play(0, &grid);
    play.events.clear();
    play.run.duration_s = 1.0;
    // Droop alone: nobody moves a set-point, so the flows are the file's own.
    let still = rehearse(&grid, &play, Scheme::Droop, &mut |_| true).expect("the play runs");
    let (off, line) = worst(&still.end.line_flow_mw, &file().base_flows_pu);
    println!("base flows off by {off:.1e} pu at {}", grid.lines[line].name);
    assert!(off < 1e-5, "{}: {off} pu", grid.lines[line].name);
}

/// Source: own study, closed loop 0, central optimum by clarabel at 1e-9; tolerance 2e-3 pu, 1 mHz.
#[test]
fn the_39_bus_load_step_ends_at_the_central_optimum() {
    check(0);
}

/// Source: own study, closed loop 1, central optimum by clarabel at 1e-9; tolerance 2e-3 pu, 1 mHz.
#[test]
fn the_39_bus_line_trip_ends_at_the_central_optimum() {
    check(1);
}

#[test]
#[ignore = "prints how fast it runs; nothing to fail"]
fn how_fast_the_39_bus_run_is() {
    let grid = grid();
    let (play, _) = play(0, &grid);
    let begun = std::time::Instant::now();
    let recording = run(&grid, &play);
    let wall_s = begun.elapsed().as_secs_f64();
    println!(
        "{:.0} s of play in {wall_s:.2} s: {:.0} times real time",
        recording.duration_s,
        recording.duration_s / wall_s
    );
    assert!(!recording.stopped);
}
