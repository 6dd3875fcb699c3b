//! Divided differences of `exp(-u)`: what multi-exponential kinetics is made of, equal rates and all.
//!
//! With `f(u) = exp(-u)` and `f[..]` a divided difference, [`falling1`] is `-f[0, x]`, [`falling2`] is `f[0, x, y]` and
//! [`falling3`] is `-f[0, x, y, z]`. All are positive and fall with each argument. They are the weights of a dose that
//! passes one, two, three compartments; a rate that equals another, or nearly so, needs no case of its own, and nothing
//! is divided by a difference of rates.
//!
//! Where the largest argument is large, the recurrence divides by it, and its subtraction costs less than two bits.
//! Elsewhere `f[0, x, y] = exp(-y) g[y, y - x, 0]` with `g(v) = exp(v)`, whose series has no cancellation: its terms are
//! positive. The difference of the fitted polynomial is taken by synthetic division, one Horner chain an argument. Both
//! are computed and one is selected: no branch, and a plain loop is vectorised. The edges between the two, 2 and 3, are
//! where the worst errors of both sides about agree.
//!
//! Source of the recurrence and of the series: McCurdy, Ng and Parlett 1984, Accurate computation of divided differences
//! of the exponential function, Mathematics of Computation 43:501-528 (from memory); the shift that makes every term
//! positive and the fits are ours.

use super::exp::{decay, exp};

/// Largest spread of the arguments up to which [`falling2`] takes its series.
const SERIES_2_UP_TO: f64 = 2.0;
/// Largest spread of the arguments up to which [`falling3`] takes its series.
const SERIES_3_UP_TO: f64 = 3.0;

/// `a_n / ((n + 1) (n + 2))`, where `sum a_n v^n` is the near-minimax fit of `exp(v)` on [0, 2] (error 4.3e-18).
const SERIES_2: [f64; 16] = [
    0.5,
    0.166_666_666_666_666_82,
    0.041_666_666_666_663_23,
    0.008_333_333_333_367_887,
    0.001_388_888_888_686_287_1,
    0.000_198_412_699_181_334,
    2.480_158_529_490_144e-5,
    2.755_735_669_006_422e-6,
    2.755_680_690_917_034_5e-7,
    2.505_730_615_007_474e-8,
    2.083_748_614_437_034_6e-9,
    1.627_869_205_421_800_5e-10,
    1.057_737_562_260_846_6e-11,
    1.019_594_398_274_794_7e-12,
    2.583_059_304_364_219_6e-16,
    7.755_504_319_272_184e-15,
];

/// `a_n / ((n + 1) (n + 2) (n + 3))`, where `sum a_n v^n` is the near-minimax fit of `exp(v)` on [0, 3] (error 8.8e-18).
const SERIES_3: [f64; 18] = [
    0.166_666_666_666_666_66,
    0.041_666_666_666_666_734,
    0.008_333_333_333_332_364,
    0.001_388_888_888_895_767,
    0.000_198_412_698_383_311_87,
    2.480_158_738_504_244e-5,
    2.755_731_755_279_254e-6,
    2.755_734_373_542_976_3e-7,
    2.505_183_840_625_488_8e-8,
    2.087_902_586_739_187e-9,
    1.604_436_807_139_119_2e-10,
    1.154_397_703_612_380_9e-11,
    7.366_478_995_518_359e-13,
    5.595_711_937_918_255e-14,
    1.052_450_183_731_454_8e-15,
    4.255_320_987_470_175e-16,
    -1.884_228_852_527_082_4e-17,
    1.897_426_711_051_581e-18,
];

/// `(1 - exp(-x)) / x`, given the numerator; 1 at 0.
#[inline(always)]
fn mean_of_decay(lost: f64, x: f64) -> f64 {
    if x == 0.0 { 1.0 } else { lost / x }
}

