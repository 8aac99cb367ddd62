//! What is said: inside its range, finite, without a negative zero, whatever is heard.
//!
//! Figures: the project's own requirements; ranges are compared exactly, as `f32`.

use crate::common::{Area, Rng, Said, Snapshot, Steward32, World, listen};
use crate::share;
use hedgerow_protocol::message::{
    BasePoint, Message, Reading, Restore, Rung, Schedule, TieTerms, Verdict,
};
use proptest::prelude::*;

/// Spoil readings and statuses.
fn spoil(snapshot: &mut Snapshot, rng: &mut Rng, share: f64) {
    for list in snapshot.lists_mut() {
        for reading in list {
            if rng.chance(share) {
                *reading = match rng.index(4) {
                    0 => Reading::missing(),
                    1 => Reading { age_ticks: rng.index(9) as u8, ..*reading },
                    2 => Reading::fresh(reading.value * rng.between32(-3.0, 3.0)),
                    _ => Reading::fresh(rng.wild()),
                };
            }
        }
    }
    let statuses =
        [&mut snapshot.line_closed, &mut snapshot.tie_closed, &mut snapshot.unit_in_service];
    for closed in statuses.into_iter().flatten() {
        *closed ^= rng.chance(0.1 * share);
    }
}

fn any_message(rng: &mut Rng, tick: u32) -> Message<'static> {
    let ramp_ticks = [0, 1, 7, u32::MAX][rng.index(4)];
    match rng.index(6) {
        0 => Message::Schedule(Schedule {
            tie: rng.index(6) as u8,
            export_mw: if rng.chance(0.5) { rng.wild() } else { rng.between32(-300.0, 300.0) },
            ramp_ticks,
        }),
        1 => Message::BasePoint(BasePoint {
            unit: rng.index(9) as u8,
            base_mw: if rng.chance(0.3) { rng.wild() } else { rng.between32(0.0, 300.0) },
            ramp_ticks,
        }),
        2 => Message::Restore(Restore { tick }),
        _ => Message::TieTerms(TieTerms {
            tie: 100 + rng.index(5) as u16,
            tick: tick.wrapping_add(rng.index(3) as u32),
            round: rng.index(40) as u16,
            ready: rng.chance(0.8),
            bid: [rng.between32(-60.0, 60.0), rng.between32(-60.0, 60.0)],
            bid_before: [
                rng.between32(-60.0, 60.0),
                if rng.chance(0.1) { rng.wild() } else { 0.0 },
            ],
            deviation: [rng.between32(-1.0, 1.0), if rng.chance(0.1) { rng.wild() } else { 0.0 }],
            open: rng.chance(0.8),
            detached: rng.chance(0.1),
            distance: rng.index(7) as u8,
            rung: Rung::ALL[rng.index(4)],
        }),
    }
}

/// Every number finite and no negative zero; every set-point and shed in range.
fn check(area: &Area, steward: &Steward32, rung: Rung, said: &Said) -> Result<(), TestCaseError> {
    for number in &said.numbers {
        prop_assert!(number.is_finite(), "said {number}");
        let negative_zero = number.to_bits() == (-0.0_f32).to_bits();
        prop_assert!(
            !negative_zero,
            "said a negative zero: load {} {:?}",
            said.load_mw,
            said.terms
        );
    }
    for (index, unit) in area.units.iter().enumerate() {
        let p = steward.setpoint(index);
        let (low, high) = (unit.emergency_low.min(0.0), unit.emergency_high.max(0.0));
        prop_assert!(p >= low && p <= high, "unit {index}: {p} outside {low} {high}");
        prop_assert_eq!(said.setpoint_mw[index].to_bits(), (p * 100.0 + 0.0).to_bits());
        let movable = unit.available && steward.network().is_kept(unit.bus.into());
        let (low, high) = match rung {
            Rung::Keep | Rung::Lean => (unit.low, unit.high),
            Rung::Stretch | Rung::Shed => (unit.emergency_low, unit.emergency_high),
        };
        // A unit that is out of service is written as zero.
        let inside = p == 0.0 || (p >= low && p <= high);
        prop_assert!(
            said.verdict == Verdict::Blind || !movable || inside,
            "unit {index}: {p} on {rung:?}"
        );
    }
    for (index, shed) in said.shed_mw.iter().enumerate() {
        prop_assert!(*shed >= 0.0, "feeder {index}: {shed}");
        prop_assert!(*shed <= 1e6, "feeder {index}: {shed}");
    }
    for terms in &said.terms {
        let s = &area.settings;
        let [flow, angle] = terms.deviation;
        prop_assert!(flow.abs() <= s.tie_band && angle.abs() <= s.angle_band, "{terms:?}");
    }
    Ok(())
}

