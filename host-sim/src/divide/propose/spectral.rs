//! One bisection: order the nodes by the Fiedler vector, cut where it is cheapest.
//!
//! Contract: both parts hang together and neither is empty, provided the nodes do
//! and there are at least two. Shares follow the numbers of areas on each side.
//!
//! Data flow: normalised Laplacian of the nodes -> block inverse iteration ->
//! second vector -> sweep over its order -> stray pieces change sides.

use faer::linalg::solvers::Solve;
use faer::sparse::linalg::solvers::{Llt, SymbolicLlt};
use faer::sparse::{SparseColMat, Triplet};
use faer::{Mat, Side};
use nalgebra::DMatrix;

use super::graph::Weighted;

/// Vectors iterated together; the second converges as (second / last) eigenvalue.
const VECTORS: usize = 5;
/// Rounds of inverse iteration: an order is wanted, not digits.
const ROUNDS: usize = 25;
/// Shift that makes the Laplacian invertible, against a mean degree of about 3.
const SHIFT: f64 = 1e-4;
/// A part may be this much smaller or larger than its share.
const LEEWAY: f64 = 0.3;

/// Split nodes into two parts for `one` and `other` areas.
pub(super) fn bisect(
    graph: &Weighted,
    nodes: &[usize],
    one: usize,
    other: usize,
) -> (Vec<usize>, Vec<usize>) {
    let fiedler = fiedler(graph, nodes);
    let mut order: Vec<usize> = (0..nodes.len()).collect();
    order.sort_by(|&a, &b| fiedler[a].total_cmp(&fiedler[b]).then(a.cmp(&b)));
    let ordered: Vec<usize> = order.into_iter().map(|place| nodes[place]).collect();
    // The share of `one` may lie at either end of the order.
    let share = one as f64 / (one + other) as f64;
    let (cut, low) = cheapest(graph, &ordered, share);
    let reversed: Vec<usize> = ordered.iter().rev().copied().collect();
    let (cut_back, high) = cheapest(graph, &reversed, share);
    let first: &[usize] = if low <= high { &ordered[..cut] } else { &reversed[..cut_back] };
    tidy(graph, nodes, first)
}

/// Both parts in one piece: what is cut off from the main piece changes sides.
fn tidy(graph: &Weighted, nodes: &[usize], first: &[usize]) -> (Vec<usize>, Vec<usize>) {
    let mut side = vec![0_u8; graph.len()];
    nodes.iter().for_each(|&node| side[node] = 2);
    first.iter().for_each(|&node| side[node] = 1);
    for (own, new) in [(1, 2), (2, 1)] {
        let pieces = graph.pieces(nodes, &|node| side[node] == own);
        for piece in pieces.iter().skip(1) {
            piece.iter().for_each(|&node| side[node] = new);
        }
    }
    let of = |own: u8| nodes.iter().copied().filter(|&node| side[node] == own).collect();
    (of(1), of(2))
}

/// Length of the prefix with the least normalised cut among those of fair size, and its cost.
fn cheapest(graph: &Weighted, ordered: &[usize], share: f64) -> (usize, f64) {
    let size: f64 = ordered.iter().map(|&node| graph.size[node]).sum();
    let mut inside = vec![false; graph.len()];
    let mut member = vec![false; graph.len()];
    ordered.iter().for_each(|&node| member[node] = true);
    let volume = |node: usize| -> f64 {
        graph.around[node].iter().filter(|edge| member[edge.to]).map(|edge| edge.weight).sum()
    };
    let all: f64 = ordered.iter().map(|&node| volume(node)).sum();
    let (mut taken, mut within, mut cut, mut surplus_mw) = (0.0, 0.0, 0.0, 0.0);
    let mut best = (1, f64::INFINITY);
    let mut nearest = (1, f64::INFINITY);
    for (place, &node) in ordered[..ordered.len() - 1].iter().enumerate() {
        inside[node] = true;
        taken += graph.size[node];
        within += volume(node);
        surplus_mw += graph.surplus_mw[node];
        for edge in graph.around[node].iter().filter(|edge| member[edge.to]) {
            cut += if inside[edge.to] { -edge.weight } else { edge.weight };
        }
        let off = (taken / size / share - 1.0)
            .abs()
            .max(((size - taken) / size / (1.0 - share) - 1.0).abs());
        if off < nearest.1 {
            nearest = (place + 1, off);
        }
        let normalised = cut / within.max(1e-12) + cut / (all - within).max(1e-12);
        let unbalance = surplus_mw.abs() / graph.load_mw.max(1e-12);
        let cost = normalised + 0.3 * unbalance + 0.2 * off;
        if off <= LEEWAY && cost < best.1 {
            best = (place + 1, cost);
        }
    }
    if best.1.is_finite() { best } else { (nearest.0, 1e6 + nearest.1) }
}

