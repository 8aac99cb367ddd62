//! A strictly convex quadratic programme with ranges, solved exactly by a dual active set.
//!
//! Contract: minimise `sum 1/2 curve x^2 + slope x` with `low <= x <= high` and
//! rows added one by one. Ranges are kept at every moment; [`Quadratic::settle`]
//! ends at the optimum over all rows added so far, or with the row that makes
//! them contradict. Rows and variables may be added afterwards and the work
//! goes on from there, so a caller adds only the rows that turn out to matter.
//! Data flow: free variables are eliminated by their own curvature; what is left
//! is one small dense system over the active rows, factorised anew each step.
//! Source: D. Goldfarb and A. Idnani, "A numerically stable dual method for
//! solving strictly convex quadratic programs", Math. Programming 27 (1983).

/// Rows may be missed by this much.
const ROW_TOL: f64 = 1e-9;

/// A direction that gains less than this share of its own length is no direction.
const DEPENDENT: f64 = 1e-11;

/// Why there is no optimum.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum NoOptimum {
    /// The rows and ranges contradict each other.
    Contradiction,
    /// More steps than a problem of this size can need (rounding).
    Stalled,
}

/// A row `low <= coefficients x <= high`; missing coefficients are 0.
#[derive(Clone, Debug)]
struct Row {
    coefficients: Vec<f64>,
    low: f64,
    high: f64,
}

/// A row that holds with equality now, with its multiplier.
#[derive(Clone, Copy, Debug)]
struct Active {
    row: usize,
    /// +1 at the lower end, -1 at the upper end.
    sign: f64,
    multiplier: f64,
}

/// What is in the way of a step.
#[derive(Clone, Copy, Debug)]
enum Blocker {
    Row(usize),
    Range(usize),
}

/// What is added to the active set.
#[derive(Clone, Copy, Debug)]
enum Entering {
    Row { row: usize, sign: f64 },
    Range { variable: usize, sign: f64 },
}

/// A direction: primal step, and how multipliers of rows and ranges fall along it.
#[derive(Clone, Debug, Default)]
struct Direction {
    primal: Vec<f64>,
    rows: Vec<f64>,
    ranges: Vec<f64>,
    gain: f64,
}

/// The programme and where its solution stands.
#[derive(Clone, Debug, Default)]
pub struct Quadratic {
    curve: Vec<f64>,
    low: Vec<f64>,
    high: Vec<f64>,
    x: Vec<f64>,
    /// 0 free, +1 held at the lower end, -1 at the upper end.
    held: Vec<f64>,
    range_multiplier: Vec<f64>,
    rows: Vec<Row>,
    active: Vec<Active>,
}

impl Quadratic {
    /// Add a variable at the least of its own cost; `curve` must be positive.
    pub fn add_variable(&mut self, curve: f64, slope: f64, low: f64, high: f64) -> usize {
        let best = -slope / curve;
        let (x, held) = if best <= low {
            (low, 1.0)
        } else if best >= high {
            (high, -1.0)
        } else {
            (best, 0.0)
        };
        self.curve.push(curve);
        self.low.push(low);
        self.high.push(high);
        self.x.push(x);
        self.held.push(held);
        self.range_multiplier.push(held * (curve * x + slope));
        self.curve.len() - 1
    }

    /// Demand `low <= coefficients x <= high` from the next [`Self::settle`] on.
    pub fn add_row(&mut self, coefficients: Vec<f64>, low: f64, high: f64) {
        self.rows.push(Row { coefficients, low, high });
    }

    /// Values of the variables now.
    pub fn values(&self) -> &[f64] {
        &self.x
    }

    /// Go to the optimum over everything that was added.
    ///
    /// Errors: [`NoOptimum`].
    /// Cost: per step `active^2 * free` flops.
    pub fn settle(&mut self) -> Result<(), NoOptimum> {
        let limit = 200 + 50 * (self.x.len() + self.rows.len());
        let mut steps = 0;
        while let Some((entering, missing)) = self.worst() {
            self.enter(entering, missing, &mut steps, limit)?;
        }
        Ok(())
    }

    /// The row or range that is missed most, and by how much.
    fn worst(&self) -> Option<(Entering, f64)> {
        let mut worst = None;
        let mut most = ROW_TOL;
        for (row, data) in self.rows.iter().enumerate() {
            let value = dot(&data.coefficients, &self.x);
            // Equalities first: they never leave again.
            let weight = if data.low == data.high { 1e3 } else { 1.0 };
            for (missing, sign) in [(data.low - value, 1.0), (value - data.high, -1.0)] {
                if missing > ROW_TOL && missing * weight > most {
                    most = missing * weight;
                    worst = Some((Entering::Row { row, sign }, missing));
                }
            }
        }
        for variable in 0..self.x.len() {
            let x = self.x[variable];
            for (missing, sign) in [(self.low[variable] - x, 1.0), (x - self.high[variable], -1.0)]
            {
                if missing > most {
                    most = missing;
                    worst = Some((Entering::Range { variable, sign }, missing));
                }
            }
        }
        worst
    }

