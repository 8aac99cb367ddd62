//! A boxed quadratic programme in f64, and what an interior-point solver says of it.
//!
//! Contract: minimise `sum 1/2 q (x - x0)^2 + w |x|` subject to `l <= A x <= r`
//! (the first `n_eq` rows are equalities) and `lo <= x <= hi`. [`Programme::optimum`]
//! and [`Programme::least_violation`] ask clarabel; nothing here knows the steward.

use clarabel::algebra::CscMatrix;
use clarabel::solver::{
    DefaultSettings, DefaultSolver, IPSolver, NonnegativeConeT, SolverStatus, SupportedConeT,
};

/// What a column is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// A unit or storage.
    Unit,
    /// A feeder, tie deviation or angle deviation.
    Other,
}

/// How limits move with a parameter.
#[derive(Clone, Debug)]
pub struct Direction {
    /// Rate of each lower limit.
    pub low: Vec<f64>,
    /// Rate of each upper limit.
    pub high: Vec<f64>,
}

/// One problem, physical pu.
#[derive(Clone, Debug)]
pub struct Programme {
    /// Rows.
    pub a: Vec<Vec<f64>>,
    /// Lower row limits.
    pub l: Vec<f64>,
    /// Upper row limits.
    pub r: Vec<f64>,
    /// Lower ends of the ranges.
    pub lo: Vec<f64>,
    /// Upper ends of the ranges.
    pub hi: Vec<f64>,
    /// Curvatures.
    pub q: Vec<f64>,
    /// Targets.
    pub x0: Vec<f64>,
    /// Prices of the magnitudes.
    pub w: Vec<f64>,
    /// What each column is.
    pub kinds: Vec<Kind>,
    /// Number of equality rows.
    pub n_eq: usize,
}

impl Programme {
    /// Number of unknowns.
    pub fn cols(&self) -> usize {
        self.q.len()
    }

    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.l.len()
    }

    /// The same problem with every number as the nearest `f32`.
    pub fn rounded(&self) -> Self {
        let near = |v: &Vec<f64>| v.iter().map(|&x| f64::from(x as f32)).collect::<Vec<f64>>();
        Self {
            a: self.a.iter().map(near).collect(),
            l: near(&self.l),
            r: near(&self.r),
            lo: near(&self.lo),
            hi: near(&self.hi),
            q: near(&self.q),
            x0: near(&self.x0),
            w: near(&self.w),
            kinds: self.kinds.clone(),
            n_eq: self.n_eq,
        }
    }

    /// Cost of a point.
    pub fn cost(&self, x: &[f64]) -> f64 {
        let term = |j: usize| {
            let off = x[j] - self.x0[j];
            0.5 * self.q[j] * off * off + self.w[j] * x[j].abs()
        };
        (0..self.cols()).map(term).sum()
    }

    /// Largest amount by which a point leaves the rows, pu.
    pub fn violation(&self, x: &[f64]) -> f64 {
        let row = |i: usize| {
            let value: f64 = self.a[i].iter().zip(x).map(|(a, x)| a * x).sum();
            (self.l[i] - value).max(value - self.r[i])
        };
        (0..self.rows()).map(row).fold(0.0, f64::max)
    }

    /// The optimum, if the solver finds one.
    pub fn optimum(&self) -> Option<Vec<f64>> {
        let n = self.cols();
        let magnitudes: Vec<usize> = (0..n).filter(|&j| self.w[j] > 0.0).collect();
        let mut conic = Conic::new(n + magnitudes.len());
        for j in 0..n {
            conic.curve[j] = self.q[j];
            conic.slope[j] = -self.q[j] * self.x0[j];
        }
        for (extra, &j) in magnitudes.iter().enumerate() {
            conic.slope[n + extra] = self.w[j];
            conic.at_most(vec![(j, 1.0), (n + extra, -1.0)], 0.0);
            conic.at_most(vec![(j, -1.0), (n + extra, -1.0)], 0.0);
        }
        self.add_ranges(&mut conic);
        for i in 0..self.rows() {
            let terms = sparse(&self.a[i]);
            if i < self.n_eq {
                conic.equal(terms, self.l[i]);
            } else {
                conic.at_most(terms.clone(), self.r[i]);
                conic.at_most(negative(&terms), -self.l[i]);
            }
        }
        let x = conic.solve()?;
        Some((0..n).map(|j| x[j].clamp(self.lo[j], self.hi[j])).collect())
    }

    /// Least over the set-points of the largest violation of a row, pu.
    pub fn least_violation(&self) -> f64 {
        let n = self.cols();
        let mut conic = Conic::new(n + 1);
        conic.slope[n] = 1.0;
        conic.at_most(vec![(n, -1.0)], 0.0);
        self.add_ranges(&mut conic);
        for i in 0..self.rows() {
            let mut terms = sparse(&self.a[i]);
            let mut below = negative(&terms);
            terms.push((n, -1.0));
            below.push((n, -1.0));
            conic.at_most(terms, self.r[i]);
            conic.at_most(below, -self.l[i]);
        }
        conic.solve().expect("the least violation always exists")[n]
    }

    /// Farthest `t` at which limits moved by `t` times a direction leave `slack` pu of violation.
    ///
    /// At that `t` the least violation is `slack`; without slack the problem is just feasible.
    pub fn farthest(&self, direction: &Direction, slack: f64) -> Option<f64> {
        let n = self.cols();
        let mut conic = Conic::new(n + 1);
        conic.slope[n] = -1.0;
        conic.at_most(vec![(n, 1.0)], 1e3);
        self.add_ranges(&mut conic);
        for i in 0..self.rows() {
            let mut terms = sparse(&self.a[i]);
            let mut below = negative(&terms);
            terms.push((n, -direction.high[i]));
            below.push((n, direction.low[i]));
            conic.at_most(terms, self.r[i] + slack);
            conic.at_most(below, slack - self.l[i]);
        }
        conic.solve().map(|x| x[n])
    }

    /// The problem with its limits moved.
    pub fn moved(&self, direction: &Direction, t: f64) -> Self {
        let mut out = self.clone();
        for i in 0..self.rows() {
            out.l[i] += t * direction.low[i];
            out.r[i] += t * direction.high[i];
        }
        out
    }

    fn add_ranges(&self, conic: &mut Conic) {
        for j in 0..self.cols() {
            if self.lo[j] == self.hi[j] {
                conic.equal(vec![(j, 1.0)], self.lo[j]);
            } else {
                conic.at_most(vec![(j, 1.0)], self.hi[j]);
                conic.at_most(vec![(j, -1.0)], -self.lo[j]);
            }
        }
    }
}