/// `-f[0, x] = (1 - exp(-x)) / x`, for `x >= 0`; 1 at 0: the mean of `exp(-t)` for t from 0 to x.
///
/// # Accuracy
/// 1.6 ulp at most in 130,000 random and adversarial points, against 200-bit arithmetic.
///
/// # Example
/// ```
/// use neap_engine::math::falling1;
///
/// assert_eq!(falling1(0.0), 1.0);
/// assert_eq!(falling1(1e-20), 1.0);
/// assert!((falling1(2.0) - 0.432_332_358_381_693_65).abs() < 1e-16);
/// ```
#[inline(always)]
pub fn falling1(x: f64) -> f64 {
    mean_of_decay(decay(x).1, x)
}

/// `exp(-x)` and [`falling1`] of `x`, for the price of one exponential.
///
/// ```
/// use neap_engine::math::{exp, exp_and_falling1, falling1};
///
/// assert_eq!(exp_and_falling1(0.7), (exp(-0.7), falling1(0.7)));
/// ```
#[inline(always)]
pub fn exp_and_falling1(x: f64) -> (f64, f64) {
    let (left, lost) = decay(x);
    (left, mean_of_decay(lost, x))
}

/// `f[0, x, y] = ((1 - exp(-y)) / y - (1 - exp(-x)) / x) / (x - y)`, for `0 <= x <= y`, y finite; 1/2 at 0.
///
/// # Accuracy
/// 4.3 ulp at most, 0.63 on average, in 100,000 random and adversarial points (equal and nearly equal arguments, the edge
/// of the series), against 200-bit arithmetic and more.
///
/// # Example
/// ```
/// use neap_engine::math::{exp, falling2};
///
/// assert_eq!(falling2(0.0, 0.0), 0.5);
/// // Equal arguments: (1 - (1 + x) exp(-x)) / x^2.
/// assert!((falling2(4.0, 4.0) - (1.0 - 5.0 * exp(-4.0)) / 16.0).abs() < 1e-16);
/// ```
#[inline(always)]
pub fn falling2(x: f64, y: f64) -> f64 {
    let gap = y - x;
    falling2_of(exp_and_falling1(x), exp_and_falling1(gap), gap, y)
}

/// [`falling2`], given [`exp_and_falling1`] of x and of the gap y - x.
#[inline(always)]
fn falling2_of(at_x: (f64, f64), at_gap: (f64, f64), gap: f64, y: f64) -> f64 {
    let apart = (at_x.1 - at_x.0 * at_gap.1) / y;
    let together = at_x.0 * at_gap.0 * rising2(gap, y);
    if y > SERIES_2_UP_TO { apart } else { together }
}

/// The second divided difference of `exp(v)` over 0, v, w.
#[inline(always)]
fn rising2(v: f64, w: f64) -> f64 {
    let mut first = SERIES_2[SERIES_2.len() - 1];
    let mut second = first;
    for &coefficient in SERIES_2.iter().rev().skip(1) {
        first = coefficient + v * first;
        second = first + w * second;
    }
    second
}

/// `-f[0, x, y, z] = (f[0, x, y] - f[x, y, z]) / z`, for `0 <= x <= y <= z`, z finite; 1/6 at 0.
///
/// # Accuracy
/// 6.6 ulp at most, 0.78 on average, in 100,000 random and adversarial points, against 200-bit arithmetic and more.
///
/// # Example
/// ```
/// use neap_engine::math::{exp, falling3};
///
/// assert_eq!(falling3(0.0, 0.0, 0.0), 1.0 / 6.0);
/// // Equal arguments: (1 - (1 + x + x^2 / 2) exp(-x)) / x^3.
/// assert!((falling3(4.0, 4.0, 4.0) - (1.0 - 13.0 * exp(-4.0)) / 64.0).abs() < 1e-16);
/// ```
#[inline(always)]
pub fn falling3(x: f64, y: f64, z: f64) -> f64 {
    let (gap_xy, gap_yz, gap_xz) = (y - x, z - y, z - x);
    let at_x = exp_and_falling1(x);
    let at_xy = exp_and_falling1(gap_xy);
    let at_yz = exp_and_falling1(gap_yz);
    let near = falling2_of(at_x, at_xy, gap_xy, y);
    let far = falling2_of(at_xy, at_yz, gap_yz, gap_xz);
    let apart = (near - at_x.0 * far) / z;
    let together = at_x.0 * at_xy.0 * at_yz.0 * rising3(gap_yz, gap_xz, z);
    if z > SERIES_3_UP_TO { apart } else { together }
}

