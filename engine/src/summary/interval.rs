//! Monte Carlo intervals: Wilson for shares, order statistics for percentiles.

use crate::math::{exp, ln, normal_quantile};

/// The Wilson score interval of a share (Wilson 1927, J Am Stat Assoc 22:209-212; from memory): `successes` of `trials` at
/// confidence `level`.
///
/// Returns `(lower, upper)`, within \[0, 1\]; `(0, 1)` without trials.
///
/// ```
/// let (lower, upper) = neap_engine::summary::wilson(1, 10, 0.95);
/// assert!((lower - 0.017876213).abs() < 1e-9 && (upper - 0.404150027).abs() < 1e-9);
/// ```
pub fn wilson(successes: u64, trials: u64, level: f64) -> (f64, f64) {
    if trials == 0 {
        return (0.0, 1.0);
    }
    let (n, p) = (trials as f64, successes as f64 / trials as f64);
    let z = normal_quantile(0.5 + 0.5 * level);
    let square = z * z;
    let center = p + square / (2.0 * n);
    let half = z * (p * (1.0 - p) / n + square / (4.0 * n * n)).sqrt();
    let whole = 1.0 + square / n;
    let lower = if successes == 0 { 0.0 } else { ((center - half) / whole).max(0.0) };
    let upper = if successes == trials { 1.0 } else { ((center + half) / whole).min(1.0) };
    (lower, upper)
}

/// Ranks, counted from 1, between whose order statistics a quantile lies with at least the confidence `level`, whatever the
/// distribution (common practice; David and Nagaraja 2003, Order Statistics, section 7.1, from memory): the lower is the
/// binomial quantile at `(1 - level) / 2`, the upper that at `1 - (1 - level) / 2` plus 1. `None` where the sample is too
/// small to have the bound.
pub fn order_statistic_ranks(n: u64, p: f64, level: f64) -> (Option<u64>, Option<u64>) {
    let tail = 0.5 * (1.0 - level);
    let lower = binomial_quantile(n, p, tail);
    // Seen from the other end, so that both tails are small numbers.
    let upper = n - binomial_quantile_strict(n, 1.0 - p, tail) + 1;
    ((lower > 0).then_some(lower), (upper <= n).then_some(upper))
}

/// Smallest `k` with `P(X <= k) >= probability`, for a small probability.
fn binomial_quantile(n: u64, p: f64, probability: f64) -> u64 {
    climb(n, p, |below| below >= probability)
}

/// Smallest `k` with `P(X <= k) > probability`: what `n` minus the quantile at `1 - probability` is, with `p` mirrored.
fn binomial_quantile_strict(n: u64, p: f64, probability: f64) -> u64 {
    climb(n, p, |below| below > probability)
}

/// Smallest `k` whose `P(X <= k)` is enough; starts far below the mean and adds up terms.
fn climb(n: u64, p: f64, enough: impl Fn(f64) -> bool) -> u64 {
    let (mean, sd) = (n as f64 * p, (n as f64 * p * (1.0 - p)).sqrt());
    let mut k = (mean - 12.0 * sd).max(0.0) as u64;
    let mut term = binomial_term(n, p, k);
    let mut sum = term;
    let odds = p / (1.0 - p);
    while !enough(sum) && k < n {
        term *= (n - k) as f64 / (k + 1) as f64 * odds;
        k += 1;
        // Far below the mean a term may underflow; it is computed afresh until it does not.
        if term < 1e-290 {
            term = binomial_term(n, p, k);
        }
        sum += term;
    }
    k
}

/// Probability of `k` successes in `n` trials by the saddle-point form (Loader 2000, "Fast and accurate computation of binomial
/// probabilities"; from memory): no large numbers cancel.
fn binomial_term(n: u64, p: f64, k: u64) -> f64 {
    let (size, x, q) = (n as f64, k as f64, 1.0 - p);
    if k == 0 {
        return exp(size * ln(q));
    }
    if k == n {
        return exp(size * ln(p));
    }
    let rest = size - x;
    let exponent = stirling_error(size)
        - stirling_error(x)
        - stirling_error(rest)
        - deviance(x, size * p)
        - deviance(rest, size * q);
    exp(exponent) * (size / (std::f64::consts::TAU * x * rest)).sqrt()
}

/// `ln(n!)` less Stirling's formula for it.
fn stirling_error(n: f64) -> f64 {
    if n < 16.0 {
        let factorial = (2..=n as u64).fold(1.0, |product, k| product * k as f64);
        return ln(factorial) - (0.5 * ln(std::f64::consts::TAU * n) + n * ln(n) - n);
    }
    let square = n * n;
    (1.0 / 12.0 - (1.0 / 360.0 - (1.0 / 1260.0 - (1.0 / 1680.0) / square) / square) / square) / n
}

/// `x ln(x / mean) + mean - x`, without cancelling where the two are close.
fn deviance(x: f64, mean: f64) -> f64 {
    let difference = x - mean;
    if difference.abs() < 0.1 * (x + mean) {
        let v = difference / (x + mean);
        let mut sum = difference * v;
        let mut power = 2.0 * x * v;
        let mut denominator = 1.0;
        loop {
            power *= v * v;
            denominator += 2.0;
            let next = sum + power / denominator;
            if next == sum {
                return sum;
            }
            sum = next;
        }
    }
    x * ln(x / mean) + mean - x
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn binomial_terms_add_up_to_one() {
        for (n, p) in [(1u64, 0.5), (10, 0.05), (100, 0.5), (1000, 0.975)] {
            let sum: f64 = (0..=n).map(|k| binomial_term(n, p, k)).sum();
            assert!((sum - 1.0).abs() < 1e-13, "{n} {p}: {sum}");
        }
    }

    #[test]
    fn wilson_stays_within_the_unit_interval_at_the_ends() {
        assert_eq!(wilson(0, 10, 0.95).0, 0.0);
        assert_eq!(wilson(10, 10, 0.95).1, 1.0);
        assert_eq!(wilson(0, 0, 0.95), (0.0, 1.0));
    }

    #[test]
    fn small_samples_have_no_bound_for_extreme_percentiles() {
        assert_eq!(order_statistic_ranks(10, 0.05, 0.95).0, None);
        assert_eq!(order_statistic_ranks(10, 0.95, 0.95).1, None);
    }
}
