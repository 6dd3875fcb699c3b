//! What must not change an answer does not: threads, memory, other arms, other covariates, more patients. And laws that
//! every linear model obeys.

#![expect(clippy::print_stdout, reason = "a test reports its worst error")]

use std::collections::BTreeMap;
use std::fmt::Write as _;

use neap_engine::kinetics::Structure;
use neap_engine::model::{Flow, Network};
use neap_engine::plan::{DEFAULT_MEMORY, Limits, Plan};
use neap_engine::run::Watch;
use neap_engine::scenario::{Model, Role};
use neap_tests::{assert_same, facts, least_memory, patients, plan, run, run_within, scenario};
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

/// A population with a bit of everything that this version has.
const POPULATION: &str = r#"
[population.weight]
distribution = "lognormal"
mean = "75 kg"
cv = "20 %"
limits = ["40 kg", "140 kg"]

[population.sex]
distribution = "categories"
proportions = { female = 0.5, male = 0.5 }

[population.height]
by = "sex"
each.female = { distribution = "normal", mean = "163 cm", sd = "7 cm" }
each.male = { distribution = "normal", mean = "176 cm", sd = "7 cm" }
"#;

const DRUG: &str = r#"
[drug]
name = "Compound T (invented)"
model = "two-compartment"

[drug.parameter.clearance]
typical = "5 L/h"
cv = "30 %"
scale = [{ covariate = "weight", reference = "70 kg", exponent = 0.75 }]

[drug.parameter.central_volume]
typical = "30 L"
cv = "20 %"
scale = [{ covariate = "height", reference = "170 cm", slope = "0.01 /cm" }, { covariate = "sex", is = "female", times = 0.9 }]

[drug.parameter.intercompartmental_clearance]
typical = "8 L/h"

[drug.parameter.peripheral_volume]
typical = "50 L"
cv = "25 %"

[drug.parameter.absorption_rate]
typical = "1.1 /h"
cv = "40 %"

[drug.parameter.lag_time]
typical = "0.3 h"
cv = "30 %"

[drug.parameter.bioavailability]
typical = "70 %"
varies = "logit-normal"
logit_sd = 0.4

[[drug.correlation]]
between = ["clearance", "central_volume"]
value = 0.4
"#;

const ARMS: &str = r#"
[[arm]]
name = "tablets"
[[arm.dose]]
amount = "500 mg"
route = "oral"
every = "12 h"
count = 4

[[arm]]
name = "infusions"
[[arm.dose]]
amount = "4 mg/kg"
per = "weight"
route = "bolus"
first_at = "2 h"
[[arm.dose]]
amount = "300 mg"
route = "infusion"
over = "5 h"
every = "3 h"
first_at = "3 h"
count = 8
"#;

const OUTPUT: &str = r#"
[window]
low = "2 mg/L"
high = "6 mg/L"

[output]
times = ["0 h", "1 h", "2 h", "2.5 h", "3 h", "7 h", "12 h", "12.2 h", "24 h", "36 h", "48 h"]
percentiles = [1, 5, 25, 50, 75, 95, 99.5]
"#;

fn head(size: u64) -> String {
    format!("neap = 1\n[population]\nsize = {size}\nseed = 11\n")
}

/// The usual scenario.
fn usual(size: u64) -> String {
    [head(size).as_str(), POPULATION, DRUG, ARMS, OUTPUT].concat()
}

/// No variability but a covariate with two classes: every value is one of two.
fn ties(size: u64) -> String {
    let drug = "[drug]\nname = \"invented\"\nmodel = \"one-compartment\"\n[drug.parameter.clearance]\n\
         typical = \"5 L/h\"\nscale = [{ covariate = \"sex\", is = \"female\", times = 0.8 }]\n\
         [drug.parameter.volume]\ntypical = \"40 L\"\n[drug.parameter.absorption_rate]\ntypical = \"1 /h\"\n";
    let sex = "[population.sex]\ndistribution = \"categories\"\nproportions = { female = 0.3, male = 0.7 }\n";
    let arms = "[[arm]]\nname = \"tablets\"\n[[arm.dose]]\namount = \"500 mg\"\nroute = \"oral\"\nfirst_at = \"2.5 h\"\n\
         every = \"12 h\"\ncount = 3\n[[arm]]\nname = \"nothing\"\n[[arm.dose]]\namount = \"0 mg\"\nroute = \"bolus\"\n";
    [head(size).as_str(), sex, drug, arms, OUTPUT].concat()
}

