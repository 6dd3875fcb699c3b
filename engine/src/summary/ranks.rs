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
        Self {
            probability: p,
            at: floor.to_integer().to_u64().expect("a rank of a sample"),
            fraction: to_f64(&(place - floor)),
            lower: lower.map(|rank| rank - 1),
            upper: upper.map(|rank| rank - 1),
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