/// Entries of the second eigenvector of the normalised Laplacian, by place in `nodes`.
fn fiedler(graph: &Weighted, nodes: &[usize]) -> Vec<f64> {
    let size = nodes.len();
    let mut place = vec![usize::MAX; graph.len()];
    nodes.iter().enumerate().for_each(|(index, &node)| place[node] = index);
    let mut degree = vec![0.0; size];
    let mut triplets = Vec::new();
    for (row, &node) in nodes.iter().enumerate() {
        for edge in graph.around[node].iter().filter(|edge| place[edge.to] != usize::MAX) {
            degree[row] += edge.weight;
            triplets.push(Triplet::new(row, place[edge.to], -edge.weight));
        }
        triplets.push(Triplet::new(row, row, degree[row] * (1.0 + SHIFT) + 1e-12));
    }
    let by_order = || (0..size).map(|row| row as f64).collect();
    let Ok(matrix) = SparseColMat::<usize, f64>::try_new_from_triplets(size, size, &triplets)
    else {
        return by_order();
    };
    let factors = SymbolicLlt::try_new(matrix.symbolic(), Side::Lower).ok().and_then(|symbolic| {
        Llt::try_new_with_symbolic(symbolic, matrix.as_ref(), Side::Lower).ok()
    });
    match factors {
        Some(factors) => iterate(&factors, &degree),
        None => by_order(),
    }
}

/// Block inverse iteration for `L x = lambda D x`; returns the second vector.
fn iterate(factors: &Llt<usize, f64>, degree: &[f64]) -> Vec<f64> {
    let size = degree.len();
    let count = VECTORS.min(size);
    // Any start that is not orthogonal to the wanted vector will do; this one is fixed.
    let mut block = DMatrix::from_fn(size, count, |row, column| {
        let turn = (row * (2 * column + 1)) as f64 * 0.754_877_666 + column as f64;
        if column == 0 { 1.0 } else { turn.fract() - 0.5 }
    });
    for _ in 0..ROUNDS {
        orthonormalise(&mut block, degree);
        let mut right = Mat::from_fn(size, count, |row, column| degree[row] * block[(row, column)]);
        factors.solve_in_place(right.as_mut());
        let solved = DMatrix::from_fn(size, count, |row, column| right[(row, column)]);
        block = ritz(&block, solved, degree);
    }
    block.column(1.min(count - 1)).iter().copied().collect()
}

/// Rotate the solved block onto its Ritz vectors, largest Ritz value (of the inverse) first.
fn ritz(block: &DMatrix<f64>, solved: DMatrix<f64>, degree: &[f64]) -> DMatrix<f64> {
    let mut weighted = block.clone();
    for (row, degree) in degree.iter().enumerate() {
        weighted.row_mut(row).scale_mut(*degree);
    }
    let small = weighted.transpose() * &solved;
    let small = (&small + small.transpose()) * 0.5;
    let eigen = small.symmetric_eigen();
    let mut order: Vec<usize> = (0..eigen.eigenvalues.len()).collect();
    order.sort_by(|&a, &b| eigen.eigenvalues[b].total_cmp(&eigen.eigenvalues[a]));
    let turned = solved * &eigen.eigenvectors;
    DMatrix::from_fn(turned.nrows(), turned.ncols(), |row, column| turned[(row, order[column])])
}

/// Gram-Schmidt in the scalar product weighted by degree.
fn orthonormalise(block: &mut DMatrix<f64>, degree: &[f64]) {
    for column in 0..block.ncols() {
        for before in 0..column {
            let along: f64 = (0..block.nrows())
                .map(|row| degree[row] * block[(row, before)] * block[(row, column)])
                .sum();
            for row in 0..block.nrows() {
                block[(row, column)] -= along * block[(row, before)];
            }
        }
        let norm: f64 = (0..block.nrows())
            .map(|row| degree[row] * block[(row, column)] * block[(row, column)])
            .sum::<f64>()
            .sqrt()
            .max(1e-300);
        block.column_mut(column).scale_mut(1.0 / norm);
    }
}
