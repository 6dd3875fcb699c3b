//! The few functions that checking needs, the same on every machine.

pub(super) use crate::math::{exp, ln, normal_cdf};

/// The 95th percentile of the standard normal distribution.
pub(super) const NORMAL_95: f64 = 1.644_853_626_951_472_7;
