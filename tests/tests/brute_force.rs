//! The plainest way to do it: the textbook's formulas by the machine's own functions, every value stored, a sort. Slow, and
//! independent of how the engine works.

#![expect(clippy::disallowed_methods, reason = "an independent computation uses the machine's own functions")]

use std::fmt::Write as _;

use neap_engine::math::normal_quantile;
use neap_engine::run::PatientBlock;
use neap_engine::scenario::Role;
use neap_tests::{patients, plan, run, scenario};

/// What a unit dose leaves in the central compartment, per litre: a sum of exponentials with these coefficients and rates.
struct Disposition {
    terms: Vec<(f64, f64)>,
}

impl Disposition {
    fn one(clearance: f64, volume: f64) -> Self {
        Self { terms: vec![(1.0 / volume, clearance / volume)] }
    }

    /// The textbook's two-compartment model: rates are the roots of a quadratic.
    fn two(clearance: f64, central: f64, exchange: f64, peripheral: f64) -> Self {
        let (k10, k12, k21) = (clearance / central, exchange / central, exchange / peripheral);
        let sum = k10 + k12 + k21;
        let root = (sum * sum - 4.0 * k10 * k21).sqrt();
        let (alpha, beta) = (0.5 * (sum + root), 0.5 * (sum - root));
        let fast = (alpha - k21) / (alpha - beta) / central;
        let slow = (k21 - beta) / (alpha - beta) / central;
        Self { terms: vec![(fast, alpha), (slow, beta)] }
    }

    fn sum(&self, of: impl Fn(f64) -> f64) -> f64 {
        self.terms.iter().map(|&(coefficient, rate)| coefficient * of(rate)).sum()
    }

    fn bolus(&self, t: f64) -> f64 {
        if t < 0.0 { 0.0 } else { self.sum(|k| (-k * t).exp()) }
    }

    /// At a constant rate over `length`.
    fn infusion(&self, length: f64, t: f64) -> f64 {
        if t <= 0.0 {
            return 0.0;
        }
        let ran = t.min(length);
        self.sum(|k| -(-k * ran).exp_m1() / (length * k) * (-k * (t - ran)).exp())
    }

    /// By mouth; the rates must be apart.
    fn oral(&self, ka: f64, t: f64) -> f64 {
        if t <= 0.0 { 0.0 } else { self.sum(|k| ka / (ka - k) * ((-k * t).exp() - (-ka * t).exp())) }
    }
}

const N: usize = 20_011;

const POPULATION: &str = r#"
[population.weight]
distribution = "lognormal"
mean = "75 kg"
cv = "20 %"
limits = ["40 kg", "140 kg"]

[population.sex]
distribution = "categories"
proportions = { female = 0.5, male = 0.5 }

[population.age]
distribution = "uniform"
from = "18 a"
to = "80 a"
"#;

const COMMON: &str = r#"
[drug.parameter.absorption_rate]
typical = "1.5 /h"
cv = "30 %"
[drug.parameter.lag_time]
typical = "0.4 h"
cv = "30 %"
[drug.parameter.bioavailability]
typical = "80 %"
varies = "logit-normal"
logit_sd = 0.5
"#;

const ONE: &str = r#"
[drug]
name = "invented"
model = "one-compartment"
[drug.parameter.clearance]
typical = "5 L/h"
cv = "30 %"
scale = [{ covariate = "weight", reference = "70 kg", exponent = 0.75 }]
[drug.parameter.volume]
typical = "40 L"
cv = "20 %"
[[drug.correlation]]
between = ["clearance", "volume"]
value = 0.5
"#;

const TWO: &str = r#"
[drug]
name = "invented"
model = "two-compartment"
[drug.parameter.clearance]
typical = "5 L/h"
cv = "30 %"
scale = [{ covariate = "weight", reference = "70 kg", exponent = 0.75 }]
[drug.parameter.central_volume]
typical = "20 L"
cv = "20 %"
[drug.parameter.intercompartmental_clearance]
typical = "9 L/h"
cv = "25 %"
[drug.parameter.peripheral_volume]
typical = "45 L"
cv = "30 %"
[[drug.correlation]]
between = ["clearance", "central_volume"]
value = 0.5
"#;

const ARMS: &str = r#"
[[arm]]
name = "by mouth"
[[arm.dose]]
amount = "500 mg"
route = "oral"
every = "12 h"
count = 3
[[arm.dose]]
amount = "150 mg"
route = "oral"
at = ["1 h", "1.25 h", "20 h", "40 h"]

