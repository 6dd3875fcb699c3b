//! Tests of the whole way from text to scenario; single faults are in the golden files of the `tests` member.

use proptest::prelude::*;

use super::*;
use crate::diagnostic::{Fault, Severity};
use crate::quantity::{decimal, to_f64};

/// The demo, which has no faults.
const DEMO: &str = include_str!("../../../scenarios/first-arm.toml");

fn parse(text: &str) -> Result<Scenario, Fault> {
    Scenario::parse(Source { name: "test.toml".into(), text: text.into() })
}

fn good(text: &str) -> Scenario {
    match parse(text) {
        Ok(scenario) => scenario,
        Err(Fault::Scenario { diagnostics, .. }) => panic!("{diagnostics:#?}"),
        Err(fault) => panic!("{fault}"),
    }
}

/// The messages of the errors.
fn errors(text: &str) -> Vec<String> {
    match parse(text) {
        Ok(_) => Vec::new(),
        Err(Fault::Scenario { diagnostics, .. }) => {
            diagnostics.into_iter().filter(|d| d.severity == Severity::Error).map(|d| d.message).collect()
        }
        Err(fault) => panic!("{fault}"),
    }
}

/// A small scenario around the table of one covariate, which a dose uses.
fn with_covariate(table: &str) -> String {
    format!(
        "neap = 1\n[population]\nsize = 10\nseed = 1\n[population.x]\n{table}\n\
         [drug]\nmodel = \"one-compartment\"\n[drug.parameter.clearance]\ntypical = \"5 L/h\"\n\
         [drug.parameter.volume]\ntypical = \"30 L\"\n\
         [[arm]]\nname = \"a\"\n[[arm.dose]]\namount = \"1 mg/kg\"\nper = \"x\"\nroute = \"bolus\"\n\
         [output]\ntimes = [\"0 h\", \"1 h\"]\n"
    )
}

fn distribution(table: &str) -> Distribution {
    match good(&with_covariate(table)).population.covariates[0].spread {
        Spread::Number(limited) => limited.distribution,
        ref other => panic!("{other:?}"),
    }
}

#[test]
fn the_demo_says_what_it_says() {
    let scenario = good(DEMO);
    assert!(scenario.warnings.is_empty());
    assert_eq!(scenario.population.size, 100_000);
    assert_eq!(scenario.drug.amount_unit, AmountUnit::Milligram);
    assert_eq!(scenario.drug.model, Model::TwoCompartment);
    assert_eq!(scenario.drug.correlations, [(0, 1, 0.4)]);
    let roles: Vec<Role> = scenario.drug.parameters.iter().map(|parameter| parameter.role).collect();
    let all = [
        Role::Clearance,
        Role::CentralVolume,
        Role::IntercompartmentalClearance,
        Role::PeripheralVolume,
        Role::AbsorptionRate,
        Role::LagTime,
        Role::Bioavailability,
    ];
    assert_eq!(roles, all);
    assert_eq!(scenario.drug.parameters[5].typical, 0.25);
    assert_eq!(scenario.drug.parameters[6].typical, 0.78);
    assert_eq!(scenario.drug.parameters[6].varies, Varies::LogitNormal { logit_sd: 0.5 });
    assert_eq!(
        scenario.drug.parameters[0].factors,
        [
            Factor::Power { covariate: 0, reference: 70.0, exponent: 0.75 },
            Factor::Class { covariate: 1, class: 0, times: 0.88 },
        ]
    );
    let times =
        |arm: usize, row: usize| -> Vec<f64> { scenario.arms[arm].doses[row].times.iter().map(to_f64).collect() };
    assert_eq!(times(0, 0).len(), 14);
    assert_eq!(times(1, 0), [0.0]);
    // `until` is exclusive: the last dose falls at 156 h.
    assert_eq!(times(1, 1).len(), 13);
    assert_eq!(times(1, 1).last(), Some(&156.0));
    assert_eq!(scenario.output.times.len(), 169);
    assert_eq!(scenario.output.concentration.text, "mg/L");
    assert!(scenario.defaults.is_empty());
}

