//! The quick way to a good choice: a few starting trees, then exchanges of ties.
//!
//! Contract: deterministic; returns trees of ties with their worst loading, best
//! first. No claim about the optimum is made here.
//!
//! Data flow: starting trees (ties with the largest base flow, with the largest
//! relaxed flow, and perturbed ones) -> close one tie and open one of its ring,
//! as long as that helps.
//! Source: Kruskal, Proc. AMS 7(1), 1956 (largest spanning tree); branch exchange
//! as for radial networks after Civanlar, Grainger, Yin and Lee, IEEE Trans.
//! Power Delivery 3(3), 1988.

use rand::{Rng, SeedableRng, rngs::ChaCha8Rng};

use super::problem::{TieProblem, Worst};

/// Starting trees drawn beside the ones with a reason.
const DRAWN_STARTS: usize = 6;

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
/// Cost: starts, times exchanges, times ties, times ring length, evaluations each.
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
    let mut found: Vec<Found> = starts.into_iter().map(|tree| improve(problem, tree)).collect();
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
        let (one, other) =
            (group[problem.ties[tie].from_area], group[problem.ties[tie].to_area]);
        if one != other {
            group.iter_mut().filter(|g| **g == other).for_each(|g| *g = one);
            tree.push(tie);
        }
    }
    tree.sort_unstable();
    tree
}

/// Exchange ties as long as the worst loading falls.
fn improve(problem: &TieProblem, mut tree: Vec<usize>) -> Found {
    let mut worst = problem.worst(&tree);
    for _ in 0..EXCHANGES_MAX {
        let mut best: Option<(Vec<usize>, Worst)> = None;
        for candidate in neighbours(problem, &tree) {
            let loading = problem.worst(&candidate);
            if loading.loading < best.as_ref().map_or(worst.loading, |b| b.1.loading) {
                best = Some((candidate, loading));
            }
        }
        match best {
            Some((next, loading)) => (tree, worst) = (next, loading),
            None => break,
        }
    }
    Found { tree, worst }
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
