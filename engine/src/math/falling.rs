//! Divided differences of `exp(-u)`: what multi-exponential kinetics is made of, equal rates and all.

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

/// `(1 - exp(-x)) / x`; 1 at 0.
#[inline(always)]
pub fn falling1(x: f64) -> f64 {
    mean_of_decay(decay(x).1, x)
}

/// `exp(-x)` and [`falling1`] of `x`, for the price of one exponential.
#[inline(always)]
pub fn exp_and_falling1(x: f64) -> (f64, f64) {
    let (left, lost) = decay(x);
    (left, mean_of_decay(lost, x))
}

/// The second divided difference of `exp(-u)` over 0, x, y.
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

/// Minus the third divided difference of `exp(-u)` over 0, x, y, z.
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

/// `exp(-a t)` convolved with `exp(-b t)`, at `h`.
#[inline(always)]
pub fn convolved2(a: f64, b: f64, h: f64) -> f64 {
    let (low, high) = ordered(a, b);
    h * exp(-(low * h)) * falling1((high - low) * h)
}

/// `exp(-a t)`, `exp(-b t)` and `exp(-c t)` convolved, at `h`.
#[inline(always)]
pub fn convolved3(a: f64, b: f64, c: f64, h: f64) -> f64 {
    let (a, b) = ordered(a, b);
    let (b, c) = ordered(b, c);
    let (a, b) = ordered(a, b);
    h * h * exp(-(a * h)) * falling2((b - a) * h, (c - a) * h)
}

/// `exp(-a t)`, `exp(-b t)`, `exp(-c t)` and `exp(-d t)` convolved, at `h`.
#[inline(always)]
pub fn convolved4(a: f64, b: f64, c: f64, d: f64, h: f64) -> f64 {
    let (a, b) = ordered(a, b);
    let (c, d) = ordered(c, d);
    let (a, c) = ordered(a, c);
    let (b, d) = ordered(b, d);
    let (b, c) = ordered(b, c);
    h * h * h * exp(-(a * h)) * falling3((b - a) * h, (c - a) * h, (d - a) * h)
}
