//! Agreement of two ends over a bad link, and who helps whom.

use crate::common::{Area, Rng, Steward32, World, listen, settings};
use hedgerow_firmware::neighbour::{NOBODY, TieEnd, help_distance};
use hedgerow_protocol::charter::Tie;
use hedgerow_protocol::message::{Message, Rung, TieTerms};
use proptest::prelude::*;

fn tie() -> Tie {
    Area::random(6, 1).ties[0]
}

/// Terms as a stranger might send them.
fn any_terms(rng: &mut Rng) -> TieTerms {
    let mut pair = |most: f64| [rng.between32(-most, most), rng.between32(-most, most)];
    let (bid, bid_before, deviation) = (pair(100.0), pair(100.0), pair(1.5));
    TieTerms {
        tie: 100,
        tick: rng.index(50) as u32,
        round: rng.index(5) as u16,
        ready: rng.chance(0.7),
        bid,
        bid_before,
        deviation,
        open: rng.chance(0.7),
        detached: rng.chance(0.1),
        distance: rng.index(6) as u8,
        rung: Rung::Lean,
    }
}

/// Two live ends and what is under way between them.
struct Link {
    ends: [TieEnd; 2],
    under_way: [Vec<TieTerms>; 2],
    /// Optimum that each end would like, flow and angle.
    wish: [[f32; 2]; 2],
    tick: u32,
}

impl Link {
    fn new(rng: &mut Rng) -> Self {
        let mut pair = || [rng.between32(-0.8, 0.8), rng.between32(-0.8, 0.8)];
        let wish = [pair(), pair()];
        Self { ends: [TieEnd::new(); 2], under_way: [Vec::new(), Vec::new()], wish, tick: 0 }
    }

    /// What the end's own problem would answer: min 1/2 (v - wish)^2 + rho/2 v^2 - z v.
    fn answer(&self, end: usize) -> [f32; 2] {
        let z = self.ends[end].price();
        let rho = settings().agreement_penalty;
        std::array::from_fn(|k| ((self.wish[end][k] + z[k]) / (1.0 + rho)).clamp(-1.0, 1.0))
    }

    /// One tick of both ends; each may be late, and its message lost, doubled or overtaken.
    fn pass(&mut self, rng: &mut Rng, loss: f64, always_open: bool) {
        self.tick += 1;
        let s = settings();
        for end in 0..2 {
            while !self.under_way[end].is_empty() && rng.chance(0.6) {
                let place = rng.index(self.under_way[end].len().min(4));
                let terms = self.under_way[end].remove(place);
                if rng.chance(0.2) {
                    self.under_way[end].push(terms);
                }
                self.ends[end].hear(&terms, &s);
            }
            self.ends[end].pass(true, true);
            let open = always_open || self.ends[end].is_open(true, &s);
            let answer = self.answer(end);
            self.ends[end].settle(open, answer, &s);
            let terms = self.ends[end].say(&tie(), self.tick, true, 0, Rung::Lean);
            if !rng.chance(loss) {
                self.under_way[1 - end].push(terms);
            }
        }
    }
}

