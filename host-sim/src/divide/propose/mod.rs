//! Areas proposed for a grid that has none, or not the wanted number.
//!
//! Contract: every proposed area hangs together by lines in service; no line
//! without a rating and none with a negative reactance becomes a tie; areas are
//! alike in size and in generation against load as far as few and weak ties
//! allow. Deterministic.
//!
//! Data flow: lines -> weighted graph of nodes that may be told apart -> recursive
//! spectral bisection -> boundary moves -> area of each bus.
//! Source: Fiedler, Czech. Math. J. 23(98), 1973; recursive spectral bisection after
//! Pothen, Simon and Liou, SIAM J. Matrix Anal. Appl. 11(3), 1990; normalised cut
//! after Shi and Malik, IEEE Trans. PAMI 22(8), 2000; flow weights for grids after
//! Sanchez-Garcia et al., IEEE Trans. Power Systems 29(5), 2014; boundary moves
//! after Fiduccia and Mattheyses, 19th Design Automation Conf., 1982.

mod graph;
mod refine;
mod spectral;

use super::DivideError;
use super::base::BaseCase;
use crate::case::model::Grid;

use graph::Weighted;

/// Name of the method, for reports.
pub const METHOD: &str = "recursive spectral bisection (Fiedler 1973; Pothen, Simon and Liou 1990) with the \
normalised cut (Shi and Malik 2000), then boundary moves (Fiduccia and Mattheyses 1982)";

/// What makes a line worth keeping inside an area.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Weight {
    /// The flow it carries in the base case: ties carry little, opening them moves little.
    Flow,
    /// Its susceptance: areas are what is electrically close.
    Susceptance,
}

/// Proposed areas.
#[derive(Clone, Debug, PartialEq)]
pub struct Proposal {
    /// Area of each bus, from 0.
    pub area_of_bus: Vec<usize>,
    /// Number of areas.
    pub area_count: usize,
    /// What the lines were weighted by.
    pub weight: Weight,
    /// Moves of single nodes after the bisection.
    pub moves: usize,
}

/// Propose areas.
///
/// Errors: a number of areas below 2 or above a third of the nodes; a network
/// without solution.
pub fn propose(
    grid: &Grid,
    base: &BaseCase,
    count: usize,
    weight: Weight,
) -> Result<Proposal, DivideError> {
    let graph = Weighted::new(grid, base, weight);
    if count < 2 || count > graph.len() / 3 {
        return Err(DivideError::Count { wanted: count, buses: graph.len() });
    }
    let mut area = vec![0; graph.len()];
    let all: Vec<usize> = (0..graph.len()).collect();
    // (nodes, first area number, number of areas); each split makes two smaller ones.
    let mut waiting = vec![(all, 0, count)];
    while let Some((nodes, first, parts)) = waiting.pop() {
        if parts == 1 {
            nodes.iter().for_each(|&node| area[node] = first);
            continue;
        }
        let one = parts / 2;
        let (left, right) = spectral::bisect(&graph, &nodes, one, parts - one);
        waiting.push((left, first, one));
        waiting.push((right, first + one, parts - one));
    }
    let moves = refine::refine(&graph, &mut area, count);
    renumber(&mut area);
    Ok(Proposal {
        area_of_bus: graph.node_of_bus.iter().map(|&node| area[node]).collect(),
        area_count: count,
        weight,
        moves,
    })
}

/// Number areas by their first node, so that the numbers follow the file.
fn renumber(area: &mut [usize]) {
    let mut order: Vec<usize> = Vec::new();
    for value in area.iter() {
        if !order.contains(value) {
            order.push(*value);
        }
    }
    for value in area.iter_mut() {
        *value = order.iter().position(|known| known == value).unwrap_or(*value);
    }
}
