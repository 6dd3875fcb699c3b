//! Individual parameters: typical value, covariate effects and the random part, lane by lane.
//!
//! `value = (typical + additive terms) x linear and class factors x exp(power and exponential effects + random)`: all
//! that is a product of powers is added up on the log scale first, so a parameter costs one exponential a patient.

use multiversion::multiversion;
use nalgebra::DMatrix;

use crate::draw::Stream;
use crate::math::{LANES, Row, exp, exp_row, ln, ln_row, normal_cdf, normal_quantile, normal_quantile_row};
use crate::scenario::{Drug, Factor, Parameter, Role, Scenario, Varies};

/// No parameter is larger, and no volume smaller than its inverse: squares of rates, and concentrations, stay finite.
const FARTHEST: f64 = 1e75;

/// Draws the parameters of any block of patients.
#[derive(Debug)]
pub struct Individuals {
    parameters: Vec<Parameter>,
    /// One stream a parameter; `None` where nothing is random.
    streams: Vec<Option<Stream>>,
    /// For each parameter, how it mixes the independent deviates of those declared before it and its own: rows of the
    /// Cholesky factor of the correlation matrix, in file order, so that adding a parameter moves none before it.
    mixes: Vec<Vec<(usize, f64)>>,
    /// Covariates whose logarithm some power effect needs.
    logs: Vec<usize>,
}

impl Individuals {
    /// Prepares the parameters of a scenario's drug.
    ///
    /// # Panics
    /// If the correlations are not positive definite, which the scenario's check refuses.
    pub fn new(scenario: &Scenario, cohort: u32) -> Self {
        let drug = &scenario.drug;
        let parameters: Vec<Parameter> = drug
            .parameters
            .iter()
            .cloned()
            .map(|mut parameter| {
                if !scenario.between_subject {
                    parameter.varies = Varies::Not;
                }
                parameter
            })
            .collect();
        let streams = parameters
            .iter()
            .map(|parameter| {
                (parameter.varies != Varies::Not).then(|| {
                    let path = format!("drug.parameter.{}", parameter.role.name(drug.model));
                    Stream::new(scenario.population.seed, cohort, &path)
                })
            })
            .collect();
        let mut logs: Vec<usize> = parameters
            .iter()
            .flat_map(|parameter| &parameter.factors)
            .filter_map(|factor| match factor {
                Factor::Power { covariate, .. } => Some(*covariate),
                _ => None,
            })
            .collect();
        logs.sort_unstable();
        logs.dedup();
        Self { mixes: mixes(drug, parameters.len()), parameters, streams, logs }
    }

    /// How many parameters there are.
    pub fn len(&self) -> usize {
        self.parameters.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.parameters.is_empty()
    }

    /// Index of the parameter with this role.
    pub fn index(&self, role: Role) -> Option<usize> {
        self.parameters.iter().position(|parameter| parameter.role == role)
    }

    /// Rows of scratch that [`Individuals::fill`] wants.
    pub fn scratch(&self) -> usize {
        self.parameters.len() + self.logs.len()
    }

    /// Fills one row a parameter for the block whose first patient is `first`.
    ///
    /// # Panics
    /// If `rows` or `scratch` has another length than [`Individuals::len`] or [`Individuals::scratch`].
    pub fn fill(&self, first: u64, covariates: &[Row], rows: &mut [Row], scratch: &mut [Row]) {
        assert_eq!((rows.len(), scratch.len()), (self.len(), self.scratch()), "rows and scratch as asked");
        let (deviates, logs) = scratch.split_at_mut(self.parameters.len());
        for (log, &covariate) in logs.iter_mut().zip(&self.logs) {
            *log = covariates[covariate];
            ln_row(log);
        }
        for (deviate, stream) in deviates.iter_mut().zip(&self.streams) {
            if let Some(stream) = stream {
                stream.fill_uniform(first, 0, deviate);
                normal_quantile_row(deviate);
            }
        }
        for (index, row) in rows.iter_mut().enumerate() {
            let mut random = Row::ZERO;
            if self.streams[index].is_some() {
                match self.mixes[index].as_slice() {
                    [(own, _)] => random = deviates[*own],
                    mix => mix.iter().for_each(|&(other, weight)| add_scaled(&mut random, &deviates[other], weight)),
                }
            }
            self.one(index, covariates, logs, &random, row);
        }
    }

    /// The first of the first `count` lanes with a parameter that no body can have: below zero, a volume of zero, or so far out that
    /// what is made of it would be no number; and which parameter it is.
    pub fn impossible(&self, rows: &[Row], count: usize) -> Option<Impossible> {
        let mut first: Option<Impossible> = None;
        for (parameter, row) in self.parameters.iter().zip(rows) {
            let least = if parameter.role.is_volume() { 1.0 / FARTHEST } else { 0.0 };
            if within(row, least) {
                continue;
            }
            let lanes = &row[..count.min(first.map_or(LANES, |found| found.lane))];
            if let Some(lane) = lanes.iter().position(|value| !(least..=FARTHEST).contains(value)) {
                first = Some(Impossible { lane, role: parameter.role, value: row[lane] });
            }
        }
        first
    }

