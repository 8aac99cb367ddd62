//! The numbers of one problem: physical limits in, scaled limits out.
//!
//! Contract: [`Problem`] is what the rung, the estimates and the neighbours ask
//! for, in physical pu; [`Limits`] is the same in the scale of a [`Scaled`]
//! matrix. Ranges are ordered when they are written: a low end above its high
//! end (possible only by bad data) collapses to the high end.

use super::kernel::{at, min};
use super::scale::Scaled;

/// Physical numbers of a problem.
#[derive(Clone, Debug)]
pub struct Problem<const X: usize, const R: usize> {
    /// Lower end of each unknown's range, pu.
    pub low: [f32; X],
    /// Upper end of each unknown's range, pu.
    pub high: [f32; X],
    /// Target of each unknown, pu.
    pub target: [f32; X],
    /// Further linear price of each unknown (the neighbours' prices), taken off.
    pub price: [f32; X],
    /// Price of the magnitude of each unknown.
    pub weight: [f32; X],
    /// Curvature of each unknown's cost.
    pub curvature: [f32; X],
    /// Lower limit of each row, pu.
    pub row_low: [f32; R],
    /// Upper limit of each row, pu.
    pub row_high: [f32; R],
}

impl<const X: usize, const R: usize> Problem<X, R> {
    /// An empty problem.
    pub const fn new() -> Self {
        Self {
            low: [0.0; X],
            high: [0.0; X],
            target: [0.0; X],
            price: [0.0; X],
            weight: [0.0; X],
            curvature: [0.0; X],
            row_low: [0.0; R],
            row_high: [0.0; R],
        }
    }
}

impl<const X: usize, const R: usize> Default for Problem<X, R> {
    fn default() -> Self {
        Self::new()
    }
}

/// Scaled numbers of a problem.
#[derive(Clone, Debug)]
pub struct Limits<const X: usize, const R: usize> {
    pub(crate) low: [f32; X],
    pub(crate) high: [f32; X],
    pub(crate) pull: [f32; X],
    pub(crate) weight: [f32; X],
    pub(crate) row_low: [f32; R],
    pub(crate) row_high: [f32; R],
}

impl<const X: usize, const R: usize> Limits<X, R> {
    /// Everything closed.
    pub const fn new() -> Self {
        Self {
            low: [0.0; X],
            high: [0.0; X],
            pull: [0.0; X],
            weight: [0.0; X],
            row_low: [0.0; R],
            row_high: [0.0; R],
        }
    }

    /// Scale `problem` by `scaled`.
    pub fn fill(&mut self, scaled: &Scaled<X, R>, problem: &Problem<X, R>) {
        for j in 0..scaled.cols {
            let s = at(&scaled.s, j);
            let high = at(&problem.high, j);
            let low = min(at(&problem.low, j), high);
            super::kernel::put(&mut self.low, j, low * s);
            super::kernel::put(&mut self.high, j, high * s);
            let pull = at(&problem.curvature, j) * at(&problem.target, j) + at(&problem.price, j);
            super::kernel::put(&mut self.pull, j, pull / s);
            super::kernel::put(&mut self.weight, j, at(&problem.weight, j) / s);
        }
        self.row_low = problem.row_low;
        self.row_high = problem.row_high;
        scaled.scale_rows(&mut self.row_low);
        scaled.scale_rows(&mut self.row_high);
    }
}

impl<const X: usize, const R: usize> Default for Limits<X, R> {
    fn default() -> Self {
        Self::new()
    }
}
