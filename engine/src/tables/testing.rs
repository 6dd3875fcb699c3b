//! A small scenario and results made by hand, for tests of this module.

use crate::diagnostic::{Source, Span};
use crate::plan::{DEFAULT_MEMORY, Limits, Plan};
use crate::quantity::{Dimension, Exact, Unit};
use crate::run::{ArmResult, AtTime, Band, Counts, Effort, Realised, Results};
use crate::scenario::{
    Amount, AmountUnit, Arm, Covariate, Distribution, Dose, Drug, Limited, Model, Output, Parameter, Population, Role,
    Route, Scenario, Spread, Varies, Window,
};

pub(super) fn unit(text: &str, over: i64, under: i64) -> Unit {
    Unit { text: text.to_owned(), dimension: Dimension::default(), factor: Exact::new(over.into(), under.into()) }
}

fn whole(value: i64) -> Exact {
    Exact::from_integer(value.into())
}

/// Four patients, two arms, three times.
pub(super) fn scenario() -> Scenario {
    let parameter = |role, typical| Parameter {
        role,
        span: Span { start: 0, end: 0 },
        typical,
        additive: Vec::new(),
        factors: Vec::new(),
        varies: Varies::Lognormal { log_sd: 0.3 },
        low: f64::NEG_INFINITY,
        high: f64::INFINITY,
    };
    let arm = |name: &str, amount| Arm {
        name: name.to_owned(),
        doses: vec![Dose { amount: Amount::Flat(amount), route: Route::Bolus, times: vec![whole(0)] }],
    };
    Scenario {
        source: Source { name: "by hand.toml".to_owned(), text: "neap = 1\n# by hand\n".to_owned() },
        title: Some("An invented compound".to_owned()),
        question: None,
        population: Population {
            size: 4,
            seed: 41,
            covariates: vec![
                Covariate {
                    name: "weight".to_owned(),
                    unit: Some(unit("kg", 1_000_000, 1)),
                    spread: Spread::Number(Limited {
                        distribution: Distribution::Lognormal { median: 73.5, log_sd: 0.2 },
                        low: 40.0,
                        high: 140.0,
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
            ],
        },
        drug: Drug {
            name: "Compound A (invented)".to_owned(),
            model: Model::OneCompartment,
            amount_unit: AmountUnit::Milligram,
            parameters: vec![parameter(Role::Clearance, 5.0), parameter(Role::CentralVolume, 40.0)],
            correlations: Vec::new(),
        },
        arms: vec![arm("placebo", 0.0), arm("500 mg", 500.0)],
        window: Some(Window { low: Some(2.0), high: Some(8.0) }),
        between_subject: true,
        output: Output {
            times: vec![whole(0), whole(6), whole(12)],
            percentiles: vec![whole(5), whole(50), whole(95)],
            concentration: unit("mg/L", 1, 1),
            patients: false,
        },
        warnings: Vec::new(),
        defaults: Vec::new(),
    }
}

pub(super) fn results() -> Results {
    results_of(scenario())
}

pub(super) fn results_of(scenario: Scenario) -> Results {
    let plan = Plan::new(scenario, &Limits { threads: 1, memory: DEFAULT_MEMORY }).expect("one block fits");
    let arm = |name: &str, top: f64, counts: Counts| ArmResult {
        name: name.to_owned(),
        times: [0.0, 6.0, 12.0]
            .map(|time_h| AtTime {
                time_h,
                bands: [5.0, 50.0, 95.0]
                    .map(|percentile| Band {
                        percentile,
                        value: top * percentile / (100.0 + time_h),
                        mc_lower: None,
                        mc_upper: (percentile == 50.0).then_some(top),
                    })
                    .to_vec(),
                shares: Some(counts),
            })
            .to_vec(),
    };
    Results {
        plan,
        patients: 4,
        arms: vec![
            arm("placebo", 0.0, Counts { below: 4, within: 0, above: 0 }),
            arm("500 mg", 12.5, Counts { below: 1, within: 2, above: 1 }),
        ],
        population: vec![
            Realised {
                quantity: "weight".to_owned(),
                unit: "kg".to_owned(),
                statistic: "mean".to_owned(),
                asked: Some(75.0),
                realised: 74.25,
            },
            Realised {
                quantity: "clearance".to_owned(),
                unit: "L/h".to_owned(),
                statistic: "percentile 5".to_owned(),
                asked: None,
                realised: 3.5,
            },
        ],
        effort: Effort { threads: 1, passes: 1, ..Effort::default() },
    }
}