    fn one(&self, index: usize, covariates: &[Row], logs: &[Row], random: &Row, row: &mut Row) {
        let parameter = &self.parameters[index];
        let mut base = Row::splat(parameter.typical);
        for term in &parameter.additive {
            add_scaled(&mut base, &covariates[term.covariate], term.slope);
        }
        let mut exponent = Row::ZERO;
        let mut scaled = false;
        for factor in &parameter.factors {
            match *factor {
                Factor::Power { covariate, reference, exponent: power } => {
                    let log = self.logs.iter().position(|&c| c == covariate).expect("its logarithm is prepared");
                    add_shifted(&mut exponent, &logs[log], ln(reference), power);
                    scaled = true;
                }
                Factor::Exponential { covariate, reference, rate } => {
                    add_shifted(&mut exponent, &covariates[covariate], reference, rate);
                    scaled = true;
                }
                Factor::Linear { covariate, reference, slope } => {
                    for (value, c) in base.iter_mut().zip(covariates[covariate].iter()) {
                        *value *= 1.0 + slope * (c - reference);
                    }
                }
                Factor::Class { covariate, class, times } => {
                    for (value, c) in base.iter_mut().zip(covariates[covariate].iter()) {
                        *value *= if *c == class as f64 { times } else { 1.0 };
                    }
                }
            }
        }
        let limited = parameter.low != f64::NEG_INFINITY || parameter.high != f64::INFINITY;
        match parameter.varies {
            Varies::Lognormal { log_sd } if !limited => {
                add_scaled(&mut exponent, random, log_sd);
                exp_row(&mut exponent);
                multiply(&base, &exponent, row);
            }
            varies => {
                if scaled {
                    exp_row(&mut exponent);
                    let unscaled = base;
                    multiply(&unscaled, &exponent, &mut base);
                }
                for lane in 0..LANES {
                    row[lane] = individual(varies, base[lane], random[lane], parameter.low, parameter.high);
                }
            }
        }
    }
}

/// A value that no body can have.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Impossible {
    /// The patient's lane.
    pub lane: usize,
    /// The parameter.
    pub role: Role,
    /// Its value.
    pub value: f64,
}

/// Whether all lanes lie between `least`, which is not negative, and [`FARTHEST`]: their bits order as they do, and those of negative
/// values, infinities and what is not a number lie above.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn within(row: &Row, least: f64) -> bool {
    let mut most = 0;
    for value in &row.0 {
        let above = value.to_bits().wrapping_sub(least.to_bits());
        most = if above > most { above } else { most };
    }
    most <= FARTHEST.to_bits() - least.to_bits()
}

/// One value of a parameter whose random part needs more than an exponential, limits by inversion. Where covariates have led
/// below zero, or to no number, no limit mends it: that value is handed on, to be refused.
fn individual(varies: Varies, base: f64, random: f64, low: f64, high: f64) -> f64 {
    if base.is_nan() || base < 0.0 {
        return base;
    }
    let inside = |a: f64, b: f64| {
        if a == f64::NEG_INFINITY && b == f64::INFINITY { random } else { squeeze(random, a, b) }
    };
    let value = match varies {
        Varies::Not => base,
        Varies::Lognormal { log_sd } => {
            let deviate = |limit: f64| {
                if limit <= 0.0 {
                    f64::NEG_INFINITY
                } else if limit == f64::INFINITY {
                    limit
                } else {
                    ln(limit / base) / log_sd
                }
            };
            base * exp(log_sd * inside(deviate(low), deviate(high)))
        }
        Varies::Normal { cv } => {
            let sd = base * cv;
            base + sd * inside((low - base) / sd, (high - base) / sd)
        }
        Varies::LogitNormal { logit_sd } => {
            // A covariate may carry the typical fraction to 1 or beyond; there is nothing left to vary there.
            if base >= 1.0 {
                return 1.0;
            }
            let logit = |p: f64| ln(p / (1.0 - p));
            let center = logit(base);
            let deviate = |limit: f64| {
                if limit <= 0.0 {
                    f64::NEG_INFINITY
                } else if limit >= 1.0 {
                    f64::INFINITY
                } else {
                    (logit(limit) - center) / logit_sd
                }
            };
            1.0 / (1.0 + exp(-(center + logit_sd * inside(deviate(low), deviate(high)))))
        }
    };
    if value < low {
        low
    } else if value > high {
        high
    } else {
        value
    }
}

/// Limits that lie farther out than this, in standard deviations, hold too little for a probability to tell.
const FAR_OUT: f64 = 36.0;

