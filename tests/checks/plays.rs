//! Every built-in play, run once and held against what must be true of its end.
//!
//! Data flow: [`ended`] runs a play and keeps the record for all tests; the
//! independent programme stands in `reference`. `shed` comes back to `keep` by
//! its end, so it is also run without its way back, as `shed before 235 s`.

mod reference;

use std::collections::BTreeMap;
use std::sync::{Mutex, OnceLock};

use hedgerow::case::model::{FeederKind, Grid, Play};
use hedgerow::case::{builtin_play, builtin_plays};
use hedgerow::judge::{Judgement, Outcome, judge};
use hedgerow::record::{Recording, Scheme};
use hedgerow::rehearsal::rehearse;
use hedgerow::report::figures::Meta;
use hedgerow::report::{Bundle, json};
use reference::{Breakers, Reference};

/// A run with its judgement.
struct Ended {
    grid: Grid,
    play: Play,
    recording: Recording,
    judgement: Judgement,
}

impl Ended {
    fn run(grid: Grid, play: Play, scheme: Scheme) -> Self {
        let recording = rehearse(&grid, &play, scheme, &mut |_| true).expect("the play runs");
        let judgement = judge(&grid, &play, &recording);
        Self { grid, play, recording, judgement }
    }

    /// The document of the run without facts of clock and machine.
    fn document(&self) -> String {
        let bundle = Bundle {
            grid: &self.grid,
            play: &self.play,
            recording: &self.recording,
            judgement: &self.judgement,
            others: &[],
            meta: &Meta::default(),
        };
        json::document(&bundle).expect("a document")
    }

    fn reference(&self) -> Reference<'_> {
        Reference::of(&self.grid, &self.play, &self.recording)
    }
}

/// A built-in play, or its first events alone when the name says `NAME before S s`.
fn staged(name: &str) -> (Grid, Play) {
    let (play_name, before_s) = match name.split_once(" before ") {
        Some((play_name, before)) => {
            (play_name, before.trim_end_matches(" s").parse().expect("seconds"))
        }
        None => (name, f64::INFINITY),
    };
    let (grid, mut play) = builtin_play(play_name).expect("a built-in play");
    play.events.retain(|event| event.at_s < before_s);
    (grid, play)
}

/// The run of a play under stewards; run at the first question, then kept.
fn ended(name: &'static str) -> &'static Ended {
    type Runs = Mutex<BTreeMap<&'static str, &'static OnceLock<Ended>>>;
    static RUNS: Runs = Mutex::new(BTreeMap::new());
    let slot: &'static OnceLock<Ended> = RUNS
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner)
        .entry(name)
        .or_insert_with(|| Box::leak(Box::default()));
    slot.get_or_init(|| {
        let (grid, play) = staged(name);
        Ended::run(grid, play, Scheme::Steward)
    })
}

/// Every settled fact is met and the outcome is `kept`.
#[track_caller]
fn settled_facts_hold(name: &'static str) {
    let ended = ended(name);
    for fact in &ended.judgement.facts {
        println!("{name}: {} {:.4} of {:.4} {}", fact.name, fact.worst, fact.limit, fact.unit);
    }
    assert!(ended.judgement.facts.len() >= 4, "there is something to hold");
    assert_eq!(ended.judgement.outcome, Outcome::Kept, "{:#?}", ended.judgement.broken_by);
    assert!(ended.judgement.facts.iter().all(|fact| fact.met));
}

/// At rest each area trades what was agreed, but for its answer to what is left of the
/// frequency deviation: sum (export - agreed) = metered answer of its units - D df.
///
/// The answer of the units is what they deliver beyond their set-points, so the
/// identity says that set-points meet load and agreed trade, whatever the droop.
#[track_caller]
fn trade_identity_holds(name: &'static str) {
    const TRADE_MW: f64 = 0.5;
    let Ended { grid, recording, .. } = ended(name);
    let end = &recording.end;
    for area in (0..grid.areas.len()).filter(|&area| end.steward_alive[area]) {
        let inside = |bus: usize| grid.buses[bus].area == area;
        let off: f64 = (0..grid.lines.len())
            .filter(|&line| end.line_closed[line])
            .map(|line| {
                let data = &grid.lines[line];
                let off = end.line_flow_mw[line] - end.agreed_mw[line];
                off * f64::from(i8::from(inside(data.from)) - i8::from(inside(data.to)))
            })
            .sum::<f64>();
        let answer: f64 = (0..grid.units.len())
            .filter(|&unit| inside(grid.units[unit].bus) && end.unit_in_service[unit])
            .map(|unit| end.unit_output_mw[unit] - end.unit_setpoint_mw[unit])
            .sum();
        let damping: f64 = (0..grid.buses.len())
            .filter(|&bus| inside(bus))
            .map(|bus| {
                let data = &grid.buses[bus];
                let by_load = end.bus_load_mw[bus] * data.load_damping / grid.nominal_hz;
                let dev_hz = end.bus_island[bus].map_or(0.0, |i| end.island_freq_dev_hz[i]);
                (by_load + data.damping_mw_per_hz) * dev_hz
            })
            .sum();
        let left = off - answer + damping;
        println!("{name}: {} is off by {left:.4} MW", grid.areas[area].name);
        assert!(left.abs() <= TRADE_MW, "{}: {left} MW", grid.areas[area].name);
    }
}

