//! The grid as a weighted graph of the nodes that may be told apart.
//!
//! Contract: buses joined by a line that cannot be a tie are one node; parallel
//! lines are one edge with their weights and number added up.

use super::super::base::BaseCase;
use super::Weight;
use crate::case::model::Grid;

/// Weight that every line has at least, as a share of the mean: an idle line still ties.
const IDLE_SHARE: f64 = 0.1;

/// An edge around a node.
#[derive(Clone, Copy, Debug)]
pub(super) struct Edge {
    /// Node at the other end.
    pub to: usize,
    /// Weight, with mean 1 over the lines.
    pub weight: f64,
    /// Lines in it.
    pub lines: f64,
}

/// The graph.
pub(super) struct Weighted {
    /// Node of each bus.
    pub node_of_bus: Vec<usize>,
    /// Buses in each node.
    pub size: Vec<f64>,
    /// Generation less load in MW.
    pub surplus_mw: Vec<f64>,
    /// Generation in MW.
    pub generation_mw: Vec<f64>,
    /// Load of the grid in MW.
    pub load_mw: f64,
    /// Edges around each node.
    pub around: Vec<Vec<Edge>>,
    /// All weight.
    pub weight: f64,
    /// All lines between nodes.
    pub lines: f64,
}

impl Weighted {
    pub(super) fn new(grid: &Grid, base: &BaseCase, weight: Weight) -> Self {
        let (node_of_bus, count) = nodes(grid, base);
        let mut graph = Self {
            size: vec![0.0; count],
            surplus_mw: vec![0.0; count],
            generation_mw: vec![0.0; count],
            load_mw: 0.0,
            around: vec![Vec::new(); count],
            weight: 0.0,
            lines: 0.0,
            node_of_bus,
        };
        for (bus, data) in grid.buses.iter().enumerate() {
            let node = graph.node_of_bus[bus];
            graph.size[node] += 1.0;
            graph.surplus_mw[node] += base.injection_mw[bus];
            graph.generation_mw[node] += base.injection_mw[bus] + data.load_mw;
            graph.load_mw += data.load_mw;
        }
        graph.add_lines(grid, base, weight);
        graph
    }

    fn add_lines(&mut self, grid: &Grid, base: &BaseCase, weight: Weight) {
        let raw: Vec<f64> = (0..grid.lines.len())
            .map(|line| match weight {
                Weight::Flow => base.flow_mw[line].abs(),
                Weight::Susceptance => 1.0 / grid.lines[line].reactance_pu.abs(),
            })
            .collect();
        let between: Vec<(usize, usize, usize)> = (0..grid.lines.len())
            .filter(|&line| base.closed[line])
            .map(|line| {
                let data = &grid.lines[line];
                (line, self.node_of_bus[data.from], self.node_of_bus[data.to])
            })
            .filter(|&(_, a, b)| a != b)
            .collect();
        let total: f64 = between.iter().map(|&(line, ..)| raw[line]).sum();
        let mean = (total / between.len().max(1) as f64).max(f64::MIN_POSITIVE);
        for (line, a, b) in between {
            let weight = raw[line] / mean + IDLE_SHARE;
            self.weight += weight;
            self.lines += 1.0;
            for (node, to) in [(a, b), (b, a)] {
                match self.around[node].iter_mut().find(|edge| edge.to == to) {
                    Some(edge) => {
                        edge.weight += weight;
                        edge.lines += 1.0;
                    }
                    None => self.around[node].push(Edge { to, weight, lines: 1.0 }),
                }
            }
        }
    }

    /// Number of nodes.
    pub(super) fn len(&self) -> usize {
        self.size.len()
    }

    /// Components of the nodes that `inside` admits, largest first.
    pub(super) fn pieces(
        &self,
        nodes: &[usize],
        inside: &dyn Fn(usize) -> bool,
    ) -> Vec<Vec<usize>> {
        let mut seen = vec![false; self.len()];
        let mut pieces: Vec<Vec<usize>> = Vec::new();
        for &start in nodes.iter().filter(|&&node| inside(node)) {
            if seen[start] {
                continue;
            }
            seen[start] = true;
            let mut piece = vec![start];
            let mut next = 0;
            while let Some(&node) = piece.get(next) {
                next += 1;
                for edge in &self.around[node] {
                    if inside(edge.to) && !seen[edge.to] {
                        seen[edge.to] = true;
                        piece.push(edge.to);
                    }
                }
            }
            pieces.push(piece);
        }
        pieces.sort_by_key(|piece| std::cmp::Reverse(piece.len()));
        pieces
    }
}

/// Node of each bus, and how many there are.
fn nodes(grid: &Grid, base: &BaseCase) -> (Vec<usize>, usize) {
    let ends = crate::grid::line_ends(grid);
    let inseparable: Vec<bool> = grid
        .lines
        .iter()
        .zip(&base.closed)
        .map(|(line, &closed)| closed && (line.rating_mw.is_infinite() || line.reactance_pu < 0.0))
        .collect();
    crate::grid::graph::components(grid.buses.len(), &ends, &inseparable)
}