proptest! {
    #[test]
    fn terms_heard_twice_change_nothing(seed in any::<u64>()) {
        let (mut rng, s) = (Rng::new(seed), settings());
        let mut end = TieEnd::new();
        for _ in 0..20 {
            let terms = any_terms(&mut rng);
            end.hear(&terms, &s);
            let once = end;
            end.hear(&terms, &s);
            prop_assert_eq!(once, end);
            end.pass(true, true);
            end.settle(true, [0.1, 0.2], &s);
        }
    }

    #[test]
    fn older_terms_after_newer_ones_change_nothing(seed in any::<u64>(), loss in 0.0_f64..0.5) {
        let (mut rng, s) = (Rng::new(seed), settings());
        let mut link = Link::new(&mut rng);
        let mut heard: Vec<TieTerms> = Vec::new();
        for _ in 0..60 {
            link.pass(&mut rng, loss, true);
            // What end 1 has said so far, in any order, once end 0 has its newest word.
            heard.push(link.ends[1].say(&tie(), link.tick, true, 0, Rung::Lean));
            let mut end = link.ends[0];
            end.hear(heard.last().unwrap(), &s);
            let newest = end;
            for _ in 0..5 {
                end.hear(&heard[rng.index(heard.len())], &s);
                prop_assert_eq!(newest, end);
            }
        }
    }

    #[test]
    fn terms_of_an_earlier_tick_are_nothing_new(seed in any::<u64>()) {
        let (mut rng, s) = (Rng::new(seed), settings());
        let mut end = TieEnd::new();
        for tick in 0..20 {
            let newer = TieTerms { tick: 100 + tick, ..any_terms(&mut rng) };
            end.hear(&newer, &s);
            let before = end;
            end.hear(&TieTerms { tick: rng.index(100) as u32, ..any_terms(&mut rng) }, &s);
            prop_assert_eq!(before, end);
            end.pass(true, true);
            end.settle(true, [0.1, 0.2], &s);
        }
    }

    #[test]
    fn rounds_of_two_live_ends_stay_together(seed in any::<u64>(), loss in 0.0_f64..0.8, always in any::<bool>()) {
        let mut rng = Rng::new(seed);
        let mut link = Link::new(&mut rng);
        for tick in 0..300 {
            link.pass(&mut rng, loss, always);
            let apart = link.ends[0].round().wrapping_sub(link.ends[1].round()) as i16;
            prop_assert!(apart.abs() <= 1, "tick {tick}: {apart} rounds apart");
        }
        prop_assert!(link.ends[0].round() > 5, "no progress: {}", link.ends[0].round());
    }

    #[test]
    fn two_ends_agree_in_the_end(seed in any::<u64>(), loss in 0.0_f64..0.3) {
        let mut rng = Rng::new(seed);
        let mut link = Link::new(&mut rng);
        for _ in 0..3000 {
            link.pass(&mut rng, loss, true);
        }
        let (a, b) = (link.ends[0], link.ends[1]);
        for k in 0..2 {
            let v = a.deviation()[k];
            prop_assert!((v - b.deviation()[k]).abs() < 1e-4, "{a:?} {b:?}");
            let sum = a.price()[k] + b.price()[k];
            let expected = 2.0 * settings().agreement_penalty * v;
            prop_assert!((sum - expected).abs() < 1e-3, "{sum} {expected}");
            let exact = 0.5 * (link.wish[0][k] + link.wish[1][k]);
            prop_assert!((v - exact).abs() < 1e-3, "{v} {exact}");
        }
    }

    #[test]
    fn terms_out_of_range_are_dropped_whole(seed in any::<u64>(), field in 0_usize..6) {
        let (mut rng, s) = (Rng::new(seed), settings());
        let mut terms = any_terms(&mut rng);
        let bad = [f32::NAN, f32::INFINITY, f32::NEG_INFINITY, 3e4, -3e4][rng.index(5)];
        let [a, b, c] = [&mut terms.bid, &mut terms.bid_before, &mut terms.deviation];
        [a, b, c][field / 2][field % 2] = bad;
        let mut end = TieEnd::new();
        end.settle(true, [0.1, 0.2], &s);
        let before = end;
        prop_assert!(!end.hear(&terms, &s));
        prop_assert_eq!(before, end);
    }

    #[test]
    fn prices_stay_finite_whatever_is_heard(seed in any::<u64>()) {
        let (mut rng, s) = (Rng::new(seed), settings());
        let mut end = TieEnd::new();
        for _ in 0..200 {
            let terms = TieTerms {
                bid: [rng.wild(), rng.wild()],
                bid_before: [rng.wild(), rng.wild()],
                deviation: [rng.wild(), rng.wild()],
                round: rng.bits() as u16,
                tick: rng.bits() as u32,
                ..any_terms(&mut rng)
            };
            end.hear(&terms, &s);
            end.pass(true, true);
            end.settle(rng.chance(0.8), [rng.between32(-1.0, 1.0), 0.5], &s);
            let said = end.say(&tie(), 1, true, 0, Rung::Lean);
            let numbers = [said.bid, said.bid_before, said.deviation, end.price()];
            prop_assert!(numbers.iter().flatten().all(|x| x.is_finite() && x.abs() <= 2e4));
        }
    }

    #[test]
    fn help_ends_within_a_message_round_more_than_its_reach(areas in 2_usize..12, seed in any::<u64>()) {
        let mut rng = Rng::new(seed);
        let mut ties: Vec<(usize, usize)> = Vec::new();
        for a in 1..areas {
            ties.extend([(a, rng.index(a)), (a, rng.index(a))]);
        }
        let joined = |a, b| ties.contains(&(a, b)) || ties.contains(&(b, a));
        let mut distance = vec![NOBODY; areas];
        let mut rungs: Vec<Rung> =
            (0..areas).map(|_| Rung::ALL[rng.index(4) * rng.index(2)]).collect();
        let round = |distance: &[u8], rungs: &[Rung]| -> Vec<u8> {
            (0..areas)
                .map(|a| {
                    let terms: Vec<TieTerms> = (0..areas)
                        .filter(|&b| joined(a, b))
                        .map(|b| TieTerms { distance: distance[b], ..any_terms(&mut Rng::new(0)) })
                        .collect();
                    help_distance(rungs[a], terms.iter().map(Some))
                })
                .collect()
        };
        for _ in 0..areas {
            distance = round(&distance, &rungs);
        }
        rungs.fill(Rung::Keep);
        let hops = settings().help_hops;
        for _ in 0..=hops {
            distance = round(&distance, &rungs);
        }
        prop_assert!(distance.iter().all(|&d| d > hops), "{distance:?}");
    }
}

