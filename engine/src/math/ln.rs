//! The natural logarithm: one branch-free scalar source, vectorised by the loops it is inlined into.

use multiversion::multiversion;

use super::row::{LANES, Row};

/// ln 2 in two parts; the first has 21 bits, so that its product with an exponent is exact.
const LN_2_HIGH: f64 = 0.693_146_705_627_441_4;
const LN_2_LOW: f64 = 4.749_325_039_031_672_6e-7;

const MANTISSA_BITS: u32 = 52;
const MANTISSA_MASK: u64 = (1 << MANTISSA_BITS) - 1;
const ONE_BITS: u64 = 1023 << MANTISSA_BITS;
/// sqrt(1/2): the mantissa is brought into [sqrt(1/2), sqrt(2)).
const ROOT_HALF_BITS: u64 = std::f64::consts::FRAC_1_SQRT_2.to_bits();
/// 2^52, whose mantissa holds an integer.
const INTEGER_HOLDER: f64 = 4_503_599_627_370_496.0;
/// 2^54 lifts a subnormal number into the normal range.
const LIFT: f64 = 18_014_398_509_481_984.0;

/// The natural logarithm of `x`.
#[inline(always)]
pub fn ln(x: f64) -> f64 {
    let subnormal = x < f64::MIN_POSITIVE;
    let lifted = if subnormal { x * LIFT } else { x };
    let exponent_offset = if subnormal { INTEGER_HOLDER + (1023.0 + 54.0) } else { INTEGER_HOLDER + 1023.0 };

    // lifted = 2^k (1 + f)
    let bits = lifted.to_bits().wrapping_add(ONE_BITS - ROOT_HALF_BITS);
    let k = f64::from_bits((bits >> MANTISSA_BITS) | INTEGER_HOLDER.to_bits()) - exponent_offset;
    let f = f64::from_bits((bits & MANTISSA_MASK) + ROOT_HALF_BITS) - 1.0;

    // ln(1 + f) = 2 atanh(s) = 2 s + s R(s^2), s = f / (2 + f); and 2 s = f - f^2 / 2 + s f^2 / 2.
    let s = f / (2.0 + f);
    let z = s * s;
    let w = z * z;
    let odd = z
        * (0.666_666_666_666_667
            + w * (0.285_714_286_260_032_7 + w * (0.181_828_894_556_749_47 + w * 0.146_165_854_248_886_23)));
    let even = w * (0.399_999_999_998_994_44 + w * (0.222_222_111_302_598_78 + w * 0.153_317_106_182_107_73));
    let half_square = 0.5 * f * f;
    let value = s * (half_square + (odd + even)) + k * LN_2_LOW - half_square + f + k * LN_2_HIGH;

    // Infinity and NaN give themselves.
    let value = if x < f64::INFINITY { value } else { x };
    let value = if x < 0.0 { f64::NAN } else { value };
    if x == 0.0 { f64::NEG_INFINITY } else { value }
}

/// [`ln`] of every lane.
pub fn ln_row(row: &mut Row) {
    ln_lanes(&mut row.0);
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+bmi2", "x86_64+avx2+bmi2"))]
fn ln_lanes(lanes: &mut [f64; LANES]) {
    for lane in lanes {
        *lane = ln(*lane);
    }
}