#[test]
fn every_form_of_a_lognormal_is_the_same_one() {
    let close = |one: Distribution, other: Distribution| match (one, other) {
        (Distribution::Lognormal { median: a, log_sd: s }, Distribution::Lognormal { median: b, log_sd: t }) => {
            assert!((a / b - 1.0).abs() < 1e-14 && (s / t - 1.0).abs() < 1e-13, "{one:?} {other:?}");
        }
        _ => panic!("{one:?} {other:?}"),
    };
    let lognormal = |keys: &str| distribution(&format!("distribution = \"lognormal\"\n{keys}"));
    let stated = lognormal("median = \"70 kg\"\nlog_sd = 0.25");
    // exp(0.25^2) = 1.064494458917859430
    let w = 1.064_494_458_917_859_4_f64;
    close(stated, lognormal("median = \"70 kg\"\nlog_variance = 0.0625"));
    close(stated, lognormal(&format!("median = \"70 kg\"\ncv = \"{} %\"", (w - 1.0).sqrt() * 100.0)));
    close(stated, lognormal(&format!("mean = \"{} kg\"\nlog_sd = 0.25", 70.0 * w.sqrt())));
    let sd = 70.0 * (w * (w - 1.0)).sqrt();
    close(stated, lognormal(&format!("median = \"70 kg\"\nsd = \"{sd} kg\"")));
    close(stated, lognormal(&format!("mean = \"{} kg\"\nsd = \"{sd} kg\"", 70.0 * w.sqrt())));
    // exp(0.25 x 1.6448536269514722) = 1.508647655
    let f = libm::exp(0.25 * 1.644_853_626_951_472_2);
    close(stated, lognormal(&format!("range90 = [\"{} kg\", \"{} kg\"]", 70.0 / f, 70.0 * f)));
    assert_eq!(lognormal("mean = \"70 kg\"\ncv = \"0 %\""), Distribution::Fixed { value: 70.0 });
}

#[test]
fn a_covariate_is_held_in_the_unit_in_which_it_is_written() {
    let text = with_covariate("distribution = \"uniform\"\nfrom = \"40000 g\"\nto = \"100 kg\"");
    let scenario = good(&text);
    let covariate = &scenario.population.covariates[0];
    assert_eq!(covariate.unit.as_ref().map(|unit| unit.text.as_str()), Some("g"));
    assert_eq!(
        distribution("distribution = \"uniform\"\nfrom = \"40000 g\"\nto = \"100 kg\""),
        Distribution::Uniform { from: 40_000.0, to: 100_000.0 }
    );
    // 1 mg/kg is 0.001 mg for each gram.
    assert_eq!(scenario.arms[0].doses[0].amount, Amount::Per { covariate: 0, amount: 0.001 });
}

#[test]
fn what_depends_on_a_class_stands_behind_it() {
    let moved = DEMO.replace(
        "[population.weight]",
        "[population.height]\nby = \"sex\"\n\
         each.male = { distribution = \"normal\", mean = \"176 cm\", sd = \"7 cm\" }\n\
         each.female = { distribution = \"normal\", mean = \"1.63 m\", sd = \"7 cm\" }\n\n[population.weight]",
    );
    let scenario = good(&moved);
    let names: Vec<&str> = scenario.population.covariates.iter().map(|c| c.name.as_str()).collect();
    assert_eq!(names, ["weight", "sex", "height"]);
    let Spread::ByClass { of, each } = &scenario.population.covariates[2].spread else { panic!() };
    assert_eq!(*of, 1);
    // In the order of the classes, which is not that of the table.
    assert_eq!(each[0].distribution, Distribution::Normal { mean: 163.0, sd: 7.0 });
    assert_eq!(scenario.drug.parameters[0].factors[1], Factor::Class { covariate: 1, class: 0, times: 0.88 });
    assert_eq!(scenario.warnings.len(), 1, "nothing uses the height");
}

#[test]
fn defaults_are_echoed() {
    let scenario = good(&with_covariate("distribution = \"fixed\"\nvalue = \"70 kg\""));
    let echoed: Vec<(&str, &str)> =
        scenario.defaults.iter().map(|echo| (echo.key.as_str(), echo.value.as_str())).collect();
    let all = [
        ("population.draws", "independent"),
        ("arm.1.dose.1.first_at", "0 h"),
        ("variability.between_subject", "true"),
        ("output.percentiles", "[5, 25, 50, 75, 95]"),
    ];
    assert_eq!(echoed, all);
    assert_eq!(scenario.warnings.len(), 1, "no window");
    assert_eq!(scenario.output.concentration.text, "mg/L");
}

#[test]
fn numbers_given_outside_stand_in_for_the_files() {
    let source = Source { name: "test.toml".into(), text: DEMO.replace("seed = 2718\n", "") };
    let overrides = Overrides { size: Some(7), seed: Some(9) };
    let scenario = Scenario::parse_with(source.clone(), overrides).expect("no faults");
    assert_eq!((scenario.population.size, scenario.population.seed), (7, 9));
    assert_eq!(scenario.source, source);
    assert!(Scenario::parse_with(source, Overrides { size: Some(0), seed: Some(9) }).is_err());
}