type Terms = Vec<(usize, f64)>;

fn sparse(row: &[f64]) -> Terms {
    row.iter().enumerate().filter(|(_, a)| **a != 0.0).map(|(j, &a)| (j, a)).collect()
}

fn negative(terms: &Terms) -> Terms {
    terms.iter().map(|&(j, a)| (j, -a)).collect()
}

/// A programme in the solver's form.
struct Conic {
    curve: Vec<f64>,
    slope: Vec<f64>,
    equal: Vec<(Terms, f64)>,
    at_most: Vec<(Terms, f64)>,
}

impl Conic {
    fn new(n: usize) -> Self {
        Self { curve: vec![0.0; n], slope: vec![0.0; n], equal: vec![], at_most: vec![] }
    }

    fn equal(&mut self, terms: Terms, right: f64) {
        self.equal.push((terms, right));
    }

    fn at_most(&mut self, terms: Terms, right: f64) {
        self.at_most.push((terms, right));
    }

    fn solve(&self) -> Option<Vec<f64>> {
        let n = self.curve.len();
        let (mut i, mut j, mut v, mut rhs) = (vec![], vec![], vec![], vec![]);
        for (row, (terms, right)) in self.equal.iter().chain(&self.at_most).enumerate() {
            for &(column, factor) in terms {
                i.push(row);
                j.push(column);
                v.push(factor);
            }
            rhs.push(*right);
        }
        let rows = CscMatrix::new_from_triplets(rhs.len(), n, i, j, v);
        let all: Vec<usize> = (0..n).collect();
        let curvature = CscMatrix::new_from_triplets(n, n, all.clone(), all, self.curve.clone());
        let cones: [SupportedConeT<f64>; 2] =
            [SupportedConeT::ZeroConeT(self.equal.len()), NonnegativeConeT(self.at_most.len())];
        let settings = DefaultSettings {
            verbose: false,
            max_threads: 1,
            tol_gap_abs: 1e-10,
            tol_gap_rel: 1e-10,
            tol_feas: 1e-10,
            reduced_tol_gap_abs: 1e-7,
            reduced_tol_gap_rel: 1e-7,
            reduced_tol_feas: 1e-8,
            ..DefaultSettings::default()
        };
        let mut solver =
            DefaultSolver::new(&curvature, &self.slope, &rows, &rhs, &cones, settings).ok()?;
        solver.solve();
        let good =
            matches!(solver.solution.status, SolverStatus::Solved | SolverStatus::AlmostSolved);
        good.then(|| solver.solution.x.clone())
    }
}
