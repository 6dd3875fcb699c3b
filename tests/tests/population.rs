//! Simulated populations against their exact distributions.
//!
//! Seeds are fixed, so a check passes or fails for good; its false-alarm rate is the chance that a correct simulator fails
//! it under a seed chosen blindly. It is stated at each check.

#![expect(clippy::print_stdout, reason = "a test reports its worst error")]

use std::fmt::Write as _;

use neap_engine::cohort::quantile;
use neap_engine::run::{Realised, Results};
use neap_engine::scenario::{Distribution, Limited};
use neap_tests::{csv, json, number, run};
use serde_json::Value;

/// Two-sided normal deviate that a standard normal number leaves with probability 1e-6 (`scipy.stats.norm.isf(5e-7)`).
const ONE_IN_A_MILLION: f64 = 4.891_638_475_699_9;

/// A lognormal parameter by its median and the standard deviation of its logarithm.
fn lognormal(name: &str, median: &str, unit: &str, log_sd: &str) -> String {
    format!("[drug.parameter.{name}]\ntypical = \"{median} {unit}\"\nlog_sd = {log_sd}\n")
}

fn fixed(name: &str, value: &str) -> String {
    format!("[drug.parameter.{name}]\ntypical = \"{value}\"\n")
}

/// Weight as the cases by weight have it: normal within limits, and a clearance that follows it.
fn by_weight(input: &dyn Fn(&str) -> String) -> (String, String) {
    let weight = format!(
        "[population.weight]\ndistribution = \"normal\"\nmean = \"{} kg\"\nsd = \"{} kg\"\nlimits = [\"{} kg\", \"{} kg\"]\n",
        input("mean_weight_kg"),
        input("sd_weight_kg"),
        input("minimum_weight_kg"),
        input("maximum_weight_kg")
    );
    let clearance = lognormal("clearance", &input("clearance_at_70_kg_L_per_h"), "L/h", &input("log_sd_clearance"));
    let scale =
        format!("scale = [{{ covariate = \"weight\", reference = \"70 kg\", exponent = {} }}]\n", input("exponent"));
    (weight, clearance + &scale)
}

/// A constant input of `hourly` (an amount with its unit) over 20,000 h into 1 L. The slowest clearance that 10^5 draws with
/// a log-sd of 0.9 around 6.5 L/h show is about 0.1 L/h, so exp(-2000) is missing to the plateau: nothing in binary64.
fn plateau(hourly: &str, clearance: &str) -> (String, String) {
    let (amount, unit) = hourly.split_once(' ').unwrap();
    let total = number(amount) * 20_000.0;
    let per = if unit == "mg/kg" { "per = \"weight\"\n" } else { "" };
    let dose = format!("amount = \"{total} {unit}\"\n{per}route = \"infusion\"\nover = \"20000 h\"\n");
    (format!("{clearance}{}", fixed("volume", "1 L")), dose + "!20000")
}

