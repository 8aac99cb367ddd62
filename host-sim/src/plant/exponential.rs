//! The functions that step a linear system exactly under inputs linear in time.
//!
//! For x' = A x + B u with u going linearly from u0 to u0 + du over a step h:
//! x(h) = x0 + h phi1(hA) (A x0 + B u0) + h phi2(hA) B du. The first bracket is
//! the derivative at the start, so a state of rest stays at rest whatever the
//! rounding inside phi1.
//!
//! | code | symbol | meaning | shape | unit | source |
//! |---|---|---|---|---|---|
//! | `exponential` | e^Z | | n x n | 1 | |
//! | `phi1` | (e^Z - 1)/Z | weight of the derivative | n x n | 1 | Hochbruck, Ostermann, Acta Numerica 19, 2010 |
//! | `phi2` | (e^Z - 1 - Z)/Z^2 | weight of the input's change | n x n | 1 | the same |

use super::dense::Square;

/// phi1 and phi2 of one matrix.
pub struct PhiFunctions {
    /// (e^Z - 1)/Z.
    pub phi1: Square,
    /// (e^Z - 1 - Z)/Z^2.
    pub phi2: Square,
}

/// Terms of the Taylor series of phi2: with a norm of at most 1/2 the first one
/// left out is below 0.5^14/16! = 3e-18.
const TERMS: u32 = 14;

/// At most this many doublings; 2^40 is beyond any network with a usable step.
const DOUBLINGS_MAX: i32 = 40;

/// Evaluate phi1 and phi2 by scaling, Taylor series and doubling.
///
/// Cost: 15 products and 3 for every doubling.
/// Source: scaling and squaring for phi functions, Skaflestad and Wright,
/// Appl. Numer. Math. 59, 2009 (their Pade step replaced by the series).
pub fn phi_functions(matrix: &Square) -> PhiFunctions {
    let norm = matrix.norm_one();
    let mut doublings = 0;
    while norm * 0.5_f64.powi(doublings) > 0.5 && doublings < DOUBLINGS_MAX {
        doublings += 1;
    }
    let mut z = matrix.clone();
    z.scale(0.5_f64.powi(doublings));
    let mut phi2 = series_phi2(&z);
    let mut phi1 = z.times(&phi2);
    phi1.add_to_diagonal(1.0);
    let mut exponential = z.times(&phi1);
    exponential.add_to_diagonal(1.0);
    for _ in 0..doublings {
        let mut next2 = exponential.times(&phi2);
        next2.add(&phi1);
        next2.add(&phi2);
        next2.scale(0.25);
        let mut next1 = exponential.times(&phi1);
        next1.add(&phi1);
        next1.scale(0.5);
        exponential = exponential.times(&exponential);
        phi1 = next1;
        phi2 = next2;
    }
    PhiFunctions { phi1, phi2 }
}

/// Horner's scheme for the sum of z^k/(k+2)!.
fn series_phi2(z: &Square) -> Square {
    let coefficient = |k: u32| 1.0 / (1..=k + 2).map(f64::from).product::<f64>();
    let mut sum = Square::zeros(z.size);
    sum.add_to_diagonal(coefficient(TERMS - 1));
    for k in (0..TERMS - 1).rev() {
        sum = z.times(&sum);
        sum.add_to_diagonal(coefficient(k));
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    fn assert_close(found: f64, expected: f64) {
        let error = (found - expected).abs();
        assert!(error < 1e-13 * (1.0 + expected.abs()), "{found} {expected}");
    }

    #[test]
    fn agrees_with_scalars_from_mild_to_stiff() {
        for z in [-3.0_f64, -0.2, 0.7, 2.5] {
            let mut matrix = Square::zeros(1);
            *matrix.at(0, 0) = z;
            let mut found = phi_functions(&matrix);
            assert_close(*found.phi1.at(0, 0), z.exp_m1() / z);
            assert_close(*found.phi2.at(0, 0), (z.exp_m1() - z) / (z * z));
        }
        let z = -1e5_f64;
        let mut matrix = Square::zeros(1);
        *matrix.at(0, 0) = z;
        let mut found = phi_functions(&matrix);
        assert!((*found.phi1.at(0, 0) * 1e5 - 1.0).abs() < 1e-9);
        assert!((*found.phi2.at(0, 0) * 1e5 - 1.0).abs() < 1e-4);
    }

    #[test]
    fn turns_a_rotation_by_any_angle() {
        // Z = [[0, -t], [t, 0]]: phi1 = [[sin t, cos t - 1], [1 - cos t, sin t]]/t.
        for t in [0.1_f64, 1.0, 40.0] {
            let mut matrix = Square::zeros(2);
            *matrix.at(0, 1) = -t;
            *matrix.at(1, 0) = t;
            let mut phi1 = phi_functions(&matrix).phi1;
            assert!((*phi1.at(0, 0) - t.sin() / t).abs() < 1e-14);
            assert!((*phi1.at(1, 0) - (1.0 - t.cos()) / t).abs() < 1e-14);
        }
    }

    #[test]
    fn handles_a_matrix_without_inverse() {
        // Nilpotent: phi1 = 1 + Z/2, phi2 = 1/2 + Z/6.
        let mut matrix = Square::zeros(2);
        *matrix.at(0, 1) = 6.0;
        let mut found = phi_functions(&matrix);
        assert_close(*found.phi1.at(0, 1), 3.0);
        assert_close(*found.phi2.at(0, 1), 1.0);
        assert_close(*found.phi2.at(1, 1), 0.5);
    }
}
