//! The proof: true for any dual vector whatever.

use crate::common::Rng;
use hedgerow_firmware::verdict::{Product, Ranges, Rows, dust, shortfall};
use proptest::prelude::*;

/// A random problem by columns, and a point inside its ranges.
struct Case {
    a: Vec<Vec<f32>>,
    row_low: Vec<f32>,
    row_high: Vec<f32>,
    error: Vec<f32>,
    low: Vec<f32>,
    high: Vec<f32>,
    point: Vec<f64>,
    y: Vec<f32>,
}

impl Case {
    /// The limits hold what the point gives, moved aside by at most `apart`.
    fn random(seed: u64, apart: f64) -> Self {
        let mut rng = Rng::new(seed);
        let (rows, cols) = (1 + rng.index(30), 1 + rng.index(24));
        let dense = rng.between(0.05, 1.0);
        let mut coefficient = || if rng.chance(dense) { rng.between32(-1.5, 1.5) } else { 0.0 };
        let a: Vec<Vec<f32>> =
            (0..cols).map(|_| (0..rows).map(|_| coefficient()).collect()).collect();
        let low: Vec<f32> = (0..cols).map(|_| rng.between32(-5.0, 3.0)).collect();
        let high: Vec<f32> = low
            .iter()
            .map(|low| low + if rng.chance(0.2) { 0.0 } else { rng.between32(0.0, 5.0) })
            .collect();
        let point: Vec<f64> = low
            .iter()
            .zip(&high)
            .map(|(&l, &h)| match rng.index(3) {
                0 => f64::from(l),
                1 => f64::from(h),
                _ => rng.between(l.into(), h.into()),
            })
            .collect();
        let (mut row_low, mut row_high) = (Vec::new(), Vec::new());
        for row in 0..rows {
            let at: f64 = a.iter().zip(&point).map(|(c, x)| f64::from(c[row]) * x).sum();
            let (below, above) = match rng.index(4) {
                0 => (0.0, 0.0),
                1 => (0.0, rng.between(0.0, 9.0)),
                2 => (rng.between(0.0, 9.0), 0.0),
                _ => (rng.between(0.0, 9.0), rng.between(0.0, 9.0)),
            };
            let aside = if apart > 0.0 { rng.between(-apart, apart) } else { 0.0 };
            row_low.push((at - below + aside) as f32);
            row_high.push((at + above + aside) as f32);
        }
        let error = (0..rows)
            .map(|_| if rng.chance(0.5) { 0.0 } else { rng.between32(0.0, 0.1) })
            .collect();
        let decade = 10_f64.powf(rng.between(-3.0, 3.0));
        let filled = rng.between(0.02, 1.0);
        let y = (0..rows)
            .map(
                |_| if rng.chance(filled) { rng.between32(-1.0, 1.0) * decade as f32 } else { 0.0 },
            )
            .collect();
        Self { a, row_low, row_high, error, low, high, point, y }
    }

    fn bound(&self, y: &[f32]) -> f32 {
        let sum = |f: &dyn Fn(f32, f32) -> f32| -> Vec<f32> {
            let columns = self.a.iter();
            columns.map(|c| c.iter().zip(y).fold(0.0, |s, (&a, &y)| s + f(a, y))).collect()
        };
        let column = sum(&|a, y| a * y);
        let magnitude = sum(&|a, y| (a * y).abs());
        shortfall(
            y,
            Product { column: &column, magnitude: &magnitude },
            Rows { low: &self.row_low, high: &self.row_high, error: &self.error },
            Ranges { low: &self.low, high: &self.high },
        )
    }

    /// Largest violation at a point, estimation errors allowed for.
    fn violation(&self, x: &[f64]) -> f64 {
        let mut worst = 0.0_f64;
        for row in 0..self.row_low.len() {
            let at: f64 = self.a.iter().zip(x).map(|(c, x)| f64::from(c[row]) * x).sum();
            let error = f64::from(self.error[row]);
            let below = f64::from(self.row_low[row]) - error - at;
            let above = at - f64::from(self.row_high[row]) - error;
            worst = worst.max(below).max(above);
        }
        worst
    }

    /// A point of small violation: steps against the worst row, back into the ranges.
    fn improve(&self) -> Vec<f64> {
        let mut best = self.point.clone();
        let mut x = best.clone();
        for step in 1..400 {
            let (mut worst, mut row, mut sign) = (0.0, 0, 0.0);
            for i in 0..self.row_low.len() {
                let at: f64 = self.a.iter().zip(&x).map(|(c, x)| f64::from(c[i]) * x).sum();
                for (by, s) in [
                    (f64::from(self.row_low[i]) - at, 1.0),
                    (at - f64::from(self.row_high[i]), -1.0),
                ] {
                    if by > worst {
                        (worst, row, sign) = (by, i, s);
                    }
                }
            }
            for (j, value) in x.iter_mut().enumerate() {
                let slope = sign * f64::from(self.a[j][row]);
                let moved = *value + slope * worst / f64::from(step).sqrt();
                *value = moved.clamp(self.low[j].into(), self.high[j].into());
            }
            if self.violation(&x) < self.violation(&best) {
                best.clone_from(&x);
            }
        }
        best
    }