/// The independent programme finds the same rungs, cost and shed load.
#[track_caller]
fn reference_finds_the_same_end(name: &'static str) {
    let ended = ended(name);
    let (reference, end) = (ended.reference(), &ended.recording.end);
    let least = reference.least_rungs();
    println!("{name}: rungs {:?}, least {least:?}", end.rung);
    let alive = |area: &usize| end.steward_alive[*area];
    for area in (0..least.len()).filter(alive) {
        assert_eq!(end.rung[area], least[area], "{}", ended.grid.areas[area].name);
    }
    let (cost, optimum) =
        (reference.cost_at_end(&least), reference.optimum(&least, Breakers::Standing).cost);
    println!("{name}: cost {cost:.5}, optimum {optimum:.5}");
    let tolerance = (0.005 * optimum.abs()).max(0.01);
    assert!((cost - optimum).abs() <= tolerance, "cost {cost}, optimum {optimum}");
    held_sheds(ended, reference.optimum(&least, Breakers::Free).shed_mw);
}

/// Shed load is the least, to 1 % or one breaker.
#[track_caller]
fn held_sheds(ended: &Ended, least_mw: f64) {
    let sheds = &ended.recording.end.feeder_shed_mw;
    let shed_mw: f64 = sheds.iter().sum();
    let switched = ended.grid.feeders.iter().zip(sheds);
    let breaker_mw = switched
        .filter(|(feeder, _)| feeder.kind == FeederKind::Switched)
        .map(|(_, &mw)| mw)
        .fold(0.0, f64::max);
    println!("{}: shed {shed_mw:.3} MW, least {least_mw:.3} MW", ended.play.name);
    let slack_mw = (0.01 * least_mw).max(0.1);
    assert!(shed_mw >= least_mw - slack_mw, "{shed_mw} MW of {least_mw} MW");
    assert!(shed_mw <= least_mw + slack_mw + breaker_mw, "{shed_mw} MW of {least_mw} MW");
}

/// Every proof announced holds in f64, and the rungs given up can not meet the limits.
#[track_caller]
fn proofs_hold(name: &'static str) {
    let ended = ended(name);
    for proof in &ended.recording.proofs {
        println!(
            "{name}: {:.1} s area {} rung {} claimed {:.3} MW, verified {:.3} MW",
            proof.at_s, proof.area, proof.rung, proof.claimed_mw, proof.verified_mw
        );
        assert!(proof.accepted && proof.verified_mw > 0.0, "{proof:?}");
    }
    let end = &ended.recording.end;
    for (area, &rung) in end.rung.iter().enumerate() {
        if rung > 0 && end.steward_alive[area] {
            let mut above = end.rung.clone();
            above[area] -= 1;
            // One rung up is either impossible for all together, or for the area alone at `keep`.
            let only = (above[area] == 0).then_some(area);
            let short_mw = ended.reference().violation_mw(&above, only);
            println!("{name}: rung {} would be short by {short_mw:.3} MW", above[area]);
            assert!(short_mw > 0.1, "{name}: rung {} is possible", above[area]);
        }
    }
}

/// The plays with their tests; a new built-in play must be named here.
macro_rules! plays {
    ($($module:ident: $name:literal,)*) => {
        const NAMED: &[&str] = &[$($name),*];
        $(mod $module {
            #[test]
            fn settled_facts_hold_and_it_is_kept() { super::settled_facts_hold($name); }
            #[test]
            fn each_area_trades_what_was_agreed() { super::trade_identity_holds($name); }
            #[test]
            fn an_independent_programme_finds_the_same_end() {
                super::reference_finds_the_same_end($name);
            }
            #[test]
            fn every_proof_holds_and_no_rung_is_given_up_for_nothing() { super::proofs_hold($name); }
        })*
    };
}