/// Forty arms that share a few schedules.
fn many_arms(size: u64) -> String {
    let mut arms = String::new();
    for arm in 0..40 {
        let (amount, every) = (100 + 25 * arm, [6, 8, 12][arm % 3]);
        let _ = writeln!(
            arms,
            "[[arm]]\nname = \"arm {arm}\"\n[[arm.dose]]\namount = \"{amount} mg\"\nroute = \"oral\"\nevery = \"{every} h\"\n\
             count = {}",
            48 / every
        );
    }
    [head(size).as_str(), POPULATION, DRUG, &arms, OUTPUT].concat()
}

/// Sizes on both sides of where a pilot begins, and no multiple of a block.
const SIZES: [u64; 3] = [777, 8193, 30_001];

type Written = fn(u64) -> String;
const KINDS: [(&str, Written); 3] = [("usual", usual), ("ties", ties), ("forty arms", many_arms)];

#[test]
fn threads_change_no_bit() {
    for (name, text) in KINDS {
        for size in SIZES {
            let text = text(size);
            let one = facts(&run_within(&text, 1, DEFAULT_MEMORY));
            for threads in [2, 7] {
                let other = facts(&run_within(&text, threads, DEFAULT_MEMORY));
                assert_same(&one, &other, &format!("{name}, {size} patients, {threads} threads"));
            }
        }
    }
}

/// The least budget that is accepted makes passes of what else is one.
#[test]
fn memory_changes_no_bit() {
    let mut most = BTreeMap::new();
    for (name, text) in KINDS {
        for size in [30_001, 150_001] {
            let text = text(size);
            let roomy = run_within(&text, 2, DEFAULT_MEMORY);
            let facts_of_roomy = facts(&roomy);
            let least = least_memory(&text, 2);
            for budget in [least, least + (8 << 20)] {
                let tight = run_within(&text, 2, budget);
                assert_same(&facts_of_roomy, &facts(&tight), &format!("{name}, {size} patients, {budget} bytes"));
                let passes = most.entry(name).or_insert(0);
                *passes = tight.effort.passes.max(*passes);
            }
        }
    }
    println!("passes: {most:?}");
    assert!(
        most["usual"] > 1 && most["forty arms"] > 1,
        "the small budgets are meant to take several passes: {most:?}"
    );
}

#[test]
fn a_run_repeats_itself() {
    assert_same(&facts(&run(&usual(20_000))), &facts(&run(&usual(20_000))), "the same scenario twice");
}

#[test]
fn another_seed_gives_other_patients() {
    let other = usual(2000).replace("seed = 11", "seed = 12");
    assert_ne!(facts(&run(&usual(2000))), facts(&run(&other)));
}

/// Those of some facts that concern an arm.
fn of_arm(facts: &BTreeMap<String, u64>, arm: &str) -> BTreeMap<String, u64> {
    let start = format!("{arm} at ");
    facts.iter().filter(|(name, _)| name.starts_with(&start)).map(|(name, bits)| (name.clone(), *bits)).collect()
}

#[test]
fn another_arm_leaves_the_others_as_they_were() {
    let third =
        "[[arm]]\nname = \"third\"\n[[arm.dose]]\namount = \"80 mg\"\nroute = \"bolus\"\nevery = \"5 h\"\ncount = 9\n";
    for size in [3000, 30_000] {
        let before = facts(&run(&usual(size)));
        let after = facts(&run(&[head(size).as_str(), POPULATION, DRUG, third, ARMS, OUTPUT].concat()));
        for arm in ["tablets", "infusions"] {
            assert!(!of_arm(&before, arm).is_empty());
            assert_same(&of_arm(&before, arm), &of_arm(&after, arm), arm);
        }
    }
}

#[test]
fn another_covariate_leaves_the_others_as_they_were() {
    let more = "[population.age]\ndistribution = \"uniform\"\nfrom = \"18 a\"\nto = \"80 a\"\n";
    let before = facts(&run(&usual(20_000)));
    let mut after = facts(&run(&[head(20_000).as_str(), more, POPULATION, DRUG, ARMS, OUTPUT].concat()));
    let own = after.len();
    after.retain(|name, _| !name.starts_with("age "));
    assert!(after.len() < own, "the covariate is summarised");
    assert_same(&before, &after, "with age");
}

