//! The few functions that checking needs, the same on every machine.

/// The 95th percentile of the standard normal distribution.
pub(super) const NORMAL_95: f64 = 1.644_853_626_951_472_7;

/// Natural logarithm.
pub(super) fn ln(x: f64) -> f64 {
    libm::log(x)
}

/// Exponential.
pub(super) fn exp(x: f64) -> f64 {
    libm::exp(x)
}

/// The standard normal distribution function.
pub(super) fn normal_cdf(x: f64) -> f64 {
    0.5 * libm::erfc(-x * std::f64::consts::FRAC_1_SQRT_2)
}
