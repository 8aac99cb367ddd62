//! Scaling of a problem: unit curvature, orthonormal equality rows, unit line rows.
//!
//! Contract: built from a physical matrix on start, topology change, rung change
//! or change of the open columns; constant between. Scaling decides how many
//! iterations the law needs: balance and angle rows are nearly parallel, and
//! closed columns with small curvature would dominate if they were left in.
//!
//! Data flow: columns are divided by `s` and closed ones zeroed; the equality
//! rows go through modified Gram-Schmidt over the open columns (factor `t`);
//! line rows are divided by their norm over the same columns (factor `e`); a
//! power iteration gives the safe step. Norms over the units alone were tried:
//! rows that move mostly feeders or ties then rule the step (379 of 391 random
//! problems within 1e-3 pu after 1000 steps, against 371).

use super::kernel::{at, dot, entry, mat_vec, max, max_abs, put, sqrt};
use core::ops::Range;
use hedgerow_protocol::limits::TIES_MAX;
use nalgebra::{ArrayStorage, SMatrix};

/// Most equality rows: the balance, and one angle row per tie but the first.
pub const EQUALITIES_MAX: usize = TIES_MAX;
/// Share of its original norm below which an equality row is not shortened further:
/// what is left then is mostly rounding and must not be blown up.
const ROW_FLOOR: f32 = 0.03;
/// Line rows that no open column touches keep their scale.
const NORM_MIN: f32 = 1e-4;
/// Power iterations for the largest eigenvalue.
const POWER_STEPS: usize = 20;
/// Head-room over the estimate, since a power iteration stays below the truth.
const POWER_MARGIN: f32 = 1.1;

/// A zero matrix that can be made in a constant.
pub const fn zeros<const R: usize, const C: usize>() -> SMatrix<f32, R, C> {
    SMatrix::from_array_storage(ArrayStorage([[0.0; R]; C]))
}

/// What an unknown is to the scaling.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Column {
    /// It can not move from zero: left out.
    Closed,
    /// A unit.
    Own,
    /// A feeder, tie deviation or angle deviation.
    Other,
}

/// A scaled problem matrix.
#[derive(Clone, Debug)]
pub struct Scaled<const X: usize, const R: usize> {
    pub(crate) a: SMatrix<f32, R, X>,
    pub(crate) at: SMatrix<f32, X, R>,
    pub(crate) s: [f32; X],
    pub(crate) e: [f32; R],
    t: [[f32; EQUALITIES_MAX]; EQUALITIES_MAX],
    pub(crate) cols: usize,
    pub(crate) rows: usize,
    pub(crate) eqs: usize,
    /// Step while every open column may move.
    pub(crate) sigma: f32,
    /// Step while tie flows stand still (the shadow above `lean`).
    pub(crate) sigma_flows_fixed: f32,
    /// Step while tie flows and angles stand still (the shadow looking at `keep`).
    pub(crate) sigma_ties_fixed: f32,
}

impl<const X: usize, const R: usize> Scaled<X, R> {
    /// An empty problem: all zero, so that a static one takes no flash.
    pub const fn new() -> Self {
        Self {
            a: zeros(),
            at: zeros(),
            s: [0.0; X],
            e: [0.0; R],
            t: [[0.0; EQUALITIES_MAX]; EQUALITIES_MAX],
            cols: 0,
            rows: 0,
            eqs: 0,
            sigma: 0.0,
            sigma_flows_fixed: 0.0,
            sigma_ties_fixed: 0.0,
        }
    }

    /// Number of unknowns in use.
    pub fn cols(&self) -> usize {
        self.cols
    }

    /// Number of rows in use.
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Step length while every open column may move.
    pub fn sigma(&self) -> f32 {
        self.sigma
    }

    /// Number of equality rows.
    pub fn eqs(&self) -> usize {
        self.eqs
    }

    /// The matrix, to be filled with physical rows before [`Self::scale`].
    pub fn matrix_mut(&mut self) -> &mut SMatrix<f32, R, X> {
        &mut self.a
    }