[[arm]]
name = "into blood"
[[arm.dose]]
amount = "3 mg/kg"
per = "weight"
route = "bolus"
first_at = "1 h"
[[arm.dose]]
amount = "400 mg"
route = "infusion"
over = "4 h"
first_at = "2 h"
every = "3 h"
count = 5
[window]
low = "2 mg/L"
high = "6 mg/L"
[output]
times = ["0 h", "1 h", "1.5 h", "2 h", "2.5 h", "3 h", "7 h", "12 h", "12.2 h", "24 h", "36 h", "47 h"]
percentiles = [1, 5, 25, 50, 75, 95, 99.5]
"#;

/// Percentiles and shares by sorting every value.
///
/// The differences of exponentials above cancel where two rates are close: with rates a thousandth apart, true of all but a
/// handful of these draws, they keep 1e-12 relative; percentiles are compared at 1e-9. A count differs only where a value lies
/// within 1e-12 of an edge of the window, a coincidence of one in 10^6 for all these values together.
fn compare(drug: &str, disposition: impl Fn(&dyn Fn(Role) -> f64) -> Disposition) {
    let head = format!("neap = 1\n[population]\nsize = {N}\nseed = 11\n");
    let text = [&head, POPULATION, drug, COMMON, ARMS].concat();
    let plan = plan(scenario(&text));
    let results = run(&text);
    let all = patients(&plan);
    let bodies: Vec<Disposition> =
        (0..N).map(|i| disposition(&|role| all.parameters[plan.individuals.index(role).unwrap()][i])).collect();
    let column = |role: Role| &all.parameters[plan.individuals.index(role).expect("the drug has it")];
    let (ka, lag, fraction) = (column(Role::AbsorptionRate), column(Role::LagTime), column(Role::Bioavailability));
    let weight = &all.covariates[0];
    for (arm, found) in results.arms.iter().enumerate() {
        for at in &found.times {
            let t = at.time_h;
            let value = |i: usize| {
                let body = &bodies[i];
                if arm == 0 {
                    let swallowed = |amount: f64, times: &[f64]| {
                        times.iter().map(|dose| amount * fraction[i] * body.oral(ka[i], t - dose - lag[i])).sum::<f64>()
                    };
                    return swallowed(500.0, &[0.0, 12.0, 24.0]) + swallowed(150.0, &[1.0, 1.25, 20.0, 40.0]);
                }
                let infused = [2.0, 5.0, 8.0, 11.0, 14.0].map(|start| 400.0 * body.infusion(4.0, t - start));
                3.0 * weight[i] * body.bolus(t - 1.0) + infused.iter().sum::<f64>()
            };
            let mut values: Vec<f64> = (0..N).map(value).collect();
            values.sort_by(f64::total_cmp);
            for band in &at.bands {
                let place = (N - 1) as f64 * band.percentile / 100.0;
                let low = place.floor() as usize;
                let expected = values[low] + (place - low as f64) * (values[(low + 1).min(N - 1)] - values[low]);
                assert!(
                    (band.value - expected).abs() <= 1e-9 * expected,
                    "{} at {t} h, percentile {}: {} for {expected}",
                    found.name,
                    band.percentile,
                    band.value
                );
            }
            let shares = at.shares.expect("there is a window");
            let count = |test: fn(f64) -> bool| values.iter().filter(|&&value| test(value)).count() as u64;
            let counted = [count(|c| c < 2.0), count(|c| (2.0..=6.0).contains(&c)), count(|c| c > 6.0)];
            assert_eq!([shares.below, shares.within, shares.above], counted, "{} at {t} h", found.name);
        }
    }
}

#[test]
fn one_compartment_by_sorting_every_value() {
    compare(ONE, |of| Disposition::one(of(Role::Clearance), of(Role::CentralVolume)));
}

#[test]
fn two_compartments_by_sorting_every_value() {
    compare(TWO, |of| {
        Disposition::two(
            of(Role::Clearance),
            of(Role::CentralVolume),
            of(Role::IntercompartmentalClearance),
            of(Role::PeripheralVolume),
        )
    });
}

/// The parameters of a one-compartment drug whose clearance is described so.
fn drawn(clearance: &str, size: usize) -> PatientBlock {
    let mut text = format!("neap = 1\n[population]\nsize = {size}\nseed = 23\n{POPULATION}");
    let _ = write!(
        text,
        "[drug]\nname = \"invented\"\nmodel = \"one-compartment\"\n[drug.parameter.clearance]\n{clearance}\n\
         [drug.parameter.volume]\ntypical = \"40 L\"\n[[arm]]\nname = \"only\"\n[[arm.dose]]\namount = \"1 mg\"\n\
         route = \"bolus\"\n[output]\ntimes = [\"0 h\"]\n"
    );
    patients(&plan(scenario(&text)))
}

