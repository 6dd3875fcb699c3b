//! A scenario and results made by hand, for tests: twice-daily tablets of an invented compound.

use neap_engine::diagnostic::{Source, Span};
use neap_engine::plan::{DEFAULT_MEMORY, Limits, Plan};
use neap_engine::quantity::{Dimension, Exact, Unit};
use neap_engine::run::{ArmResult, AtTime, Band, Counts, Effort, Realised, Results};
use neap_engine::scenario::{
    Amount, AmountUnit, Arm, Covariate, Distribution, Dose, Drug, Echo, Factor, Limited, Model, Output, Parameter,
    Population, Role, Route, Scenario, Spread, Varies, Window,
};

use crate::printer::Look;

/// Eighty columns without colour.
pub(crate) fn look(unicode: bool) -> Look {
    Look { colour: false, unicode, width: 80 }
}

fn whole(value: u32) -> Exact {
    Exact::from_integer(value.into())
}

fn unit(text: &str) -> Unit {
    Unit { text: text.to_owned(), dimension: Dimension::default(), factor: whole(1) }
}

/// Bands that do not change over time, with evenly spread percentiles.
pub(crate) fn flat(values: &[f64], times: &[f64]) -> Vec<AtTime> {
    let percentile = |index: usize| 100.0 * (index + 1) as f64 / (values.len() + 1) as f64;
    let band =
        |(index, &value): (usize, &f64)| Band { percentile: percentile(index), value, mc_lower: None, mc_upper: None };
    let bands: Vec<Band> = values.iter().enumerate().map(band).collect();
    times.iter().map(|&time_h| AtTime { time_h, bands: bands.clone(), shares: None }).collect()
}

pub(crate) fn scenario() -> Scenario {
    let parameter = |role, typical, log_sd, factors| Parameter {
        role,
        span: Span { start: 0, end: 0 },
        typical,
        additive: Vec::new(),
        factors,
        varies: Varies::Lognormal { log_sd },
        low: f64::NEG_INFINITY,
        high: f64::INFINITY,
    };
    let arm = |name: &str, amount| Arm {
        name: name.to_owned(),
        doses: vec![Dose {
            amount: Amount::Flat(amount),
            route: Route::Oral,
            times: (0..14).map(|dose| whole(12 * dose)).collect(),
        }],
    };
    let number = |distribution| Limited { distribution, low: f64::NEG_INFINITY, high: f64::INFINITY };
    Scenario {
        source: Source { name: "tablets.toml".to_owned(), text: "neap = 1\n".to_owned() },
        title: Some("Twice-daily tablets of an invented antiseizure compound".to_owned()),
        question: Some("Which twice-daily amount keeps most adults between 2 and 8 mg/L by day 7?".to_owned()),
        population: Population {
            size: 10_000,
            seed: 41,
            covariates: vec![
                Covariate {
                    name: "weight".to_owned(),
                    unit: Some(unit("kg")),
                    spread: Spread::Number(Limited {
                        low: 40.0,
                        high: 140.0,
                        ..number(Distribution::Lognormal { median: 73.542_835_5, log_sd: 0.198_042_2 })
                    }),
                },
                Covariate {
                    name: "sex".to_owned(),
                    unit: None,
                    spread: Spread::Classes {
                        names: vec!["female".to_owned(), "male".to_owned()],
                        proportions: vec![0.5, 0.5],
                    },
                },
                Covariate {
                    name: "height".to_owned(),
                    unit: Some(unit("cm")),
                    spread: Spread::ByClass {
                        of: 1,
                        each: vec![
                            number(Distribution::Normal { mean: 163.0, sd: 7.0 }),
                            number(Distribution::Normal { mean: 176.0, sd: 7.0 }),
                        ],
                    },
                },
            ],
        },
        drug: Drug {
            name: "Compound A (invented)".to_owned(),
            model: Model::OneCompartment,
            amount_unit: AmountUnit::Milligram,
            parameters: vec![
                parameter(
                    Role::Clearance,
                    5.0,
                    0.293_560_4,
                    vec![Factor::Power { covariate: 0, reference: 70.0, exponent: 0.75 }],
                ),
                parameter(Role::CentralVolume, 60.0, 0.5, vec![Factor::Class { covariate: 1, class: 0, times: 0.85 }]),
                parameter(Role::AbsorptionRate, 1.2, 0.2, Vec::new()),
            ],
            correlations: vec![(0, 1, 0.5)],
        },
        arms: vec![arm("300 mg every 12 h", 300.0), arm("500 mg every 12 h", 500.0)],
        window: Some(Window { low: Some(2.0), high: Some(8.0) }),
        between_subject: true,
        output: Output {
            times: (0..=168).map(whole).collect(),
            percentiles: [5, 25, 50, 75, 95].map(whole).to_vec(),
            concentration: unit("mg/L"),
            patients: false,
        },
        warnings: Vec::new(),
        defaults: vec![Echo { key: "variability.between_subject".to_owned(), value: "true".to_owned() }],
    }
}