    /// Scale the physical matrix that was filled in.
    ///
    /// Shapes: `curvature` and `columns` one entry per unknown; the first `eqs`
    /// of `rows` rows are equalities (at most [`EQUALITIES_MAX`]); the
    /// columns of the tie flows are `flows`, those of the angles follow to the end.
    /// Cost: about 2 (eqs^2 + 122) rows x cols flops.
    pub fn scale(
        &mut self,
        curvature: &[f32],
        columns: &[Column],
        rows: usize,
        eqs: usize,
        flows: Range<usize>,
    ) {
        self.cols = columns.len().min(X);
        self.rows = rows.min(R);
        self.eqs = eqs.min(EQUALITIES_MAX).min(self.rows);
        self.scale_columns(curvature, columns);
        self.transpose();
        self.orthonormalise();
        self.normalise_lines();
        self.untranspose();
        self.sigma = self.step(0..0);
        self.sigma_flows_fixed = self.step(flows.clone());
        self.sigma_ties_fixed = self.step(flows.start..self.cols);
    }

    fn scale_columns(&mut self, curvature: &[f32], columns: &[Column]) {
        let rows = self.rows;
        for (j, column) in self.a.data.0.iter_mut().enumerate() {
            let kind = columns.get(j).copied().unwrap_or(Column::Closed);
            let s = sqrt(max(at(curvature, j), 1e-6));
            put(&mut self.s, j, s);
            for (i, value) in column.iter_mut().enumerate() {
                *value = if kind == Column::Closed || i >= rows { 0.0 } else { *value / s };
            }
        }
    }

    fn transpose(&mut self) {
        for (i, row) in self.at.data.0.iter_mut().enumerate() {
            for (j, value) in row.iter_mut().enumerate() {
                *value = entry(&self.a, i, j);
            }
        }
    }

    fn untranspose(&mut self) {
        for (j, column) in self.a.data.0.iter_mut().enumerate() {
            for (i, value) in column.iter_mut().enumerate() {
                *value = entry(&self.at, j, i);
            }
        }
    }

    /// Modified Gram-Schmidt over the open columns; `t` keeps the combination.
    fn orthonormalise(&mut self) {
        self.t = [[0.0; EQUALITIES_MAX]; EQUALITIES_MAX];
        for i in 0..self.eqs {
            let (before, rest) = self.at.data.0.split_at_mut_checked(i).unwrap_or_default();
            let (t_before, t_rest) = self.t.split_at_mut_checked(i).unwrap_or_default();
            let (Some(row), Some(t_row)) = (rest.first_mut(), t_rest.first_mut()) else {
                return;
            };
            put(t_row, i, 1.0);
            let original = sqrt(dot(row, row));
            for (earlier, t_earlier) in before.iter().zip(t_before.iter()) {
                let share = dot(row, earlier);
                subtract(row, share, earlier);
                subtract(t_row, share, t_earlier);
            }
            let left = sqrt(dot(row, row));
            let norm = max(max(left, ROW_FLOOR * original), 1e-6);
            let norm = if original > 0.0 { norm } else { 1.0 };
            row.iter_mut().chain(t_row.iter_mut()).for_each(|x| *x /= norm);
        }
    }

    fn normalise_lines(&mut self) {
        let (eqs, rows) = (self.eqs, self.rows);
        for (i, (row, e)) in self.at.data.0.iter_mut().zip(&mut self.e).enumerate() {
            *e = 1.0;
            if i < eqs || i >= rows {
                continue;
            }
            let norm = sqrt(dot(row, row));
            if norm >= NORM_MIN {
                *e = 1.0 / norm;
                row.iter_mut().for_each(|x| *x /= norm);
            }
        }
    }