#[test]
fn the_order_of_arms_and_of_unrelated_covariates_does_not_matter() {
    let swapped: Vec<&str> = ARMS.split("[[arm]]").filter(|part| !part.trim().is_empty()).collect();
    let swapped = format!("[[arm]]{}\n[[arm]]{}", swapped[1], swapped[0]);
    let parts: Vec<&str> = POPULATION.split("\n\n").collect();
    let population = [parts[1], parts[2], parts[0]].join("\n\n");
    let before = facts(&run(&usual(20_000)));
    let after = facts(&run(&[head(20_000).as_str(), &population, DRUG, &swapped, OUTPUT].concat()));
    assert_same(&before, &after, "swapped");
}

#[test]
fn the_first_patients_are_the_same_whatever_the_size() {
    let small = patients(&plan(scenario(&usual(1001))));
    let large = patients(&plan(scenario(&usual(20_000))));
    assert_eq!((small.count, large.count), (1001, 20_000));
    let columns =
        |block: &neap_engine::run::PatientBlock| [block.covariates.clone(), block.parameters.clone()].concat();
    for (small, large) in columns(&small).iter().zip(columns(&large)) {
        let same = small.iter().zip(&large).all(|(a, b)| a.to_bits() == b.to_bits());
        assert!(same, "a patient changed with the size of the population");
    }
}

#[test]
fn shares_add_up_and_percentiles_rise() {
    for (_, text) in KINDS {
        for size in [1, 2, 63, 8192, 30_001] {
            let results = run(&text(size));
            for at in results.arms.iter().flat_map(|arm| &arm.times) {
                let shares = at.shares.expect("there is a window");
                assert_eq!(shares.below + shares.within + shares.above, size);
                assert!(at.bands.is_sorted_by(|a, b| a.value <= b.value), "{:?}", at.bands);
                for band in &at.bands {
                    assert!(band.value >= 0.0 && band.value.is_finite());
                    let (lower, upper) = (band.mc_lower.unwrap_or(0.0), band.mc_upper.unwrap_or(f64::INFINITY));
                    assert!(lower <= upper, "{band:?}");
                    if size > 100 {
                        assert!((lower..=upper).contains(&band.value), "{band:?}");
                    }
                }
            }
        }
    }
}

/// Twice the dose is twice every concentration, exactly: multiplying by two changes no digit of a binary number.
#[test]
fn twice_the_dose_is_twice_the_concentration() {
    let arm = |amount: &str| {
        format!(
            "[[arm]]\nname = \"only\"\n[[arm.dose]]\namount = \"{amount} mg\"\nroute = \"oral\"\nevery = \"8 h\"\ncount = 6\n\
             [[arm.dose]]\namount = \"{amount} mg\"\nroute = \"infusion\"\nover = \"2 h\"\nfirst_at = \"1 h\"\n"
        )
    };
    let results =
        ["250", "500"].map(|amount| run(&[head(20_000).as_str(), POPULATION, DRUG, &arm(amount), OUTPUT].concat()));
    for (one, two) in results[0].arms[0].times.iter().zip(&results[1].arms[0].times) {
        for (one, two) in one.bands.iter().zip(&two.bands) {
            assert_eq!((2.0 * one.value).to_bits(), two.value.to_bits(), "percentile {}", one.percentile);
        }
    }
}

/// Within means `low <= C <= high`: 100 mg in 40 L are 2.5 mg/L, and a placebo's zero is within a window that has no low.
#[test]
fn both_limits_belong_to_the_window() {
    let text = |window: &str, amount: u32| {
        format!(
            "neap = 1\n[population]\nsize = 10000\nseed = 1\n[drug]\nname = \"invented\"\nmodel = \"one-compartment\"\n\
             [drug.parameter.clearance]\ntypical = \"5 L/h\"\n[drug.parameter.volume]\ntypical = \"40 L\"\n[[arm]]\n\
             name = \"only\"\n[[arm.dose]]\namount = \"{amount} mg\"\nroute = \"bolus\"\n[window]\n{window}\n[output]\n\
             times = [\"0 h\"]\n"
        )
    };
    for (window, amount, expected) in [
        ("low = \"2.5 mg/L\"", 100, [0, 10_000, 0]),
        ("high = \"2.5 mg/L\"", 100, [0, 10_000, 0]),
        ("low = \"2.5 mg/L\"\nhigh = \"3 mg/L\"", 100, [0, 10_000, 0]),
        ("low = \"1 mg/L\"\nhigh = \"2500 ug/L\"", 100, [0, 10_000, 0]),
        ("low = \"2.5000000000000005 mg/L\"", 100, [10_000, 0, 0]),
        ("high = \"2.4999999999999995 mg/L\"", 100, [0, 0, 10_000]),
        ("high = \"1 mg/L\"", 0, [0, 10_000, 0]),
        ("low = \"1 mg/L\"", 0, [10_000, 0, 0]),
    ] {
        let shares = run(&text(window, amount)).arms[0].times[0].shares.expect("there is a window");
        assert_eq!([shares.below, shares.within, shares.above], expected, "{window}, {amount} mg");
    }
}

