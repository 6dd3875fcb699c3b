//! A scenario in plain sentences: what it means and what a run would do.

use std::fmt::Write;

use neap_engine::plan::{Explanation, Plan};
use neap_engine::quantity::to_f64;
use neap_engine::run::Realised;
use neap_engine::scenario::{Covariate, Distribution, Factor, Limited, Parameter, Scenario, Spread, Varies};
use neap_engine::tables::{self, CAUTIONS, PARAMETER_UNCERTAINTY, VERSION, names};
use serde_json::{Value, json};

use crate::numbers::{about, count, counted, listed, ordinal, significant, with_unit};
use crate::size::Size;

/// Above this coefficient of variation the two forms of a log-normal spread differ enough to mislead, so both are shown.
const BOTH_FORMS_ABOVE: f64 = 0.40;

/// What `check` shows.
pub(crate) struct Checked<'a> {
    /// The plan, with the scenario.
    pub(crate) plan: &'a Plan,
    /// What the plan will do.
    pub(crate) explanation: &'a Explanation,
    /// The population as sampled.
    pub(crate) population: &'a [Realised],
    /// Patients in that sample.
    pub(crate) sampled: u64,
}

impl Checked<'_> {
    fn scenario(&self) -> &Scenario {
        self.plan.scenario()
    }

    fn realised(&self, quantity: &str, statistic: &str) -> Option<&Realised> {
        self.population.iter().find(|row| row.quantity == quantity && row.statistic == statistic)
    }

    /// The middle nine tenths of a quantity as sampled.
    fn spread(&self, quantity: &str) -> Option<String> {
        let (low, high) = (self.realised(quantity, "percentile 5")?, self.realised(quantity, "percentile 95")?);
        let unit = if low.unit == "1" { String::new() } else { format!(" {}", low.unit) };
        if low.realised == high.realised {
            return Some(format!("sampled {}{unit} for nearly everyone", significant(low.realised, 3)));
        }
        let mut text = format!(
            "sampled 5th to 95th percentile {} to {}{unit}",
            significant(low.realised, 3),
            significant(high.realised, 3)
        );
        if let Some(mean) = self.realised(quantity, "mean") {
            let _ = write!(text, ", mean {}{unit}", significant(mean.realised, 3));
            if let Some(asked) = mean.asked {
                let _ = write!(text, " (asked {}{unit})", significant(asked, 3));
            }
        }
        Some(text)
    }
}

/// The sentences for people.
pub(crate) fn text(checked: &Checked<'_>) -> String {
    let scenario = checked.scenario();
    let mut text = String::new();
    for line in [&scenario.title, &scenario.question].into_iter().flatten() {
        let _ = writeln!(text, "{line}");
    }
    if !text.is_empty() {
        text.push('\n');
    }
    population(&mut text, checked);
    drug(&mut text, checked);
    arms(&mut text, checked);
    work(&mut text, checked);
    let _ = writeln!(text, "\nDefaults that act on the numbers");
    if scenario.defaults.is_empty() {
        let _ = writeln!(text, "  none: the scenario states everything");
    }
    for default in &scenario.defaults {
        let _ = writeln!(text, "  {} = {}", default.key, default.value);
    }
    let _ = writeln!(text, "\nOf every number a run gives: {PARAMETER_UNCERTAINTY}.");
    let _ = writeln!(text, "{}", warnings(scenario.warnings.len()));
    let _ = writeln!(text, "\n{}", CAUTIONS.join("\n"));
    text
}

fn warnings(found: usize) -> String {
    match found {
        0 => "No warnings.".to_owned(),
        found => format!("{}, shown above.", counted(found as u64, "warning")),
    }
}

fn population(text: &mut String, checked: &Checked<'_>) {
    let scenario = checked.scenario();
    let population = &scenario.population;
    let sampled = if checked.sampled == population.size {
        "all of them drawn for the figures below".to_owned()
    } else {
        format!("the first {} drawn for the figures below", count(checked.sampled))
    };
    let _ = writeln!(text, "Population: {}, seed {}, {sampled}", counted(population.size, "patient"), population.seed);
    if population.covariates.is_empty() {
        let _ = writeln!(text, "  no covariates: patients differ by the random parts of the parameters only");
    }
    for covariate in &population.covariates {
        let _ = writeln!(text, "  {}: {}", covariate.name, distribution(covariate, &population.covariates));
        match &covariate.spread {
            Spread::Classes { names, .. } => {
                let shares: Vec<String> = names
                    .iter()
                    .filter_map(|class| {
                        let share = checked.realised(&format!("{} = {class}", covariate.name), "share")?;
                        Some(format!("{class} {} %", significant(100.0 * share.realised, 3)))
                    })
                    .collect();
                if !shares.is_empty() {
                    let _ = writeln!(text, "      sampled {}", listed(&shares));
                }
            }
            Spread::Number(_) | Spread::ByClass { .. } => {
                if let Some(spread) = checked.spread(&covariate.name) {
                    let _ = writeln!(text, "      {spread}");
                }
            }
        }
    }
}

