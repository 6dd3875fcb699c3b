//! Portable mathematics: the same bits on every machine, at every vector width, debug or release.
//!
//! Scalar functions here use only `+ - * /`, square root, comparison and integer operations, never a fused
//! multiply-add, and are inlined into plain loops that are compiled for several vector widths.

mod exp;
mod falling;
mod kernel;
mod ln;
mod normal;
#[cfg(test)]
mod reference;
mod row;
mod sum;
mod triangular;

pub use exp::{decay, exp, exp_row};
pub use falling::{convolved2, convolved3, convolved4, exp_and_falling1, falling1, falling2, falling3};
pub use kernel::{Kept, Sieve, chunk_for};
pub use ln::{ln, ln_one_plus, ln_row};
pub use normal::{normal_between, normal_cdf, normal_quantile, normal_quantile_row, normal_upper_tail};
pub use row::{LANES, Row};
pub use sum::{ExactSum, SUM_WORDS};
pub use triangular::{triangular_cdf, triangular_quantile};

#[cfg(test)]
mod tests {
    use super::reference::sweep;
    use super::*;

    /// FNV-1a over the bits of a function's values, NaN as one pattern.
    fn fingerprint(function: impl Fn(f64) -> f64) -> u64 {
        sweep().into_iter().fold(0xcbf2_9ce4_8422_2325, |hash, x| {
            let value = function(x);
            let bits = if value.is_nan() { f64::NAN.to_bits() } else { value.to_bits() };
            (hash ^ bits).wrapping_mul(0x100_0000_01b3)
        })
    }

    /// A change here changes the bytes of every table: it belongs in the change log.
    #[test]
    fn bits_stay_what_they_were_on_every_machine_and_build() {
        let finite = |x: f64| if x.is_finite() { x.abs().min(1e6) } else { 1.0 };
        assert_eq!(fingerprint(exp), 0x4330_d10b_b0d2_bf10);
        assert_eq!(fingerprint(ln), 0x0ec0_01a5_9689_32ca);
        assert_eq!(fingerprint(normal_quantile), 0x618f_eb5c_3db6_f662);
        assert_eq!(fingerprint(normal_cdf), 0x2ea3_1321_c03e_133b);
        assert_eq!(fingerprint(|x| falling1(finite(x))), 0x033d_9bc7_f334_0bb9);
        assert_eq!(fingerprint(|x| convolved3(finite(x), 1.0, 0.25, 1.5)), 0xd74b_1258_0c51_9312);
        assert_eq!(fingerprint(|x| convolved4(finite(x), 1.0, 0.25, 0.25, 1.5)), 0x878c_d46c_c495_0fb2);
    }
}
