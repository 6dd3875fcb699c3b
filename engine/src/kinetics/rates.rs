//! Rate constants and disposition rates of a block of patients.

use multiversion::multiversion;

use super::Structure;
use crate::math::{LANES, Row};
use crate::scenario::Role;

/// Rates of a block, one lane a patient; 1/h unless said otherwise.
///
/// With `k10 = CL/V1`, `k12 = Q/V1`, `k21 = Q/V2` the amount in the central compartment after a unit bolus is
/// `A exp(-alpha t) + B exp(-beta t)`, where `alpha + beta = k10 + k12 + k21` and `alpha beta = k10 k21` (the textbook
/// two-compartment model; common practice, no source). One compartment is the case `A = 1`, `alpha = k10` without the rest.
#[derive(Clone, Debug)]
pub struct Rates {
    /// The faster disposition rate.
    pub alpha: Row,
    /// The slower disposition rate, at most `alpha`.
    pub beta: Row,
    /// Share `A` of the faster exponential, between 0 and 1; without unit.
    pub fast: Row,
    /// Share `B = 1 - A` of the slower one, computed apart so that both keep their relative accuracy; without unit.
    pub slow: Row,
    /// Central to peripheral.
    pub k12: Row,
    /// Peripheral to central.
    pub k21: Row,
    /// Absorption.
    pub absorption: Row,
    /// 1 / central volume, 1/L.
    pub per_volume: Row,
}

impl Default for Rates {
    fn default() -> Self {
        Self {
            alpha: Row::ZERO,
            beta: Row::ZERO,
            fast: Row::ZERO,
            slow: Row::ZERO,
            k12: Row::ZERO,
            k21: Row::ZERO,
            absorption: Row::ZERO,
            per_volume: Row::ZERO,
        }
    }
}

impl Rates {
    /// Computes the rates from parameter rows, looked up by role.
    pub fn fill<'a>(&mut self, structure: &Structure, row: impl Fn(Role) -> &'a Row) {
        let (clearance, volume) = (row(structure.clearance), row(structure.central_volume));
        for lane in 0..LANES {
            self.per_volume[lane] = 1.0 / volume[lane];
        }
        if let Some(rate) = structure.absorption_rate {
            self.absorption = *row(rate);
        }
        match structure.peripheral {
            None => {
                for lane in 0..LANES {
                    self.alpha[lane] = clearance[lane] * self.per_volume[lane];
                }
                self.fast = Row::splat(1.0);
            }
            Some((exchange, peripheral)) => {
                two_compartments(clearance, row(exchange), row(peripheral), self);
            }
        }
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn two_compartments(clearance: &Row, exchange: &Row, peripheral: &Row, rates: &mut Rates) {
    for lane in 0..LANES {
        let k10 = clearance.0[lane] * rates.per_volume.0[lane];
        let k12 = exchange.0[lane] * rates.per_volume.0[lane];
        let k21 = exchange.0[lane] / peripheral.0[lane];
        let (alpha, beta, fast, slow) = disposition(k10, k12, k21);
        rates.alpha.0[lane] = alpha;
        rates.beta.0[lane] = beta;
        rates.fast.0[lane] = fast;
        rates.slow.0[lane] = slow;
        rates.k12.0[lane] = k12;
        rates.k21.0[lane] = k21;
    }
}

/// `(alpha, beta, A, B)` of two compartments, each to a few units in the last place, for any non-negative rates.
///
/// `alpha - k21` and `k21 - beta` are the numerators of A and B. One of them is half of `|d| + root` with
/// `d = k10 + k12 - k21`, a sum; the other follows from their product `k12 k21`. `beta` follows from the product
/// `alpha beta = k10 k21`. So nothing is subtracted but `d` itself, whose rounding error is far below `root`.
#[inline(always)]
fn disposition(k10: f64, k12: f64, k21: f64) -> (f64, f64, f64, f64) {
    let d = k10 + k12 - k21;
    let product = k12 * k21;
    let root = (d * d + 4.0 * product).sqrt();
    let alpha = 0.5 * ((k10 + k12 + k21) + root);
    // A patient without elimination or exchange has rates of zero; the quotients are then replaced by their limits.
    let beta = if alpha > 0.0 { k10 * k21 / alpha } else { 0.0 };
    let large = 0.5 * (d.abs() + root);
    let small = if large > 0.0 { product / large } else { 0.0 };
    let per_spread = if root > 0.0 { 1.0 / root } else { 1.0 };
    let (above, below) = if d >= 0.0 { (large, small) } else { (small, large) };
    let fast = if root > 0.0 { above * per_spread } else { 1.0 };
    (alpha, beta, fast, below * per_spread)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn disposition_rates_have_their_sum_and_product() {
        for (k10, k12, k21) in
            [(0.125, 0.2, 0.1333), (1e-6, 1e3, 1e-3), (5.0, 1e-9, 5.0), (0.0, 0.3, 0.7), (2.0, 0.0, 0.5)]
        {
            let (alpha, beta, fast, slow) = disposition(k10, k12, k21);
            assert!((alpha + beta - (k10 + k12 + k21)).abs() <= 4e-16 * alpha, "sum of {k10} {k12} {k21}");
            assert!((alpha * beta - k10 * k21).abs() <= 1e-15 * (k10 * k21), "product of {k10} {k12} {k21}");
            assert!((fast + slow - 1.0).abs() <= 4e-16 && fast >= 0.0 && slow >= 0.0);
            assert!(alpha >= beta);
        }
    }

    #[test]
    fn nothing_moves_without_rates() {
        assert_eq!(disposition(0.0, 0.0, 0.0), (0.0, 0.0, 1.0, 0.0));
    }
}
