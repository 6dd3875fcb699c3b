//! Which order statistics a percentile and its interval need.

use num_bigint::BigInt;
use num_traits::ToPrimitive;

use super::order_statistic_ranks;
use crate::quantity::{Exact, to_f64};

/// The order statistics behind one percentile, ranks counted from 0.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ranks {
    /// Between 0 and 1.
    pub probability: f64,
    /// Rank at or below the percentile.
    pub at: u64,
    /// How far towards the next rank: Hyndman and Fan 1996 type 7, `(n - 1) p = at + fraction`.
    pub fraction: f64,
    /// Lower bound of the interval; `None` where the sample is too small.
    pub lower: Option<u64>,
    /// Upper bound of the interval.
    pub upper: Option<u64>,
}

impl Ranks {
    /// Of a percentile (between 0 and 100) among `n` values, at least one, with the interval of confidence `level`.
    ///
    /// # Panics
    /// If the percentile is outside 0 to 100 or there are no values.
    pub fn new(percentile: &Exact, n: u64, level: f64) -> Self {
        let probability = percentile / Exact::from_integer(BigInt::from(100));
        let place = &probability * Exact::from_integer(BigInt::from(n - 1));
        let floor = place.floor();
        let p = to_f64(&probability);
        let (lower, upper) = order_statistic_ranks(n, p, level);
        let at = floor.to_integer().to_u64().expect("a rank of a sample");
        let fraction = to_f64(&(place - floor));
        // Far out in a small sample the percentile lies between two order statistics of which the outer one would do as a bound.
        let next = at + u64::from(fraction > 0.0);
        Self {
            probability: p,
            at,
            fraction,
            lower: lower.map(|rank| (rank - 1).min(at)),
            upper: upper.map(|rank| (rank - 1).max(next)),
        }
    }

    /// All ranks needed, rising.
    pub fn needed(&self) -> impl Iterator<Item = u64> {
        let next = (self.fraction > 0.0).then_some(self.at + 1);
        let mut all: Vec<u64> = [self.lower, Some(self.at), next, self.upper].into_iter().flatten().collect();
        all.sort_unstable();
        all.into_iter()
    }

    /// The percentile from its two order statistics.
    pub fn interpolate(&self, at: f64, next: f64) -> f64 {
        if self.fraction > 0.0 { at + self.fraction * (next - at) } else { at }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_interval_holds_its_percentile() {
        for n in [1, 2, 3, 10, 255, 256, 257, 8193] {
            for thousandths in [1u32, 10, 2500, 5000, 50_000, 97_500, 99_990, 99_999] {
                let percentile = Exact::new(thousandths.into(), 1000.into());
                let ranks = Ranks::new(&percentile, n, 0.95);
                let next = ranks.at + u64::from(ranks.fraction > 0.0);
                assert!(ranks.lower.is_none_or(|lower| lower <= ranks.at), "{n} {thousandths}: {ranks:?}");
                assert!(ranks.upper.is_none_or(|upper| next <= upper && upper < n), "{n} {thousandths}: {ranks:?}");
            }
        }
    }
}
