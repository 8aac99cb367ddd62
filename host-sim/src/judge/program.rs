//! A convex programme with a diagonal curvature, and its solution by clarabel.
//!
//! Contract: minimise `sum 1/2 curve x^2 + slope x` subject to rows; variables
//! are free unless a row bounds them. Every solution is returned with status
//! checked; a status that is not a solution is an error with its name.

use clarabel::algebra::CscMatrix;
use clarabel::solver::{
    DefaultSettings, DefaultSolver, IPSolver, NonnegativeConeT, SolverStatus, SupportedConeT,
    ZeroConeT,
};

/// Coefficients of a row: (variable, factor).
pub(super) type Terms = Vec<(usize, f64)>;

/// A row: terms and right-hand side.
type Row = (Terms, f64);

/// A programme under construction.
#[derive(Clone, Debug, Default)]
pub(super) struct Program {
    curve: Vec<f64>,
    slope: Vec<f64>,
    equal: Vec<Row>,
    at_most: Vec<Row>,
}

/// Stopping tolerance in pu: 1e-9 of 100 MVA is 0.1 W, far below any limit judged.
const TOLERANCE: f64 = 1e-9;

/// Tolerance at which a solution that stalled is still used: 1e-6 pu = 0.1 kW on 100 MVA.
const TOLERANCE_STALLED: f64 = 1e-6;

impl Program {
    /// Add a free variable with its cost and return its index.
    pub(super) fn add(&mut self, curve: f64, slope: f64) -> usize {
        self.curve.push(curve);
        self.slope.push(slope);
        self.curve.len() - 1
    }

    /// Demand `terms = rhs`.
    pub(super) fn equal(&mut self, terms: Terms, rhs: f64) {
        self.equal.push((terms, rhs));
    }

    /// Demand `terms <= rhs`; an infinite right-hand side is no demand.
    pub(super) fn at_most(&mut self, terms: Terms, rhs: f64) {
        if rhs.is_finite() {
            self.at_most.push((terms, rhs));
        }
    }

    /// Demand `low <= x <= high`.
    pub(super) fn bound(&mut self, variable: usize, low: f64, high: f64) {
        if low == high {
            self.equal(vec![(variable, 1.0)], low);
        } else {
            self.at_most(vec![(variable, 1.0)], high);
            self.at_most(vec![(variable, -1.0)], -low);
        }
    }

    /// Solve it.
    ///
    /// Errors: a sentence with the solver's status.
    pub(super) fn solve(&self) -> Result<Vec<f64>, String> {
        self.solve_if_feasible()?
            .ok_or_else(|| "the reference solver found no feasible point".to_owned())
    }

    /// Solve it; none when it has no feasible point.
    ///
    /// Errors: a sentence with the solver's status.
    pub(super) fn solve_if_feasible(&self) -> Result<Option<Vec<f64>>, String> {
        let n = self.curve.len();
        let curvature = diagonal(&self.curve);
        let (rows, rhs) = stack(&self.equal, &self.at_most, n);
        let cones: [SupportedConeT<f64>; 2] =
            [ZeroConeT(self.equal.len()), NonnegativeConeT(self.at_most.len())];
        let mut solver =
            DefaultSolver::new(&curvature, &self.slope, &rows, &rhs, &cones, settings())
                .map_err(|e| format!("the reference solver refused the problem ({e:?})"))?;
        solver.solve();
        match solver.solution.status {
            SolverStatus::Solved | SolverStatus::AlmostSolved => Ok(Some(solver.solution.x)),
            SolverStatus::PrimalInfeasible | SolverStatus::AlmostPrimalInfeasible => Ok(None),
            status => Err(format!("the reference solver ended with `{status:?}`")),
        }
    }
}

fn settings() -> DefaultSettings<f64> {
    DefaultSettings {
        verbose: false,
        tol_gap_abs: TOLERANCE,
        tol_gap_rel: TOLERANCE,
        tol_feas: TOLERANCE,
        reduced_tol_gap_abs: TOLERANCE_STALLED,
        reduced_tol_gap_rel: TOLERANCE_STALLED,
        reduced_tol_feas: TOLERANCE_STALLED,
        max_threads: 1,
        ..DefaultSettings::default()
    }
}

fn diagonal(curve: &[f64]) -> CscMatrix<f64> {
    let at: Vec<usize> = (0..curve.len()).filter(|&i| curve[i] != 0.0).collect();
    let values = at.iter().map(|&i| curve[i]).collect();
    CscMatrix::new_from_triplets(curve.len(), curve.len(), at.clone(), at, values)
}

/// Equal rows first, then the others: clarabel's order of cones.
fn stack(equal: &[Row], at_most: &[Row], columns: usize) -> (CscMatrix<f64>, Vec<f64>) {
    let (mut i, mut j, mut v, mut rhs) = (vec![], vec![], vec![], vec![]);
    for (row, (terms, right)) in equal.iter().chain(at_most).enumerate() {
        for (column, factor) in merged(terms) {
            i.push(row);
            j.push(column);
            v.push(factor);
        }
        rhs.push(*right);
    }
    (CscMatrix::new_from_triplets(rhs.len(), columns, i, j, v), rhs)
}

/// Parallel lines name a bus angle twice: add such factors up.
fn merged(terms: &Terms) -> Terms {
    let mut sorted = terms.clone();
    sorted.sort_by_key(|t| t.0);
    let mut out: Terms = Vec::with_capacity(sorted.len());
    for (column, factor) in sorted {
        match out.last_mut() {
            Some(last) if last.0 == column => last.1 += factor,
            _ => out.push((column, factor)),
        }
    }
    out
}