#[test]
fn without_variability_between_subjects_nothing_varies() {
    let scenario = good(&DEMO.replace("between_subject = true", "between_subject = false\nbetween_occasion = false"));
    assert!(scenario.drug.parameters.iter().all(|parameter| parameter.varies == Varies::Not));
    assert!(scenario.drug.correlations.is_empty());
}

#[test]
fn cv_becomes_the_spread_of_the_logarithm() {
    let scenario = good(DEMO);
    // sqrt(ln(1 + 0.32^2)) = 0.312229...
    let Varies::Lognormal { log_sd } = scenario.drug.parameters[0].varies else { panic!() };
    assert!((log_sd * log_sd - libm::log1p(0.32 * 0.32)).abs() < 1e-15);
    let scenario = good(&DEMO.replace("cv = \"45 %\"", "cv = \"0 %\""));
    assert_eq!(scenario.drug.parameters[4].varies, Varies::Not);
}

#[test]
fn linear_effects_are_per_unit_of_the_covariate_as_held() {
    let text = DEMO.replace("exponent = 0.75 },", "slope = \"0.00001 /g\" },");
    let scenario = good(&text);
    assert_eq!(scenario.drug.parameters[0].factors[0], Factor::Linear { covariate: 0, reference: 70.0, slope: 0.01 });
    let text = DEMO.replace(
        "typical = \"6.4 L/h\"",
        "typical = \"0 L/h\"\nplus = [{ covariate = \"weight\", slope = \"90 mL/h/kg\" }]",
    );
    let scenario = good(&text);
    assert_eq!(scenario.drug.parameters[0].additive, [Additive { covariate: 0, slope: 0.09 }]);
}

#[test]
fn percentiles_rise_and_stay_exact() {
    let scenario = good(&DEMO.replace("[5, 25, 50, 75, 95]", "[97.5, 2.5, 50]"));
    let exact: Vec<_> = ["2.5", "50", "97.5"].iter().map(|text| decimal(text).expect("a number")).collect();
    assert_eq!(scenario.output.percentiles, exact);
}

#[test]
fn a_range_of_times_may_end_between_two_steps() {
    let scenario = good(&DEMO.replace("to = \"168 h\", step = \"1 h\"", "to = \"1 d\", step = \"5 h\""));
    let times: Vec<f64> = scenario.output.times.iter().map(to_f64).collect();
    assert_eq!(times, [0.0, 5.0, 10.0, 15.0, 20.0]);
}

#[test]
fn every_later_key_is_refused_by_name() {
    for field in fields::FIELDS.iter().filter(|field| field.need == fields::Need::Later) {
        for table in field.tables {
            let line = format!("{} = 1\n", field.key);
            let text = match *table {
                "" => DEMO.replace("neap = 1\n", &format!("neap = 1\n{line}")),
                "population" => DEMO.replace("size = 100_000\n", &format!("size = 100_000\n{line}")),
                "population.*" => DEMO.replace("mean = \"74 kg\"\n", &format!("mean = \"74 kg\"\n{line}")),
                "drug" => DEMO.replace("[drug]\n", &format!("[drug]\n{line}")),
                "drug.parameter.*.scale" => {
                    DEMO.replace("exponent = 1 }", &format!("exponent = 1, {} = 1 }}", field.key))
                }
                "arm.dose" => DEMO.replace("count = 14\n", &format!("count = 14\n{line}")),
                "window" => DEMO.replace("[window]\n", &format!("[window]\n{line}")),
                "output" => DEMO.replace("[output]\n", &format!("[output]\n{line}")),
                other => panic!("where is {other}?"),
            };
            let said = format!("`{}` is not in this version", field.key);
            assert!(errors(&text).contains(&said), "{table}.{}: {:?}", field.key, errors(&text));
        }
    }
}

#[test]
fn every_required_key_is_missed_by_name() {
    for (line, key) in [
        ("neap = 1\n", "`neap`, the version of the format, is missing"),
        ("size = 100_000\n", "`size` is missing"),
        ("seed = 2718\n", "`seed` is missing"),
        ("model = \"two-compartment\"\n", "`model` is missing"),
        ("typical = \"6.4 L/h\"\n", "`typical` is missing"),
        ("name = \"500 mg every 12 h\"\n", "`name` is missing"),
        ("amount = \"500 mg\"\n", "`amount` is missing"),
        ("route = \"oral\"\nfirst_at = \"0 h\"\nevery", "`route` is missing"),
        ("times = { from = \"0 h\", to = \"168 h\", step = \"1 h\" }\n", "`times` is missing"),
    ] {
        let text = DEMO.replacen(line, if line.ends_with("every") { "every" } else { "" }, 1);
        assert_ne!(text, DEMO, "{line}");
        assert!(errors(&text).contains(&key.to_owned()), "{key}: {:?}", errors(&text));
    }
}

