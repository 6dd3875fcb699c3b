//! A time in h to twice the digits of a number, so that a short time between two late ones keeps its own.

use crate::quantity::{Exact, to_f64};

/// A time: the nearest number, and what it leaves out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Moment {
    near: f64,
    rest: f64,
}

impl Moment {
    /// Before everything.
    pub const NEVER: Self = Self { near: f64::NEG_INFINITY, rest: 0.0 };

    /// Of an exact time.
    pub fn new(time: &Exact) -> Self {
        let near = to_f64(time);
        let rest = Exact::from_float(near).map_or(0.0, |near| to_f64(&(time - near)));
        Self { near, rest }
    }

    /// Hours since an earlier moment, to a few units in the last place.
    #[inline(always)]
    pub fn since(self, earlier: Self) -> f64 {
        (self.near - earlier.near) + (self.rest - earlier.rest)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn seconds_late_in_a_study_keep_their_digits() {
        let hours = |numerator: i64| Exact::new(numerator.into(), 3_600_000.into());
        for late in [0, 3_600_000 * 100_000 + 1, 3_600_000 * 1_000_000_000 + 7] {
            for milliseconds in [1, 2880, 3_600_000] {
                let since = Moment::new(&hours(late + milliseconds)).since(Moment::new(&hours(late)));
                let exact = to_f64(&hours(milliseconds));
                assert!((since - exact).abs() <= 1e-15 * exact, "{milliseconds} ms after {late}: {since}");
            }
        }
        assert_eq!(Moment::new(&hours(5)).since(Moment::NEVER), f64::INFINITY);
        assert_eq!(Moment::NEVER.since(Moment::new(&hours(5))), f64::NEG_INFINITY);
    }
}
