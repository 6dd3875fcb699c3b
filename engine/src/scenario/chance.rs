//! How much of a distribution its limits hold, and where its values lie: what checking needs and no more.

use super::{Distribution, Limited};
use crate::math::{exp, ln, normal_between, triangular_cdf};

/// Limits that hold less than this share of a distribution are refused.
pub(super) const LEAST_HELD: f64 = 1e-6;
/// Values further out than this many standard deviations (one in a thousand million) are not looked for.
const FAR: f64 = 6.0;

impl Limited {
    /// The share of the distribution within the limits.
    pub(super) fn held(&self) -> f64 {
        let (low, high) = (self.low, self.high);
        match self.distribution {
            Distribution::Normal { mean, sd } => normal_between((low - mean) / sd, (high - mean) / sd),
            Distribution::Lognormal { median, log_sd } => {
                let z = |x: f64| if x > 0.0 { (ln(x) - ln(median)) / log_sd } else { f64::NEG_INFINITY };
                normal_between(z(low), z(high))
            }
            Distribution::Uniform { from, to } => {
                let part = |x: f64| ((x - from) / (to - from)).clamp(0.0, 1.0);
                part(high) - part(low)
            }
            Distribution::Triangular { from, mode, to } => {
                triangular_cdf(from, mode, to, high) - triangular_cdf(from, mode, to, low)
            }
            Distribution::Fixed { value } => f64::from(u8::from(low <= value && value <= high)),
        }
    }

    /// Lowest and highest value that can occur; infinite where nothing bounds it.
    pub(super) fn support(&self) -> (f64, f64) {
        let (from, to) = match self.distribution {
            Distribution::Normal { .. } => (f64::NEG_INFINITY, f64::INFINITY),
            Distribution::Lognormal { .. } => (0.0, f64::INFINITY),
            Distribution::Uniform { from, to } | Distribution::Triangular { from, to, .. } => (from, to),
            Distribution::Fixed { value } => (value, value),
        };
        (from.max(self.low), to.min(self.high))
    }

    /// As [`Limited::support`], with far and unlikely values left out where nothing bounds them.
    pub(super) fn reach(&self) -> (f64, f64) {
        let (low, high) = self.support();
        let (near, far) = match self.distribution {
            Distribution::Normal { mean, sd } => (mean - FAR * sd, mean + FAR * sd),
            Distribution::Lognormal { median, log_sd } => (median * exp(-FAR * log_sd), median * exp(FAR * log_sd)),
            _ => (low, high),
        };
        (if low.is_finite() && low != 0.0 { low } else { low.max(near) }, if high.is_finite() { high } else { far })
    }

    /// Whether every value is above zero. A log-normal's are, although zero bounds them.
    pub(super) fn positive(&self) -> bool {
        matches!(self.distribution, Distribution::Lognormal { .. }) || self.support().0 > 0.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const OPEN: (f64, f64) = (f64::NEG_INFINITY, f64::INFINITY);

    fn limited(distribution: Distribution, (low, high): (f64, f64)) -> Limited {
        Limited { distribution, low, high }
    }

    #[test]
    fn without_limits_all_is_held() {
        for distribution in [
            Distribution::Normal { mean: 3.0, sd: 2.0 },
            Distribution::Lognormal { median: 3.0, log_sd: 0.4 },
            Distribution::Uniform { from: 1.0, to: 2.0 },
            Distribution::Triangular { from: 1.0, mode: 1.0, to: 2.0 },
            Distribution::Fixed { value: 1.0 },
        ] {
            assert_eq!(limited(distribution, OPEN).held(), 1.0, "{distribution:?}");
        }
    }

    #[test]
    fn tails_keep_their_digits() {
        let normal = Distribution::Normal { mean: 0.0, sd: 1.0 };
        let (below, above) = (limited(normal, (-9.0, -8.0)).held(), limited(normal, (8.0, 9.0)).held());
        assert!((below / above - 1.0).abs() < 1e-12);
        // Upper tail of the standard normal at 8, from tables: 6.220960574e-16; the part above 9 is 1.13e-19.
        assert!((above / 6.219_832e-16 - 1.0).abs() < 1e-6, "{above:e}");
    }

    #[test]
    fn halves_are_halves() {
        let halves = [
            limited(Distribution::Lognormal { median: 3.0, log_sd: 0.4 }, (-1.0, 3.0)),
            limited(Distribution::Triangular { from: 0.0, mode: 1.0, to: 2.0 }, (0.0, 1.0)),
            limited(Distribution::Uniform { from: 0.0, to: 2.0 }, (-5.0, 1.0)),
        ];
        for half in halves {
            assert!((half.held() - 0.5).abs() < 1e-15, "{half:?}");
        }
    }
}
