//! Every spanning tree of the area graph, one after the other.
//!
//! Contract: parallel ties are different; each tree is visited once, in a fixed
//! order; the visitor may stop the walk. Depth is bounded by the number of ties.
//! Cost: every step on the way down leads to at least one tree.

use crate::grid::graph::components;

/// Visit the trees; returns false if the visitor stopped the walk.
///
/// Shapes: `edges` are pairs of `0..node_count`; the visitor gets edge indices in
/// ascending order and returns whether to go on.
pub fn each_tree(
    node_count: usize,
    edges: &[(usize, usize)],
    visit: &mut dyn FnMut(&[usize]) -> bool,
) -> bool {
    let mut walk = Walk {
        edges,
        node_count,
        alive: edges.iter().map(|&(a, b)| a != b).collect(),
        chosen: Vec::with_capacity(node_count.saturating_sub(1)),
    };
    if components(node_count, edges, &walk.alive).1 != 1 {
        return true;
    }
    let groups: Vec<usize> = (0..node_count).collect();
    walk.step(0, &groups, visit)
}

struct Walk<'a> {
    edges: &'a [(usize, usize)],
    node_count: usize,
    alive: Vec<bool>,
    chosen: Vec<usize>,
}

impl Walk<'_> {
    /// Decide edge `edge`; `group` says what the chosen edges have joined so far.
    fn step(
        &mut self,
        edge: usize,
        group: &[usize],
        visit: &mut dyn FnMut(&[usize]) -> bool,
    ) -> bool {
        if self.chosen.len() + 1 == self.node_count {
            return visit(&self.chosen);
        }
        let Some(&(a, b)) = self.edges.get(edge) else {
            return true;
        };
        let (one, other) = (group[a], group[b]);
        if one == other {
            // It would close a ring; leaving it out cuts nothing.
            return self.step(edge + 1, group, visit);
        }
        let joined: Vec<usize> = group.iter().map(|&g| if g == other { one } else { g }).collect();
        self.chosen.push(edge);
        let go_on = self.step(edge + 1, &joined, visit);
        self.chosen.pop();
        if !go_on {
            return false;
        }
        self.alive[edge] = false;
        let still_whole = components(self.node_count, self.edges, &self.alive).1 == 1;
        let go_on = !still_whole || self.step(edge + 1, group, visit);
        self.alive[edge] = true;
        go_on
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::grid::graph::{TreeCount, spanning_tree_count};

    fn counted(node_count: usize, edges: &[(usize, usize)]) -> u128 {
        let mut seen = std::collections::BTreeSet::new();
        each_tree(node_count, edges, &mut |tree| seen.insert(tree.to_vec()));
        seen.len() as u128
    }

    #[test]
    fn visits_as_many_different_trees_as_the_matrix_tree_theorem_counts() {
        // A square with both diagonals, one side doubled, and a loop.
        let edges = [(0, 1), (1, 2), (2, 3), (3, 0), (0, 2), (1, 3), (0, 1), (2, 2)];
        let closed = [true; 8];
        assert_eq!(TreeCount::Exact(counted(4, &edges)), spanning_tree_count(4, &edges, &closed));
        // Complete graph of five nodes: 5^3 = 125 (Cayley).
        let k5: Vec<_> = (0..5).flat_map(|a| (0..a).map(move |b| (b, a))).collect();
        assert_eq!(counted(5, &k5), 125);
    }

    #[test]
    fn stops_when_the_visitor_has_seen_enough() {
        let edges = [(0, 1), (1, 2), (2, 0)];
        let mut left = 2;
        let ended = each_tree(3, &edges, &mut |_| {
            left -= 1;
            left > 0
        });
        assert!(!ended && left == 0);
    }

    #[test]
    fn finds_no_tree_where_the_areas_do_not_hang_together() {
        assert_eq!(counted(3, &[(0, 1)]), 0);
        assert_eq!(counted(1, &[]), 1);
    }
}