/// The case as a scenario of so many patients; `None` for kinds that this version cannot express. The dose may end with `!`
/// and the output time.
fn written(case: &Value, size: u64, seed: u64) -> Option<String> {
    let input = |key: &str| case["inputs"][key].as_str().unwrap_or_else(|| panic!("no {key} in {case}")).to_owned();
    let has = |key: &str| case["inputs"].get(key).is_some();
    let mut covariates = String::new();
    let (parameters, dose) = match case["kind"].as_str().unwrap() {
        "plateau" => {
            let clearance =
                lognormal("clearance", &input("median_clearance_L_per_h"), "L/h", &input("log_sd_clearance"));
            plateau(&format!("{} mg", input("infusion_rate_mg_per_h")), &clearance)
        }
        // The area dose/CL is the number that a plateau with the dose per hour shows.
        "exposure_by_weight" => {
            let (weight, clearance) = by_weight(&input);
            covariates = weight;
            let hourly = if has("dose_mg") {
                format!("{} mg", input("dose_mg"))
            } else {
                format!("{} mg/kg", input("dose_mg_per_kg"))
            };
            plateau(&hourly, &clearance)
        }
        // Each group's clearance is drawn as a covariate, by class; the parameter takes it over.
        "plateau_two_groups" => {
            let first = number(&input("share_group_1"));
            let each = |group: u8| {
                let median = input(&format!("median_clearance_{group}_L_per_h"));
                let log_sd = input(&format!("log_sd_{group}"));
                format!("{{ distribution = \"lognormal\", median = \"{median} L/h\", log_sd = {log_sd} }}")
            };
            let _ = write!(
                covariates,
                "[population.group]\ndistribution = \"categories\"\nproportions = {{ one = {first}, two = {} }}\n\
                 [population.own]\nby = \"group\"\neach.one = {}\neach.two = {}\n",
                1.0 - first,
                each(1),
                each(2)
            );
            let scale = "scale = [{ covariate = \"own\", reference = \"1 L/h\", exponent = 1 }]\n";
            plateau(&format!("{} mg", input("infusion_rate_mg_per_h")), &(fixed("clearance", "1 L/h") + scale))
        }
        // The area F dose/CL is the number that the same dose shows in a volume distributed as CL, wholly absorbed (all but
        // exp(-1000) of it after an hour), before any is lost.
        "total_exposure" => {
            let mut all = fixed("clearance", "0 L/h");
            all += &lognormal("volume", &input("median_clearance_L_per_h"), "L", &input("log_sd_clearance"));
            all += &lognormal("bioavailability", &input("median_fraction"), "", &input("log_sd_fraction"))
                .replace(" \"\n", "\"\n");
            all += &fixed("absorption_rate", "1000 /h");
            all += &correlation("volume", "bioavailability", &input("correlation"));
            (all, format!("amount = \"{} mg\"\nroute = \"oral\"\n!1", input("dose_mg")))
        }
        "bolus_at_time" => {
            let mut all = lognormal("clearance", &input("median_clearance_L_per_h"), "L/h", &input("log_sd_clearance"));
            if has("log_sd_volume") {
                all += &lognormal("volume", &input("median_volume_L"), "L", &input("log_sd_volume"));
                all += &correlation("clearance", "volume", &input("correlation"));
            } else {
                all += &fixed("volume", &format!("{} L", input("median_volume_L")));
            }
            (all, format!("amount = \"{} mg\"\nroute = \"bolus\"\n!{}", input("dose_mg"), input("time_h")))
        }
        // 150 doses. With log-sd 0.32 the slowest of 10^5 patients eliminates at about 0.02 /h: exp(-36) is missing.
        "bolus_steady_trough" => {
            let all = lognormal("clearance", &input("median_clearance_L_per_h"), "L/h", &input("log_sd_clearance"))
                + &fixed("volume", &format!("{} L", input("median_volume_L")));
            let interval = input("interval_h");
            let dose = format!(
                "amount = \"{} mg\"\nroute = \"bolus\"\nevery = \"{interval} h\"\ncount = 150\n!{}",
                input("dose_mg"),
                number(&interval) * 150.0
            );
            (all, dose)
        }
        // A length of time above a threshold: belongs to goals.
        "time_above_percent" => return None,
        other => panic!("unknown kind `{other}`"),
    };
    let (dose, time) = dose.split_once('!').unwrap();
    let unit = case["quantity_unit"].as_str().unwrap();
    assert!(unit.contains("mg"), "{unit}");
    Some(format!(
        "neap = 1\n[population]\nsize = {size}\nseed = {seed}\n{covariates}[drug]\nname = \"invented\"\n\
         model = \"one-compartment\"\n{parameters}[[arm]]\nname = \"only\"\n[[arm.dose]]\n{dose}\n\
         [window]\nlow = \"{} mg/L\"\nhigh = \"{} mg/L\"\n[output]\ntimes = [\"{time} h\"]\npercentiles = [5, 50, 95]\n",
        case["window"][0].as_str().unwrap(),
        case["window"][1].as_str().unwrap(),
    ))
}