/// The third divided difference of `exp(v)` over 0, u, v, w.
#[inline(always)]
fn rising3(u: f64, v: f64, w: f64) -> f64 {
    let mut first = SERIES_3[SERIES_3.len() - 1];
    let mut second = first;
    let mut third = first;
    for &coefficient in SERIES_3.iter().rev().skip(1) {
        first = coefficient + u * first;
        second = first + v * second;
        third = second + w * third;
    }
    third
}

/// The smaller and the larger of two numbers.
#[inline(always)]
fn ordered(a: f64, b: f64) -> (f64, f64) {
    if a < b { (a, b) } else { (b, a) }
}

/// The integral of `exp(-a s) exp(-b (h - s))` for s from 0 to h: what a unit amount that leaves one compartment with
/// rate `a` has brought, per unit of that rate, into the next, which it leaves with rate `b`, after the time `h`.
///
/// `h exp(-min(a, b) h) falling1(|a - b| h)`; any order, any equality of the rates; rates and h not negative, in units
/// whose product is 1.
///
/// # Accuracy
/// That of [`falling1`] and a few roundings, and the rounding of `min(a, b) h`, which exp magnifies to at most
/// `min(a, b) h` half-ulps.
///
/// # Example
/// ```
/// use neap_engine::math::{convolved2, exp};
///
/// let (ka, k, t) = (1.3, 0.2, 5.0);
/// let bateman = (exp(-k * t) - exp(-ka * t)) / (ka - k);
/// assert!((convolved2(ka, k, t) / bateman - 1.0).abs() < 1e-14);
/// assert_eq!(convolved2(0.2, 0.2, 5.0), 5.0 * exp(-0.2 * 5.0));
/// ```
#[inline(always)]
pub fn convolved2(a: f64, b: f64, h: f64) -> f64 {
    let (low, high) = ordered(a, b);
    h * exp(-(low * h)) * falling1((high - low) * h)
}

/// `exp(-a t)`, `exp(-b t)` and `exp(-c t)` convolved, at `h`: `h^2 exp(-min h) falling2(..)` of the differences from the
/// smallest rate, times h. Domain as [`convolved2`]; a rate of 0 is allowed and gives the integral of the other two.
///
/// # Example
/// ```
/// use neap_engine::math::convolved3;
///
/// // The triangle of 0 <= s <= t <= h has the area h^2 / 2.
/// assert_eq!(convolved3(0.0, 0.0, 0.0, 3.0), 4.5);
/// assert_eq!(convolved3(0.7, 0.1, 0.4, 3.0), convolved3(0.4, 0.7, 0.1, 3.0));
/// ```
#[inline(always)]
pub fn convolved3(a: f64, b: f64, c: f64, h: f64) -> f64 {
    let (a, b) = ordered(a, b);
    let (b, c) = ordered(b, c);
    let (a, b) = ordered(a, b);
    h * h * exp(-(a * h)) * falling2((b - a) * h, (c - a) * h)
}