/// Every effect of a covariate is its formula: `(typical + additive terms) x factors`. A few roundings, and the exponential of
/// an argument below 3: 1e-14 relative.
#[test]
fn covariate_effects_are_their_formulas() {
    let all = drawn(
        "typical = \"5 L/h\"\nplus = [{ covariate = \"age\", slope = \"0.03 L/h/a\" }]\nscale = [\
         { covariate = \"weight\", reference = \"70 kg\", exponent = 0.75 },\
         { covariate = \"age\", reference = \"40 a\", rate = \"-0.01 /a\" },\
         { covariate = \"sex\", is = \"male\", times = 1.2 },\
         { covariate = \"weight\", reference = \"80 kg\", slope = \"0.002 /kg\" }]",
        5000,
    );
    let [weight, sex, age] = [&all.covariates[0], &all.covariates[1], &all.covariates[2]];
    for i in 0..all.count {
        let factors = (weight[i] / 70.0).powf(0.75)
            * (-0.01 * (age[i] - 40.0)).exp()
            * if sex[i] == 1.0 { 1.2 } else { 1.0 }
            * (1.0 + 0.002 * (weight[i] - 80.0));
        let expected = (5.0 + 0.03 * age[i]) * factors;
        let got = all.parameters[0][i];
        assert!((got - expected).abs() <= 1e-14 * expected, "patient {}: {got} for {expected}", i + 1);
    }
}

/// Two-sided normal deviate that a standard normal number leaves with probability 1e-6 (`scipy.stats.norm.isf(5e-7)`).
const ONE_IN_A_MILLION: f64 = 4.891_638_475_699_9;

/// Sampled percentiles lie between the quantiles at `p -+ z sqrt(p (1 - p) / n)`, false-alarm rate 1e-6 each.
fn percentiles(what: &str, mut values: Vec<f64>, quantile: impl Fn(f64) -> f64) {
    values.sort_by(f64::total_cmp);
    let n = values.len() as f64;
    for p in [0.01, 0.1, 0.25, 0.5, 0.75, 0.9, 0.99] {
        let half = ONE_IN_A_MILLION * (p * (1.0f64 - p) / n).sqrt() + 1.0 / n;
        let (low, high) = (quantile((p - half).max(0.0)), quantile(p + half));
        let got = values[(p * (n - 1.0)).round() as usize];
        assert!((low..=high).contains(&got), "{what}: percentile {} is {got}, not {low} to {high}", 100.0 * p);
    }
}

/// Normal, log-normal and logit-normal variability, with and without limits, against quantiles written out here. `between`
/// is the distribution function's value at the limits, by Simpson's rule on the density.
#[test]
fn parameters_vary_as_they_are_said_to() {
    const SIZE: usize = 100_000;
    let density = |z: f64| (-0.5 * z * z).exp() / (2.0 * std::f64::consts::PI).sqrt();
    let below = |z: f64| {
        let (steps, start) = (4000, -10.0);
        let h = (z - start) / f64::from(steps);
        let inner: f64 =
            (1..steps).map(|i| density(start + f64::from(i) * h) * if i % 2 == 1 { 4.0 } else { 2.0 }).sum();
        h / 3.0 * (density(start) + density(z) + inner)
    };
    let within = |low: f64, high: f64| {
        let (low, high) = (below(low), below(high));
        move |p: f64| normal_quantile(low + p * (high - low))
    };

    let values = drawn("typical = \"5 L/h\"\ncv = \"40 %\"", SIZE).parameters.swap_remove(0);
    let log_sd = (1.0f64 + 0.16).ln().sqrt();
    percentiles("log-normal", values, |p| 5.0 * (log_sd * normal_quantile(p)).exp());

    let values =
        drawn("typical = \"5 L/h\"\nlog_sd = 0.5\nlimits = [\"3 L/h\", \"7 L/h\"]", SIZE).parameters.swap_remove(0);
    assert!(values.iter().all(|value| (3.0..=7.0).contains(value)));
    let inside = within((3.0f64 / 5.0).ln() / 0.5, (7.0f64 / 5.0).ln() / 0.5);
    percentiles("log-normal within limits", values, |p| 5.0 * (0.5 * inside(p)).exp());

    let normal = "typical = \"5 L/h\"\nvaries = \"normal\"\ncv = \"30 %\"\nlimits = [\"2 L/h\", \"9 L/h\"]";
    let values = drawn(normal, SIZE).parameters.swap_remove(0);
    assert!(values.iter().all(|value| (2.0..=9.0).contains(value)));
    let inside = within(-2.0, 4.0 / 1.5);
    percentiles("normal within limits", values, |p| 5.0 + 1.5 * inside(p));
}

