//! Can this rung meet the limits at all? A bound that is true for any dual vector.
//!
//! Contract: for any `y`, [`shortfall`] is a proven lower bound, in pu, on the
//! violation that no choice of the unknowns inside their ranges can avoid. A bad
//! `y` can only miss, never accuse falsely: `impossible` rests on this product
//! alone, not on how `y` was found.
//!
//! | code | symbol | meaning | shape | unit |
//! |---|---|---|---|---|
//! | `y` | y | any dual vector, physical rows | rows | - |
//! | `column` | A'y | its product with the columns | cols | - |
//! | `magnitude` | abs(A)' abs(y) | the same with magnitudes, for the rounding bound | cols | - |
//! | `error` | env | how far the estimates in a row may be off | rows | pu |
//!
//! Source: theorem of the alternative, J. Farkas, "Theorie der einfachen
//! Ungleichungen", 1902, with box constraints; rounding bound by the standard
//! model of floating-point sums (N. Higham, "Accuracy and Stability of Numerical
//! Algorithms", 2002, chapter 3).

pub mod candidate;

use crate::law::kernel::{abs, max, max_abs, min};

/// Unit round-off of `f32`, with the factor for one product and one sum.
const ROUNDING: f32 = 6e-8;
/// Entries below this share of the largest are dropped: any `y` is allowed, and small ones cost rounding.
const DUST: f32 = 1e-4;

/// Limits of the rows, with what the estimates may be off.
#[derive(Clone, Copy, Debug)]
pub struct Rows<'a> {
    /// Lower limits, pu.
    pub low: &'a [f32],
    /// Upper limits, pu.
    pub high: &'a [f32],
    /// Allowed estimation error, pu.
    pub error: &'a [f32],
}

/// Ranges of the unknowns.
#[derive(Clone, Copy, Debug)]
pub struct Ranges<'a> {
    /// Lower ends, pu.
    pub low: &'a [f32],
    /// Upper ends, pu.
    pub high: &'a [f32],
}

/// The product of a dual vector with the columns of the physical matrix.
#[derive(Clone, Copy, Debug)]
pub struct Product<'a> {
    /// `A' y`.
    pub column: &'a [f32],
    /// `|A|' |y|`.
    pub magnitude: &'a [f32],
}

/// Drop what is too small to matter.
pub fn dust(y: &mut [f32]) {
    let small = DUST * max_abs(y);
    for value in y {
        if abs(*value) < small || !value.is_finite() {
            *value = 0.0;
        }
    }
}

/// Violation in pu that no choice of the unknowns can avoid; negative or zero = nothing proven.
///
/// Shapes: `y` and `rows` one entry per row, `product` and `ranges` one per unknown.
/// Cost: 4 cols + 6 rows flops.
pub fn shortfall(y: &[f32], product: Product<'_>, rows: Rows<'_>, ranges: Ranges<'_>) -> f32 {
    let (mut gap, mut magnitude, mut norm) = (0.0, 0.0, 0.0);
    let columns = product.column.iter().zip(product.magnitude);
    for ((&column, &size), (&low, &high)) in columns.zip(ranges.low.iter().zip(ranges.high)) {
        gap += min(column * low, column * high);
        magnitude += size * max(abs(low), abs(high));
    }
    let limits = rows.low.iter().zip(rows.high).zip(rows.error);
    for (&y, ((&low, &high), &error)) in y.iter().zip(limits) {
        let most = max(y * (low - error), y * (high + error));
        gap -= most;
        magnitude += abs(most);
        norm += abs(y);
    }
    let terms = (y.len() + product.column.len() + 4) as f32;
    let bound = (gap - terms * ROUNDING * magnitude) / norm;
    // A zero or unusable y proves nothing.
    if norm > 0.0 && bound.is_finite() { bound } else { -1.0 }
}