/// Equal quantities in other units are the same bits.
#[test]
fn spelling_changes_no_bit() {
    let respelt = usual(5000)
        .replace("\"500 mg\"", "\"0.5 g\"")
        .replace("\"5 L/h\"", "\"5000 mL/h\"")
        .replace("\"30 L\"", "\"300 dL\"")
        .replace("\"2 mg/L\"", "\"2 ug/mL\"")
        .replace("\"12 h\"", "\"720 min\"")
        .replace("\"0.3 h\"", "\"18 min\"");
    assert!(respelt != usual(5000));
    let (one, other) = (run(&usual(5000)), run(&respelt));
    // The window's unit is the output's: ug/mL and mg/L are the same number.
    assert_same(&facts(&one), &facts(&other), "other spellings");
}

/// The shorthands and the networks they stand for, written out in another order and with other names, are solved as one
/// structure, and with the same bytes; a network that is none of them is refused.
#[test]
fn a_shorthand_is_its_network() {
    let limits = Limits { threads: 2, memory: DEFAULT_MEMORY };
    let mut compared = 0;
    for absorbed in [false, true] {
        for model in [Model::OneCompartment, Model::TwoCompartment] {
            let mut written = Network::default();
            let tissue =
                (model == Model::TwoCompartment).then(|| written.compartment("tissue", Some(Role::PeripheralVolume)));
            let depot = absorbed.then(|| written.compartment("depot", None));
            let plasma = written.compartment("plasma", Some(Role::CentralVolume));
            written.flow(Flow::Out { from: plasma, clearance: Role::Clearance });
            if let Some(tissue) = tissue {
                written.flow(Flow::Between {
                    one: tissue,
                    other: plasma,
                    clearance: Role::IntercompartmentalClearance,
                });
            }
            if let Some(depot) = depot {
                written.flow(Flow::Rate { from: depot, to: plasma, rate: Role::AbsorptionRate });
            }
            let shorthand = Structure::recognise(&Network::expand(model, absorbed));
            assert!(shorthand.is_some());
            assert_eq!(Structure::recognise(&written), shorthand);
            for text in [usual(9000), ties(9000)] {
                let scenario = scenario(&text);
                let same = scenario.drug.model == model && absorbed;
                let planned = Plan::of_network(scenario, &written, &limits);
                if same {
                    let results = planned.expect("it is the scenario's own").run(&Watch::new()).unwrap();
                    assert_same(&facts(&run(&text)), &facts(&results), "a shorthand and its network");
                    compared += 1;
                }
            }
            written.compartment("loose", None);
            assert!(Plan::of_network(scenario(&usual(9000)), &written, &limits).is_err());
        }
    }
    assert_eq!(compared, 2, "one with one compartment, one with two");
}

/// One patient's concentrations, time by time.
fn curve(text: &str) -> Vec<f64> {
    run(text).arms[0].times.iter().map(|at| at.bands[0].value).collect()
}

/// One patient of a two-compartment drug.
fn one_patient(parameters: &[f64; 5], doses: &str, times: &str) -> String {
    let [clearance, central, exchange, peripheral, ka] = parameters;
    let absorption = if doses.contains("oral") {
        format!("[drug.parameter.absorption_rate]\ntypical = \"{ka} /h\"\n")
    } else {
        String::new()
    };
    format!(
        "neap = 1\n[population]\nsize = 1\nseed = 1\n[drug]\nname = \"invented\"\nmodel = \"two-compartment\"\n\
         [drug.parameter.clearance]\ntypical = \"{clearance} L/h\"\n[drug.parameter.central_volume]\ntypical = \"{central} L\"\n\
         [drug.parameter.intercompartmental_clearance]\ntypical = \"{exchange} L/h\"\n\
         [drug.parameter.peripheral_volume]\ntypical = \"{peripheral} L\"\n{absorption}[[arm]]\nname = \"only\"\n{doses}[output]\ntimes = {times}\npercentiles = [50]\n"
    )
}

const EVERY_HOUR: &str = "{ from = \"0 h\", to = \"30 h\", step = \"1 h\" }";

