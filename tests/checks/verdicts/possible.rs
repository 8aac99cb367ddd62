//! Possible problems are never called impossible.

use super::pairs;
use hedgerow_tests::board::Board;
use hedgerow_tests::detector::{Facts, THRESHOLD, trial};

/// Accuracy of the reference, pu.
const REFERENCE: f64 = 1e-6;

/// Source: J. Farkas, "Theorie der einfachen Ungleichungen", 1902, held against linear programmes by clarabel 0.11; recomputed; tolerance 1e-6 pu.
#[test]
fn no_claim_exceeds_the_least_violation() {
    let (mut possible, mut impossible) = (0, 0);
    for pair in pairs(120, 1300) {
        for programme in [&pair.possible, &pair.impossible] {
            let truth = programme.least_violation();
            let (facts, mut board) = (Facts::new(programme), Board::new(programme));
            let found = trial(&mut board, &facts, 50, 60, false);
            let claimed = f64::from(found.claimed);
            let of = (pair.seed, pair.family, pair.distance);
            assert!(claimed <= truth.max(0.0) + REFERENCE, "{of:?}: {claimed} above {truth}");
            if truth < f64::from(THRESHOLD) {
                assert!(found.tick.is_none(), "{of:?}: false alarm, truth {truth}");
            }
            *(if truth <= REFERENCE { &mut possible } else { &mut impossible }) += 1;
        }
    }
    println!("{possible} possible and {impossible} impossible problems, no false claim");
    assert!(possible > 80 && impossible > 80, "{possible} {impossible}");
}