/// Bioavailability on the logit scale.
#[test]
fn fractions_vary_on_the_logit_scale() {
    let text = "neap = 1\n[population]\nsize = 100000\nseed = 29\n[drug]\nname = \"invented\"\nmodel = \"one-compartment\"\n\
         [drug.parameter.clearance]\ntypical = \"5 L/h\"\n[drug.parameter.volume]\ntypical = \"40 L\"\n\
         [drug.parameter.absorption_rate]\ntypical = \"1 /h\"\n[drug.parameter.bioavailability]\ntypical = \"70 %\"\n\
         varies = \"logit-normal\"\nlogit_sd = 0.8\n[[arm]]\nname = \"only\"\n[[arm.dose]]\namount = \"1 mg\"\n\
         route = \"oral\"\n[output]\ntimes = [\"1 h\"]\n";
    let values = patients(&plan(scenario(text))).parameters.swap_remove(3);
    assert!(values.iter().all(|value| *value > 0.0 && *value < 1.0));
    percentiles("logit-normal", values, |p| {
        let logit = (0.7f64 / 0.3).ln() + 0.8 * normal_quantile(p);
        1.0 / (1.0 + (-logit).exp())
    });
}

/// `between_subject = false`: everyone is typical for their covariates.
#[test]
fn without_variability_everyone_is_typical() {
    let text = format!(
        "neap = 1\n[population]\nsize = 3000\nseed = 11\n{POPULATION}{ONE}{COMMON}{ARMS}[variability]\nbetween_subject = false\n"
    );
    let all = patients(&plan(scenario(&text)));
    for i in 0..all.count {
        let expected = 5.0 * (all.covariates[0][i] / 70.0).powf(0.75);
        assert!((all.parameters[0][i] - expected).abs() <= 1e-14 * expected);
        assert_eq!(all.parameters[1][i], 40.0);
        assert!((all.parameters[4][i] - 0.8).abs() < 1e-15);
    }
}

/// What enters 100,000 h into a study, read three seconds later, is what enters at its beginning, read three seconds later. The lag
/// itself is a rounded number: three seconds after 0.1 h that is worth 2e-14, and 1e-10 is promised.
#[test]
fn a_lag_late_in_a_study_keeps_its_digits() {
    let concentration = |dose: &str, time: &str| {
        let text = format!(
            "neap = 1\n[population]\nsize = 1\nseed = 1\n[drug]\nname = \"invented\"\nmodel = \"two-compartment\"\n\
             [drug.parameter.clearance]\ntypical = \"5 L/h\"\n[drug.parameter.central_volume]\ntypical = \"40 L\"\n\
             [drug.parameter.intercompartmental_clearance]\ntypical = \"8 L/h\"\n\
             [drug.parameter.peripheral_volume]\ntypical = \"60 L\"\n[drug.parameter.absorption_rate]\n\
             typical = \"1.1 /h\"\n[drug.parameter.lag_time]\ntypical = \"0.1 h\"\n[[arm]]\nname = \"only\"\n\
             [[arm.dose]]\namount = \"100 mg\"\nroute = \"oral\"\nfirst_at = \"{dose} h\"\n[output]\n\
             times = [\"{time} h\"]\npercentiles = [50]\n"
        );
        run(&text).arms[0].times[0].bands[0].value
    };
    // Closed form for so short a time t: ka D t / V (1 - (ka + (CL + Q) / V) t / 2), whose next term is below 1e-6 of it.
    let t: f64 = 0.0008;
    let near = 1.1 * 100.0 * t / 40.0 * (1.0 - (1.1 + 13.0 / 40.0) * t / 2.0);
    let early = concentration("0", "0.1008");
    assert!((early - near).abs() < 1e-6 * near, "{early} against {near}");
    for (dose, time) in [("100000", "100000.1008"), ("99999.7", "99999.8008")] {
        let late = concentration(dose, time);
        assert!((late - early).abs() <= 1e-12 * early, "dose at {dose} h: {late} against {early}");
    }
}