/// An area of one tie whose neighbour leans.
fn helping() -> (Steward32, World) {
    let mut area = Area::random(6, 11);
    area.ties.truncate(1);
    area.ties[0].meshed = false;
    area.settle();
    let mut steward = Steward32::new();
    steward.load(&area.charter()).unwrap();
    (steward, World::new(&area))
}

#[test]
fn a_silent_neighbour_closes_the_tie_at_the_next_tick() {
    let (mut steward, world) = helping();
    let snapshot = world.measure();
    let leaning = |tick| TieTerms {
        tie: 100,
        tick,
        round: 0,
        ready: true,
        bid: [8.0, 0.0],
        bid_before: [8.0, 0.0],
        deviation: [0.3, 0.0],
        open: true,
        detached: false,
        distance: 0,
        rung: Rung::Lean,
    };
    for tick in 0..60 {
        snapshot.tell(tick, |m| steward.hear(m));
        assert!(steward.hear(&Message::TieTerms(leaning(tick))));
        listen(&mut steward, tick);
    }
    let before = steward.tie_deviation(0);
    assert!(before.abs() > 0.01, "the tie did not move: {before}");
    let dead = u32::from(settings().neighbour_ticks);
    for silent in 0..=dead + 5 {
        let tick = 60 + silent;
        snapshot.tell(tick, |m| steward.hear(m));
        let said = listen(&mut steward, tick);
        if silent + 1 < dead {
            assert_eq!(said.ties_open, 1, "closed after {silent} silent ticks");
        }
        if silent > dead {
            assert_eq!(said.ties_open, 0, "still open after {silent} silent ticks");
            assert_eq!(said.terms[0].deviation, [0.0, 0.0]);
            assert_eq!(steward.tie_deviation(0), 0.0);
        }
    }
}

#[test]
fn a_tie_that_nobody_asks_for_stays_on_schedule() {
    let (mut steward, world) = helping();
    let snapshot = world.measure();
    for tick in 0..100 {
        snapshot.tell(tick, |m| steward.hear(m));
        let far =
            TieTerms { open: true, distance: 4, tick, ..any_terms(&mut Rng::new(tick.into())) };
        steward.hear(&Message::TieTerms(far));
        let said = listen(&mut steward, tick);
        assert_eq!((said.ties_open, said.terms[0].deviation), (0, [0.0, 0.0]));
    }
}
