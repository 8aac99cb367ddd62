//! The quick way to a good choice: a few starting trees, then exchanges of ties.
//!
//! Contract: deterministic; returns trees of ties with their worst loading, best
//! first. No claim about the optimum is made here.
//!
//! Data flow: starting trees (ties with the largest base flow, with the largest
//! relaxed flow, and perturbed ones) -> close one tie and open one of its ring,
//! as long as that helps; then again from random exchanges around the best.
//! Source: Kruskal, Proc. AMS 7(1), 1956 (largest spanning tree); iterated local search after
//! Baxter, J. Oper. Res. Soc. 32(9), 1981; branch exchange
//! as for radial networks after Civanlar, Grainger, Yin and Lee, IEEE Trans.
//! Power Delivery 3(3), 1988.

use rand::{Rng, SeedableRng, rngs::ChaCha8Rng};

use super::problem::{TieProblem, Worst};

/// Starting trees drawn beside the ones with a reason.
const DRAWN_STARTS: usize = 12;

/// Starts a few random exchanges away from the best so far.
const KICKS: usize = 100;

/// Steps (a line times a tie) after which no more kicks are given.
const WORK_MAX: u64 = 600_000_000;

/// Exchanges per start at most; each makes the choice better, so it ends anyway.
const EXCHANGES_MAX: usize = 200;

/// A tree of ties and what it loads.
#[derive(Clone, Debug, PartialEq)]
pub struct Found {
    /// Closed ties, indices into the problem's, ascending.
    pub tree: Vec<usize>,
    /// Its worst loading.
    pub worst: Worst,
}

/// Search from several starts.
///
/// Cost: starts and kicks, times exchanges, times ties, times ring length, evaluations each.
pub fn search(problem: &TieProblem, base_mw: &[f64], relaxed_mw: &[f64]) -> Vec<Found> {
    let mut starts = vec![largest_tree(problem, base_mw)];
    if relaxed_mw.len() == problem.ties.len() {
        starts.push(largest_tree(problem, relaxed_mw));
    }
    let mut stream = ChaCha8Rng::seed_from_u64(1);
    for _ in 0..DRAWN_STARTS {
        let weights: Vec<f64> = base_mw
            .iter()
            .map(|flow| {
                // A whole number turned into 0.25 to 1.25 by hand: portable for ever.
                let factor = 0.25 + f64::from(stream.next_u32() >> 12) / f64::from(1 << 20);
                (flow.abs() + 1.0) * factor
            })
            .collect();
        starts.push(largest_tree(problem, &weights));
    }
    let mut work = 0;
    let mut found: Vec<Found> = Vec::new();
    let mut best: Option<Scored> = None;
    for start in starts {
        let end = improve(problem, start, &mut work);
        found.push(end.0.clone());
        if best.as_ref().is_none_or(|best| better(score(&end), score(best))) {
            best = Some(end);
        }
    }
    for _ in 0..KICKS {
        let Some(known) = best.as_ref().filter(|_| work < WORK_MAX) else { break };
        let start = kicked(problem, &known.0.tree, &mut stream);
        let end = improve(problem, start, &mut work);
        found.push(end.0.clone());
        if better(score(&end), score(known)) {
            best = Some(end);
        }
    }
    found.sort_by(|a, b| {
        a.worst.loading.total_cmp(&b.worst.loading).then_with(|| a.tree.cmp(&b.tree))
    });
    found.dedup_by(|a, b| a.tree == b.tree);
    found
}

/// Spanning tree of the ties with the largest magnitudes.
pub fn largest_tree(problem: &TieProblem, weight: &[f64]) -> Vec<usize> {
    let mut order: Vec<usize> = (0..problem.ties.len()).collect();
    order.sort_by(|&a, &b| weight[b].abs().total_cmp(&weight[a].abs()).then(a.cmp(&b)));
    let mut group: Vec<usize> = (0..problem.surplus_mw.len()).collect();
    let mut tree = Vec::new();
    for tie in order {
        let (one, other) = (group[problem.ties[tie].from_area], group[problem.ties[tie].to_area]);
        if one != other {
            group.iter_mut().filter(|g| **g == other).for_each(|g| *g = one);
            tree.push(tie);
        }
    }
    tree.sort_unstable();
    tree
}

