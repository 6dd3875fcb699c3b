//! One file for the inverse distribution functions: a uniform goes in, a value within the limits comes out, rising with
//! the uniform. Limits act by inversion: the uniform is squeezed into the part of the unit interval that the limits
//! leave, so nothing is drawn twice.

use multiversion::multiversion;

use crate::math::{Row, exp, exp_row, ln, normal_cdf, normal_quantile_row, triangular_cdf, triangular_quantile};
use crate::scenario::{Distribution, Limited};

/// A distribution within its limits, ready to transform uniforms.
#[derive(Clone, Copy, Debug)]
pub struct Sampler {
    shape: Shape,
    low: f64,
    high: f64,
}

#[derive(Clone, Copy, Debug)]
enum Shape {
    Fixed(f64),
    /// `center + spread z`, or `exp` of it times `scale` for the log-normal.
    Normal {
        center: f64,
        spread: f64,
        tail: Tail,
    },
    Lognormal {
        median: f64,
        log_sd: f64,
        tail: Tail,
    },
    Uniform {
        from: f64,
        width: f64,
    },
    Triangular {
        from: f64,
        mode: f64,
        to: f64,
        low: f64,
        width: f64,
    },
}

/// The part of a normal distribution that the limits leave, as probabilities seen from the nearer tail, where they are
/// small numbers and therefore exact: `probability = start + width u`, mirrored where the limits lie above the centre.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Tail {
    start: f64,
    width: f64,
    sign: f64,
}

impl Tail {
    /// The part between the standard normal deviates `low` and `high` (infinite where there is no limit).
    pub(super) fn between(low: f64, high: f64) -> Self {
        if low > 0.0 {
            // Mirrored: z = -quantile(upper tail), and the upper tail falls as the uniform rises.
            let (far, near) = (normal_cdf(-high), normal_cdf(-low));
            Self { start: near, width: far - near, sign: -1.0 }
        } else {
            let (start, end) = (normal_cdf(low), normal_cdf(high));
            Self { start, width: end - start, sign: 1.0 }
        }
    }

    /// Whether the limits leave everything.
    fn is_whole(&self) -> bool {
        self.start == 0.0 && self.width == 1.0
    }

    /// Uniforms become standard normal deviates within the limits.
    pub(super) fn deviates(&self, row: &mut Row) {
        if self.is_whole() {
            normal_quantile_row(row);
        } else {
            affine(row, self.width, self.start);
            // Rounding may reach 0 or 1, whose deviates are infinite.
            clamp(row, f64::MIN_POSITIVE, 1.0 - 0.5 * f64::EPSILON);
            normal_quantile_row(row);
            affine(row, self.sign, 0.0);
        }
    }
}

impl Sampler {
    /// Prepares a distribution within its limits.
    pub fn new(limited: &Limited) -> Self {
        let (low, high) = (limited.low, limited.high);
        let shape = match limited.distribution {
            Distribution::Fixed { value } => Shape::Fixed(value),
            Distribution::Normal { mean, sd } => {
                Shape::Normal { center: mean, spread: sd, tail: Tail::between((low - mean) / sd, (high - mean) / sd) }
            }
            Distribution::Lognormal { median, log_sd } => {
                let deviate = |limit: f64| {
                    if limit <= 0.0 { f64::NEG_INFINITY } else { ln(limit / median) / log_sd }
                };
                let high = if high == f64::INFINITY { f64::INFINITY } else { deviate(high) };
                Shape::Lognormal { median, log_sd, tail: Tail::between(deviate(low), high) }
            }
            Distribution::Uniform { from, to } => {
                let from = from.max(low);
                Shape::Uniform { from, width: to.min(high) - from }
            }
            Distribution::Triangular { from, mode, to } => {
                let start = triangular_cdf(from, mode, to, low);
                let width = triangular_cdf(from, mode, to, high) - start;
                Shape::Triangular { from, mode, to, low: start, width }
            }
        };
        Self { shape, low, high }
    }

    /// Uniforms in `row` become values.
    pub fn transform(&self, row: &mut Row) {
        match self.shape {
            Shape::Fixed(value) => *row = Row::splat(value),
            Shape::Normal { center, spread, tail } => {
                tail.deviates(row);
                affine(row, spread, center);
            }
            Shape::Lognormal { median, log_sd, tail } => {
                tail.deviates(row);
                affine(row, log_sd, 0.0);
                exp_row(row);
                affine(row, median, 0.0);
            }
            Shape::Uniform { from, width } => affine(row, width, from),
            Shape::Triangular { from, mode, to, low, width } => {
                affine(row, width, low);
                triangular(row, from, mode, to);
            }
        }
        // Rounding may step over a limit by one unit in the last place.
        clamp(row, self.low, self.high);
    }
}

/// The logarithm of the median times the exponential of the spread: used where a scalar is wanted.
pub(super) fn lognormal_value(median: f64, log_sd: f64, deviate: f64) -> f64 {
    exp(log_sd * deviate) * median
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn affine(row: &mut Row, slope: f64, intercept: f64) {
    for lane in &mut row.0 {
        *lane = *lane * slope + intercept;
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn clamp(row: &mut Row, low: f64, high: f64) {
    for lane in &mut row.0 {
        let value = *lane;
        let value = if value < low { low } else { value };
        *lane = if value > high { high } else { value };
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn triangular(row: &mut Row, from: f64, mode: f64, to: f64) {
    for lane in &mut row.0 {
        *lane = triangular_quantile(from, mode, to, *lane);
    }
}
