//! The iteration itself, as a list of verbs.
//!
//! Contract: after any number of steps the unknowns are inside their scaled
//! ranges and the duals inside the clamp, whatever the numbers were, so nothing
//! winds up. Warm start: the state is kept from tick to tick.

use super::kernel::{clip, mat_vec, soft, sqrt};
use super::limits::Limits;
use super::scale::Scaled;

/// Steps after a restart for which the momentum still grows; then it is held.
const MOMENTUM_LEN: usize = 256;

/// Momentum by steps since the last restart: (tau - 1) / tau', tau' = (1 + sqrt(1 + 4 tau^2)) / 2.
static MOMENTUM: [f32; MOMENTUM_LEN] = momentum();

const fn momentum() -> [f32; MOMENTUM_LEN] {
    let mut table = [0.0; MOMENTUM_LEN];
    let mut tau = 1.0_f64;
    let mut k = 0;
    while k < MOMENTUM_LEN {
        // Newton from above: 1 + 4 tau^2 lies between (2 tau)^2 and (2 tau + 1)^2.
        let square = 1.0 + 4.0 * tau * tau;
        let mut root = 2.0 * tau + 1.0;
        let mut step = 0;
        while step < 8 {
            root = 0.5 * (root + square / root);
            step += 1;
        }
        let next = 0.5 * (1.0 + root);
        #[allow(clippy::indexing_slicing)] // evaluated by the compiler, never on a board
        {
            table[k] = ((tau - 1.0) / next) as f32;
        }
        tau = next;
        k += 1;
    }
    table
}

/// State of one instance of the iteration.
#[derive(Clone, Debug)]
pub struct Iterate<const X: usize, const R: usize> {
    pub(crate) x: [f32; X],
    pub(crate) y: [f32; R],
    v: [f32; R],
    pub(crate) ax: [f32; R],
    momentum: usize,
}

impl<const X: usize, const R: usize> Iterate<X, R> {
    /// Cold start.
    pub const fn new() -> Self {
        Self { x: [0.0; X], y: [0.0; R], v: [0.0; R], ax: [0.0; R], momentum: 0 }
    }

    /// Forget the duals.
    pub fn reset(&mut self) {
        self.y = [0.0; R];
        self.v = [0.0; R];
        self.momentum = 0;
    }

    /// Go on from these scaled duals, without momentum.
    pub fn set_dual(&mut self, y: &[f32; R]) {
        self.y = *y;
        self.v = *y;
        self.momentum = 0;
    }

    /// The scaled duals.
    pub fn dual(&self) -> &[f32; R] {
        &self.y
    }

    /// Make `count` steps of length `sigma`.
    ///
    /// Cost: `count` times (4 rows x cols + 8 rows + 6 cols) flops.
    pub fn run(
        &mut self,
        scaled: &Scaled<X, R>,
        limits: &Limits<X, R>,
        sigma: f32,
        clamp: f32,
        count: u16,
    ) {
        for _ in 0..count {
            self.minimise(scaled, limits);
            self.ascend(scaled, limits, sigma, clamp);
        }
    }

    /// The unknowns that minimise the Lagrangian at `v`.
    fn minimise(&mut self, scaled: &Scaled<X, R>, limits: &Limits<X, R>) {
        mat_vec(&scaled.at, &self.v, scaled.cols, scaled.rows, &mut self.x);
        let ranges = limits.low.iter().zip(&limits.high);
        let prices = limits.pull.iter().zip(&limits.weight);
        for ((x, (&low, &high)), (&pull, &weight)) in
            self.x.iter_mut().zip(ranges).zip(prices).take(scaled.cols)
        {
            *x = clip(soft(pull - *x, weight), low, high);
        }
        mat_vec(&scaled.a, &self.x, scaled.rows, scaled.cols, &mut self.ax);
    }

    /// Projected ascent on the duals, with momentum and restart.
    fn ascend(&mut self, scaled: &Scaled<X, R>, limits: &Limits<X, R>, sigma: f32, clamp: f32) {
        let inverse = 1.0 / sigma;
        let mut next = [0.0; R];
        let mut turn = 0.0;
        let rows = self.ax.iter().zip(&limits.row_low).zip(&limits.row_high);
        let duals = next.iter_mut().zip(&self.v).zip(&self.y);
        for (((&ax, &low), &high), ((next, &v), &y)) in rows.zip(duals).take(scaled.rows) {
            let wish = v * inverse + ax;
            *next = clip(sigma * (wish - clip(wish, low, high)), -clamp, clamp);
            turn += (v - *next) * (*next - y);
        }
        let beta = if turn > 0.0 { 0.0 } else { super::kernel::at(&MOMENTUM, self.momentum) };
        self.momentum = if turn > 0.0 { 0 } else { (self.momentum + 1).min(MOMENTUM_LEN - 1) };
        for ((v, y), &next) in self.v.iter_mut().zip(&mut self.y).zip(&next).take(scaled.rows) {
            *v = next + beta * (next - *y);
            *y = next;
        }
    }

    /// Physical value of unknown `j`, inside `[low, high]` exactly.
    pub fn value(&self, scaled: &Scaled<X, R>, j: usize, low: f32, high: f32) -> f32 {
        let x = super::kernel::at(&self.x, j) / super::kernel::at(&scaled.s, j);
        clip(x, super::kernel::min(low, high), high)
    }

    /// Largest physical amount by which the rows are violated, pu.
    pub fn violation(&self, scaled: &Scaled<X, R>, limits: &Limits<X, R>) -> f32 {
        scaled.violation(&self.ax, &limits.row_low, &limits.row_high)
    }

    /// Euclidean norm of the scaled duals, for tests and figures.
    pub fn dual_norm(&self) -> f32 {
        sqrt(super::kernel::dot(&self.y, &self.y))
    }
}

impl<const X: usize, const R: usize> Default for Iterate<X, R> {
    fn default() -> Self {
        Self::new()
    }
}
