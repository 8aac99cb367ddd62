//! The iteration itself, as a list of verbs.
//!
//! Contract: after any number of steps the unknowns are inside their scaled
//! ranges and the duals inside the clamp, whatever the numbers were, so nothing
//! winds up. Warm start: the state is kept from tick to tick.

use super::kernel::{abs, clip, soft, sqrt};
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
        const { assert!(X.is_multiple_of(2) && R.is_multiple_of(4), "whole groups") };
        // Rounded up to whole groups: what is beyond is zero and stays so.
        let (rows, cols) = (scaled.rows.next_multiple_of(4).min(R), scaled.cols);
        let pairs = cols.next_multiple_of(2).min(X);
        let unknowns = Unknowns {
            low: head(&limits.low, pairs),
            high: head(&limits.high, pairs),
            pull: head(&limits.pull, pairs),
            weight: head(&limits.weight, pairs),
        };
        let ends = (head(&limits.row_low, rows), head(&limits.row_high, rows));
        let inverse = 1.0 / sigma;
        let mut spare = self.y;
        // The duals and the next ones change places after each step.
        let (mut y, mut next) = (head_mut(&mut self.y, rows), head_mut(&mut spare, rows));
        for _ in 0..count {
            // The unknowns that minimise the Lagrangian at v.
            scaled.a.transposed_times(&self.v, scaled.rows, cols, &mut self.x);
            minimise(head_mut(&mut self.x, pairs), &unknowns);
            scaled.a.times(&self.x, scaled.rows, cols, &mut self.ax);
            // Projected ascent on the duals, with momentum and restart.
            let duals = Duals { y, v: head(&self.v, rows), ends };
            let step = Step { sigma, inverse, clamp };
            let turn = ascend(next, head(&self.ax, rows), &duals, step);
            let beta = if turn > 0.0 { 0.0 } else { super::kernel::at(&MOMENTUM, self.momentum) };
            self.momentum = if turn > 0.0 { 0 } else { (self.momentum + 1).min(MOMENTUM_LEN - 1) };
            extrapolate(next, y, head_mut(&mut self.v, rows), beta);
            core::mem::swap(&mut y, &mut next);
        }
        if count % 2 == 1 {
            // The last duals are in the spare.
            self.y = spare;
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

/// Prices and ranges of the unknowns, scaled.
struct Unknowns<'a> {
    low: &'a [f32],
    high: &'a [f32],
    pull: &'a [f32],
    weight: &'a [f32],
}

/// Duals and the limits of their rows, scaled.
struct Duals<'a> {
    y: &'a [f32],
    v: &'a [f32],
    ends: (&'a [f32], &'a [f32]),
}

/// Length of a step, its inverse, and the clamp of the duals.
#[derive(Clone, Copy)]
struct Step {
    sigma: f32,
    inverse: f32,
    clamp: f32,
}

// The loops below are not generic and not inlined, so that they are made once,
// in this crate, at its level of optimisation.

/// From `A' v` in `x` to the unknowns.
#[inline(never)]
fn minimise(x: &mut [f32], unknowns: &Unknowns<'_>) {
    let one = |x: &mut f32, (low, high): (f32, f32), pull: f32, weight: f32| {
        let wish = pull - *x;
        // Most unknowns have no such price, and their number does not change from tick to tick.
        let wish = if weight.to_bits() == 0 { wish } else { soft(wish, weight) };
        *x = clip(wish, low, high);
    };
    let (x, pull) = (x.as_chunks_mut::<2>().0, unknowns.pull.as_chunks::<2>().0);
    let (low, high) = (unknowns.low.as_chunks::<2>().0, unknowns.high.as_chunks::<2>().0);
    let prices = pull.iter().zip(unknowns.weight.as_chunks::<2>().0);
    for (((x, low), high), (pull, weight)) in x.iter_mut().zip(low).zip(high).zip(prices) {
        let ([x0, x1], &[l0, l1], &[h0, h1]) = (x, low, high);
        let (&[p0, p1], &[w0, w1]) = (pull, weight);
        one(x0, (l0, h0), p0, w0);
        one(x1, (l1, h1), p1, w1);
    }
}

/// The next duals; returns how far they turn against the momentum.
///
/// Four rows at a time: the bookkeeping of a loop costs as much as a quiet row.
#[inline(never)]
fn ascend(next: &mut [f32], ax: &[f32], duals: &Duals<'_>, step: Step) -> f32 {
    let mut turn = 0.0;
    let (next, ax) = (next.as_chunks_mut::<4>().0, ax.as_chunks::<4>().0);
    let (low, high) = (duals.ends.0.as_chunks::<4>().0, duals.ends.1.as_chunks::<4>().0);
    let (v, y) = (duals.v.as_chunks::<4>().0, duals.y.as_chunks::<4>().0);
    let pairs = next.iter_mut().zip(v).zip(y);
    for (((ax, low), high), ((next, v), y)) in ax.iter().zip(low).zip(high).zip(pairs) {
        let ([n0, n1, n2, n3], &[a0, a1, a2, a3]) = (next, ax);
        let (&[l0, l1, l2, l3], &[h0, h1, h2, h3]) = (low, high);
        let (&[v0, v1, v2, v3], &[y0, y1, y2, y3]) = (v, y);
        *n0 = next_dual(a0, (l0, h0), (v0, y0), step, &mut turn);
        *n1 = next_dual(a1, (l1, h1), (v1, y1), step, &mut turn);
        *n2 = next_dual(a2, (l2, h2), (v2, y2), step, &mut turn);
        *n3 = next_dual(a3, (l3, h3), (v3, y3), step, &mut turn);
    }
    turn
}

/// The next dual of one row; zero while the row is inside its limits, and for a NaN.
#[inline(always)]
fn next_dual(
    ax: f32,
    (low, high): (f32, f32),
    (v, y): (f32, f32),
    step: Step,
    turn: &mut f32,
) -> f32 {
    let wish = v * step.inverse + ax;
    let beyond = if wish < low {
        wish - low
    } else if wish > high {
        wish - high
    } else {
        *turn -= v * y;
        return 0.0;
    };
    let mut dual = step.sigma * beyond;
    if !(abs(dual) <= step.clamp) {
        dual = clip(dual, -step.clamp, step.clamp);
    }
    *turn += (v - dual) * (dual - y);
    dual
}

/// `v` = `next` carried on by the momentum.
#[inline(never)]
fn extrapolate(next: &[f32], y: &[f32], v: &mut [f32], beta: f32) {
    let (next, y) = (next.as_chunks::<4>().0, y.as_chunks::<4>().0);
    for ((&[n0, n1, n2, n3], &[y0, y1, y2, y3]), v) in
        next.iter().zip(y).zip(v.as_chunks_mut::<4>().0)
    {
        let [v0, v1, v2, v3] = v;
        *v0 = n0 + beta * (n0 - y0);
        *v1 = n1 + beta * (n1 - y1);
        *v2 = n2 + beta * (n2 - y2);
        *v3 = n3 + beta * (n3 - y3);
    }
}

/// The first `count` values, or as many as there are.
fn head(values: &[f32], count: usize) -> &[f32] {
    values.get(..count).unwrap_or(values)
}

fn head_mut(values: &mut [f32], count: usize) -> &mut [f32] {
    let count = count.min(values.len());
    values.get_mut(..count).unwrap_or_default()
}
