//! Boundary moves: a node changes to a neighbouring area where that is better for all.
//!
//! Contract: areas stay in one piece and keep at least two nodes; every move
//! lowers one cost, so it ends: weight and number of the ties, unlike sizes,
//! generation unlike load, areas without generation.

use super::graph::Weighted;

/// Passes over the boundary at most.
const PASSES_MAX: usize = 30;
/// Price of the squared deviation of sizes from the mean, averaged over areas.
const SIZE_PRICE: f64 = 0.25;
/// Price of the squared surplus against an area's mean load, averaged over areas.
const SURPLUS_PRICE: f64 = 0.25;
/// Price of the ties as a share of all lines.
const TIE_PRICE: f64 = 1.0;
/// Price of an area without generation.
const DEAD_PRICE: f64 = 1.0;

/// Totals of the areas.
struct Totals {
    size: Vec<f64>,
    nodes: Vec<usize>,
    surplus_mw: Vec<f64>,
    generation_mw: Vec<f64>,
}

/// Move nodes as long as it pays; returns the number of moves.
pub(super) fn refine(graph: &Weighted, area: &mut [usize], count: usize) -> usize {
    let mut totals = totals(graph, area, count);
    let mut moves = 0;
    for _ in 0..PASSES_MAX {
        let before = moves;
        for node in 0..graph.len() {
            if let Some(target) = best_move(graph, area, &totals, node) {
                let own = area[node];
                totals.shift(graph, node, own, -1.0);
                totals.shift(graph, node, target, 1.0);
                area[node] = target;
                moves += 1;
            }
        }
        if moves == before {
            break;
        }
    }
    moves
}

fn totals(graph: &Weighted, area: &[usize], count: usize) -> Totals {
    let mut totals = Totals {
        size: vec![0.0; count],
        nodes: vec![0; count],
        surplus_mw: vec![0.0; count],
        generation_mw: vec![0.0; count],
    };
    for (node, &area) in area.iter().enumerate() {
        totals.shift(graph, node, area, 1.0);
    }
    totals
}

impl Totals {
    fn shift(&mut self, graph: &Weighted, node: usize, area: usize, sign: f64) {
        self.size[area] += sign * graph.size[node];
        self.surplus_mw[area] += sign * graph.surplus_mw[node];
        self.generation_mw[area] += sign * graph.generation_mw[node];
        self.nodes[area] =
            if sign > 0.0 { self.nodes[area] + 1 } else { self.nodes[area].saturating_sub(1) };
    }

    /// Cost of one area with a node more (`sign` 1), less (-1) or as it is (0).
    fn cost(&self, graph: &Weighted, area: usize, node: usize, sign: f64) -> f64 {
        let count = self.size.len() as f64;
        let mean: f64 = graph.node_of_bus.len() as f64 / count;
        let size = (self.size[area] + sign * graph.size[node]) / mean - 1.0;
        let surplus_mw = self.surplus_mw[area] + sign * graph.surplus_mw[node];
        let surplus = surplus_mw / (graph.load_mw / count).max(1e-9);
        let generation_mw = self.generation_mw[area] + sign * graph.generation_mw[node];
        let dead = if generation_mw > 1e-6 { 0.0 } else { DEAD_PRICE };
        (SIZE_PRICE * size * size + SURPLUS_PRICE * surplus * surplus) / count + dead
    }
}

/// The area a node should move to, if any.
fn best_move(graph: &Weighted, area: &[usize], totals: &Totals, node: usize) -> Option<usize> {
    let own = area[node];
    if totals.nodes[own] <= 2 || graph.around[node].iter().all(|edge| area[edge.to] == own) {
        return None;
    }
    let pull = |target: usize| -> f64 {
        graph.around[node]
            .iter()
            .filter(|edge| area[edge.to] == target)
            .map(|edge| edge.weight / graph.weight + TIE_PRICE * edge.lines / graph.lines)
            .sum()
    };
    let leave =
        totals.cost(graph, own, node, -1.0) - totals.cost(graph, own, node, 0.0) + pull(own);
    let mut targets: Vec<usize> =
        graph.around[node].iter().map(|edge| area[edge.to]).filter(|&a| a != own).collect();
    targets.sort_unstable();
    targets.dedup();
    let change = |target: usize| {
        leave + totals.cost(graph, target, node, 1.0)
            - totals.cost(graph, target, node, 0.0)
            - pull(target)
    };
    let best = targets.into_iter().min_by(|&a, &b| change(a).total_cmp(&change(b)))?;
    (change(best) < -1e-9 && stays_whole(graph, area, node)).then_some(best)
}

/// Whether the rest of the node's area hangs together without it.
fn stays_whole(graph: &Weighted, area: &[usize], node: usize) -> bool {
    let own = area[node];
    let friends: Vec<usize> =
        graph.around[node].iter().map(|edge| edge.to).filter(|&to| area[to] == own).collect();
    let Some(&start) = friends.first() else {
        return false;
    };
    let mut left = friends.len();
    let mut seen = std::collections::BTreeSet::from([node, start]);
    let mut stack = vec![start];
    while let Some(at) = stack.pop() {
        if friends.contains(&at) {
            left -= 1;
            if left == 0 {
                return true;
            }
        }
        for edge in &graph.around[at] {
            if area[edge.to] == own && seen.insert(edge.to) {
                stack.push(edge.to);
            }
        }
    }
    false
}