    fn widen(&mut self, rng: &mut Rng) {
        for (low, high) in self.low.iter_mut().zip(&mut self.high) {
            *low -= rng.between32(0.0, 0.5);
            *high += rng.between32(0.0, 0.5);
        }
        for (low, high) in self.row_low.iter_mut().zip(&mut self.row_high) {
            *low -= rng.between32(0.0, 0.5);
            *high += rng.between32(0.0, 0.5);
        }
        self.error.iter_mut().for_each(|error| *error += rng.between32(0.0, 0.1));
    }
}

proptest! {
    #[test]
    fn nothing_is_proven_against_a_problem_that_has_a_point(seed in any::<u64>()) {
        let case = Case::random(seed, 0.0);
        // The limits were rounded to f32: the point may miss them by that much.
        let truth = case.violation(&case.point) as f32;
        prop_assert!(case.bound(&case.y) <= truth + 1e-6, "{} {truth}", case.bound(&case.y));
    }

    #[test]
    fn no_more_is_proven_than_any_point_leaves(seed in any::<u64>(), apart in 0.0_f64..2.0) {
        let case = Case::random(seed, apart);
        let least = case.violation(&case.improve()) as f32;
        prop_assert!(case.bound(&case.y) <= least + 1e-6, "{} {least}", case.bound(&case.y));
        let mut single = vec![0.0; case.y.len()];
        for row in 0..single.len() {
            for value in [1.0, -1.0] {
                single[row] = value;
                prop_assert!(case.bound(&single) <= least + 1e-6);
            }
            single[row] = 0.0;
        }
    }

    #[test]
    fn scale_of_the_dual_does_not_matter(seed in any::<u64>(), exponent in -20_i32..20) {
        let case = Case::random(seed, 1.0);
        let scaled: Vec<f32> = case.y.iter().map(|y| y * 2_f32.powi(exponent)).collect();
        prop_assert_eq!(case.bound(&scaled).to_bits(), case.bound(&case.y).to_bits());
        let odd: Vec<f32> = case.y.iter().map(|y| y * 0.3).collect();
        let (a, b) = (case.bound(&odd), case.bound(&case.y));
        prop_assert!((a - b).abs() <= 1e-5 * (1.0 + b.abs()), "{a} {b}");
    }

    #[test]
    fn wider_limits_never_prove_more(seed in any::<u64>()) {
        let mut case = Case::random(seed, 1.0);
        let before = case.bound(&case.y);
        case.widen(&mut Rng::new(seed ^ 1));
        let after = case.bound(&case.y);
        prop_assert!(after <= before + 1e-5 * (1.0 + before.abs()), "{after} {before}");
    }

    #[test]
    fn unusable_numbers_prove_nothing(seed in any::<u64>()) {
        let mut case = Case::random(seed, 1.0);
        let mut rng = Rng::new(seed ^ 2);
        let row = rng.index(case.y.len());
        case.y[row] = [f32::NAN, f32::INFINITY, f32::NEG_INFINITY][rng.index(3)];
        prop_assert!(case.bound(&case.y) <= 0.0);
        let mut cleaned = case.y.clone();
        dust(&mut cleaned);
        prop_assert!(cleaned.iter().all(|y| y.is_finite()));
        prop_assert!(case.bound(&vec![0.0; case.y.len()]) <= 0.0);
    }
}

/// One unknown in [-1, 1], two rows that ask for x >= 3 and x <= 0.5: the least
/// violation is 2 at x = 1, and the first row alone proves it.
#[test]
fn proves_the_whole_of_what_one_row_misses() {
    let case = Case {
        a: vec![vec![1.0, 1.0]],
        row_low: vec![3.0, -9.0],
        row_high: vec![9.0, 0.5],
        error: vec![0.0, 0.0],
        low: vec![-1.0],
        high: vec![1.0],
        point: vec![1.0],
        y: vec![-1.0, 0.0],
    };
    assert!((case.bound(&case.y) - 2.0).abs() < 1e-5, "{}", case.bound(&case.y));
    assert!(case.bound(&[1.0, 0.0]) < 0.0);
}

/// x + y = 2 and x - y >= 1.5 with x <= 1: at x = 1 the rows miss by |1 - y| and
/// y + 0.5, equal at y = 0.25, so the least violation is 0.75.
#[test]
fn proves_the_whole_of_what_two_rows_miss_together() {
    let case = Case {
        a: vec![vec![1.0, 1.0], vec![1.0, -1.0]],
        row_low: vec![2.0, 1.5],
        row_high: vec![2.0, 99.0],
        error: vec![0.0, 0.0],
        low: vec![-9.0, -9.0],
        high: vec![1.0, 9.0],
        point: vec![1.0, 0.25],
        y: vec![-1.0, -1.0],
    };
    assert!((case.bound(&case.y) - 0.75).abs() < 1e-5, "{}", case.bound(&case.y));
    assert!((case.violation(&case.point) - 0.75).abs() < 1e-9);
}
