//! The same area in builds of different capacity says the same bytes.

use crate::common::{Area, Rng, Said, World, listen};
use crate::share;
use hedgerow_firmware::steward::Steward;
use hedgerow_protocol::message::{Message, Reading, Rung, TieTerms};
use proptest::prelude::*;

/// 300 ticks of load steps, noise, gaps, outages and neighbours' terms.
fn run<const B: usize, const X: usize, const R: usize>(area: &Area, seed: u64) -> Vec<Said> {
    let mut rng = Rng::new(seed);
    let mut steward = Box::new(Steward::<B, X, R>::new());
    steward.load(&area.charter()).unwrap();
    let mut world = World::new(area);
    let mut heard = Vec::new();
    for tick in 0..300 {
        if rng.chance(0.02) {
            let bus = rng.index(area.buses);
            world.load[bus] = f64::max(world.load[bus] + rng.between(-1.0, 1.5), 0.0);
        }
        if rng.chance(0.01) {
            let line = rng.index(area.lines.len());
            world.line_closed[line] ^= true;
        }
        let mut snapshot = world.measure();
        for list in snapshot.lists_mut() {
            for reading in list {
                reading.value += rng.between32(-0.05, 0.05);
                if rng.chance(0.001) {
                    *reading = Reading::missing();
                }
            }
        }
        snapshot.tell(tick, |m| steward.hear(m));
        let terms = TieTerms {
            tie: 100 + rng.index(area.ties.len()) as u16,
            tick,
            round: (tick / 4) as u16,
            ready: rng.chance(0.8),
            bid: [rng.between32(-9.0, 9.0), rng.between32(-1.0, 1.0)],
            bid_before: [rng.between32(-9.0, 9.0), 0.0],
            deviation: [rng.between32(-0.5, 0.5), 0.0],
            open: true,
            detached: false,
            distance: rng.index(5) as u8,
            rung: Rung::Lean,
        };
        steward.hear(&Message::TieTerms(terms));
        let said = listen(&mut steward, tick);
        world.obey(&said);
        heard.push(said);
    }
    heard
}

proptest! {
    #![proptest_config(share(16))]

    #[test]
    fn capacity_does_not_change_a_single_bit(buses in 5_usize..=14, seed in any::<u64>()) {
        let mut area = Area::random(buses, seed);
        area.settings.proof_ticks = 3;
        area.settings.climb_ticks = 20;
        let small = run::<16, 48, 40>(&area, seed);
        let middle = run::<32, 64, 64>(&area, seed);
        let large = run::<64, 112, 112>(&area, seed);
        for (tick, ((a, b), c)) in small.iter().zip(&middle).zip(&large).enumerate() {
            prop_assert!(a.bytes == b.bytes, "16 and 32 differ at tick {tick}:\n{a:?}\n{b:?}");
            prop_assert!(b.bytes == c.bytes, "32 and 64 differ at tick {tick}:\n{b:?}\n{c:?}");
        }
    }
}
