//! The exponential: one branch-free scalar source, vectorised by the loops it is inlined into.

use std::f64::consts::LOG2_E;

use multiversion::multiversion;

use super::row::{LANES, Row};

/// 1.5 · 2^52. Adding it rounds to an integer (ties to even), which then stands in the low bits of the sum.
const ROUNDER: f64 = 6_755_399_441_055_744.0;
/// ln 2 in two parts; the first has 21 bits, so that its product with an exponent is exact.
const LN_2_HIGH: f64 = 0.693_146_705_627_441_4;
const LN_2_LOW: f64 = 4.749_325_039_031_672_6e-7;

const MANTISSA_BITS: u32 = 52;
const EXPONENT_BIAS: u64 = 1023;
/// 2^-512
const TINY: f64 = f64::from_bits((EXPONENT_BIAS - 512) << MANTISSA_BITS);

/// Below this the result may be subnormal, and is scaled in two steps.
const GRADUAL: f64 = -707.0;
/// exp is 0 here and below: exp(-746) < 2^-1075.
const LOWEST: f64 = -746.0;
/// exp overflows here and above: ln(2^1024) = 709.78...
const HIGHEST: f64 = 710.0;

/// `exp(x) = 2^k (1 + q)` for `LOWEST <= x <= HIGHEST`; returns k (two's complement in the low 52 bits; the bits above
/// are of no meaning) and q in [-0.293, 0.415].
#[inline(always)]
fn split(x: f64) -> (u64, f64) {
    let shifted = x * LOG2_E + ROUNDER;
    let k = shifted - ROUNDER;
    // Exact: k has 11 bits, LN_2_HIGH 21, and the difference cancels.
    let r = (x - k * LN_2_HIGH) - k * LN_2_LOW;
    (shifted.to_bits(), r + (r * r) * after_linear(r))
}

/// `(exp(r) - 1 - r) / r^2` for |r| <= ln(2) / 2. The near-minimax fit contributes 2.6e-17 to exp(r).
#[inline(always)]
fn after_linear(r: f64) -> f64 {
    let s = r * r;
    let even = 0.041_666_666_666_651_36
        + s * (0.001_388_888_890_588_154_2 + s * (2.480_153_638_869_076_6e-5 + s * 2.761_380_686_153_829e-7));
    let odd = 0.166_666_666_666_666_66
        + s * (0.008_333_333_333_332_155
            + s * (0.000_198_412_698_543_386_1 + s * (2.755_728_006_701_698e-6 + s * 2.509_555_467_711_111_2e-8)));
    0.5 + (s * even + r * odd)
}

/// `max(x, low)`, and NaN stays NaN.
#[inline(always)]
fn at_least(x: f64, low: f64) -> f64 {
    if x < low { low } else { x }
}

/// The exponential of `x`.
#[inline(always)]
pub fn exp(x: f64) -> f64 {
    let x = at_least(x, LOWEST);
    let x = if x > HIGHEST { HIGHEST } else { x };
    let (k, q) = split(x);
    let small = x < GRADUAL;
    // 2^(k-1), or 2^(k-1+512) when small; times 2 (1 + q), which is exact; then 2^-512, which rounds once.
    let bias = if small { EXPONENT_BIAS - 1 + 512 } else { EXPONENT_BIAS - 1 };
    let unscale = if small { TINY } else { 1.0 };
    let scale = f64::from_bits(k.wrapping_add(bias) << MANTISSA_BITS);
    (2.0 * (1.0 + q)) * scale * unscale
}

/// `exp(-x)` and `1 - exp(-x)`, both to full relative accuracy, for the price of one exponential.
#[inline(always)]
pub fn decay(x: f64) -> (f64, f64) {
    let x = at_least(-x, LOWEST);
    let (k, q) = split(x);
    let small = x < GRADUAL;
    let bias = if small { EXPONENT_BIAS + 512 } else { EXPONENT_BIAS };
    let unscale = if small { TINY } else { 1.0 };
    let scale = f64::from_bits(k.wrapping_add(bias) << MANTISSA_BITS);
    // The fraction lost: (1 - 2^k) - 2^k q has no cancellation: for k = 0 it is -q, else q is at most 0.415.
    let lost = if small { 1.0 } else { (1.0 - scale) - scale * q };
    ((1.0 + q) * scale * unscale, lost)
}

/// [`exp`] of every lane.
pub fn exp_row(row: &mut Row) {
    exp_lanes(&mut row.0);
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+bmi2", "x86_64+avx2+bmi2"))]
fn exp_lanes(lanes: &mut [f64; LANES]) {
    for lane in lanes {
        *lane = exp(*lane);
    }
}
