//! The steward's law and detector on a raw problem, in f32, as the steward runs them.
//!
//! Contract: every number is rounded to f32 once, on entry; columns that cannot
//! move are closed to the scaling, as in the steward. The detector uses the
//! physical rows, whatever internal factors the law was given.

use crate::programme::{Kind, Programme};
use hedgerow_firmware::law::scale::Column;
use hedgerow_firmware::law::{Iterate, Limits, Problem, Scaled, dual_clamp};

/// Most unknowns.
pub const COLS: usize = 64;
/// Most rows.
pub const ROWS: usize = 104;

/// The law on one problem.
pub struct Board {
    scaled: Box<Scaled<COLS, ROWS>>,
    problem: Box<Problem<COLS, ROWS>>,
    limits: Box<Limits<COLS, ROWS>>,
    iterate: Box<Iterate<COLS, ROWS>>,
    factors: Vec<f32>,
    clamp: f32,
}

impl Board {
    /// Set up, cold.
    pub fn new(programme: &Programme) -> Self {
        Self::with_factors(programme, &vec![1.0; programme.rows()])
    }

    /// Set up with each row multiplied by a factor before the law sees it.
    pub fn with_factors(programme: &Programme, factors: &[f32]) -> Self {
        let mut scaled = Box::new(Scaled::new());
        for (i, row) in programme.a.iter().enumerate() {
            for (j, &value) in row.iter().enumerate() {
                scaled.matrix_mut().data.0[j][i] = value as f32 * factors[i];
            }
        }
        let mut board = Self {
            scaled,
            problem: Box::new(Problem::new()),
            limits: Box::new(Limits::new()),
            iterate: Box::new(Iterate::new()),
            factors: factors.to_vec(),
            clamp: dual_clamp(reach(programme)),
        };
        board.set_limits(programme);
        let columns: Vec<Column> = (0..programme.cols()).map(|j| column(programme, j)).collect();
        let flows = programme.cols()..programme.cols();
        board.scaled.scale(
            &board.problem.curvature,
            &columns,
            programme.rows(),
            programme.n_eq,
            flows,
        );
        board.limits.fill(&board.scaled, &board.problem);
        board
    }

    fn set_limits(&mut self, programme: &Programme) {
        let problem = &mut self.problem;
        for j in 0..programme.cols() {
            problem.low[j] = programme.lo[j] as f32;
            problem.high[j] = programme.hi[j] as f32;
            problem.target[j] = programme.x0[j] as f32;
            problem.weight[j] = programme.w[j] as f32;
            problem.curvature[j] = programme.q[j] as f32;
        }
        for (i, factor) in self.factors.iter().enumerate() {
            problem.row_low[i] = programme.l[i] as f32 * factor;
            problem.row_high[i] = programme.r[i] as f32 * factor;
        }
    }

    /// Go on with other limits and ranges, the same columns open: a warm start.
    pub fn go_on_with(&mut self, programme: &Programme) {
        self.set_limits(programme);
        self.limits.fill(&self.scaled, &self.problem);
    }

    /// Make `count` iterations.
    pub fn run(&mut self, count: usize) {
        let sigma = self.scaled.sigma();
        let mut left = count;
        while left > 0 {
            let now = left.min(usize::from(u16::MAX));
            self.iterate.run(&self.scaled, &self.limits, sigma, self.clamp, now as u16);
            left -= now;
        }
    }

    /// The set-points, as they would be written.
    pub fn point(&self) -> Vec<f64> {
        let value = |j: usize| {
            let (low, high) = (self.problem.low[j], self.problem.high[j]);
            f64::from(self.iterate.value(&self.scaled, j, low, high))
        };
        (0..self.scaled.cols()).map(value).collect()
    }

    /// Duals of the physical rows.
    pub fn physical_dual(&self) -> [f32; ROWS] {
        let mut dual = [0.0; ROWS];
        self.scaled.physical_dual(self.iterate.dual(), &mut dual);
        dual.iter_mut().zip(&self.factors).for_each(|(y, factor)| *y *= factor);
        dual
    }

    /// Clamp of the scaled duals.
    pub fn clamp(&self) -> f32 {
        self.clamp
    }

    /// Largest magnitude among the scaled duals.
    pub fn dual_max(&self) -> f32 {
        self.iterate.dual().iter().fold(0.0, |most, y| y.abs().max(most))
    }
}

/// Largest range of a unit times the root of its curvature.
fn reach(programme: &Programme) -> f32 {
    let units = (0..programme.cols()).filter(|&j| programme.kinds[j] == Kind::Unit);
    let reach = units.map(|j| (programme.hi[j] - programme.lo[j]) * programme.q[j].sqrt());
    reach.fold(0.0, f64::max) as f32
}

fn column(programme: &Programme, j: usize) -> Column {
    let (low, high) = (programme.lo[j], programme.hi[j]);
    if low == 0.0 && high == 0.0 {
        Column::Closed
    } else if programme.kinds[j] == Kind::Unit && low < high {
        Column::Own
    } else {
        Column::Other
    }
}
