//! The few functions that checking needs, the same on every machine.

pub(super) use crate::math::{exp, ln, normal_cdf};

/// The 95th percentile of the standard normal distribution.
pub(super) const NORMAL_95: f64 = 1.644_853_626_951_472_7;

/// `ln(1 + x)` for `x` not below 0, without losing the digits of a small one to the 1 (Kahan's correction for the rounding of
/// the sum; from memory).
pub(super) fn ln_one_plus(x: f64) -> f64 {
    let sum = 1.0 + x;
    if sum == 1.0 { x } else { ln(sum) * (x / (sum - 1.0)) }
}