/// `exp(-a t)`, `exp(-b t)`, `exp(-c t)` and `exp(-d t)` convolved, at `h`: `h^3 exp(-min h) falling3(..)` of the
/// differences from the smallest rate, times h. Domain as [`convolved2`].
///
/// # Example
/// ```
/// use neap_engine::math::convolved4;
///
/// // The tetrahedron of 0 <= r <= s <= t <= h has the volume h^3 / 6.
/// assert!((convolved4(0.0, 0.0, 0.0, 0.0, 3.0) - 4.5).abs() < 1e-15);
/// assert_eq!(convolved4(0.7, 0.1, 0.4, 0.2, 3.0), convolved4(0.2, 0.4, 0.7, 0.1, 3.0));
/// ```
#[inline(always)]
pub fn convolved4(a: f64, b: f64, c: f64, d: f64, h: f64) -> f64 {
    let (a, b) = ordered(a, b);
    let (c, d) = ordered(c, d);
    let (a, c) = ordered(a, c);
    let (b, d) = ordered(b, d);
    let (b, c) = ordered(b, c);
    h * h * h * exp(-(a * h)) * falling3((b - a) * h, (c - a) * h, (d - a) * h)
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::super::reference::{assert_within, points};
    use super::*;

    #[test]
    fn falling1_is_within_its_stated_error() {
        assert_within("falling1", 1.6, |x| falling1(x[0]));
    }

    #[test]
    fn falling2_is_within_its_stated_error() {
        assert_within("falling2", 4.3, |x| falling2(x[0], x[1]));
    }

    #[test]
    fn falling3_is_within_its_stated_error() {
        assert_within("falling3", 6.6, |x| falling3(x[0], x[1], x[2]));
    }

    /// The rounding of the products of rates and h allows min h half-ulps beside the error of the difference.
    fn assert_convolved(name: &str, error_of_difference: f64, function: impl Fn(&[f64]) -> f64) {
        for point in points(name) {
            let (h, rates) = point.arguments.split_last().expect("rates and h");
            let slowest = rates.iter().copied().fold(f64::INFINITY, f64::min);
            // In units of the last place, which is up to twice a rounding unit: each factor and product, twice its own.
            let bound = 2.0 * (error_of_difference + 4.0) + slowest * h;
            let error = point.error(function(&point.arguments));
            assert!(error <= bound, "{name}{:?}: {error} ulp", point.arguments);
        }
    }

    #[test]
    fn convolutions_are_within_their_errors() {
        assert_convolved("convolved2", 1.6, |x| convolved2(x[0], x[1], x[2]));
        assert_convolved("convolved3", 4.3, |x| convolved3(x[0], x[1], x[2], x[3]));
        assert_convolved("convolved4", 6.6, |x| convolved4(x[0], x[1], x[2], x[3], x[4]));
    }

    #[test]
    fn coincident_zeros_give_the_first_coefficients() {
        assert_eq!(falling1(0.0), 1.0);
        assert_eq!(falling2(0.0, 0.0), 0.5);
        assert_eq!(falling3(0.0, 0.0, 0.0), 1.0 / 6.0);
        assert_eq!(convolved2(0.0, 0.0, 2.0), 2.0);
    }

    #[test]
    fn far_arguments_stay_finite_and_positive() {
        for far in [50.0, 1e3, 1e10, 1e100] {
            assert_eq!(falling1(far), 1.0 / far);
            for value in [falling2(0.0, far), falling2(far, far), falling3(0.0, 0.0, far), falling3(far, far, far)] {
                assert!(value > 0.0 && value < 1.0, "{far}: {value}");
            }
        }
    }

    proptest! {
        /// A convolution does not depend on the order of its rates.
        #[test]
        fn order_of_rates_moves_no_bit(a in 0.0..9.0, b in 0.0..9.0, c in 0.0..9.0, d in 0.0..9.0, h in 0.0..9.0) {
            prop_assert_eq!(convolved2(a, b, h), convolved2(b, a, h));
            prop_assert_eq!(convolved3(a, b, c, h), convolved3(c, a, b, h));
            prop_assert_eq!(convolved3(a, b, c, h), convolved3(b, a, c, h));
            prop_assert_eq!(convolved4(a, b, c, d, h), convolved4(d, c, b, a, h));
            prop_assert_eq!(convolved4(a, b, c, d, h), convolved4(b, d, a, c, h));
        }

        /// The larger an argument, the smaller the value; up to the stated error.
        #[test]
        fn values_fall(x in 0.0..5.0, gap in 0.0..5.0, more in 0.0..5.0) {
            let slack = 1.0 + 1e-14;
            prop_assert!(falling2(x, x + gap + more) <= falling2(x, x + gap) * slack);
            prop_assert!(falling3(x, x + gap, x + gap + more) <= falling2(x, x + gap) / 3.0 * slack);
        }
    }
}