/// How a covariate is distributed.
fn distribution(covariate: &Covariate, all: &[Covariate]) -> String {
    let unit = covariate.unit.as_ref().map_or("1", |unit| unit.text.as_str());
    match &covariate.spread {
        Spread::Number(one) => limited(one, unit),
        Spread::ByClass { of, each } => {
            let Spread::Classes { names, .. } = &all[*of].spread else { return "by class".to_owned() };
            let parts: Vec<String> =
                names.iter().zip(each).map(|(class, one)| format!("for {class} {}", limited(one, unit))).collect();
            format!("by {}: {}", all[*of].name, parts.join("; "))
        }
        Spread::Classes { names, proportions } => {
            let parts: Vec<String> = names
                .iter()
                .zip(proportions)
                .map(|(class, share)| format!("{class} {} %", significant(100.0 * share, 4)))
                .collect();
            listed(&parts)
        }
    }
}

/// A distribution with its limits, in words.
fn limited(one: &Limited, unit: &str) -> String {
    let show = |value: f64| with_unit(value, unit);
    let words = match one.distribution {
        Distribution::Normal { mean, sd } => format!("normal, mean {}, sd {}", show(mean), show(sd)),
        Distribution::Lognormal { median, log_sd } => format!(
            "lognormal, mean {} (median {}), {}",
            show(median * libm::exp(0.5 * log_sd * log_sd)),
            show(median),
            lognormal_spread(log_sd)
        ),
        Distribution::Uniform { from, to } => format!("uniform from {} to {}", show(from), show(to)),
        Distribution::Triangular { from, mode, to } => {
            format!("triangular from {} to {}, most likely {}", show(from), show(to), show(mode))
        }
        Distribution::Fixed { value } => format!("{} for everyone", show(value)),
    };
    words + &limits(one.low, one.high, unit)
}

/// Limits as a phrase to follow another; empty without any.
fn limits(low: f64, high: f64, unit: &str) -> String {
    let show = |value: f64| with_unit(value, unit);
    match (low.is_finite(), high.is_finite()) {
        (true, true) => format!(", between {} and {}", significant(low, 4), show(high)),
        (true, false) => format!(", at least {}", show(low)),
        (false, true) => format!(", at most {}", show(high)),
        (false, false) => String::new(),
    }
}

/// `cv = sqrt(exp(log_sd^2) - 1)`, and the log-sd too where the cv is large.
fn lognormal_spread(log_sd: f64) -> String {
    let cv = cv_of(log_sd);
    let cv_text = format!("cv {} %", significant(100.0 * cv, 3));
    if cv > BOTH_FORMS_ABOVE { format!("{cv_text} (log-sd {})", significant(log_sd, 3)) } else { cv_text }
}

fn cv_of(log_sd: f64) -> f64 {
    libm::expm1(log_sd * log_sd).sqrt()
}

fn drug(text: &mut String, checked: &Checked<'_>) {
    let scenario = checked.scenario();
    let drug = &scenario.drug;
    let model = match drug.model {
        neap_engine::scenario::Model::OneCompartment => "one compartment",
        neap_engine::scenario::Model::TwoCompartment => "two compartments",
    };
    let _ = writeln!(text, "\nDrug: {}, {model}", drug.name);
    if !scenario.between_subject {
        let _ = writeln!(text, "  between-subject variability is off: the random parts below do not act");
    }
    for parameter in &drug.parameters {
        let name = parameter.role.name(drug.model);
        let unit = parameter.role.unit();
        let typical = with_unit(parameter.typical, unit);
        let _ = writeln!(text, "  {name}: typically {typical}{}", varies(parameter, unit));
        for effect in effects(parameter, name, unit, &scenario.population.covariates) {
            let _ = writeln!(text, "      {effect}");
        }
        if let Some(spread) = checked.spread(name) {
            let _ = writeln!(text, "      {spread}");
        }
    }
    for &(one, other, value) in &drug.correlations {
        let name = |index: usize| drug.parameters[index].role.name(drug.model);
        let value = significant(value, 4);
        let _ = writeln!(text, "  random parts of {} and {}: correlation {value}", name(one), name(other));
    }
    let half_lives: Vec<String> = checked
        .explanation
        .half_lives
        .iter()
        .map(|(what, hours)| {
            let infinite = !hours.is_finite();
            if infinite { format!("{what} without end") } else { format!("{what} {} h", significant(*hours, 3)) }
        })
        .collect();
    if !half_lives.is_empty() {
        let _ = writeln!(text, "  half-lives from the typical values: {}", listed(&half_lives));
    }
}

