//! The small loops: edge cases and orders of sums.

use hedgerow_firmware::law::kernel::{
    LANES, abs, at, clip, dot, entry, mat_vec, max, max_abs, min, put, soft, sqrt,
};
use nalgebra::SMatrix;
use proptest::prelude::*;

const SPECIAL: [f32; 9] =
    [f32::NAN, f32::INFINITY, f32::NEG_INFINITY, f32::MAX, f32::MIN_POSITIVE, 0.0, -0.0, 1.0, -1.0];

#[test]
fn smaller_and_larger_give_the_second_when_the_first_is_no_number() {
    for b in SPECIAL {
        assert_eq!(min(f32::NAN, b).to_bits(), b.to_bits());
        assert_eq!(max(f32::NAN, b).to_bits(), b.to_bits());
    }
    assert!(min(1.0, f32::NAN).is_nan() && max(1.0, f32::NAN).is_nan());
    assert_eq!((min(-0.0, 0.0).to_bits(), max(0.0, -0.0).to_bits()), (0, (-0.0_f32).to_bits()));
}

#[test]
fn clip_stays_inside_for_every_value_and_ordered_ends() {
    for x in SPECIAL {
        for low in [-1e30_f32, -2.0, 0.0, 3.0] {
            for width in [0.0, 1.0, 1e30] {
                let clipped = clip(x, low, low + width);
                assert!(clipped >= low && clipped <= low + width, "{x} {low} {width} {clipped}");
            }
        }
    }
}

#[test]
fn soft_moves_towards_zero_and_not_beyond() {
    assert_eq!((soft(3.0, 1.0), soft(-3.0, 1.0), soft(0.5, 1.0)), (2.0, -2.0, 0.0));
    assert_eq!((soft(1.0, 1.0), soft(-1.0, 1.0), soft(f32::NAN, 1.0)), (0.0, 0.0, 0.0));
    assert_eq!(soft(2.0, 0.0), 2.0);
}

#[test]
fn what_is_not_there_reads_as_zero_and_is_not_written() {
    let mut values = [1.0, 2.0];
    put(&mut values, 2, 9.0);
    put(&mut values, 1, 5.0);
    assert_eq!((values, at(&values, 2), at(&values, 1)), ([1.0, 5.0], 0.0, 5.0));
    let a = SMatrix::<f32, 8, 2>::from_fn(|i, j| (10 * i + j) as f32);
    assert_eq!((entry(&a, 7, 1), entry(&a, 8, 0), entry(&a, 0, 2)), (71.0, 0.0, 0.0));
}

proptest! {
    #[test]
    fn root_of_any_positive_number_squares_back(bits in 0x0080_0000_u32..0x7F00_0000) {
        let x = f32::from_bits(bits);
        let exact = f64::from(x).sqrt();
        prop_assert!(((f64::from(sqrt(x)) - exact) / exact).abs() < 2e-7, "{x} {}", sqrt(x));
    }

    #[test]
    fn root_of_anything_is_a_number(bits in any::<u32>()) {
        let root = sqrt(f32::from_bits(bits));
        prop_assert!(root.is_finite() && root >= 0.0);
    }

    #[test]
    fn magnitude_is_never_negative(bits in any::<u32>()) {
        let x = f32::from_bits(bits);
        prop_assert!(x.is_nan() || abs(x) >= 0.0);
    }

    #[test]
    fn largest_magnitude_is_one_of_the_values(values in prop::collection::vec(-1e6_f32..1e6, 1..40)) {
        let most = max_abs(&values);
        prop_assert!(values.iter().any(|x| x.abs() == most));
        prop_assert!(values.iter().all(|x| x.abs() <= most));
    }

    #[test]
    fn product_equals_the_plain_sum_bit_for_bit(
        values in prop::collection::vec(-1e3_f32..1e3, 24 * 16),
        x in prop::array::uniform16(-1e3_f32..1e3),
        rows in 0_usize..=24,
        cols in 0_usize..=16,
    ) {
        let a = SMatrix::<f32, 24, 16>::from_column_slice(&values);
        let mut out = [f32::NAN; 24];
        mat_vec(&a, &x, rows, cols, &mut out);
        let touched = rows.div_ceil(LANES) * LANES;
        for (i, value) in out.iter().enumerate() {
            let plain = (0..cols).fold(0.0_f32, |sum, j| sum + values[24 * j + i] * x[j]);
            let expected = if i < touched { plain } else { f32::NAN };
            prop_assert_eq!(value.to_bits(), expected.to_bits(), "row {}", i);
        }
        let row: Vec<f32> = (0..16).map(|j| values[24 * j]).collect();
        let plain = (0..16).fold(0.0_f32, |sum, j| sum + row[j] * x[j]);
        prop_assert_eq!(dot(&row, &x).to_bits(), plain.to_bits());
    }
}
