use neap_engine::diagnostic::*;
use neap_engine::plan::*;
use neap_engine::quantity::{Dimension, Exact, Unit};
use neap_engine::run::*;
use neap_engine::scenario::*;
fn ex(n: i64) -> Exact {
    Exact::from_integer(n.into())
}
fn lsd(cv: f64) -> f64 {
    (neap_engine::math::ln(1.0 + cv * cv)).sqrt()
}
fn main() {
    let n: u64 = std::env::args().filter_map(|a| a.parse().ok()).next().unwrap_or(1_000_000);
    let span = Span { start: 0, end: 0 };
    let par = |role, typical: f64, cv: f64, e: Option<f64>| Parameter {
        role,
        span,
        typical,
        additive: vec![],
        factors: e.map(|x| Factor::Power { covariate: 0, reference: 70.0, exponent: x }).into_iter().collect(),
        varies: Varies::Lognormal { log_sd: lsd(cv) },
        low: f64::NEG_INFINITY,
        high: f64::INFINITY,
    };
    let s = lsd(0.2);
    let median = 75.0 * neap_engine::math::exp(-s * s / 2.0);
    let unit = Unit { text: "mg/L".into(), dimension: Dimension::default(), factor: ex(1) };
    let sc = Scenario {
        source: Source { name: "w1".into(), text: String::new() },
        title: None,
        question: None,
        population: Population {
            size: n,
            seed: 1,
            covariates: vec![Covariate {
                name: "weight".into(),
                unit: Some(Unit { text: "kg".into(), dimension: Dimension::default(), factor: ex(1) }),
                spread: Spread::Number(Limited {
                    distribution: Distribution::Lognormal { median, log_sd: s },
                    low: 40.0,
                    high: 140.0,
                }),
            }],
        },
        drug: Drug {
            name: "w1".into(),
            model: Model::TwoCompartment,
            amount_unit: AmountUnit::Milligram,
            parameters: vec![
                par(Role::Clearance, 5.0, 0.3, Some(0.75)),
                par(Role::CentralVolume, 40.0, 0.2, Some(1.0)),
                par(Role::IntercompartmentalClearance, 8.0, 0.25, Some(0.75)),
                par(Role::PeripheralVolume, 60.0, 0.25, Some(1.0)),
                par(Role::AbsorptionRate, 1.1, 0.4, None),
            ],
            correlations: vec![],
        },
        arms: vec![Arm {
            name: "a".into(),
            doses: vec![Dose {
                amount: Amount::Flat(500.0),
                route: Route::Oral,
                times: (0..14).map(|i| ex(12 * i)).collect(),
            }],
        }],
        window: Some(Window { low: Some(2.0), high: Some(8.0) }),
        between_subject: true,
        output: Output {
            times: (0..169).map(ex).collect(),
            percentiles: [5, 25, 50, 75, 95].iter().map(|&p| ex(p)).collect(),
            concentration: unit,
            patients: false,
        },
        warnings: vec![],
        defaults: vec![],
    };
    let plan = Plan::new(sc, &Limits { threads: 2, memory: 1 << 30 }).unwrap();
    let pool = rayon::ThreadPoolBuilder::new().num_threads(2).build().unwrap();
    pool.install(|| {
        for i in 0..6 {
            let r = plan.run(&Watch::new()).unwrap();
            println!("{:?}", r.effort);
            if i == 0 {
                for t in [12, 84, 168] {
                    let a = &r.arms[0].times[t];
                    println!("{} {:?} {:?}", a.time_h, a.bands.iter().map(|b| b.value).collect::<Vec<_>>(), a.shares);
                }
                for p in &r.population {
                    println!("{} {} {:?} {}", p.quantity, p.statistic, p.asked, p.realised);
                }
                println!("{:?}", r.arms[0].times[168].bands);
            }
        }
    });
}