plays! {
    absorb: "absorb",
    island: "island",
    lean: "lean",
    quillon: "quillon",
    rough_link: "rough-link",
    shed: "shed",
    shed_at_its_depth: "shed before 235 s",
    silent_neighbour: "silent-neighbour",
    stretch: "stretch",
    switched: "switched",
}

#[test]
fn every_built_in_play_is_named_here() {
    for (name, _) in builtin_plays() {
        assert!(NAMED.contains(name), "{name}");
    }
}

#[test]
fn each_play_reaches_the_rung_it_is_there_for() {
    let deepest = |name| ended(name).recording.worst_rung.iter().copied().max();
    for (name, rung) in [
        ("absorb", 0),
        ("island", 0),
        ("lean", 1),
        ("rough-link", 1),
        ("silent-neighbour", 1),
        ("stretch", 2),
        ("shed", 3),
        ("switched", 3),
    ] {
        assert_eq!(deepest(name), Some(rung), "{name}");
    }
}

#[test]
fn a_rough_link_loses_and_damages_frames_and_the_end_is_kept() {
    let ended = ended("rough-link");
    for frames in &ended.recording.frames {
        println!("{frames:?}");
        assert!(frames.lost > 0 && frames.refused > 0 && frames.sent > frames.lost, "{frames:?}");
    }
    assert_eq!(ended.judgement.outcome, Outcome::Kept, "{:#?}", ended.judgement.broken_by);
}

#[test]
fn a_dead_neighbours_area_stays_dead_and_the_others_keep() {
    let ended = ended("silent-neighbour");
    assert_eq!(ended.recording.end.steward_alive, [true, true, false]);
    assert_eq!(ended.recording.end.rung[..2], [1, 0]);
}

#[test]
fn the_same_seed_gives_the_same_bytes() {
    let (grid, play) = staged("rough-link");
    let again = Ended::run(grid, play, Scheme::Steward).document();
    assert!(again == ended("rough-link").document(), "two runs of one seed differ");
}

#[test]
fn another_seed_gives_other_frames_and_the_same_outcome() {
    let (grid, mut play) = staged("rough-link");
    play.run.seed += 1;
    let other = Ended::run(grid, play, Scheme::Steward);
    let first = ended("rough-link");
    assert_ne!(other.recording.frames, first.recording.frames);
    assert_eq!(other.judgement.outcome, first.judgement.outcome);
}

/// Largest frequency deviation of an island at the end, Hz.
fn left_hz(ended: &Ended) -> f64 {
    ended.recording.end.island_freq_dev_hz.iter().fold(0.0, |most, dev| dev.abs().max(most))
}

/// Largest deviation of a closed tie from schedule at the end, MW.
fn tie_off_mw(ended: &Ended) -> f64 {
    let (grid, end) = (&ended.grid, &ended.recording.end);
    let of = |bus: usize| grid.buses[bus].area;
    let ties = grid.lines.iter().enumerate().filter(|(_, l)| of(l.from) != of(l.to));
    ties.filter(|&(line, _)| end.line_closed[line])
        .map(|(line, _)| (end.line_flow_mw[line] - end.schedule_mw[line]).abs())
        .fold(0.0, f64::max)
}

/// A play under another scheme.
fn under(name: &str, scheme: Scheme) -> Ended {
    let (grid, play) = staged(name);
    Ended::run(grid, play, scheme)
}

#[test]
fn droop_alone_leaves_frequency_off_nominal() {
    for name in ["lean", "absorb"] {
        let run = under(name, Scheme::Droop);
        println!("{name} under droop: {:.4} Hz off", left_hz(&run));
        assert!(left_hz(&run) > 0.01, "{name}: {} Hz", left_hz(&run));
        assert_eq!(run.judgement.outcome, Outcome::Broken);
    }
}

#[test]
fn area_control_error_restores_frequency_where_each_area_has_the_power() {
    let run = under("absorb", Scheme::AreaControlError);
    println!("absorb: {:.2e} Hz, ties off by {:.2} MW", left_hz(&run), tie_off_mw(&run));
    assert!(left_hz(&run) < 1e-3, "{} Hz", left_hz(&run));
    // Sampling every 4 s is slower than the stewards, and no droop is left to find.
    assert!(left_hz(&run) < 0.1 * left_hz(&under("absorb", Scheme::Droop)));
}

#[test]
fn area_control_error_can_not_restore_an_area_that_is_short() {
    let run = under("lean", Scheme::AreaControlError);
    println!("lean: {:.4} Hz, ties off by {:.2} MW", left_hz(&run), tie_off_mw(&run));
    assert!(left_hz(&run) < left_hz(&under("lean", Scheme::Droop)));
    assert!(left_hz(ended("lean")) < 1e-3, "stewards do, by agreed help");
}
