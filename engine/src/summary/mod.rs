//! Percentiles, shares and their Monte Carlo errors. Knows no patients and no drugs.

/// The Wilson score interval of a share (Wilson 1927): `successes` of `trials` at confidence `level`.
///
/// Returns `(lower, upper)`, within \[0, 1\]; `(0, 1)` without trials.
pub fn wilson(successes: u64, trials: u64, level: f64) -> (f64, f64) {
    let _ = (successes, trials, level);
    todo!()
}
