//! The triangular distribution.

/// Probability below `x` under the triangular distribution from `from` to `to` with its peak at `mode` (`from <= mode <= to`,
/// `from < to`).
///
/// ```
/// assert_eq!(neap_engine::math::triangular_cdf(0.0, 1.0, 2.0, 1.0), 0.5);
/// ```
#[inline(always)]
pub fn triangular_cdf(from: f64, mode: f64, to: f64, x: f64) -> f64 {
    if x <= from {
        0.0
    } else if x >= to {
        1.0
    } else if x <= mode {
        (x - from) * (x - from) / ((to - from) * (mode - from))
    } else {
        1.0 - (to - x) * (to - x) / ((to - from) * (to - mode))
    }
}

/// Value below which the share `u` of the triangular distribution lies, the inverse of [`triangular_cdf`].
///
/// ```
/// assert_eq!(neap_engine::math::triangular_quantile(0.0, 1.0, 2.0, 0.5), 1.0);
/// ```
#[inline(always)]
pub fn triangular_quantile(from: f64, mode: f64, to: f64, u: f64) -> f64 {
    let rising = from + (u * (to - from) * (mode - from)).sqrt();
    let falling = to - ((1.0 - u) * (to - from) * (to - mode)).sqrt();
    if u < (mode - from) / (to - from) { rising } else { falling }
}