    /// Step length from the largest eigenvalue of `A A'` without the `left_out` columns.
    fn step(&self, left_out: Range<usize>) -> f32 {
        let mut w = [0.0; R];
        for (i, value) in w.iter_mut().enumerate().take(self.rows) {
            // Any start that is not regular will do; five and seven share no factor.
            *value = 1.0 + 0.25 * ((i * 5) % 7) as f32;
        }
        let mut u = [0.0; X];
        let mut eigenvalue = 0.0;
        for _ in 0..POWER_STEPS {
            mat_vec(&self.at, &w, self.cols, self.rows, &mut u);
            u.get_mut(left_out.clone()).unwrap_or_default().fill(0.0);
            let size = dot(&w, &w);
            if size > 0.0 {
                eigenvalue = dot(&u, &u) / size;
            }
            mat_vec(&self.a, &u, self.rows, self.cols, &mut w);
            let most = max_abs(&w);
            if most > 0.0 {
                w.iter_mut().for_each(|x| *x /= most);
            }
        }
        1.0 / (POWER_MARGIN * max(eigenvalue, 1e-6))
    }

    /// Turn physical row limits into scaled ones, in place.
    pub fn scale_rows(&self, values: &mut [f32; R]) {
        let mut eq = [0.0; EQUALITIES_MAX];
        for (row, out) in self.t.iter().zip(&mut eq).take(self.eqs) {
            *out = dot(row.get(..self.eqs).unwrap_or_default(), values);
        }
        for (value, scaled) in values.iter_mut().zip(&eq).take(self.eqs) {
            *value = *scaled;
        }
        for (value, e) in values.iter_mut().zip(&self.e).skip(self.eqs) {
            *value *= e;
        }
    }

    /// Physical duals of scaled ones.
    pub fn physical_dual(&self, y: &[f32; R], out: &mut [f32; R]) {
        for ((physical, scaled), e) in out.iter_mut().zip(y).zip(&self.e) {
            *physical = e * scaled;
        }
        for (k, physical) in out.iter_mut().enumerate().take(self.eqs) {
            *physical = self
                .t
                .iter()
                .zip(y)
                .take(self.eqs)
                .fold(0.0, |sum, (row, yi)| sum + at(row, k) * yi);
        }
    }

    /// Scaled duals of physical ones (back-substitution in `t`).
    pub fn scaled_dual(&self, physical: &[f32; R], out: &mut [f32; R]) {
        for ((scaled, y), e) in out.iter_mut().zip(physical).zip(&self.e) {
            *scaled = y / e;
        }
        for i in (0..self.eqs).rev() {
            let mut left = at(physical, i);
            for (k, row) in self.t.iter().enumerate().take(self.eqs).skip(i + 1) {
                left -= at(row, i) * at(out, k);
            }
            let pivot = self.t.get(i).map_or(1.0, |row| at(row, i));
            put(out, i, if pivot == 0.0 { 0.0 } else { left / pivot });
        }
    }

    /// Largest physical amount by which `A x` leaves `[low, high]` (all scaled), pu.
    pub fn violation(&self, ax: &[f32; R], low: &[f32; R], high: &[f32; R]) -> f32 {
        let mut eq = [0.0_f32; EQUALITIES_MAX];
        let mut worst = 0.0;
        for i in 0..self.eqs {
            // Forward substitution: the physical residual r solves T r = scaled residual.
            let row = self.t.get(i).map_or(&[][..], |row| row.as_slice());
            let left = at(ax, i) - at(low, i) - dot(row.get(..i).unwrap_or_default(), &eq);
            let pivot = at(row, i);
            let residual = if pivot == 0.0 { 0.0 } else { left / pivot };
            put(&mut eq, i, residual);
            worst = max(super::kernel::abs(residual), worst);
        }
        let lines = ax.iter().zip(low).zip(high).zip(&self.e).take(self.rows).skip(self.eqs);
        for (((value, l), h), e) in lines {
            worst = max(max(l - value, value - h) / e, worst);
        }
        worst
    }
}

impl<const X: usize, const R: usize> Default for Scaled<X, R> {
    fn default() -> Self {
        Self::new()
    }
}

fn subtract(from: &mut [f32], share: f32, row: &[f32]) {
    for (x, y) in from.iter_mut().zip(row) {
        *x -= share * y;
    }
}
