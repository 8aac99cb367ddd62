//! A bound below every choice: ties share their flows as they like.
//!
//! Contract: the bound holds for every tree of ties whatever the solver returns,
//! because it is computed from the dual vector by weak duality, with the dual
//! residual charged at the largest flow that any tie of any tree can carry.
//!
//! Data flow: `TieProblem` -> linear programme `min z`, tie flows free but for the
//! areas' balance, every loading at most `z` -> bound, and flows to start trees from.
//! Source: weak duality; the relaxation drops the demand that the closed ties are a tree.

use clarabel::algebra::CscMatrix;
use clarabel::solver::{
    DefaultSettings, DefaultSolver, IPSolver, NonnegativeConeT, SupportedConeT, ZeroConeT,
};

use super::problem::TieProblem;

/// A bound for every tree, and the flows of the relaxed optimum.
#[derive(Clone, Debug, PartialEq)]
pub struct Relaxed {
    /// No tree has a worst loading below this.
    pub bound: f64,
    /// Tie flows of the relaxed optimum in MW; empty if the solver gave none.
    pub flow_mw: Vec<f64>,
}

/// Rows `terms <= right` (then `terms = right`) over tie flows and, last, `z`.
struct Rows {
    row: Vec<usize>,
    column: Vec<usize>,
    value: Vec<f64>,
    right: Vec<f64>,
}

impl Rows {
    fn add(&mut self, terms: impl Iterator<Item = (usize, f64)>, right: f64) {
        for (column, value) in terms.filter(|term| term.1 != 0.0) {
            self.row.push(self.right.len());
            self.column.push(column);
            self.value.push(value);
        }
        self.right.push(right);
    }
}

/// Solve the relaxation; without a solution the bound is that of the lines that never change.
///
/// Cost: an interior-point solve with two rows per line that answers to a tie.
pub fn relax(problem: &TieProblem) -> Relaxed {
    let unit_mw = problem.flow_mw_most().max(1e-9);
    let fixed = problem.fixed_loading();
    let rows = rows(problem, unit_mw);
    let (count, equal) = (problem.ties.len() + 1, problem.surplus_mw.len() - 1);
    let matrix = CscMatrix::new_from_triplets(
        rows.right.len(),
        count,
        rows.row.clone(),
        rows.column.clone(),
        rows.value.clone(),
    );
    let mut slope = vec![0.0; count];
    slope[count - 1] = 1.0;
    let cones: [SupportedConeT<f64>; 2] =
        [ZeroConeT(equal), NonnegativeConeT(rows.right.len() - equal)];
    let settings = DefaultSettings { verbose: false, max_threads: 1, ..Default::default() };
    let none = CscMatrix::new_from_triplets(count, count, vec![], vec![], vec![]);
    let solved = DefaultSolver::new(&none, &slope, &matrix, &rows.right, &cones, settings);
    let Ok(mut solver) = solved else {
        return Relaxed { bound: fixed, flow_mw: Vec::new() };
    };
    solver.solve();
    let bound = dual_bound(&rows, equal, count, &solver.solution.z).max(fixed);
    let flows = &solver.solution.x[..count - 1];
    let usable = flows.iter().all(|flow| flow.is_finite());
    let flow_mw = if usable { flows.iter().map(|x| x * unit_mw).collect() } else { Vec::new() };
    Relaxed { bound, flow_mw }
}

/// Balance of every area but the last, then loadings and tie loadings, both signs.
fn rows(problem: &TieProblem, unit_mw: f64) -> Rows {
    let mut rows = Rows { row: vec![], column: vec![], value: vec![], right: vec![] };
    let z = problem.ties.len();
    let around = |area: usize| {
        let ties = problem.ties.iter().enumerate();
        ties.filter(move |(_, tie)| tie.from_area == area || tie.to_area == area)
            .map(move |(index, tie)| (index, tie.seen_from(area)))
    };
    for area in 0..problem.surplus_mw.len() - 1 {
        let terms = around(area).map(|(index, (_, sign))| (index, sign));
        rows.add(terms, problem.surplus_mw[area] / unit_mw);
    }
    for (area, flows) in problem.areas.iter().enumerate() {
        for line in 0..flows.lines.len() {
            for side in [1.0, -1.0] {
                let terms = around(area).map(|(index, (end, sign))| {
                    (index, side * sign * flows.gain_per_mw[end][line] * unit_mw)
                });
                rows.add(terms.chain([(z, -1.0)]), -side * flows.base[line]);
            }
        }
    }
    for (index, tie) in problem.ties.iter().enumerate() {
        for side in [1.0, -1.0] {
            let terms = [(index, side * unit_mw / tie.rating_mw), (z, -1.0)];
            rows.add(terms.into_iter(), 0.0);
        }
    }
    rows
}

/// What a dual vector proves, or nothing (0) if it is of no use.
///
/// For `A x <= b` (first rows equal) and any dual with non-negative entries for the
/// inequalities: `z >= -b'y` less the residual's worst effect, once `y` is scaled so
/// that `z` has factor 1. Tie flows lie within -1 and 1 in the unit used.
fn dual_bound(rows: &Rows, equal: usize, count: usize, dual: &[f64]) -> f64 {
    let mut dual = dual.to_vec();
    for value in &mut dual[equal..] {
        *value = value.max(0.0);
    }
    let weight: f64 = rows
        .row
        .iter()
        .zip(&rows.column)
        .zip(&rows.value)
        .filter(|((_, column), _)| **column == count - 1)
        .map(|((row, _), value)| -value * dual[*row])
        .sum();
    let mut residual = vec![0.0; count];
    for ((&row, &column), value) in rows.row.iter().zip(&rows.column).zip(&rows.value) {
        residual[column] += value * dual[row] / weight;
    }
    let gain: f64 = rows.right.iter().zip(&dual).map(|(right, y)| -right * y / weight).sum();
    let charge: f64 = residual[..count - 1].iter().map(|r| r.abs()).sum();
    // Room for the rounding of these sums themselves.
    let bound = gain - charge - 1e-9 * gain.abs();
    if bound.is_finite() { bound.max(0.0) } else { 0.0 }
}