proptest! {
    #![proptest_config(share(2))]

    #[test]
    fn every_set_point_is_in_range_and_every_number_finite(
        buses in 5_usize..=32,
        seed in any::<u64>(),
        spoiled in prop_oneof![Just(0.0), Just(0.02), Just(0.5)],
    ) {
        let mut area = Area::random(buses, seed);
        area.settings.iterations = 10;
        area.settings.shadow_iterations = 5;
        (area.settings.proof_ticks, area.settings.climb_ticks) = (2, 8);
        let mut rng = Rng::new(seed);
        let mut steward = Steward32::new();
        steward.load(&area.charter()).unwrap();
        let mut world = World::new(&area);
        for tick in 0..150 {
            if rng.chance(0.05) {
                let bus = rng.index(buses);
                world.load[bus] = f64::max(world.load[bus] + rng.between(-2.0, 3.0), 0.0);
            }
            if rng.chance(0.02) {
                let line = rng.index(area.lines.len());
                world.line_closed[line] ^= true;
            }
            let mut snapshot = world.measure();
            spoil(&mut snapshot, &mut rng, spoiled);
            if rng.chance(0.95) {
                snapshot.tell(tick, |m| steward.hear(m));
            }
            for _ in 0..rng.index(4) {
                steward.hear(&any_message(&mut rng, tick));
            }
            let rung = steward.rung();
            let said = listen(&mut steward, tick);
            check(&area, &steward, rung, &said)?;
            if rng.chance(0.9) {
                world.obey(&said);
            }
        }
    }

    #[test]
    fn without_measurements_it_is_blind_and_set_points_stand_still(
        buses in 5_usize..=16,
        seed in any::<u64>(),
        rise in 0.0_f64..6.0,
    ) {
        let area = Area::random(buses, seed);
        let mut steward = Steward32::new();
        steward.load(&area.charter()).unwrap();
        let mut world = World::new(&area);
        world.load[0] += rise;
        for tick in 0..40 {
            world.measure().tell(tick, |m| steward.hear(m));
            let said = listen(&mut steward, tick);
            world.obey(&said);
        }
        // Three ticks without readings are bridged with the last ones; from then on nothing moves.
        let mut last = None;
        for tick in 40..100 {
            let said = listen(&mut steward, tick);
            let orders = (said.setpoint_mw.clone(), said.shed_mw.clone(), said.rung);
            if tick >= 43 {
                prop_assert_eq!(said.verdict, Verdict::Blind, "tick {}", tick);
                let before = last.replace(orders.clone());
                let moved = before.is_some_and(|before| before != orders);
                prop_assert!(!moved, "moved at tick {tick} to {orders:?}");
            }
        }
    }

    #[test]
    fn one_missing_output_holds_rung_and_verdict(buses in 5_usize..=16, seed in any::<u64>()) {
        let mut area = Area::random(buses, seed);
        area.units.iter_mut().for_each(|unit| unit.available = true);
        let mut steward = Steward32::new();
        steward.load(&area.charter()).unwrap();
        let mut world = World::new(&area);
        for tick in 0..60 {
            let mut snapshot = world.measure();
            if tick >= 10 {
                world.load[0] += 0.2;
                snapshot.output_mw[0] = Reading::missing();
            }
            snapshot.tell(tick, |m| steward.hear(m));
            let said = listen(&mut steward, tick);
            prop_assert_eq!(said.rung, Rung::Keep);
            prop_assert_eq!(said.verdict == Verdict::Blind, tick >= 10, "tick {}", tick);
        }
    }
}
