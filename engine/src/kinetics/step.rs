//! The step matrix: what of each compartment's amount is where after a step.

use multiversion::multiversion;

use super::{Rates, Structure};
use crate::math::{LANES, Row, convolved2, convolved3, exp, falling1, falling2};

/// Entries of the step matrix of a block: `cp` is the part of the peripheral amount that is central after the step, and so
/// on with `g` for the gut. Entries that a structure does not have stay untouched.
#[derive(Clone, Debug)]
pub struct Step {
    /// Central to central.
    pub cc: Row,
    /// Peripheral to central.
    pub cp: Row,
    /// Gut to central.
    pub cg: Row,
    /// Central to peripheral.
    pub pc: Row,
    /// Peripheral to peripheral.
    pub pp: Row,
    /// Gut to peripheral.
    pub pg: Row,
    /// Gut to gut.
    pub gg: Row,
}

impl Default for Step {
    fn default() -> Self {
        let zero = Row::ZERO;
        Self { cc: zero, cp: zero, cg: zero, pc: zero, pp: zero, pg: zero, gg: zero }
    }
}

impl Step {
    /// Computes the entries for a step of `h` hours, one length a lane, none negative.
    pub fn fill(&mut self, structure: &Structure, rates: &Rates, h: &Row) {
        if structure.peripheral.is_some() {
            two_compartments(rates, h, self);
            if structure.absorption_rate.is_some() {
                absorbed_by_two(rates, h, self);
            }
        } else {
            one_compartment(rates, h, self);
            if structure.absorption_rate.is_some() {
                absorbed_by_one(rates, h, self);
            }
        }
    }

    /// The entries out of the gut alone, for a dose that enters within a step at a time of each lane's own.
    pub fn fill_from_gut(&mut self, structure: &Structure, rates: &Rates, h: &Row) {
        if structure.peripheral.is_some() {
            absorbed_by_two(rates, h, self);
        } else {
            absorbed_by_one(rates, h, self);
        }
    }
}

/// What a constant input at unit rate into the central compartment leaves after it ran for some time.
#[derive(Clone, Debug)]
pub struct Infused {
    /// In the central compartment.
    pub central: Row,
    /// In the peripheral compartment.
    pub peripheral: Row,
}

impl Default for Infused {
    fn default() -> Self {
        Self { central: Row::ZERO, peripheral: Row::ZERO }
    }
}

impl Infused {
    /// Computes both for an input that ran for `h` hours.
    pub fn fill(&mut self, structure: &Structure, rates: &Rates, h: f64) {
        if structure.peripheral.is_some() {
            infused_two(rates, h, self);
        } else {
            infused_one(rates, h, self);
        }
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn one_compartment(rates: &Rates, h: &Row, step: &mut Step) {
    for lane in 0..LANES {
        step.cc.0[lane] = exp(-(rates.alpha.0[lane] * h.0[lane]));
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn absorbed_by_one(rates: &Rates, h: &Row, step: &mut Step) {
    for lane in 0..LANES {
        let (k, h) = (rates.absorption.0[lane], h.0[lane]);
        step.gg.0[lane] = exp(-(k * h));
        step.cg.0[lane] = k * convolved2(k, rates.alpha.0[lane], h);
    }
}

/// With `E(a, b) = integral of exp(-a s) exp(-b (h - s)) ds`: `cc = A exp(-alpha h) + B exp(-beta h)`, `pp` the same with A and
/// B exchanged, `cp = k21 E(alpha, beta)`, `pc = k12 E(alpha, beta)`.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn two_compartments(rates: &Rates, h: &Row, step: &mut Step) {
    for lane in 0..LANES {
        let (alpha, beta, h) = (rates.alpha.0[lane], rates.beta.0[lane], h.0[lane]);
        let (fast, slow) = (rates.fast.0[lane], rates.slow.0[lane]);
        let fading = exp(-(alpha * h));
        let lasting = exp(-(beta * h));
        let exchanged = h * lasting * falling1((alpha - beta) * h);
        step.cc.0[lane] = fast * fading + slow * lasting;
        step.pp.0[lane] = slow * fading + fast * lasting;
        step.cp.0[lane] = rates.k21.0[lane] * exchanged;
        step.pc.0[lane] = rates.k12.0[lane] * exchanged;
    }
}

/// `cg = k (A E(k, alpha) + B E(k, beta))`, `pg = k k12 E(k, alpha, beta)`.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn absorbed_by_two(rates: &Rates, h: &Row, step: &mut Step) {
    for lane in 0..LANES {
        let (k, h) = (rates.absorption.0[lane], h.0[lane]);
        let (alpha, beta) = (rates.alpha.0[lane], rates.beta.0[lane]);
        step.gg.0[lane] = exp(-(k * h));
        step.cg.0[lane] =
            k * (rates.fast.0[lane] * convolved2(k, alpha, h) + rates.slow.0[lane] * convolved2(k, beta, h));
    }
    for lane in 0..LANES {
        let (k, h) = (rates.absorption.0[lane], h.0[lane]);
        let (alpha, beta) = (rates.alpha.0[lane], rates.beta.0[lane]);
        step.pg.0[lane] = k * rates.k12.0[lane] * convolved3(k, alpha, beta, h);
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn infused_one(rates: &Rates, h: f64, infused: &mut Infused) {
    for lane in 0..LANES {
        infused.central.0[lane] = h * falling1(rates.alpha.0[lane] * h);
    }
}

/// The integrals of `cc` and `pc` over the step: a constant input is one more exponential, of rate 0.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn infused_two(rates: &Rates, h: f64, infused: &mut Infused) {
    for lane in 0..LANES {
        let (x, y) = (rates.beta.0[lane] * h, rates.alpha.0[lane] * h);
        infused.central.0[lane] = h * (rates.fast.0[lane] * falling1(y) + rates.slow.0[lane] * falling1(x));
        infused.peripheral.0[lane] = rates.k12.0[lane] * h * h * falling2(x, y);
    }
}
