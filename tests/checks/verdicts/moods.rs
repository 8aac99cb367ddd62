//! A verdict does not depend on how the problem was written or approached.

use super::pairs;
use hedgerow_tests::areas::Chance;
use hedgerow_tests::board::Board;
use hedgerow_tests::border::Border;
use hedgerow_tests::detector::{Facts, trial};
use hedgerow_tests::programme::Programme;

/// Iterations allowed, whatever the tick.
const ITERATIONS: usize = 25_000;

/// Verdict with a given number of iterations per tick.
fn verdict(board: &mut Board, programme: &Programme, per_tick: usize) -> bool {
    let facts = Facts::new(programme);
    trial(board, &facts, per_tick, ITERATIONS / per_tick, true).tick.is_some()
}

/// The same rows in another order, equalities first.
fn shuffled(programme: &Programme, chance: &mut Chance) -> Programme {
    let mut order: Vec<usize> = (0..programme.rows()).collect();
    for (first, end) in [(0, programme.n_eq), (programme.n_eq, programme.rows())] {
        for place in first..end {
            let other = place + chance.below(end - place);
            order.swap(place, other);
        }
    }
    let pick = |values: &[f64]| order.iter().map(|&i| values[i]).collect();
    let a = order.iter().map(|&i| programme.a[i].clone()).collect();
    Programme { a, l: pick(&programme.l), r: pick(&programme.r), ..programme.clone() }
}

/// All ways to come to a verdict on a problem, the other side of the border being where a warm start comes from.
fn verdicts(pair: &Border, programme: &Programme, other: &Programme) -> Vec<(&'static str, bool)> {
    let mut chance = Chance::new(pair.seed);
    let cold = |name, per_tick| (name, verdict(&mut Board::new(programme), programme, per_tick));
    let mut all = vec![cold("5 a tick", 5), cold("20 a tick", 20), cold("50 a tick", 50)];
    let order = shuffled(programme, &mut chance);
    all.push(("row order", verdict(&mut Board::new(&order), &order, 20)));
    let factors: Vec<f32> =
        (0..programme.rows()).map(|_| chance.decades(0.1, 10.0) as f32).collect();
    let mut scaled = Board::with_factors(programme, &factors);
    all.push(("row factors", verdict(&mut scaled, programme, 20)));
    let mut warm = Board::new(other);
    warm.run(2000);
    warm.go_on_with(programme);
    all.push(("warm start", verdict(&mut warm, programme, 20)));
    assert!(warm.dual_max() <= warm.clamp());
    all
}

/// Source: J. Farkas, "Theorie der einfachen Ungleichungen", 1902: a proof speaks of the problem, not of the way to it; recomputed; no verdict flips.
#[test]
fn verdicts_do_not_depend_on_order_scale_pace_or_start() {
    let mut seen = 0;
    for pair in pairs(60, 600) {
        let truth = pair.impossible.least_violation();
        if truth >= 0.005 {
            let found = verdicts(&pair, &pair.impossible, &pair.possible);
            let of = (pair.seed, pair.family, truth);
            assert!(found.iter().all(|(_, found)| *found), "missed: {of:?} {found:?}");
            seen += 1;
        }
        let alarms = verdicts(&pair, &pair.possible, &pair.impossible);
        assert!(
            alarms.iter().all(|(_, found)| !found),
            "{} {:?} {alarms:?}",
            pair.seed,
            pair.family
        );
    }
    println!("{seen} impossible problems, six ways each");
    assert!(seen > 20, "{seen}");
}
