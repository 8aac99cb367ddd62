//! The iteration itself, as a list of verbs.
//!
//! Contract: after any number of steps the unknowns are inside their scaled
//! ranges and the duals inside the clamp, whatever the numbers were, so nothing
//! winds up. Warm start: the state is kept from tick to tick.

use super::kernel::{clip, mat_vec, soft, sqrt};
use super::limits::Limits;
use super::scale::Scaled;

/// Steps after a restart beyond which the momentum is held: 1 - 3 / 65 538 is one to four digits.
const MOMENTUM_STEPS: u16 = u16::MAX;

/// A number in two parts, the second below the rounding of the first.
///
/// A dual of 100 has a last digit of 8e-6, and a step shorter than that would be
/// lost: rows would then rest up to 8e-6 / sigma off their limits. With the rest
/// kept, the floor of the set-points falls from 1e-2 to 1e-5 pu (worst of 154 problems).
#[derive(Clone, Copy, Debug)]
struct Fine {
    head: f32,
    rest: f32,
}

impl Fine {
    const ZERO: Self = Self { head: 0.0, rest: 0.0 };

    /// The sum with an ordinary number; exact but for the rounding of the rest.
    ///
    /// Source: error-free sum, D. Knuth, "The Art of Computer Programming", vol. 2, 4.2.2.
    #[inline(always)]
    fn plus(self, by: f32) -> Self {
        let sum = self.head + by;
        let shared = sum - self.head;
        let lost = (self.head - (sum - shared)) + (by - shared) + self.rest;
        let head = sum + lost;
        Self { head, rest: lost - (head - sum) }
    }

    /// The difference, rounded once.
    #[inline(always)]
    fn minus(self, other: Self) -> f32 {
        (self.head - other.head) + (self.rest - other.rest)
    }
}

/// State of one instance of the iteration.
#[derive(Clone, Debug)]
pub struct Iterate<const X: usize, const R: usize> {
    pub(crate) x: [f32; X],
    pub(crate) y: [f32; R],
    y_rest: [f32; R],
    v: [f32; R],
    v_rest: [f32; R],
    pub(crate) ax: [f32; R],
    momentum: u16,
}

impl<const X: usize, const R: usize> Iterate<X, R> {
    /// Cold start.
    pub const fn new() -> Self {
        Self {
            x: [0.0; X],
            y: [0.0; R],
            y_rest: [0.0; R],
            v: [0.0; R],
            v_rest: [0.0; R],
            ax: [0.0; R],
            momentum: 0,
        }
    }

    /// Forget the duals.
    pub fn reset(&mut self) {
        self.set_dual(&[0.0; R]);
    }

    /// Go on from these scaled duals, without momentum.
    pub fn set_dual(&mut self, y: &[f32; R]) {
        self.y = *y;
        self.v = *y;
        self.y_rest = [0.0; R];
        self.v_rest = [0.0; R];
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
        let mut next = [Fine::ZERO; R];
        let mut turn = 0.0;
        let rows = self.ax.iter().zip(limits.row_low.iter().zip(&limits.row_high));
        let duals = self.v.iter().zip(&self.v_rest).zip(self.y.iter().zip(&self.y_rest));
        for (((&ax, (&low, &high)), ((&v, &v_rest), (&y, &y_rest))), next) in
            rows.zip(duals).zip(&mut next).take(scaled.rows)
        {
            let (v, y) = (Fine { head: v, rest: v_rest }, Fine { head: y, rest: y_rest });
            *next = moved(v, sigma * (ax - low), sigma * (ax - high), clamp);
            turn += v.minus(*next) * next.minus(y);
        }
        let steps = f32::from(self.momentum);
        let beta = if turn > 0.0 { 0.0 } else { steps / (steps + 3.0) };
        let more = self.momentum.saturating_add(1).min(MOMENTUM_STEPS);
        self.momentum = if turn > 0.0 { 0 } else { more };
        let duals = self.v.iter_mut().zip(&mut self.v_rest);
        let duals = duals.zip(self.y.iter_mut().zip(&mut self.y_rest));
        for (((v, v_rest), (y, y_rest)), next) in duals.zip(&next).take(scaled.rows) {
            let ahead = next.plus(beta * next.minus(Fine { head: *y, rest: *y_rest }));
            (*v, *v_rest) = (ahead.head, ahead.rest);
            (*y, *y_rest) = (next.head, next.rest);
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

/// A dual moved by its row: up while the row is above its high limit, down while
/// below its low one, to zero between; inside the clamp, and a number.
#[inline(always)]
fn moved(v: Fine, to_low: f32, to_high: f32, clamp: f32) -> Fine {
    let (down, up) = (v.plus(to_low), v.plus(to_high));
    let next = if up.head > 0.0 {
        up
    } else if down.head < 0.0 {
        down
    } else {
        Fine::ZERO
    };
    let head = clip(next.head, -clamp, clamp);
    if head == next.head { next } else { Fine { head, rest: 0.0 } }
}

impl<const X: usize, const R: usize> Default for Iterate<X, R> {
    fn default() -> Self {
        Self::new()
    }
}