/// Bands that look like a twice-daily oral regimen: the median's curve, spread round it by factors.
pub(crate) fn results() -> Results {
    results_of(scenario())
}

/// As [`results`], for a scenario with other details.
pub(crate) fn results_of(scenario: Scenario) -> Results {
    let plan = Plan::new(scenario, &Limits { threads: 2, memory: DEFAULT_MEMORY }).expect("one block fits");
    let curve = |amount: f64, time: f64| {
        let (k, ka) = (5.0 / 60.0, 1.2);
        (0..14)
            .map(|dose| time - 12.0 * f64::from(dose))
            .filter(|since| *since > 0.0)
            .map(|since| amount / 60.0 * ka / (ka - k) * (libm::exp(-k * since) - libm::exp(-ka * since)))
            .sum::<f64>()
    };
    let at = |amount: f64, time_h: f64| {
        let median = curve(amount, time_h);
        let band = |(percentile, factor): (f64, f64)| Band {
            percentile,
            value: median * factor,
            mc_lower: Some(median * factor * 0.99),
            mc_upper: Some(median * factor * 1.01),
        };
        let below = (10_000.0 / (1.0 + median * median)) as u64;
        let above = (7.0 * median * median) as u64;
        AtTime {
            time_h,
            bands: [(5.0, 0.45), (25.0, 0.75), (50.0, 1.0), (75.0, 1.35), (95.0, 2.1)].map(band).to_vec(),
            shares: Some(Counts { below, within: 10_000 - below - above, above }),
        }
    };
    let arm = |name: &str, amount: f64| ArmResult {
        name: name.to_owned(),
        times: (0..=168).map(|hour| at(amount, f64::from(hour))).collect(),
    };
    let realised = |quantity: &str, unit: &str, statistic: &str, asked, realised| Realised {
        quantity: quantity.to_owned(),
        unit: unit.to_owned(),
        statistic: statistic.to_owned(),
        asked,
        realised,
    };
    Results {
        plan,
        patients: 10_000,
        arms: vec![arm("300 mg every 12 h", 300.0), arm("500 mg every 12 h", 500.0)],
        population: vec![
            realised("weight", "kg", "mean", Some(74.95), 74.81),
            realised("weight", "kg", "percentile 5", Some(53.1), 53.0),
            realised("weight", "kg", "percentile 95", Some(101.8), 101.4),
            realised("sex = female", "1", "share", Some(0.5), 0.503_1),
            realised("sex = male", "1", "share", Some(0.5), 0.496_9),
            realised("clearance", "L/h", "percentile 5", None, 3.1),
            realised("clearance", "L/h", "percentile 95", None, 8.6),
        ],
        effort: Effort { threads: 2, passes: 1, total: 1.25, ..Effort::default() },
    }
}