fn correlation(one: &str, other: &str, value: &str) -> String {
    format!("[[drug.correlation]]\nbetween = [\"{one}\", \"{other}\"]\nvalue = {value}\n")
}

/// Counts within the window and percentiles 5, 50 and 95, at 1,000, 10,000 and 100,000 patients, within the bands of
/// `population/exact_population.json` (mpmath). False-alarm rate: 1e-6 a band, so below 1e-3 for all of them together.
#[test]
fn populations_fall_into_bands_that_one_in_a_million_leaves() {
    let all = json("population/exact_population.json");
    let (mut bands, mut wrong, mut left_out) = (0, String::new(), Vec::new());
    for case in all["cases"].as_array().unwrap() {
        let id = case["id"].as_str().unwrap();
        for band in case["expected"]["acceptance_bands_one_in_a_million"].as_array().unwrap() {
            let size = band["simulated_subjects"].as_u64().unwrap();
            let Some(text) = written(case, size, 20_260_101) else {
                left_out.push(id);
                break;
            };
            let results = run(&text);
            let at = &results.arms[0].times[0];
            let within = at.shares.expect("there is a window").within;
            let (low, high) = (band["inside_count_low"].as_u64().unwrap(), band["inside_count_high"].as_u64().unwrap());
            bands += 4;
            if !(low..=high).contains(&within) {
                let _ = writeln!(wrong, "{id}, {size}: {within} within the window, not {low} to {high}");
            }
            for found in &at.bands {
                let ends = &band["percentile_bands"][found.percentile.to_string()];
                let (low, high) = (number(ends[0].as_str().unwrap()), number(ends[1].as_str().unwrap()));
                if !(low..=high).contains(&found.value) {
                    let value = found.value;
                    let _ = writeln!(
                        wrong,
                        "{id}, {size}: percentile {} is {value}, not {low} to {high}",
                        found.percentile
                    );
                }
            }
        }
    }
    println!("{bands} bands; left out: {left_out:?}");
    assert!(wrong.is_empty(), "{wrong}");
    assert_eq!(left_out, ["time_above_percent"], "only what belongs to goals is left out");
}

/// A scenario whose only point is its covariate.
fn covariate_only(spread: &str, size: u64) -> String {
    format!(
        "neap = 1\n[population]\nsize = {size}\nseed = 7\n[population.own]\n{spread}\n[drug]\nname = \"invented\"\n\
         model = \"one-compartment\"\n[drug.parameter.clearance]\ntypical = \"5 L/h\"\n[drug.parameter.volume]\n\
         typical = \"50 L\"\n[[arm]]\nname = \"only\"\n[[arm.dose]]\namount = \"100 mg\"\nroute = \"bolus\"\n\
         [output]\ntimes = [\"0 h\"]\npercentiles = [50]\n"
    )
}

fn row<'a>(results: &'a Results, quantity: &str, statistic: &str) -> &'a Realised {
    let find = |row: &&Realised| row.quantity == quantity && row.statistic == statistic;
    results.population.iter().find(find).unwrap_or_else(|| panic!("no {statistic} of {quantity}"))
}

/// Compares what the population table asks and shows with the moments of a reference file.
///
/// Asked: the standard deviation comes from the second moment less the squared mean, each with an error of a few units in the
/// last place, so it is off by `8 eps (mean / sd)^2`, at least 1e-13. Realised: the mean within `z sd / sqrt(n)`, with z for
/// a false-alarm rate of 1e-6.
fn moments(what: &str, results: &Results, n: u64, mean: f64, sd: f64) {
    let mean_row = row(results, "own", "mean");
    let sd_row = row(results, "own", "standard deviation");
    let cancelled = (8.0 * f64::EPSILON * (mean / sd) * (mean / sd)).max(1e-13);
    for (row, expected, tolerance) in [(mean_row, mean, 1e-13), (sd_row, sd, cancelled)] {
        let asked = row.asked.expect("a closed form");
        let error = (asked - expected).abs() / expected.abs();
        assert!(error <= tolerance, "{what}: {} asked {asked} for {expected}, off by {error:.1e}", row.statistic);
    }
    let error = (mean_row.realised - mean).abs();
    assert!(error <= ONE_IN_A_MILLION * sd / (n as f64).sqrt(), "{what}: mean {} for {mean}", mean_row.realised);
}