fn rate() -> impl Strategy<Value = f64> {
    (-6.0..6.0f64).prop_map(|power| format!("{:.6}", neap_engine::math::exp(power)).parse().expect("a number"))
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 64, failure_persistence: None, rng_seed: RngSeed::Fixed(5), ..ProptestConfig::default() })]

    /// Superposition (common practice, no source): the response to two doses is the sum of the responses. Sums of
    /// non-negative terms keep their relative accuracy; a state that is carried through 30 steps gains a unit in the last
    /// place or two a step: 1e-13.
    #[test]
    fn responses_add_up(p in [rate(), rate(), rate(), rate(), rate()], first in 0..20u32, second in 0..20u32) {
        let oral = format!("[[arm.dose]]\namount = \"70 mg\"\nroute = \"oral\"\nfirst_at = \"{first} h\"\n");
        let infusion =
            format!("[[arm.dose]]\namount = \"90 mg\"\nroute = \"infusion\"\nover = \"2.5 h\"\nfirst_at = \"{second}.25 h\"\n");
        let [one, other, both] =
            [oral.clone(), infusion.clone(), oral + &infusion].map(|doses| curve(&one_patient(&p, &doses, EVERY_HOUR)));
        for ((one, other), both) in one.iter().zip(&other).zip(&both) {
            prop_assert!(((one + other) - both).abs() <= 1e-13 * both, "{one} + {other} and {both}");
        }
    }

    /// Starting points do not matter: the value at a time is the same, to rounding, however many output times come before.
    /// Each step rounds a few times, and rounding of its exponent adds `rate x step x eps`: `1e-15 x (60 + largest exponent)`
    /// bounds both.
    #[test]
    fn output_times_in_between_do_not_matter(p in [rate(), rate(), rate(), rate(), rate()], first in 0..20u32) {
        let doses = format!(
            "[[arm.dose]]\namount = \"70 mg\"\nroute = \"oral\"\nfirst_at = \"{first}.5 h\"\n\
             [[arm.dose]]\namount = \"90 mg\"\nroute = \"infusion\"\nover = \"2.5 h\"\nfirst_at = \"{first} h\"\n"
        );
        let often = curve(&one_patient(&p, &doses, EVERY_HOUR));
        let once = curve(&one_patient(&p, &doses, "[\"30 h\"]"));
        let [clearance, central, exchange, peripheral, ka] = p;
        let exponent = 30.0 * (clearance / central + exchange / central + exchange / peripheral + ka);
        let (often, once) = (often[30], once[0]);
        prop_assert!((often - once).abs() <= 1e-15 * (60.0 + exponent) * once + 1e-300, "{often} and {once}");
    }

    /// Mass: concentrations are never negative, nor above what was given over the central volume.
    #[test]
    fn no_more_is_there_than_was_given(p in [rate(), rate(), rate(), rate(), rate()]) {
        let doses = "[[arm.dose]]\namount = \"100 mg\"\nroute = \"oral\"\nevery = \"6 h\"\ncount = 4\n";
        for (hour, value) in curve(&one_patient(&p, doses, EVERY_HOUR)).into_iter().enumerate() {
            let given = 100.0 * (hour / 6 + 1).min(4) as f64;
            prop_assert!(value >= 0.0 && value <= given / p[1] * (1.0 + 1e-13), "{value} at {hour} h");
        }
    }

    /// Without elimination everything stays: what is not in the central compartment is in the others, in equilibrium at the
    /// end.
    #[test]
    fn without_elimination_everything_stays(central in rate(), peripheral in rate()) {
        let doses = "[[arm.dose]]\namount = \"100 mg\"\nroute = \"bolus\"\n";
        // An exchange of 1000 times the volumes' sum an hour: exp(-1000) is missing to the equilibrium.
        let p = [0.0, central, 1000.0 * (central + peripheral), peripheral, 1.0];
        let all = curve(&one_patient(&p, doses, EVERY_HOUR));
        let expected = 100.0 / (central + peripheral);
        for value in &all[1..] {
            prop_assert!((value - expected).abs() <= 1e-12 * expected, "{value} and {expected}");
        }
    }
}

/// A plan says the same whoever asks.
#[test]
fn a_plan_does_not_depend_on_what_it_may_use() {
    let text = usual(30_000);
    let fingerprint = |plan: &Plan| format!("{:?}", (&plan.timetable, &plan.protocol, &plan.structure));
    let one = neap_tests::plan_within(scenario(&text), 1, DEFAULT_MEMORY);
    let other = neap_tests::plan_within(scenario(&text), 7, 2 * DEFAULT_MEMORY);
    assert_eq!(fingerprint(&one), fingerprint(&other));
}