/// The random part, as a phrase to follow the typical value.
fn varies(parameter: &Parameter, unit: &str) -> String {
    let words = match parameter.varies {
        Varies::Not => ", with no random part".to_owned(),
        Varies::Lognormal { log_sd } => format!(", log-normal between subjects, {}", lognormal_spread(log_sd)),
        Varies::Normal { cv } => format!(", normal between subjects, cv {} %", significant(100.0 * cv, 3)),
        Varies::LogitNormal { logit_sd } => {
            format!(", logit-normal between subjects, logit-sd {}", significant(logit_sd, 3))
        }
    };
    words + &limits(parameter.low, parameter.high, unit)
}

/// What covariates do to a parameter, a sentence each.
fn effects(parameter: &Parameter, name: &str, unit: &str, covariates: &[Covariate]) -> Vec<String> {
    let covariate = |index: usize| covariates[index].name.as_str();
    let unit_of = |index: usize| covariates[index].unit.as_ref().map_or("1", |unit| unit.text.as_str());
    let per = |index: usize| if unit_of(index) == "1" { "unit" } else { unit_of(index) };
    let mut sentences = Vec::new();
    for term in &parameter.additive {
        let (which, slope) = (term.covariate, with_unit(term.slope, unit));
        sentences.push(format!("plus {slope} for each {} of {}", per(which), covariate(which)));
    }
    for factor in &parameter.factors {
        sentences.push(match *factor {
            Factor::Power { covariate: which, reference, exponent: 1.0 } => {
                format!("in proportion to {}, from {}", covariate(which), with_unit(reference, unit_of(which)))
            }
            Factor::Power { covariate: which, reference, exponent } => format!(
                "with {} to the power {} from {}: twice the {0} makes {name} {} times as large",
                covariate(which),
                significant(exponent, 4),
                with_unit(reference, unit_of(which)),
                significant(libm::pow(2.0, exponent), 3),
            ),
            Factor::Linear { covariate: which, reference, slope } => format!(
                "with {}, in a straight line: {} % for each {} from {}",
                covariate(which),
                signed(100.0 * slope),
                per(which),
                with_unit(reference, unit_of(which)),
            ),
            Factor::Exponential { covariate: which, reference, rate } => format!(
                "with {}, compounding: {} % for each {} from {}",
                covariate(which),
                signed(100.0 * libm::expm1(rate)),
                per(which),
                with_unit(reference, unit_of(which)),
            ),
            Factor::Class { covariate: which, class, times } => {
                let class = match &covariates[which].spread {
                    Spread::Classes { names, .. } => names[class].as_str(),
                    Spread::Number(_) | Spread::ByClass { .. } => "that class",
                };
                format!("where {} is {class}: {} times as large", covariate(which), significant(times, 4))
            }
        });
    }
    sentences
}

fn signed(value: f64) -> String {
    if value >= 0.0 { format!("+{}", significant(value, 3)) } else { significant(value, 3) }
}

fn arms(text: &mut String, checked: &Checked<'_>) {
    let scenario = checked.scenario();
    let unit = names::amount_unit(scenario.drug.amount_unit);
    let _ = writeln!(text, "\nArms: {}, all over the same patients", scenario.arms.len());
    for arm in &checked.explanation.arms {
        let _ = writeln!(text, "  {}", arm.name);
        for row in &arm.rows {
            let _ = writeln!(text, "      {row}");
        }
        let (given, enters) = (with_unit(arm.given, unit), with_unit(arm.enters, unit));
        let _ = writeln!(
            text,
            "      a patient with average covariates is given {given} in all, of which {enters} reaches the blood"
        );
    }
    let _ = match names::window(scenario) {
        Some(window) => writeln!(text, "\nWindow: {window}; the limits belong to it"),
        None => writeln!(text, "\nWindow: none, so no shares"),
    };
    let times = &scenario.output.times;
    if let (Some(first), Some(last)) = (times.first().map(to_f64), times.last().map(to_f64)) {
        let percentiles: Vec<String> = scenario.output.percentiles.iter().map(to_f64).map(ordinal).collect();
        let _ = writeln!(
            text,
            "Output: {} from {} to {} h, {} percentile in {}",
            counted(times.len() as u64, "time"),
            significant(first, 6),
            significant(last, 6),
            listed(&percentiles),
            scenario.output.concentration.text,
        );
    }
}