/// Realised percentiles lie between the quantiles at `p -+ z sqrt(p (1 - p) / n)`, with z for a false-alarm rate of 1e-6: the
/// share of patients below the quantile at `q` is binomial with probability `q`.
fn percentiles(what: &str, results: &Results, n: u64, limited: &Limited) {
    for (p, name) in [(0.05, "percentile 5"), (0.5, "percentile 50"), (0.95, "percentile 95")] {
        let row = row(results, "own", name);
        let half = ONE_IN_A_MILLION * (p * (1.0f64 - p) / n as f64).sqrt() + 1.0 / n as f64;
        let (low, high) = (quantile(limited, p - half), quantile(limited, p + half));
        assert!((low..=high).contains(&row.realised), "{what}: {name} is {}, not {low} to {high}", row.realised);
        assert_eq!(row.asked, Some(quantile(limited, p)), "{what}: {name}");
    }
}

/// `statistics/lognormal.csv` (mpmath, 25 digits): moments and quantiles of the three stated forms, asked and sampled.
#[test]
fn lognormal_covariates_are_what_they_are_said_to_be() {
    const N: u64 = 200_000;
    let rows = csv("statistics/lognormal.csv");
    let mut forms: Vec<(&str, &str, &str)> = Vec::new();
    for row in &rows {
        let form = (row["parameterisation"].as_str(), row["parameter_1"].as_str(), row["parameter_2"].as_str());
        if forms.last() != Some(&form) {
            forms.push(form);
        }
    }
    assert_eq!(forms.len(), 5);
    for (form, first, second) in forms {
        let own = |quantity: &str| {
            rows.iter()
                .filter(|row| {
                    row["parameterisation"] == form && row["parameter_1"] == first && row["quantity"] == quantity
                })
                .map(|row| (row["probability"].clone(), number(&row["value_25_digits"])))
                .collect::<Vec<_>>()
        };
        let value = |quantity: &str| own(quantity)[0].1;
        let spread = match form {
            "mean_and_cv" => format!("mean = \"{first} kg\"\ncv = \"{} %\"", percent(second)),
            "median_and_log_sd" => format!("median = \"{first} kg\"\nlog_sd = {second}"),
            // The scenario takes the logarithm of the geometric standard deviation.
            "median_and_geometric_sd" => format!("median = \"{first} kg\"\nlog_sd = {}", value("log_sd")),
            other => panic!("unknown form `{other}`"),
        };
        let text = covariate_only(&format!("distribution = \"lognormal\"\n{spread}"), N);
        let results = run(&text);
        let what = format!("{form} {first} {second}");
        let limited = limited(&results);
        let Distribution::Lognormal { median, log_sd } = limited.distribution else { panic!("{what}: {limited:?}") };
        let near = |got: f64, expected: f64, tolerance: f64| (got - expected).abs() <= tolerance * expected.abs();
        assert!(near(log_sd, value("log_sd"), 1e-12), "{what}: log-sd {log_sd} for {}", value("log_sd"));
        // The median is exp of the mean of logarithms; a relative error of it is an absolute one there.
        let log_mean = value("log_mean");
        #[expect(clippy::disallowed_methods, reason = "the machine's own logarithm is the outside view here")]
        let got = median.ln();
        assert!((got - log_mean).abs() <= 1e-14 * log_mean.abs().max(1.0), "{what}: log-mean {got} for {log_mean}");
        // The sample mean of a wide one is far from normal, so no tolerance follows; its percentiles say enough.
        if log_sd < 0.5 {
            moments(&what, &results, N, value("mean"), value("standard_deviation"));
        }
        for (p, expected) in own("quantile") {
            let got = quantile(&limited, number(&p));
            assert!(near(got, expected, 1e-13), "{what}: quantile {p} is {got} for {expected}");
        }
        percentiles(&what, &results, N, &limited);
    }
}

