//! Portable mathematics: the same bits on every machine, at every vector width, debug or release.
//!
//! Scalar functions here use only `+ - * /`, square root, comparison and integer operations, never a fused
//! multiply-add, and are inlined into plain loops that are compiled for several vector widths.

mod exp;
mod falling;
mod kernel;
mod ln;
mod normal;
mod row;
mod sum;

pub use exp::{decay, exp, exp_row};
pub use falling::{convolved2, convolved3, convolved4, exp_and_falling1, falling1, falling2, falling3};
pub use kernel::{Kept, Sieve};
pub use ln::{ln, ln_row};
pub use normal::{normal_cdf, normal_quantile, normal_quantile_row, normal_upper_tail};
pub use row::{LANES, Row};
pub use sum::{ExactSum, SUM_WORDS};