    fn enter(
        &mut self,
        entering: Entering,
        mut missing: f64,
        steps: &mut usize,
        limit: usize,
    ) -> Result<(), NoOptimum> {
        let mut multiplier = 0.0;
        loop {
            *steps += 1;
            if *steps > limit {
                return Err(NoOptimum::Stalled);
            }
            let direction = self.direction(entering);
            let (dual_step, blocker) = self.first_blocker(&direction);
            let primal_step =
                if direction.gain > 0.0 { missing / direction.gain } else { f64::INFINITY };
            let step = dual_step.min(primal_step);
            if step.is_infinite() {
                return Err(NoOptimum::Contradiction);
            }
            self.walk(&direction, step);
            multiplier += step;
            missing -= step * direction.gain;
            if primal_step <= dual_step {
                self.activate(entering, multiplier);
                return Ok(());
            }
            match blocker {
                Some(Blocker::Row(index)) => drop(self.active.remove(index)),
                Some(Blocker::Range(variable)) => self.held[variable] = 0.0,
                None => return Err(NoOptimum::Stalled),
            }
        }
    }

    /// Normal of what enters, signed so that it asks for more.
    fn normal(&self, entering: Entering) -> Vec<f64> {
        let mut normal = vec![0.0; self.x.len()];
        match entering {
            Entering::Range { variable, sign } => normal[variable] = sign,
            Entering::Row { row, sign } => {
                for (n, a) in normal.iter_mut().zip(&self.rows[row].coefficients) {
                    *n = sign * a;
                }
            }
        }
        normal
    }

    fn direction(&self, entering: Entering) -> Direction {
        let normal = self.normal(entering);
        let weight: Vec<f64> = (0..self.x.len())
            .map(|j| if self.held[j] == 0.0 { 1.0 / self.curve[j] } else { 0.0 })
            .collect();
        let rows = self.row_rates(&normal, &weight);
        let mut left = normal.clone();
        for (active, rate) in self.active.iter().zip(&rows) {
            for (l, a) in left.iter_mut().zip(&self.rows[active.row].coefficients) {
                *l -= rate * active.sign * a;
            }
        }
        let primal: Vec<f64> = left.iter().zip(&weight).map(|(l, w)| l * w).collect();
        let ranges = left.iter().zip(&self.held).map(|(l, held)| held * l).collect();
        let gain = dot(&primal, &normal);
        let length: f64 = normal.iter().zip(&self.curve).map(|(n, c)| n * n / c).sum();
        let gain = if gain > DEPENDENT * length { gain } else { 0.0 };
        Direction { primal, rows, ranges, gain }
    }

    /// How fast the multipliers of the active rows fall: one dense solve.
    fn row_rates(&self, normal: &[f64], weight: &[f64]) -> Vec<f64> {
        let count = self.active.len();
        let mut matrix = vec![0.0; count * count];
        let mut right = vec![0.0; count];
        for (i, a) in self.active.iter().enumerate() {
            let row = &self.rows[a.row].coefficients;
            let weighted: Vec<f64> = row.iter().zip(weight).map(|(r, w)| r * w).collect();
            right[i] = a.sign * dot(&weighted, normal);
            for (k, b) in self.active.iter().enumerate().take(i + 1) {
                let value = a.sign * b.sign * dot(&weighted, &self.rows[b.row].coefficients);
                matrix[i * count + k] = value;
                matrix[k * count + i] = value;
            }
        }
        solve_positive(&mut matrix, &mut right);
        right
    }

    /// Longest step before a multiplier turns negative, and whose.
    fn first_blocker(&self, direction: &Direction) -> (f64, Option<Blocker>) {
        let (mut shortest, mut blocker) = (f64::INFINITY, None);
        let scale = direction.rows.iter().fold(1.0_f64, |m, r| m.max(r.abs())) * 1e-13;
        for (index, (active, &rate)) in self.active.iter().zip(&direction.rows).enumerate() {
            let row = &self.rows[active.row];
            if rate > scale && row.low != row.high && active.multiplier / rate < shortest {
                shortest = active.multiplier / rate;
                blocker = Some(Blocker::Row(index));
            }
        }
        for (variable, &rate) in direction.ranges.iter().enumerate() {
            let may_move = self.held[variable] != 0.0 && self.low[variable] < self.high[variable];
            if may_move && rate > scale && self.range_multiplier[variable] / rate < shortest {
                shortest = self.range_multiplier[variable] / rate;
                blocker = Some(Blocker::Range(variable));
            }
        }
        (shortest, blocker)
    }