/// A fraction in decimal digits as a percentage, exactly.
fn percent(fraction: &str) -> String {
    let (whole, part) = fraction.split_once('.').unwrap_or((fraction, ""));
    let part = format!("{part:0<2}");
    format!("{whole}{}.{}0", &part[..2], &part[2..])
}

/// The only covariate's distribution, as the engine understood it.
fn limited(results: &Results) -> Limited {
    match &results.plan.scenario().population.covariates[0].spread {
        neap_engine::scenario::Spread::Number(limited) => *limited,
        other => panic!("{other:?}"),
    }
}

/// `statistics/truncated_normal.csv` (mpmath, 25 digits): the limits act by inversion.
///
/// The case that starts 8 standard deviations out holds less than one part in a million and must be refused; its quantiles
/// are checked below the scenario.
#[test]
fn limits_of_a_normal_act_by_inversion() {
    const N: u64 = 200_000;
    let rows = csv("statistics/truncated_normal.csv");
    let mut cases: Vec<[&str; 4]> = Vec::new();
    for row in &rows {
        let case = ["mean_before_truncation", "sd_before_truncation", "lower", "upper"].map(|key| row[key].as_str());
        if cases.last() != Some(&case) {
            cases.push(case);
        }
    }
    assert_eq!(cases.len(), 5);
    for case in cases {
        let [mean, sd, low, high] = case.map(number);
        let own: Vec<_> = rows.iter().filter(|row| row["lower"] == case[2] && row["upper"] == case[3]).collect();
        let value = |quantity: &str| {
            number(&own.iter().find(|row| row["quantity"] == quantity).expect("it is in the file")["value_25_digits"])
        };
        let limited = Limited { distribution: Distribution::Normal { mean, sd }, low, high };
        let what = format!("{case:?}");
        for row in own.iter().filter(|row| row["quantity"] == "quantile") {
            let (got, expected) = (quantile(&limited, number(&row["probability"])), number(&row["value_25_digits"]));
            assert!((got - expected).abs() <= 1e-13 * expected.abs(), "{what}: {row:?}: {got}");
        }
        // Infinite limits, and limits around negative values, cannot be written: the first become far ones.
        let written = |limit: f64| if limit.is_finite() { limit } else { limit.signum() * 1e6 };
        let text = covariate_only(
            &format!(
                "distribution = \"normal\"\nmean = \"{mean} kg\"\nsd = \"{sd} kg\"\nlimits = [\"{} kg\", \"{} kg\"]",
                written(low).max(0.0),
                written(high)
            ),
            N,
        );
        if low == 8.0 {
            let source = neap_engine::diagnostic::Source { name: "test.toml".to_owned(), text };
            assert!(neap_engine::scenario::Scenario::parse(source).is_err(), "{what} holds almost nothing");
            continue;
        }
        let results = run(&text);
        moments(&what, &results, N, value("mean"), value("standard_deviation"));
        percentiles(&what, &results, N, &limited);
    }
}

