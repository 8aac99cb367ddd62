//! Margins: what changes nothing must change nothing, and both ends of a margin hold.

use hedgerow::case::builtin_play;
use hedgerow::margins::knob::{Inputs, Knob};
use hedgerow::margins::meddle::{Meddled, Meter};
use hedgerow::margins::search::{half_rounded, margin, margins};
use hedgerow::margins::trial::Subject;
use hedgerow::record::Scheme;
use hedgerow::rehearsal::{attend, rehearse};

fn subject() -> Subject {
    let (grid, play) = builtin_play("absorb").unwrap();
    Subject::new(grid, play).unwrap()
}

/// Source: own requirement; exact (same record).
#[test]
fn every_imperfection_at_its_least_value_changes_nothing() {
    let subject = subject();
    let plain = rehearse(&subject.grid, &subject.play, Scheme::Steward, &mut |_| true).unwrap();
    let least: Vec<(Knob, f64)> =
        Knob::ALL.iter().map(|&k| (k, k.range(&subject.play).0)).collect();
    assert_eq!(subject.run(&least, subject.play.run.seed).unwrap(), plain);
}

/// Frames are opened, rewritten and sealed again with an error too small to change a reading.
/// Source: own requirement; exact (same record).
#[test]
fn a_meter_without_error_passes_frames_on_as_they_are() {
    let subject = subject();
    let plain = rehearse(&subject.grid, &subject.play, Scheme::Steward, &mut |_| true).unwrap();
    let meter = Meter { class_share: f64::MIN_POSITIVE, ..Meter::default() };
    let staff = Meddled::new(&subject.grid, &subject.play, meter, 1).unwrap();
    let meddled = attend(&subject.grid, &subject.play, Box::new(staff), &mut |_| true).unwrap();
    assert_eq!(meddled.recording, plain);
}

/// Source: own requirement; exact.
#[test]
fn what_a_margin_says_was_kept_is_kept_and_what_broke_breaks() {
    let subject = subject();
    let seeds = [1];
    let mut broken = 0;
    for knob in [Knob::PlantDelay, Knob::FrequencyNoise] {
        let found = margin(&subject, knob, &seeds).unwrap();
        println!("{found:?}");
        assert_eq!(subject.trial(&[(knob, found.kept)], 1).unwrap(), Ok(()));
        if let Some(value) = found.broken {
            broken += 1;
            assert!(value > found.kept);
            assert!(subject.trial(&[(knob, value)], 1).unwrap().is_err());
        }
    }
    assert!(broken > 0);
}

/// Source: own requirement; exact.
#[test]
fn margins_do_not_depend_on_the_number_of_threads() {
    let subject = subject();
    let knobs = [Knob::Loss, Knob::ActuatorGain];
    let one = margins(&subject, &knobs, &[1], 1, &|| true).unwrap();
    let two = margins(&subject, &knobs, &[1], 2, &|| true).unwrap();
    assert_eq!(one, two);
}

/// Source: own requirement; exact.
#[test]
fn meters_and_charters_are_off_by_what_was_asked() {
    let (grid, play) = builtin_play("absorb").unwrap();
    let mut inputs = Inputs { chartered: grid.clone(), grid, play, meter: Meter::default() };
    Knob::Sensitivity.apply(20.0, 7, &mut inputs);
    let factors: Vec<f64> = inputs
        .chartered
        .lines
        .iter()
        .zip(&inputs.grid.lines)
        .map(|(a, b)| a.reactance_pu / b.reactance_pu)
        .collect();
    assert!(factors.iter().all(|f| (f - 1.2).abs() < 1e-12 || (f - 0.8).abs() < 1e-12));
    assert!(factors.iter().any(|f| *f > 1.0) && factors.iter().any(|f| *f < 1.0));
    Knob::MeterClass.apply(0.5, 7, &mut inputs);
    assert_eq!(inputs.meter.class_share, 0.005);
    assert_eq!(half_rounded(1.1), 0.5);
    assert_eq!(half_rounded(0.5), 0.2);
}