fn work(text: &mut String, checked: &Checked<'_>) {
    let (explanation, limits) = (checked.explanation, checked.plan.limits());
    let _ = writeln!(text, "\nSolver: {}; {}", explanation.solver, explanation.reason);
    let _ = writeln!(
        text,
        "Work: {}, {}, {} over the population{}",
        counted(explanation.values, "value"),
        counted(explanation.shapes as u64, "dose shape"),
        match explanation.passes {
            1 => "one pass".to_owned(),
            passes => format!("{passes} passes"),
        },
        explanation.pilot.map_or_else(String::new, |pilot| format!(" after a pilot of {}", counted(pilot, "patient"))),
    );
    let _ = writeln!(
        text,
        "  {} with {}; keeps about {} of the {} it may",
        about(explanation.seconds),
        counted(limits.threads as u64, "thread"),
        Size(explanation.kept_bytes),
        Size(limits.memory),
    );
}

/// The same facts for programs.
pub(crate) fn json(checked: &Checked<'_>) -> String {
    let scenario = checked.scenario();
    let (drug, explanation, limits) = (&scenario.drug, checked.explanation, checked.plan.limits());
    let covariates = &scenario.population.covariates;
    let parameter = |parameter: &Parameter| {
        let name = parameter.role.name(drug.model);
        let unit = parameter.role.unit();
        let random = match parameter.varies {
            Varies::Not => Value::Null,
            Varies::Lognormal { log_sd } => json!({ "form": "lognormal", "log_sd": log_sd, "cv": cv_of(log_sd) }),
            Varies::Normal { cv } => json!({ "form": "normal", "cv": cv }),
            Varies::LogitNormal { logit_sd } => json!({ "form": "logit-normal", "logit_sd": logit_sd }),
        };
        json!({
            "name": name,
            "unit": unit,
            "typical": parameter.typical,
            "varies": random,
            "effects": effects(parameter, name, unit, covariates),
        })
    };
    let arm = |arm: &neap_engine::plan::ArmExplanation| json!({ "name": arm.name, "doses": arm.rows, "given": arm.given, "enters": arm.enters });
    let value = json!({
        "neap": VERSION,
        "title": scenario.title,
        "question": scenario.question,
        "patients": scenario.population.size,
        "seed": scenario.population.seed,
        "covariates": covariates.iter().map(|covariate| json!({
            "name": covariate.name,
            "unit": covariate.unit.as_ref().map(|unit| unit.text.as_str()),
            "distribution": distribution(covariate, covariates),
        })).collect::<Vec<_>>(),
        "sampled_patients": checked.sampled,
        "sampled": checked.population.iter().map(|row| json!({
            "quantity": row.quantity,
            "unit": row.unit,
            "statistic": row.statistic,
            "asked": row.asked,
            "realised": row.realised,
        })).collect::<Vec<_>>(),
        "drug": drug.name,
        "parameters": drug.parameters.iter().map(parameter).collect::<Vec<_>>(),
        "between_subject_variability": scenario.between_subject,
        "half_lives_h": explanation.half_lives.iter().map(|(what, hours)| json!({ "of": what, "hours": hours }))
            .collect::<Vec<_>>(),
        "amount_unit": names::amount_unit(drug.amount_unit),
        "arms": explanation.arms.iter().map(arm).collect::<Vec<_>>(),
        "window": names::window(scenario),
        "concentration_unit": scenario.output.concentration.text,
        "solver": { "what": explanation.solver, "why": explanation.reason },
        "work": {
            "values": explanation.values,
            "dose_shapes": explanation.shapes,
            "passes": explanation.passes,
            "pilot_patients": explanation.pilot,
            "kept_bytes": explanation.kept_bytes,
            "memory_budget_bytes": limits.memory,
            "threads": limits.threads,
            "estimated_seconds": explanation.seconds,
        },
        "defaults": scenario.defaults.iter().map(|d| json!({ "key": d.key, "value": d.value })).collect::<Vec<_>>(),
        "warnings": scenario.warnings.iter().map(|w| tables::diagnostic(&scenario.source, w)).collect::<Vec<_>>(),
        "parameter_uncertainty": PARAMETER_UNCERTAINTY,
        "cautions": CAUTIONS,
    });
    format!("{value:#}\n")
}