/// A found tree with what strains the other lines.
type Scored = (Found, f64);

/// Whether one choice is better: its worst line, or at the same worst line the others.
fn better(one: (f64, f64), other: (f64, f64)) -> bool {
    let same = (one.0 - other.0).abs() <= 1e-12 * other.0;
    if same { one.1 < other.1 * (1.0 - 1e-12) } else { one.0 < other.0 }
}

fn score(scored: &Scored) -> (f64, f64) {
    (scored.0.worst.loading, scored.1)
}

fn evaluated(problem: &TieProblem, tree: Vec<usize>, work: &mut u64) -> Scored {
    *work += problem.evaluation_work();
    let (worst, pressure) = problem.worst_and_pressure(&tree);
    (Found { tree, worst }, pressure)
}

/// Exchange ties as long as that helps.
fn improve(problem: &TieProblem, tree: Vec<usize>, work: &mut u64) -> Scored {
    let mut at = evaluated(problem, tree, work);
    for _ in 0..EXCHANGES_MAX {
        let mut best: Option<Scored> = None;
        for candidate in neighbours(problem, &at.0.tree) {
            let next = evaluated(problem, candidate, work);
            if better(score(&next), score(best.as_ref().unwrap_or(&at))) {
                best = Some(next);
            }
        }
        match best {
            Some(next) => at = next,
            None => break,
        }
    }
    at
}

/// A tree some random exchanges away.
fn kicked(problem: &TieProblem, tree: &[usize], stream: &mut ChaCha8Rng) -> Vec<usize> {
    let mut tree = tree.to_vec();
    let exchanges = 2 + below(stream, 2);
    for _ in 0..exchanges {
        let out: Vec<usize> =
            (0..problem.ties.len()).filter(|tie| tree.binary_search(tie).is_err()).collect();
        if out.is_empty() {
            break;
        }
        let tie = out[below(stream, out.len())];
        let ring = ring(problem, &tree, tie);
        let gone = ring[below(stream, ring.len())];
        tree.retain(|&kept| kept != gone);
        tree.push(tie);
        tree.sort_unstable();
    }
    tree
}

/// A whole number below a bound that is not 0.
fn below(stream: &mut ChaCha8Rng, bound: usize) -> usize {
    stream.next_u32() as usize % bound.max(1)
}

/// Trees that differ from this one in one tie.
fn neighbours(problem: &TieProblem, tree: &[usize]) -> Vec<Vec<usize>> {
    let mut out = Vec::new();
    for tie in (0..problem.ties.len()).filter(|tie| tree.binary_search(tie).is_err()) {
        for on_ring in ring(problem, tree, tie) {
            let mut next: Vec<usize> = tree.iter().copied().filter(|&t| t != on_ring).collect();
            next.push(tie);
            next.sort_unstable();
            out.push(next);
        }
    }
    out
}

/// Ties of the tree on the ring that another tie closes.
fn ring(problem: &TieProblem, tree: &[usize], tie: usize) -> Vec<usize> {
    let (start, goal) = (problem.ties[tie].from_area, problem.ties[tie].to_area);
    let mut entered: Vec<Option<(usize, usize)>> = vec![None; problem.surplus_mw.len()];
    let mut stack = vec![start];
    let mut seen = vec![false; problem.surplus_mw.len()];
    seen[start] = true;
    while let Some(area) = stack.pop() {
        for &branch in tree {
            let data = &problem.ties[branch];
            if data.from_area != area && data.to_area != area {
                continue;
            }
            let other = data.across(area);
            if !seen[other] {
                seen[other] = true;
                entered[other] = Some((branch, area));
                stack.push(other);
            }
        }
    }
    let mut out = Vec::new();
    let mut at = goal;
    while let Some((branch, from)) = entered[at] {
        out.push(branch);
        at = from;
    }
    out
}
