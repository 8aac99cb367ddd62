//! The few loops that everything else is made of.
//!
//! Contract: total functions; a value that is not there reads as zero. The
//! order of every sum is fixed (columns ascending), whatever the block size, so
//! results do not depend on the machine.

use micromath::F32Ext;
use nalgebra::SMatrix;

/// Rows handled together: eight accumulators fit the registers of a Cortex-M
/// with an FPU and two vector registers of a host.
pub const LANES: usize = 8;

/// The smaller value; the second if the first is not a number.
#[inline(always)]
pub fn min(a: f32, b: f32) -> f32 {
    if a < b { a } else { b }
}

/// The larger value; the second if the first is not a number.
#[inline(always)]
pub fn max(a: f32, b: f32) -> f32 {
    if a > b { a } else { b }
}

/// `x` limited to `[low, high]`; a number whenever the ends are, even for a NaN.
#[inline(always)]
pub fn clip(x: f32, low: f32, high: f32) -> f32 {
    max(min(x, high), low)
}

/// Magnitude.
#[inline(always)]
pub fn abs(x: f32) -> f32 {
    x.abs()
}

/// `x` moved towards zero by `by`, not beyond it.
#[inline(always)]
pub fn soft(x: f32, by: f32) -> f32 {
    if x > by {
        x - by
    } else if x < -by {
        x + by
    } else {
        0.0
    }
}

/// Square root to `f32` accuracy: micromath's estimate, polished by four Newton steps.
///
/// Zero for anything that is not a positive number.
pub fn sqrt(x: f32) -> f32 {
    if !(x > 0.0 && x < f32::MAX) {
        return 0.0;
    }
    let estimate = F32Ext::sqrt(x);
    let mut root = if estimate > 0.0 { estimate } else { x };
    for _ in 0..4 {
        root = 0.5 * (root + x / root);
    }
    root
}

/// Entry `index` of `values`, zero beyond the end.
#[inline(always)]
pub fn at(values: &[f32], index: usize) -> f32 {
    values.get(index).copied().unwrap_or(0.0)
}

/// Write entry `index` of `values`, if there is one.
#[inline(always)]
pub fn put(values: &mut [f32], index: usize, value: f32) {
    if let Some(slot) = values.get_mut(index) {
        *slot = value;
    }
}

/// Entry (`row`, `col`) of a matrix, zero outside it.
#[inline(always)]
pub fn entry<const R: usize, const C: usize>(
    a: &SMatrix<f32, R, C>,
    row: usize,
    col: usize,
) -> f32 {
    a.data.0.get(col).and_then(|column| column.get(row)).copied().unwrap_or(0.0)
}

/// Inner product over the shorter of two slices.
#[inline]
pub fn dot(a: &[f32], b: &[f32]) -> f32 {
    a.iter().zip(b).fold(0.0, |sum, (x, y)| sum + x * y)
}

/// Largest magnitude.
pub fn max_abs(values: &[f32]) -> f32 {
    values.iter().fold(0.0, |most, &x| max(abs(x), most))
}

/// `out = a x` over the first `rows` rows (rounded up to whole blocks) and `cols` columns.
///
/// Shapes: `a` R x C by columns, R a multiple of [`LANES`]; `x` at least `cols`; `out` R.
/// Cost: 2 R' cols flops, R' = `rows` rounded up to a block.
#[inline]
pub fn mat_vec<const R: usize, const C: usize>(
    a: &SMatrix<f32, R, C>,
    x: &[f32; C],
    rows: usize,
    cols: usize,
    out: &mut [f32; R],
) {
    const { assert!(R.is_multiple_of(LANES), "make the row capacity a multiple of eight") };
    let blocks = out.as_chunks_mut::<LANES>().0.iter_mut();
    for (block, sums) in blocks.enumerate().take(rows.div_ceil(LANES)) {
        let mut acc = [0.0_f32; LANES];
        for (column, &factor) in a.data.0.iter().zip(x).take(cols) {
            if let Some(part) = column.as_chunks::<LANES>().0.get(block) {
                for (sum, &value) in acc.iter_mut().zip(part) {
                    *sum += value * factor;
                }
            }
        }
        *sums = acc;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    extern crate std;

    #[test]
    fn square_root_is_accurate_over_many_decades() {
        for exponent in -30..30 {
            for mantissa in [1.0_f32, 1.7, 3.3, 9.9] {
                let x = mantissa * 10.0_f32.powi(exponent);
                let exact = f64::from(x).sqrt();
                assert!(((f64::from(sqrt(x)) - exact) / exact).abs() < 2e-7, "{x}");
            }
        }
        assert_eq!(sqrt(0.0), 0.0);
        assert_eq!(sqrt(-1.0), 0.0);
        assert_eq!(sqrt(f32::NAN), 0.0);
    }

    #[test]
    fn clip_never_returns_nan_for_finite_ends() {
        assert_eq!(clip(f32::NAN, -1.0, 2.0), 2.0);
        assert_eq!(clip(f32::INFINITY, -1.0, 2.0), 2.0);
        assert_eq!(clip(f32::NEG_INFINITY, -1.0, 2.0), -1.0);
    }

    #[test]
    fn product_equals_the_plain_sum() {
        let a = SMatrix::<f32, 16, 3>::from_fn(|i, j| (i as f32) - 2.0 * (j as f32));
        let mut out = [9.0; 16];
        mat_vec(&a, &[1.0, -2.0, 0.5], 10, 3, &mut out);
        for (i, &value) in out.iter().enumerate().take(16) {
            let i = i as f32;
            assert_eq!(value, i - 2.0 * (i - 2.0) + 0.5 * (i - 4.0));
        }
    }
}