#[cfg(test)]
mod tests {
    use neap_engine::plan::ArmExplanation;

    use super::*;
    use crate::testing;

    fn explanation() -> Explanation {
        Explanation {
            solver: "exact: first-order flows only".to_owned(),
            reason: "Every flow is of first order, so each step is a matrix exponential.".to_owned(),
            half_lives: vec![("absorption".to_owned(), 0.578), ("elimination".to_owned(), 8.318)],
            arms: vec![ArmExplanation {
                name: "300 mg every 12 h".to_owned(),
                rows: vec!["300 mg by mouth at 0 h, then every 12 h, 14 doses, the last at 156 h".to_owned()],
                given: 4200.0,
                enters: 3360.0,
            }],
            shapes: 1,
            kept_bytes: 6 << 20,
            passes: 1,
            pilot: Some(4000),
            values: 3_380_000,
            seconds: 0.4,
        }
    }

    fn with<T>(show: impl FnOnce(&Checked<'_>) -> T) -> T {
        let results = testing::results();
        show(&Checked {
            plan: &results.plan,
            explanation: &explanation(),
            population: &results.population,
            sampled: 10_000,
        })
    }

    #[test]
    fn says_it_in_sentences() {
        let text = with(text);
        for wanted in [
            "  weight: lognormal, mean 75 kg (median 73.54 kg), cv 20 %, between 40 and 140 kg\n",
            "      sampled 5th to 95th percentile 53 to 101 kg, mean 74.8 kg (asked 75 kg)\n",
            "  sex: female 50 % and male 50 %\n      sampled female 50.3 % and male 49.7 %\n",
            "  height: by sex: for female normal, mean 163 cm, sd 7 cm; for male normal",
            "  clearance: typically 5 L/h, log-normal between subjects, cv 30 %\n",
            "with weight to the power 0.75 from 70 kg: twice the weight makes clearance 1.68 times as large\n",
            "  volume: typically 60 L, log-normal between subjects, cv 53.3 % (log-sd 0.5)\n",
            "where sex is female: 0.85 times as large",
            "random parts of clearance and volume: correlation 0.5",
            "absorption 0.578 h and elimination 8.32 h",
            "a patient with average covariates is given 4200 mg in all, of which 3360 mg reaches the blood",
            "Window: 2 to 8 mg/L",
            "169 times from 0 to 168 h, 5th, 25th, 50th, 75th and 95th percentile in mg/L",
            "one pass over the population after a pilot of 4,000 patients",
            "less than a second with 2 threads; keeps about 6MiB of the 1GiB it may",
            "variability.between_subject = true",
            "parameter uncertainty not included",
            "No warnings.",
        ] {
            assert!(text.contains(wanted), "{wanted}\n{text}");
        }
        assert!(text.ends_with(&format!("{}\n", CAUTIONS[3])));
    }

    #[test]
    fn effects_of_every_form() {
        let results = testing::results();
        let scenario = results.plan.scenario();
        let mut parameter = scenario.drug.parameters[0].clone();
        parameter.factors = vec![
            Factor::Power { covariate: 0, reference: 70.0, exponent: 1.0 },
            Factor::Linear { covariate: 0, reference: 70.0, slope: 0.02 },
            Factor::Exponential { covariate: 0, reference: 70.0, rate: -0.01 },
        ];
        parameter.additive = vec![neap_engine::scenario::Additive { covariate: 0, slope: 0.05 }];
        assert_eq!(
            effects(&parameter, "clearance", "L/h", &scenario.population.covariates),
            [
                "plus 0.05 L/h for each kg of weight",
                "in proportion to weight, from 70 kg",
                "with weight, in a straight line: +2 % for each kg from 70 kg",
                "with weight, compounding: -0.995 % for each kg from 70 kg",
            ]
        );
    }

    #[test]
    fn json_has_the_same_facts() {
        let value: Value = serde_json::from_str(&with(json)).unwrap();
        assert_eq!(value["parameters"][0]["typical"], 5.0);
        assert_eq!(value["arms"][0]["given"], 4200.0);
        assert_eq!(value["sampled"][0]["statistic"], "mean");
        assert_eq!(value["work"]["threads"], 2);
    }
}
