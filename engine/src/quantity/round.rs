//! The last rounding: from an exact number to the nearest double.

use num_bigint::BigUint;
use num_traits::{Signed, ToPrimitive, Zero};

use super::Exact;

/// Bits of a double's significand, the hidden one included.
const SIGNIFICAND: i64 = 53;
/// Exponent of the smallest positive double.
const LOWEST: i64 = -1074;
/// Exponent of the smallest normal double.
const LOWEST_NORMAL: i64 = -1022;

/// The double nearest to `x`, ties to even, denormals included; infinite beyond the largest double.
///
/// # Example
/// ```
/// use neap_engine::quantity::{decimal, to_f64};
/// assert_eq!(to_f64(&decimal("0.1").expect("a number")), 0.1);
/// ```
pub fn to_f64(x: &Exact) -> f64 {
    if x.is_zero() {
        return 0.0;
    }
    let magnitude = nearest(x.numer().magnitude(), x.denom().magnitude());
    if x.is_negative() { -magnitude } else { magnitude }
}

/// The double nearest to `above / below`, both positive.
fn nearest(above: &BigUint, below: &BigUint) -> f64 {
    let guess = bits(above) - bits(below);
    // The quotient lies strictly between 2^(guess - 1) and 2^(guess + 1); one comparison tells which half.
    let (left, right) = scaled(above, below, guess);
    let exponent = if left >= right { guess } else { guess - 1 };
    let last_place = (exponent - SIGNIFICAND + 1).max(LOWEST);
    if last_place > i64::from(f64::MAX_EXP) - SIGNIFICAND {
        return f64::INFINITY;
    }
    let (left, right) = scaled(above, below, last_place);
    let whole = &left / &right;
    let twice_rest = (left - &whole * &right) << 1_u8;
    let whole = whole.to_u64().unwrap_or(u64::MAX);
    let up = twice_rest > right || (twice_rest == right && whole % 2 == 1);
    // Exact: the significand fits 53 bits, and the power of two keeps it on the grid of doubles.
    (whole + u64::from(up)) as f64 * power_of_two(last_place)
}

fn bits(x: &BigUint) -> i64 {
    i64::try_from(x.bits()).unwrap_or(i64::MAX / 2)
}

/// `above` and `below` with their quotient divided by `2^exponent`.
fn scaled(above: &BigUint, below: &BigUint, exponent: i64) -> (BigUint, BigUint) {
    let by = exponent.unsigned_abs();
    if exponent >= 0 { (above.clone(), below << by) } else { (above << by, below.clone()) }
}

/// `2^exponent` for `-1074 <= exponent <= 1023`.
fn power_of_two(exponent: i64) -> f64 {
    if exponent >= LOWEST_NORMAL {
        f64::from_bits(((exponent - LOWEST_NORMAL + 1) as u64) << (SIGNIFICAND - 1))
    } else {
        f64::from_bits(1 << (exponent - LOWEST))
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::quantity::decimal;

    fn check(text: &str) {
        let ours = to_f64(&decimal(text).expect("a number"));
        let theirs: f64 = text.parse().expect("a double");
        assert_eq!(ours.to_bits(), theirs.to_bits(), "{text}");
    }

    #[test]
    fn edges_round_as_the_standard_library_does() {
        for text in [
            "1",
            "0.1",
            "9007199254740993",
            "9007199254740995",
            "9007199254740991.5",
            "1e300",
            "-1e-300",
            "2.2250738585072011e-300",
            "123456789012345678901234567890",
        ] {
            check(text);
        }
        let tiny = decimal("1e-300").expect("a number");
        assert_eq!(to_f64(&(&tiny * decimal("5e-24").expect("a number"))), f64::from_bits(1));
        assert_eq!(to_f64(&(&tiny * decimal("2e-24").expect("a number"))), 0.0);
        assert_eq!(to_f64(&(decimal("1e300").expect("a number") / tiny)), f64::INFINITY);
    }

    proptest! {
        #[test]
        fn random_decimals_round_as_the_standard_library_does(
            sign in "-?", whole in "[1-9][0-9]{0,24}", fraction in "[0-9]{1,24}", exponent in -270_i32..270,
        ) {
            check(&format!("{sign}{whole}.{fraction}e{exponent}"));
        }

        #[test]
        fn a_double_comes_back(bits in any::<u64>()) {
            let x = f64::from_bits(bits);
            prop_assume!(x.is_finite());
            let exact = Exact::from_float(x).expect("finite");
            prop_assert_eq!(to_f64(&exact), x);
        }
    }
}