/// Moves a standard normal deviate into the part of the distribution between `a` and `b`, keeping its rank.
fn squeeze(random: f64, a: f64, b: f64) -> f64 {
    if a > FAR_OUT {
        return far_out(normal_cdf(-random), a, b);
    }
    if b < -FAR_OUT {
        return -far_out(normal_cdf(random), -b, -a);
    }
    if a > 0.0 || (random > 0.0 && b >= 0.0) {
        // Seen from the upper tail, where probabilities are small numbers and therefore exact.
        let (far, near) = (normal_cdf(-b), normal_cdf(-a));
        -normal_quantile(far + (near - far) * normal_cdf(-random))
    } else {
        let (start, end) = (normal_cdf(a), normal_cdf(b));
        normal_quantile(start + (end - start) * normal_cdf(random))
    }
}

/// The deviate between `a`, which is far out, and `b` above which the share `above` of that part lies.
///
/// Out there a probability is its density over its deviate, and the deviate hardly changes where anything is left: the part
/// of what lies beyond `a` that lies beyond `z` is `exp((a^2 - z^2) / 2)`, to one part in `a^2`.
fn far_out(above: f64, a: f64, b: f64) -> f64 {
    let beyond = exp(0.5 * (a - b) * (a + b));
    let z = (a * a - 2.0 * ln(above + (1.0 - above) * beyond)).sqrt();
    if z < b { z } else { b }
}

/// Cholesky factor of the correlation matrix, one row a parameter; entries that are zero are left out.
fn mixes(drug: &Drug, count: usize) -> Vec<Vec<(usize, f64)>> {
    let mut matrix = DMatrix::<f64>::identity(count, count);
    for &(one, other, value) in &drug.correlations {
        matrix[(one, other)] = value;
        matrix[(other, one)] = value;
    }
    let factor =
        matrix.cholesky().expect("the scenario's check refuses correlations that are not positive definite").l();
    (0..count)
        .map(|row| {
            (0..=row).map(|column| (column, factor[(row, column)])).filter(|(_, weight)| *weight != 0.0).collect()
        })
        .collect()
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn add_scaled(sum: &mut Row, row: &Row, weight: f64) {
    for (sum, value) in sum.0.iter_mut().zip(&row.0) {
        *sum += weight * *value;
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn add_shifted(sum: &mut Row, row: &Row, origin: f64, weight: f64) {
    for (sum, value) in sum.0.iter_mut().zip(&row.0) {
        *sum += weight * (*value - origin);
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn multiply(one: &Row, other: &Row, product: &mut Row) {
    for (product, (one, other)) in product.0.iter_mut().zip(one.0.iter().zip(&other.0)) {
        *product = *one * *other;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Far outside the limits the value stands at the nearer one, and keeps its rank.
    #[test]
    fn limits_far_from_the_typical_value_hold_near_the_nearer_one() {
        let lognormal = Varies::Lognormal { log_sd: 0.001 };
        let normal = Varies::Normal { cv: 0.001 };
        for varies in [lognormal, normal] {
            for base in [1.0, 4.0, 4.7, 4.82, 4.84, 4.9] {
                let values = [-3.0, -1.0, 0.0, 1.0, 3.0].map(|random| individual(varies, base, random, 4.9, 20.0));
                assert!(values.is_sorted() && values[0] >= 4.9 && values[4] < 4.93, "{varies:?} {base}: {values:?}");
            }
            for base in [40.0, 20.9, 20.8, 20.7, 20.1] {
                let values = [-3.0, -1.0, 0.0, 1.0, 3.0].map(|random| individual(varies, base, random, 4.9, 20.0));
                assert!(values.is_sorted() && values[0] > 19.8 && values[4] <= 20.0, "{varies:?} {base}: {values:?}");
            }
        }
    }

    /// Both ways to reach far out agree where they meet: what is dropped there is one part in `a^2` of the way past the limit.
    #[test]
    fn the_far_tail_joins_the_near_one() {
        let a = FAR_OUT;
        for random in [-3.0, -1.0, 0.0, 1.0, 3.0] {
            for b in [f64::INFINITY, a + 0.05] {
                let (near, far) = (squeeze(random, a, b), far_out(normal_cdf(-random), a, b));
                assert!((near - far).abs() <= 2.0 / (a * a) * (near - a), "{random} {b}: {near} {far}");
                assert_eq!(squeeze(-random, -b, -a), -near);
            }
        }
    }

    #[test]
    fn what_covariates_made_negative_is_not_mended_by_limits() {
        for varies in [Varies::Not, Varies::Lognormal { log_sd: 0.3 }, Varies::Normal { cv: 0.3 }] {
            assert_eq!(individual(varies, -1.0, 0.5, 1.0, 2.0), -1.0, "{varies:?}");
        }
    }
}