    fn walk(&mut self, direction: &Direction, step: f64) {
        if direction.gain > 0.0 {
            for (x, d) in self.x.iter_mut().zip(&direction.primal) {
                *x += step * d;
            }
        }
        for (active, rate) in self.active.iter_mut().zip(&direction.rows) {
            active.multiplier -= step * rate;
        }
        for variable in 0..self.x.len() {
            if self.held[variable] != 0.0 {
                let left = self.range_multiplier[variable] - step * direction.ranges[variable];
                self.range_multiplier[variable] = left.max(0.0);
            }
        }
    }

    fn activate(&mut self, entering: Entering, multiplier: f64) {
        match entering {
            Entering::Row { row, sign } => self.active.push(Active { row, sign, multiplier }),
            Entering::Range { variable, sign } => {
                let end = if sign > 0.0 { self.low[variable] } else { self.high[variable] };
                self.x[variable] = end;
                self.held[variable] = sign;
                self.range_multiplier[variable] = multiplier;
            }
        }
    }
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

/// Solve a symmetric positive definite system in place (Cholesky, `right` becomes the solution).
fn solve_positive(matrix: &mut [f64], right: &mut [f64]) {
    let n = right.len();
    for j in 0..n {
        for k in 0..j {
            let factor = matrix[j * n + k];
            for i in j..n {
                matrix[i * n + j] -= factor * matrix[i * n + k];
            }
        }
        // Rows are independent when they enter; the floor only catches rounding.
        let pivot = matrix[j * n + j].max(1e-300).sqrt();
        for i in j..n {
            matrix[i * n + j] /= pivot;
        }
    }
    for i in 0..n {
        let sum: f64 = (0..i).map(|k| matrix[i * n + k] * right[k]).sum();
        right[i] = (right[i] - sum) / matrix[i * n + i];
    }
    for i in (0..n).rev() {
        let sum: f64 = (i + 1..n).map(|k| matrix[k * n + i] * right[k]).sum();
        right[i] = (right[i] - sum) / matrix[i * n + i];
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shares_a_demand_by_curvature() {
        // min x^2/2 + y^2, x + y = 3: x = 2, y = 1, by hand.
        let mut q = Quadratic::default();
        q.add_variable(1.0, 0.0, -9.0, 9.0);
        q.add_variable(2.0, 0.0, -9.0, 9.0);
        q.add_row(vec![1.0, 1.0], 3.0, 3.0);
        q.settle().unwrap();
        assert!((q.values()[0] - 2.0).abs() < 1e-12 && (q.values()[1] - 1.0).abs() < 1e-12);
    }

    #[test]
    fn goes_on_when_a_row_is_added_later() {
        let mut q = Quadratic::default();
        q.add_variable(1.0, 0.0, 0.0, 9.0);
        q.add_variable(2.0, 0.0, 0.0, 9.0);
        q.add_row(vec![1.0, 1.0], 3.0, 3.0);
        q.settle().unwrap();
        q.add_row(vec![1.0], f64::NEG_INFINITY, 0.5);
        q.settle().unwrap();
        assert!((q.values()[0] - 0.5).abs() < 1e-12 && (q.values()[1] - 2.5).abs() < 1e-12);
    }

    #[test]
    fn frees_a_range_that_is_needed_after_all() {
        // The priced variable stays at 0 until the cheap one is used up.
        let mut q = Quadratic::default();
        q.add_variable(1.0, 0.0, 0.0, 1.0);
        q.add_variable(1.0, 60.0, 0.0, 5.0);
        q.add_row(vec![1.0, 1.0], 3.0, 3.0);
        q.settle().unwrap();
        assert!((q.values()[0] - 1.0).abs() < 1e-12 && (q.values()[1] - 2.0).abs() < 1e-12);
    }

    #[test]
    fn says_when_rows_contradict() {
        let mut q = Quadratic::default();
        q.add_variable(1.0, 0.0, 0.0, 1.0);
        q.add_variable(1.0, 0.0, 0.0, 1.0);
        q.add_row(vec![1.0, 1.0], 3.0, 3.0);
        assert_eq!(q.settle(), Err(NoOptimum::Contradiction));
    }
}
