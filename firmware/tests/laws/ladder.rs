//! The ladder: every state it can reach within a bound, against every finding.

use crate::common::settings;
use hedgerow_firmware::ladder::{Finding, Ladder, Move};
use hedgerow_protocol::charter::Settings;
use hedgerow_protocol::message::Rung;
use proptest::prelude::*;
use std::collections::HashSet;

/// Thresholds small enough that every counter passes them within the bound.
fn short(lowest_rung: u8) -> Settings {
    Settings { proof_ticks: 2, persist_ticks: 3, climb_ticks: 2, lowest_rung, ..settings() }
}

fn finding(bits: u8) -> Finding {
    let bit = |place: u8| bits >> place & 1 == 1;
    Finding { clear: bit(0), hard: bit(1), conditional: bit(2), witness: bit(3), shedding: bit(4) }
}

/// What must hold for one tick, whatever came before.
fn check(before: Ladder, after: Ladder, found: Finding, step: Option<Move>, s: &Settings) {
    let (from, to) = (before.rung(), after.rung());
    assert!(to.number() <= s.lowest_rung, "{before:?} {found:?}");
    match step {
        None => assert_eq!(from, to, "moved without saying so: {before:?} {found:?}"),
        Some(Move::Exhausted) => {
            assert_eq!((from, to), (from, from));
            assert_eq!(from.number(), s.lowest_rung, "{before:?} {found:?}");
            assert!(found.clear, "exhausted while blind: {before:?}");
        }
        Some(Move::Down { from: a, to: b }) => {
            assert_eq!((a, b, from.down()), (from, to, Some(to)));
            assert!(found.clear, "{before:?} {found:?}");
            let conditional = from != Rung::Keep && (found.conditional || before != Ladder::new());
            assert!(found.hard || conditional, "{before:?} {found:?}");
        }
        Some(Move::Up { from: a, to: b }) => {
            assert_eq!((a, b, from.up()), (from, to, Some(to)));
            assert!(found.clear && found.witness && !found.hard, "{before:?} {found:?}");
            assert!(from != Rung::Shed || !found.shedding, "{before:?} {found:?}");
        }
    }
    if from != to {
        // Nothing counted on the old rung carries over to the new one.
        assert!(!after.is_proven(s) && !after.is_ripe(s), "{before:?} {found:?}");
    }
}

#[test]
fn every_reachable_state_meets_every_finding() {
    for lowest_rung in 0..=3 {
        let s = short(lowest_rung);
        let mut seen = HashSet::new();
        let mut front = vec![Ladder::new()];
        // Twelve ticks take a ladder down to the lowest rung and past every threshold there.
        for _ in 0..12 {
            let mut next = Vec::new();
            for before in front {
                for bits in 0..32 {
                    let mut after = before;
                    let found = finding(bits);
                    let step = after.tick(found, &s);
                    check(before, after, found, step, &s);
                    if seen.insert(format!("{after:?}")) {
                        next.push(after);
                    }
                }
            }
            front = next;
        }
        assert!(seen.iter().any(|state| state.contains("exhausted: true")));
        let lowest = format!("rung: {:?}", Rung::from_number(lowest_rung).unwrap());
        assert!(seen.iter().any(|state| state.contains(&lowest)));
    }
}

#[test]
fn goes_down_at_the_last_tick_of_a_proof_and_not_before() {
    let s = settings();
    let mut ladder = Ladder::new();
    let hard = finding(0b00011);
    for _ in 1..s.proof_ticks {
        assert_eq!(ladder.tick(hard, &s), None);
    }
    let step = ladder.tick(hard, &s);
    assert_eq!(step, Some(Move::Down { from: Rung::Keep, to: Rung::Lean }));
}

#[test]
fn one_blind_tick_begins_the_proof_anew() {
    let s = settings();
    let mut ladder = Ladder::new();
    for _ in 0..10 {
        for _ in 1..s.proof_ticks {
            assert_eq!(ladder.tick(finding(0b00011), &s), None);
        }
        assert_eq!(ladder.tick(finding(0b00010), &s), None);
    }
    assert_eq!(ladder.rung(), Rung::Keep);
}

#[test]
fn says_once_that_the_ladder_is_exhausted_and_again_only_after_relief() {
    let s = short(0);
    let mut ladder = Ladder::new();
    let said = |ladder: &mut Ladder, ticks: usize| {
        (0..ticks).filter(|_| ladder.tick(finding(0b00011), &s).is_some()).count()
    };
    assert_eq!(said(&mut ladder, 50), 1);
    assert_eq!(ladder.tick(finding(0b00001), &s), None);
    assert_eq!(said(&mut ladder, 50), 1);
}

#[test]
fn help_that_is_not_delivered_counts_only_below_keep_and_wears_off_twice_as_fast() {
    let s = settings();
    let mut ladder = Ladder::new();
    let conditional = finding(0b00101);
    for _ in 0..1000 {
        assert_eq!(ladder.tick(conditional, &s), None);
    }
    let mut ladder = Ladder::new();
    for _ in 0..s.proof_ticks {
        ladder.tick(finding(0b00011), &s);
    }
    assert_eq!(ladder.rung(), Rung::Lean);
    // One tick in three gains nothing: +1, +1, -2.
    for tick in 0..3000 {
        let found = if tick % 3 == 2 { finding(0b00001) } else { conditional };
        assert_eq!(ladder.tick(found, &s), None);
    }
    for _ in 1..s.persist_ticks {
        assert_eq!(ladder.tick(conditional, &s), None);
    }
    assert!(matches!(ladder.tick(conditional, &s), Some(Move::Down { to: Rung::Stretch, .. })));
}

proptest! {
    #[test]
    fn every_move_has_its_history(
        bits in prop::collection::vec(prop_oneof![Just(0b00011_u8), Just(0b01001), Just(0b00101), 0_u8..32], 1..400),
        lowest_rung in 0_u8..=3,
    ) {
        let s = short(lowest_rung);
        let (proof, climb) = (usize::from(s.proof_ticks), usize::from(s.climb_ticks));
        let mut ladder = Ladder::new();
        let (mut entered, mut relieved) = (0, true);
        for (tick, &now) in bits.iter().enumerate() {
            let before = ladder;
            let found = finding(now);
            let step = ladder.tick(found, &s);
            check(before, ladder, found, step, &s);
            let last = |count: usize| bits[..=tick].iter().rev().take(count).map(|&b| finding(b));
            relieved |= found.clear && !found.hard;
            match step {
                Some(Move::Up { .. }) => {
                    prop_assert!(tick + 1 >= entered + climb);
                    prop_assert!(last(climb).all(|f| f.clear && f.witness && !f.hard));
                }
                Some(Move::Down { .. }) => {
                    let hard = tick + 1 >= proof && last(proof).all(|f| f.clear && f.hard);
                    let needs = bits[entered..=tick].iter().map(|&b| finding(b));
                    let proofs = needs.filter(|f| f.clear && (f.hard || f.conditional)).count();
                    let persists = proofs >= usize::from(s.persist_ticks);
                    prop_assert!(hard || persists && before.rung() != Rung::Keep);
                }
                Some(Move::Exhausted) => {
                    prop_assert!(relieved, "said twice in one spell");
                    relieved = false;
                }
                None => {}
            }
            if before.rung() != ladder.rung() {
                (entered, relieved) = (tick + 1, true);
            }
        }
    }
}
