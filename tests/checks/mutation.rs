//! What each part of the steward is for: the same run with it and without it.
//!
//! Each test holds the whole steward to what it must do and shows that the same
//! steward with one part taken out, by its charter or by what it is told, does
//! not. Deleting the part makes the first half fail; a test that no longer needs
//! the part makes the second half fail.

mod bench;

use bench::{Bench, Change};
use hedgerow::case::model::Happening;
use hedgerow_protocol::message::Rung;

/// Ashmere's place in the built-in grid.
const ASHMERE: usize = 0;
/// Brackwater's place.
const BRACKWATER: usize = 1;
/// Frequency counts as restored within this, Hz.
const REST_HZ: f64 = 1e-3;
/// A line counts as within its rating up to this share of it.
const RATING_SHARE: f64 = 1.001;

/// Nothing changed.
const WHOLE: Change = |_| {};

/// A play run to a time, with a change in every charter.
fn run(play: &str, until_s: f64, change: Change) -> Bench {
    let mut bench = Bench::new(play, change);
    bench.run_until(until_s);
    let (loading, line) = bench.worst_loading();
    println!(
        "{play}: {:?}, {:.2e} Hz off, {line} at {:.1} %",
        bench.rung(ASHMERE),
        bench.worst_freq_dev_hz(),
        100.0 * loading
    );
    bench
}

fn is_kept(bench: &Bench) -> bool {
    bench.worst_freq_dev_hz() < REST_HZ && bench.worst_loading().0 <= RATING_SHARE
}

/// The `shed` play without its way back.
fn short_of_power(change: Change) -> Bench {
    let mut bench = run("shed", 235.0, change);
    // The rest without events: steam needs its time.
    for _ in 0..3000 {
        bench.step();
    }
    bench
}

#[test]
fn ladder_is_what_reaches_shed() {
    let whole = short_of_power(WHOLE);
    assert_eq!(whole.rung(ASHMERE), Rung::Shed);
    assert!(is_kept(&whole), "{:?}", whole.worst_loading());
    let without = short_of_power(|settings| settings.lowest_rung = 0);
    assert_eq!(without.rung(ASHMERE), Rung::Keep);
    let shed_mw: f64 = without.plant.feeder_shed_mw().iter().sum();
    assert_eq!(shed_mw, 0.0);
    assert!(!is_kept(&without), "nothing was wrong without the ladder");
}

#[test]
fn agreement_is_what_keeps_both_ends_together() {
    let whole = run("lean", 240.0, WHOLE);
    assert_eq!(whole.rung(ASHMERE), Rung::Lean);
    assert!(is_kept(&whole), "{} Hz", whole.worst_freq_dev_hz());
    // Prices that never move: each end goes on wishing what it alone likes best.
    let without = run("lean", 240.0, |settings| settings.agreement_relax = 0.0);
    let kept_leaning = without.rung(ASHMERE) == Rung::Lean && is_kept(&without);
    assert!(!kept_leaning, "the ends agreed without an agreement");
}

/// `lean`, then the lost unit comes back.
fn there_and_back(change: Change) -> Bench {
    let mut bench = run("lean", 240.0, change);
    let unit = bench.grid.units.iter().position(|unit| unit.name == "Sorrel Falls");
    bench.happen(&Happening::UnitReturn { unit: unit.expect("the unit of the play") });
    bench.run_until(500.0);
    bench
}

#[test]
fn shadow_is_what_climbs_back() {
    let whole = there_and_back(WHOLE);
    assert_eq!(whole.rung(ASHMERE), Rung::Keep);
    assert!(is_kept(&whole), "{} Hz", whole.worst_freq_dev_hz());
    // A witness that must hold for longer than the run never permits a climb.
    let without = there_and_back(|settings| settings.climb_ticks = 60_000);
    assert_eq!(without.rung(ASHMERE), Rung::Lean);
}

/// B1-B2 opens; the stewards are told so, or told that it is still closed.
fn b1_b2_opens(truth: bool) -> Bench {
    let mut bench = Bench::new("absorb", WHOLE);
    let line = bench.grid.lines.iter().position(|line| line.name == "B1-B2").expect("a line");
    bench.run_until(5.0);
    bench.happen(&Happening::LineTrip { line });
    bench.reported_closed = (!truth).then_some(line);
    // Without the play's own events: 200 s are twice what the ramps need.
    for _ in 0..2000 {
        bench.step();
    }
    let (loading, name) = bench.worst_loading();
    println!("told {truth}: {:?}, {name} at {:.1} %", bench.rung(BRACKWATER), 100.0 * loading);
    bench
}

#[test]
fn outage_update_is_what_keeps_the_lines_within_rating() {
    let whole = b1_b2_opens(true);
    assert!(is_kept(&whole), "{:?}", whole.worst_loading());
    let without = b1_b2_opens(false);
    let (loading, line) = without.worst_loading();
    assert!(loading > 1.01, "{line} at {loading} with the sensitivities of a closed line");
}

/// Gives a node a frame with each bit flipped in turn; every one must be refused and counted.
fn flip_every_bit(bench: &mut Bench, frame: &[u8]) {
    let (&delimiter, body) = frame.split_last().expect("a frame");
    for bit in 0..8 * body.len() {
        let mut hurt = body.to_vec();
        hurt[bit / 8] ^= 1 << (bit % 8);
        // A flip that makes a delimiter cuts the frame in two; both pieces are refused.
        let node = &mut bench.nodes[ASHMERE];
        let before = node.counts();
        node.receive(&hurt);
        node.receive(&[delimiter]);
        let after = node.counts();
        assert_eq!(after.accepted, before.accepted, "bit {bit} was accepted");
        assert!(after.refused > before.refused, "bit {bit} was not counted");
    }
    let before = bench.nodes[ASHMERE].counts();
    bench.nodes[ASHMERE].receive(frame);
    let after = bench.nodes[ASHMERE].counts();
    assert_eq!(after.accepted, before.accepted + 1, "the sound frame is used");
    assert_eq!(after.refused, before.refused);
}

#[test]
fn one_flipped_bit_in_one_frame_is_refused_and_counted() {
    let mut bench = Bench::new("lean", WHOLE);
    bench.run_until(5.0);
    let measurements = bench.measured(ASHMERE);
    flip_every_bit(&mut bench, &measurements);
    let terms = bench.mail_for(ASHMERE).swap_remove(0);
    flip_every_bit(&mut bench, &terms);
}
