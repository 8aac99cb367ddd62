//! Exact sums of products of three `f32` values, for the sign of a proof.
//!
//! Contract: every finite `f32` is an integer times a power of two, so a sum of
//! triple products is one big integer times 2^-450. Nothing is ever rounded.

/// Bits in a limb.
const LIMB: i32 = 32;
/// The least triple product of subnormals is 2^-447.
const LOWEST: i32 = -450;
/// Enough for 2^-450 to 2^400 and carries.
const LIMBS: usize = 30;

/// Mantissa and exponent of a finite value: `mantissa * 2^exponent`.
fn parts(x: f32) -> (i128, i32) {
    assert!(x.is_finite());
    let bits = x.to_bits();
    let (field, rest) = (((bits >> 23) & 0xff) as i32, i128::from(bits & 0x7f_ffff));
    let (mantissa, exponent) =
        if field == 0 { (rest, -149) } else { (rest | 1 << 23, field - 150) };
    (if bits >> 31 == 1 { -mantissa } else { mantissa }, exponent)
}

/// Sign of the exact sum of the products.
pub fn sign(terms: &[[f32; 3]]) -> i32 {
    let mut limbs = [0_i128; LIMBS];
    for term in terms {
        let [(a, p), (b, q), (c, r)] = term.map(parts);
        let place = p + q + r - LOWEST;
        // 72 bits of product and 31 of shift fit 128 with room for many terms.
        limbs[(place / LIMB) as usize] += (a * b * c) << (place % LIMB);
    }
    for low in 0..LIMBS - 1 {
        let carry = limbs[low] >> LIMB;
        limbs[low] -= carry << LIMB;
        limbs[low + 1] += carry;
    }
    let top = limbs[LIMBS - 1];
    if top < 0 { -1 } else { i32::from(limbs.iter().any(|&limb| limb > 0)) }
}

#[cfg(test)]
mod tests {
    use super::sign;

    #[test]
    fn sees_what_rounding_hides() {
        let (big, tiny) = (1e30_f32, 1e-30_f32);
        assert_eq!(sign(&[[big, big, 1.0], [-big, big, 1.0], [tiny, tiny, tiny]]), 1);
        assert_eq!(sign(&[[big, big, 1.0], [-big, big, 1.0], [-tiny, tiny, tiny]]), -1);
        assert_eq!(sign(&[[0.1, 0.3, 7.0], [-0.3, 0.1, 7.0]]), 0);
        assert_eq!(sign(&[[0.1, 10.0, 1.0], [-1.0, 1.0, 1.0]]), 1);
    }
}