/// One change to a scenario.
#[derive(Clone, Debug)]
enum Change {
    Delete(usize),
    Double(usize),
    Swap(usize, usize),
    Value(usize, String),
    Insert(usize, String),
    Cut(usize, usize),
}

fn junk() -> impl Strategy<Value = String> {
    prop_oneof![
        "\\PC{0,12}",
        "[-+.,0-9eE ]{0,8}",
        "\"[-+0-9.e]{0,6} ?[a-zA-Z/%.0-9{}\\[\\]µ]{0,8}\"",
        Just("[]".to_owned()),
        Just("{}".to_owned()),
        Just("[[[1]]]".to_owned()),
        Just("nan".to_owned()),
        Just("1e300".to_owned()),
        Just("\"1e300 kg\"".to_owned()),
        Just("\"1e-300 L/h\"".to_owned()),
        Just("9223372036854775807".to_owned()),
        Just("{ from = \"0 h\", to = \"1e300 h\", step = \"1e-300 h\" }".to_owned()),
        Just("\"\"\"\n".to_owned()),
        Just("\"weight\"".to_owned()),
        Just("\"sex\"".to_owned()),
        Just("true".to_owned()),
    ]
}

fn change() -> impl Strategy<Value = Change> {
    let line = 0..100_usize;
    prop_oneof![
        line.clone().prop_map(Change::Delete),
        line.clone().prop_map(Change::Double),
        (line.clone(), line.clone()).prop_map(|(a, b)| Change::Swap(a, b)),
        (line.clone(), junk()).prop_map(|(at, text)| Change::Value(at, text)),
        (line, junk()).prop_map(|(at, text)| Change::Insert(at, text)),
        (0..4000_usize, 0..40_usize).prop_map(|(at, length)| Change::Cut(at, length)),
    ]
}

fn changed(changes: &[Change]) -> String {
    let mut lines: Vec<String> = DEMO.lines().map(ToOwned::to_owned).collect();
    let mut cuts = Vec::new();
    for change in changes {
        let count = lines.len().max(1);
        match change {
            Change::Delete(at) if !lines.is_empty() => drop(lines.remove(at % count)),
            Change::Double(at) if !lines.is_empty() => lines.insert(at % count, lines[at % count].clone()),
            Change::Swap(a, b) if !lines.is_empty() => lines.swap(a % count, b % count),
            Change::Value(at, text) if !lines.is_empty() => {
                let line = &mut lines[at % count];
                let key = line.find('=').map_or(line.len(), |equals| equals + 1);
                line.truncate(key);
                line.push_str(text);
            }
            Change::Insert(at, text) => lines.insert(at % count, text.clone()),
            Change::Cut(at, length) => cuts.push((*at, *length)),
            _ => {}
        }
    }
    let mut text = lines.join("\n");
    for (at, length) in cuts {
        text = text.chars().enumerate().filter(|(i, _)| *i < at || *i >= at + length).map(|(_, c)| c).collect();
    }
    text
}

/// Whatever the text, the reader answers, points into the text, and goes through it from top to bottom.
fn answers(text: &str) {
    let diagnostics = match parse(text) {
        Ok(scenario) => scenario.warnings,
        Err(Fault::Scenario { diagnostics, .. }) => {
            assert!(diagnostics.iter().any(|d| d.severity == Severity::Error));
            diagnostics
        }
        Err(fault) => panic!("{fault}"),
    };
    assert!(diagnostics.is_sorted_by_key(|d| d.span));
    for diagnostic in &diagnostics {
        let spans = diagnostic.span.iter().chain(diagnostic.context.iter().map(|c| &c.span));
        for span in spans.chain(diagnostic.mend.iter().map(|m| &m.span)) {
            assert!(text.get(span.start..span.end).is_some(), "{diagnostic:?}");
        }
        assert!(!diagnostic.message.is_empty());
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 1000, ..ProptestConfig::default() })]

    #[test]
    fn no_changed_scenario_breaks_the_reader(changes in proptest::collection::vec(change(), 1..6)) {
        answers(&changed(&changes));
    }

    #[test]
    fn no_text_at_all_breaks_the_reader(text in "\\PC{0,200}") {
        answers(&text);
    }

    #[test]
    fn no_text_in_the_shape_of_toml_breaks_the_reader(
        text in "(neap|drug|arm|\\[|\\]|=|\"|'|\\{|\\}|\\.|,|\n|#|1|µ| |population|\\[\\[arm\\]\\]|\\[drug\\.parameter\\.clearance\\]){0,60}",
    ) {
        answers(&text);
    }
}