/// Shares of classes: binomial, within `z sqrt(p (1 - p) / n)`, false-alarm rate 1e-6 a class.
#[test]
fn classes_come_in_their_proportions() {
    const N: u64 = 200_000;
    let shares = [("a", 0.5), ("b", 0.3), ("c", 0.15), ("d", 0.05)];
    let text =
        covariate_only("distribution = \"categories\"\nproportions = { a = 0.5, b = 0.3, c = 0.15, d = 0.05 }", N);
    let results = run(&text);
    let mut sum = 0.0;
    for (class, share) in shares {
        let row = row(&results, &format!("own = {class}"), "share");
        let half = ONE_IN_A_MILLION * (share * (1.0f64 - share) / N as f64).sqrt();
        assert!((row.realised - share).abs() <= half, "{class}: {} for {share}", row.realised);
        assert!((row.asked.unwrap() - share).abs() <= 1e-15);
        sum += row.realised * N as f64;
    }
    assert!((sum - N as f64).abs() < 1e-6, "every patient is in one class");
}

/// Uniform and triangular distributions within limits have elementary quantiles and moments (written out here).
#[test]
fn uniform_and_triangular_covariates_are_what_they_are_said_to_be() {
    const N: u64 = 200_000;
    let results = run(&covariate_only("distribution = \"uniform\"\nfrom = \"40 kg\"\nto = \"100 kg\"", N));
    let twelfth = (60.0f64 * 60.0 / 12.0).sqrt();
    moments("uniform", &results, N, 70.0, twelfth);
    percentiles("uniform", &results, N, &limited(&results));
    assert_eq!(row(&results, "own", "percentile 5").asked, Some(43.0));

    let text = "distribution = \"triangular\"\nfrom = \"40 kg\"\nmode = \"60 kg\"\nto = \"100 kg\"";
    let results = run(&covariate_only(text, N));
    let (a, b, c) = (40.0f64, 60.0, 100.0);
    let variance = (a * a + b * b + c * c - a * b - a * c - b * c) / 18.0;
    moments("triangular", &results, N, (a + b + c) / 3.0, variance.sqrt());
    percentiles("triangular", &results, N, &limited(&results));
    let median = c - ((c - a) * (c - b) / 2.0).sqrt();
    let asked = row(&results, "own", "percentile 50").asked.unwrap();
    assert!((asked - median).abs() <= 1e-13 * median, "{asked} for {median}");
}

/// The correlation of the logarithms of two parameters. With Fisher's transformation the error of `atanh(r)` is normal with
/// standard deviation `1 / sqrt(n - 3)`; false-alarm rate 1e-6.
#[test]
#[expect(clippy::disallowed_methods, reason = "the machine's own logarithm is the outside view here")]
fn random_parts_are_correlated_as_asked() {
    const N: u64 = 100_000;
    for asked in [-0.9, -0.3, 0.0, 0.5, 0.99] {
        let text = format!(
            "neap = 1\n[population]\nsize = {N}\nseed = 3\n[drug]\nname = \"invented\"\nmodel = \"one-compartment\"\n{}{}{}\
             [[arm]]\nname = \"only\"\n[[arm.dose]]\namount = \"100 mg\"\nroute = \"bolus\"\n[output]\ntimes = [\"0 h\"]\n",
            lognormal("clearance", "5", "L/h", "0.3"),
            lognormal("volume", "50", "L", "0.2"),
            correlation("clearance", "volume", &asked.to_string()),
        );
        let all = neap_tests::patients(&neap_tests::plan(neap_tests::scenario(&text)));
        let logs: Vec<Vec<f64>> =
            all.parameters.iter().map(|column| column.iter().map(|value| value.ln()).collect()).collect();
        let mean = |values: &[f64]| values.iter().sum::<f64>() / N as f64;
        let centers = [mean(&logs[0]), mean(&logs[1])];
        let product = |i: usize, j: usize| {
            logs[i].iter().zip(&logs[j]).map(|(a, b)| (a - centers[i]) * (b - centers[j])).sum::<f64>()
        };
        let found = product(0, 1) / (product(0, 0) * product(1, 1)).sqrt();
        let transformed = |r: f64| 0.5 * ((1.0 + r) / (1.0 - r)).ln();
        let half = ONE_IN_A_MILLION / ((N - 3) as f64).sqrt();
        assert!((transformed(found) - transformed(asked)).abs() <= half, "correlation {found} for {asked}");
    }
}
