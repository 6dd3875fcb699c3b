//! What a distribution within its limits should show: mean, standard deviation, percentiles, in closed form.

use super::distribution::{Tail, lognormal_value};
use crate::math::{exp, falling1, ln, normal_between, triangular_cdf, triangular_quantile};
use crate::scenario::{Covariate, Distribution, Limited, Spread};

/// What a quantity should show, limits included.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Asked {
    /// Mean.
    pub mean: f64,
    /// Standard deviation.
    pub sd: f64,
    /// Percentiles 5, 50 and 95; `None` for a mixture over classes, which has no closed form.
    pub percentiles: Option<[f64; 3]>,
}

/// The percentiles of [`Asked`].
pub const ASKED_PERCENTILES: [f64; 3] = [0.05, 0.5, 0.95];

impl Asked {
    /// Of a numeric covariate; `None` for classes.
    pub fn of(covariate: &Covariate, all: &[Covariate]) -> Option<Self> {
        match &covariate.spread {
            Spread::Number(limited) => Some(Self::of_limited(limited)),
            Spread::ByClass { of, each } => {
                let Spread::Classes { proportions, .. } = &all[*of].spread else { return None };
                let parts: Vec<Self> = each.iter().map(Self::of_limited).collect();
                let mean = parts.iter().zip(proportions).map(|(part, p)| p * part.mean).sum::<f64>();
                let square = parts
                    .iter()
                    .zip(proportions)
                    .map(|(part, p)| p * (part.sd * part.sd + (part.mean - mean) * (part.mean - mean)))
                    .sum::<f64>();
                Some(Self { mean, sd: square.sqrt(), percentiles: None })
            }
            Spread::Classes { .. } => None,
        }
    }

    /// Of one distribution within its limits.
    pub fn of_limited(limited: &Limited) -> Self {
        let (low, high) = (limited.low, limited.high);
        let (mean, sd) = match limited.distribution {
            Distribution::Fixed { value } => (value, 0.0),
            Distribution::Normal { mean, sd } => {
                let (center, spread) = truncated_normal((low - mean) / sd, (high - mean) / sd);
                (mean + sd * center, sd * spread)
            }
            Distribution::Lognormal { median, log_sd } => truncated_lognormal(median, log_sd, low, high),
            Distribution::Uniform { from, to } => {
                let (from, to) = (from.max(low), to.min(high));
                (0.5 * (from + to), (to - from) / 12f64.sqrt())
            }
            Distribution::Triangular { from, mode, to } => triangular(from, mode, to, low, high),
        };
        Self { mean, sd, percentiles: Some(ASKED_PERCENTILES.map(|p| quantile(limited, p))) }
    }
}

/// Value below which the share `p` lies, limits included.
pub fn quantile(limited: &Limited, p: f64) -> f64 {
    let (low, high) = (limited.low, limited.high);
    let inside = |a: f64, b: f64| {
        let mut row = crate::math::Row::splat(p);
        Tail::between(a, b).deviates(&mut row);
        row[0]
    };
    let value = match limited.distribution {
        Distribution::Fixed { value } => value,
        Distribution::Normal { mean, sd } => mean + sd * inside((low - mean) / sd, (high - mean) / sd),
        Distribution::Lognormal { median, log_sd } => {
            let (a, b) = log_limits(median, log_sd, low, high);
            lognormal_value(median, log_sd, inside(a, b))
        }
        Distribution::Uniform { from, to } => {
            let (from, to) = (from.max(low), to.min(high));
            from + p * (to - from)
        }
        Distribution::Triangular { from, mode, to } => {
            let start = triangular_cdf(from, mode, to, low);
            let u = start + p * (triangular_cdf(from, mode, to, high) - start);
            triangular_quantile(from, mode, to, u)
        }
    };
    value.clamp(low, high)
}

fn log_limits(median: f64, log_sd: f64, low: f64, high: f64) -> (f64, f64) {
    let a = if low <= 0.0 { f64::NEG_INFINITY } else { ln(low / median) / log_sd };
    let b = if high == f64::INFINITY { f64::INFINITY } else { ln(high / median) / log_sd };
    (a, b)
}

/// Standard normal density, zero at the infinities.
fn density(z: f64) -> f64 {
    exp(-0.5 * z * z) * 0.398_942_280_401_432_7
}

/// Mean and standard deviation of the standard normal between `a` and `b` (Johnson, Kotz, Balakrishnan 1994, section
/// 13.10.1; from memory).
fn truncated_normal(a: f64, b: f64) -> (f64, f64) {
    let mass = normal_between(a, b);
    let (at_a, at_b) = (density(a), density(b));
    let mean = (at_a - at_b) / mass;
    let edge = |z: f64, d: f64| if z.is_finite() { z * d } else { 0.0 };
    let variance = 1.0 + (edge(a, at_a) - edge(b, at_b)) / mass - mean * mean;
    (mean, variance.max(0.0).sqrt())
}

/// Mean and standard deviation of a log-normal within limits: `E[X^k] = median^k exp(k^2 s^2 / 2) P(a - k s < Z < b - k s) /
/// P(a < Z < b)`.
fn truncated_lognormal(median: f64, log_sd: f64, low: f64, high: f64) -> (f64, f64) {
    let (a, b) = log_limits(median, log_sd, low, high);
    let mass = normal_between(a, b);
    let square = log_sd * log_sd;
    if a == f64::NEG_INFINITY && b == f64::INFINITY {
        // exp(s^2) - 1 = s^2 exp(s^2) (1 - exp(-s^2)) / s^2, which does not cancel where the spread is small.
        return (median * exp(0.5 * square), median * exp(square) * log_sd * falling1(square).sqrt());
    }
    let mean = median * exp(0.5 * square) * normal_between(a - log_sd, b - log_sd) / mass;
    let second = median * median * exp(2.0 * square) * normal_between(a - 2.0 * log_sd, b - 2.0 * log_sd) / mass;
    (mean, (second - mean * mean).max(0.0).sqrt())
}

/// Mean and standard deviation of a triangular distribution within limits, by the moments of its two straight pieces.
fn triangular(from: f64, mode: f64, to: f64, low: f64, high: f64) -> (f64, f64) {
    let mut moments = [0.0; 3];
    // The density on each piece is slope * (x - origin).
    let pieces =
        [(from, mode, 2.0 / ((to - from) * (mode - from)), from), (mode, to, -2.0 / ((to - from) * (to - mode)), to)];
    for (start, end, slope, origin) in pieces {
        let (start, end) = (start.max(low), end.min(high));
        if start < end {
            for (power, moment) in moments.iter_mut().enumerate() {
                *moment += slope * (piece(end, origin, power) - piece(start, origin, power));
            }
        }
    }
    let mean = moments[1] / moments[0];
    (mean, (moments[2] / moments[0] - mean * mean).max(0.0).sqrt())
}

/// Integral of `x^power (x - origin)`.
fn piece(x: f64, origin: f64, power: usize) -> f64 {
    match power {
        0 => x * x / 2.0 - origin * x,
        1 => x * x * x / 3.0 - origin * x * x / 2.0,
        _ => x * x * x * x / 4.0 - origin * x * x * x / 3.0,
    }
}
