//! Rules of thumb that every pharmacologist knows (common practice, no source), with the exact number of each from
//! `reference/rules/rules_of_thumb.csv`.

use neap_tests::{csv, number, run};

/// Values are products of a few exponentials of the right argument: 1e-14 relative covers the rounding of the argument, at
/// most 10 half-lives or 7 in natural logarithms.
const ROUNDING: f64 = 1e-14;

/// One patient, one compartment of 8 L, a clearance that makes the half-life exactly 4 h: `CL = V ln 2 / 4`.
fn curve(doses: &str, times: &[f64]) -> Vec<f64> {
    let clearance = 8.0 * std::f64::consts::LN_2 / 4.0;
    let times: Vec<String> = times.iter().map(|time| format!("\"{time} h\"")).collect();
    let text = format!(
        "neap = 1\n[population]\nsize = 1\nseed = 1\n[drug]\nname = \"invented\"\nmodel = \"one-compartment\"\n\
         [drug.parameter.clearance]\ntypical = \"{clearance} L/h\"\n[drug.parameter.volume]\ntypical = \"8 L\"\n\
         [[arm]]\nname = \"only\"\n[[arm.dose]]\n{doses}\n[output]\ntimes = [{}]\npercentiles = [50]\n",
        times.join(", ")
    );
    run(&text).arms[0].times.iter().map(|at| at.bands[0].value).collect()
}

/// `(n, value)` of a rule's rows whose input is a whole number of half-lives.
fn whole_half_lives(rule: &str) -> Vec<(f64, f64)> {
    let rows: Vec<(f64, f64)> = csv("rules/rules_of_thumb.csv")
        .iter()
        .filter(|row| row["rule"] == rule)
        .filter_map(|row| Some((row["inputs"].strip_prefix("n = ")?.parse().ok()?, number(&row["value"]))))
        .collect();
    assert!(rows.len() >= 4, "{rule} has {} rows", rows.len());
    rows
}

fn assert_near(got: f64, expected: f64, what: &str) {
    assert!((got - expected).abs() <= ROUNDING * expected.abs(), "{what}: {got} for {expected}");
}

/// A constant input reaches 1 - 2^-n of its plateau after n half-lives.
#[test]
fn a_constant_input_approaches_its_plateau_by_half_lives() {
    let rows = whole_half_lives("fraction_of_plateau");
    let times: Vec<f64> = rows.iter().map(|(n, _)| 4.0 * n).collect();
    // 20 mg/h for 60 h; the plateau is the rate over the clearance.
    let found = curve("amount = \"1200 mg\"\nroute = \"infusion\"\nover = \"60 h\"", &times);
    let plateau = 20.0 / (8.0 * std::f64::consts::LN_2 / 4.0);
    for ((n, share), found) in rows.iter().zip(&found) {
        assert_near(found / plateau, *share, &format!("after {n} half-lives"));
    }
    // About 97 % after five.
    let five = rows.iter().position(|(n, _)| *n == 5.0).expect("five half-lives are in the file");
    assert_eq!((100.0 * found[five] / plateau).round(), 97.0);
}

/// 2^-n of a bolus is left after n half-lives.
#[test]
fn a_bolus_halves_every_half_life() {
    let rows = whole_half_lives("fraction_remaining");
    let times: Vec<f64> = rows.iter().map(|(n, _)| 4.0 * n).collect();
    let found = curve("amount = \"80 mg\"\nroute = \"bolus\"", &times);
    for ((n, share), found) in rows.iter().zip(found) {
        assert_near(found / 10.0, *share, &format!("after {n} half-lives"));
    }
}

/// A bolus in one compartment is a straight line on a log axis: equal steps of time are equal differences of logarithms.
#[test]
#[expect(clippy::disallowed_methods, reason = "the machine's own logarithm is the outside view here")]
fn a_bolus_is_a_straight_line_on_a_log_axis() {
    let times: Vec<f64> = (0..40).map(f64::from).collect();
    let logs: Vec<f64> = curve("amount = \"80 mg\"\nroute = \"bolus\"", &times).iter().map(|c| c.ln()).collect();
    let slope = -std::f64::consts::LN_2 / 4.0;
    for (time, log) in times.iter().zip(&logs) {
        // The logarithms are below 5 in size, and each step of the way rounds once: 40 units in the last place of 5.
        let expected = 10.0f64.ln() + slope * time;
        assert!((log - expected).abs() <= 40.0 * 5.0 * f64::EPSILON, "at {time} h: {log} for {expected}");
    }
}

/// Doses every half-life accumulate to twice the first peak, and after each dose the plateau is a whole dose above the
/// trough.
#[test]
fn doses_every_half_life_accumulate_to_twice_the_first() {
    let row = csv("rules/rules_of_thumb.csv");
    let row = row.iter().find(|row| row["rule"] == "accumulation" && row["inputs"] == "interval = half-life");
    let ratio = number(&row.expect("the rule is in the file")["value"]);
    // The last dose is the sixtieth: 2^-60 is missing.
    let found = curve("amount = \"80 mg\"\nroute = \"bolus\"\nevery = \"4 h\"\ncount = 60", &[0.0, 236.0, 240.0]);
    assert_near(found[1] / found[0], ratio, "accumulation");
    assert_near(found[1] - found[2], found[0], "fluctuation");
}

/// A loading dose of target times volume is at the target at once, and an input of target times clearance keeps it there.
#[test]
fn a_loading_dose_and_its_infusion_hold_the_target() {
    let clearance = 8.0 * std::f64::consts::LN_2 / 4.0;
    let hourly = 5.0 * clearance;
    let doses = format!(
        "amount = \"40 mg\"\nroute = \"bolus\"\n[[arm.dose]]\namount = \"{} mg\"\nroute = \"infusion\"\nover = \"32 h\"",
        32.0 * hourly
    );
    for value in curve(&doses, &[0.0, 1.0, 4.0, 10.0, 32.0]) {
        assert_near(value, 5.0, "held");
    }
}
