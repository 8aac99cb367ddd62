//! Impossible problems are found, with proofs that separate.

use super::pairs;
use hedgerow_tests::board::Board;
use hedgerow_tests::border::FAMILIES;
use hedgerow_tests::detector::{Facts, trial};
use hedgerow_tests::exact;

/// Lower ends of the classes of violation, pu; below the first nothing need be found.
const CLASSES: [f64; 5] = [0.002, 0.005, 0.01, 0.05, 0.2];
/// From this violation on everything must be found, pu (0.5 MW).
const MUST: f64 = 0.005;
/// Iterations per tick and ticks allowed.
const BUDGET: (usize, usize) = (50, 500);

/// Class, family, tick at which it was found.
type Latency = (usize, usize, Option<usize>);

/// Source: J. Farkas, "Theorie der einfachen Ungleichungen", 1902, held against linear programmes by clarabel 0.11; recomputed; all of 0.5 MW and more within 500 ticks of 50 iterations.
#[test]
fn everything_impossible_by_half_a_megawatt_is_found() {
    let mut latencies: Vec<Latency> = vec![];
    let mut missed = vec![];
    for pair in pairs(120, 1300) {
        let programme = &pair.impossible;
        let truth = programme.least_violation();
        let Some(class) = CLASSES.iter().rposition(|&low| truth >= low) else { continue };
        let (facts, mut board) = (Facts::new(programme), Board::new(programme));
        let found = trial(&mut board, &facts, BUDGET.0, BUDGET.1, true);
        let family = FAMILIES.iter().position(|&f| f == pair.family).unwrap();
        latencies.push((class, family, found.tick));
        if found.tick.is_some() {
            let exactly = facts.proven_f64(&found.dual);
            assert!(exactly >= f64::from(found.claimed), "seed {}: f64 {exactly}", pair.seed);
            let terms = facts.terms(&found.dual, found.claimed);
            assert!(exact::sign(&terms) >= 0, "seed {}: no exact proof", pair.seed);
        } else if truth >= MUST {
            missed.push((pair.seed, pair.family, truth, found.claimed, board.dual_max()));
        }
    }
    table(&latencies);
    assert!(latencies.len() > 60, "{}", latencies.len());
    assert!(missed.is_empty(), "{} missed: {missed:?}", missed.len());
}

fn table(latencies: &[Latency]) {
    println!("ticks of {} iterations until found: half, 90 %, 99 %, worst, missed", BUDGET.0);
    let line = |name: String, pick: &dyn Fn(&Latency) -> bool| {
        let all: Vec<_> = latencies.iter().filter(|l| pick(l)).collect();
        let mut ticks: Vec<usize> = all.iter().filter_map(|l| l.2).collect();
        ticks.sort_unstable();
        let at = |share: f64| ticks.get((ticks.len().saturating_sub(1) as f64 * share) as usize);
        let cells = [0.5, 0.9, 0.99, 1.0].map(|share| at(share).copied().unwrap_or(0));
        println!("  {name:<16} {:>5} problems {cells:?} {}", all.len(), all.len() - ticks.len());
    };
    for (class, low) in CLASSES.iter().enumerate() {
        line(format!("from {} MW", low * 100.0), &|l| l.0 == class);
    }
    for (family, name) in FAMILIES.iter().enumerate() {
        line(format!("{name:?}"), &|l| l.1 == family);
    }
}
