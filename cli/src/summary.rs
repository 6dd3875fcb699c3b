//! What a run found, on one screen an arm: shares at the times that matter with their intervals, a picture of the bands,
//! where the tables are, and what the numbers leave out.

use std::fmt::Write;
use std::path::Path;

use neap_engine::quantity::to_f64;
use neap_engine::run::{ArmResult, AtTime, Band, Counts, Results};
use neap_engine::scenario::{Arm, Window};
use neap_engine::tables::{
    BANDS, BANDS_METHOD, CAUTIONS, PARAMETER_UNCERTAINTY, PATIENTS, POPULATION, RUN_JSON, SHARES, SHARES_METHOD, Share,
    VERSION, names,
};
use serde_json::{Value, json};

use crate::numbers::{counted, listed, ordinal, percent, significant, wrapped};
use crate::picture::Frame;
use crate::printer::Look;

/// Sentences are not wider than this on the widest terminal.
const WIDEST: usize = 100;

/// A time that the summary shows, and why.
struct Moment<'a> {
    at: &'a AtTime,
    why: String,
}

/// The three times that say most about an arm, in order, each once: shortly before the last dose, where the middle percentile is
/// highest, and the end.
fn moments<'a>(arm: &Arm, result: &'a ArmResult) -> Vec<Moment<'a>> {
    let times = &result.times;
    let mut found: Vec<(usize, String)> = Vec::new();
    let last_dose = arm.doses.iter().flat_map(|row| &row.times).max().map(to_f64);
    if let Some(dose) = last_dose
        && let Some(index) = times.partition_point(|at| at.time_h < dose).checked_sub(1)
    {
        found.push((index, format!("the last output time before the last dose (at {} h)", significant(dose, 6))));
    }
    let middle = times.first().map_or(0, nearest_to_half);
    let value = |at: &AtTime| at.bands.get(middle).map_or(f64::NEG_INFINITY, |band| band.value);
    let highest =
        (0..times.len()).reduce(|best, index| if value(&times[index]) > value(&times[best]) { index } else { best });
    if let Some(index) = highest.filter(|index| value(&times[*index]) > 0.0) {
        found.push((index, format!("where the {} is highest", percentile_name(times[index].bands[middle].percentile))));
    }
    if let Some(index) = times.len().checked_sub(1) {
        found.push((index, "the last output time".to_owned()));
    }
    found.sort_by_key(|(index, _)| *index); // stable: reasons of one time stay in the order above
    let mut moments: Vec<Moment<'a>> = Vec::new();
    for (index, why) in found {
        match moments.last_mut().filter(|last| last.at.time_h == times[index].time_h) {
            Some(last) => last.why = format!("{} and {why}", last.why),
            None => moments.push(Moment { at: &times[index], why }),
        }
    }
    moments
}

/// Index of the percentile nearest to the median.
fn nearest_to_half(at: &AtTime) -> usize {
    let distance = |index: &usize| (at.bands[*index].percentile - 50.0).abs();
    (0..at.bands.len()).min_by(|a, b| distance(a).total_cmp(&distance(b))).unwrap_or(0)
}

fn percentile_name(percentile: f64) -> String {
    if percentile == 50.0 { "median".to_owned() } else { format!("{} percentile", ordinal(percentile)) }
}

/// The summary for people.
pub(crate) fn text(results: &Results, folder: &Path, patients_table: bool, look: Look) -> String {
    let scenario = results.plan.scenario();
    let unit = &scenario.output.concentration.text;
    let width = look.width.min(WIDEST);
    let mut text = String::new();
    for line in [&scenario.title, &scenario.question].into_iter().flatten() {
        text += &wrapped(line, width, 0);
    }
    let _ = writeln!(
        text,
        "{}, seed {}, {}{}",
        counted(results.patients, "simulated patient"),
        scenario.population.seed,
        scenario.drug.name,
        if scenario.between_subject { "" } else { ", between-subject variability off" },
    );
    let window = names::window(scenario);
    let shown = match &window {
        Some(window) => format!("Share of patients below, within and above the window of {window}"),
        None => format!("No window, so no shares: percentiles in {unit}"),
    };
    let _ = write!(text, "\n{}", wrapped(&format!("{shown}, each with its 95 % Monte Carlo interval"), width, 0));
    let frame = Frame::of(results.arms.iter().map(|arm| &arm.times[..]), names::window_limits(scenario), unit, look);
    for (arm, result) in scenario.arms.iter().zip(&results.arms) {
        let _ = writeln!(text, "\n{}\n", result.name);
        let moments = moments(arm, result);
        text += &match &scenario.window {
            Some(window) => shares(&moments, results.patients, window),
            None => percentiles(&moments),
        };
        let reasons: Vec<String> =
            moments.iter().map(|moment| format!("{} is {}", hours(moment.at.time_h), moment.why)).collect();
        let _ = write!(text, "\n{}", wrapped(&format!("{}.", reasons.join("; ")), width, 2));
        if let Some(picture) = frame.draw(&result.times, interval(arm)) {
            let _ = write!(text, "\n{picture}");
        }
    }
    text.push('\n');
    let files = listed(&files(results, patients_table).iter().map(|file| (*file).to_owned()).collect::<Vec<_>>());
    for line in [
        "A band joins percentiles of the population time by time: no single patient follows one.".to_owned(),
        format!("The intervals hold sampling error only; {PARAMETER_UNCERTAINTY}."),
        format!("Written to {}: {files}.", folder.display()),
        CAUTIONS[..3].join(" "),
    ] {
        text += &wrapped(&line, width, 0);
    }
    text
}

/// The usual time between doses of an arm: the middle one of the times from each dose to the next; `None` with fewer than three doses.
fn interval(arm: &Arm) -> Option<f64> {
    let mut times: Vec<f64> = arm.doses.iter().flat_map(|row| &row.times).map(to_f64).collect();
    times.sort_by(f64::total_cmp);
    times.dedup();
    let mut gaps: Vec<f64> = times.windows(2).map(|pair| pair[1] - pair[0]).collect();
    gaps.sort_by(f64::total_cmp);
    (gaps.len() >= 2).then(|| gaps[gaps.len() / 2])
}

fn hours(time: f64) -> String {
    format!("{} h", significant(time, 6))
}

/// One line a time, one cell for each part that the window has.
fn shares(moments: &[Moment<'_>], patients: u64, window: &Window) -> String {
    let parts = |counts| Share::parts(counts, patients, window);
    let heads: Vec<String> = ["below", "within", "above"]
        .into_iter()
        .zip(parts(Counts::default()))
        .filter_map(|(head, part)| part.map(|_| head.to_owned()))
        .collect();
    aligned(&heads, moments, |at| {
        let shares = parts(at.shares.unwrap_or_default()).into_iter().flatten();
        shares.map(|share| percent(share.value, share.lower, share.upper)).collect()
    })
}

/// One line a time, one cell for the lowest, the middle and the highest percentile.
fn percentiles(moments: &[Moment<'_>]) -> String {
    let Some(first) = moments.first() else { return String::new() };
    let mut shown = vec![0, nearest_to_half(first.at), first.at.bands.len().saturating_sub(1)];
    shown.dedup();
    let heads: Vec<String> = shown.iter().map(|&index| percentile_name(first.at.bands[index].percentile)).collect();
    let cell = |band: &Band| match (band.mc_lower, band.mc_upper) {
        (Some(low), Some(high)) => {
            format!("{} ({} to {})", significant(band.value, 3), significant(low, 3), significant(high, 3))
        }
        _ => format!("{} (too few)", significant(band.value, 3)),
    };
    let text = aligned(&heads, moments, |at| shown.iter().map(|&index| cell(&at.bands[index])).collect());
    if text.contains("(too few)") { text + "  (too few): too few patients for an interval\n" } else { text }
}

/// A line of heads, then a line a time; columns as wide as their widest cell.
fn aligned(heads: &[String], moments: &[Moment<'_>], cells: impl Fn(&AtTime) -> Vec<String>) -> String {
    let mut lines = vec![(String::new(), heads.to_vec())];
    lines.extend(moments.iter().map(|moment| (hours(moment.at.time_h), cells(moment.at))));
    let width = |column: usize| lines.iter().map(|(_, cells)| cells[column].chars().count()).max().unwrap_or(0);
    let mut text = String::new();
    for (time, cells) in &lines {
        let mut line = format!("  {time:>8}");
        for (column, cell) in cells.iter().enumerate() {
            let _ = write!(line, "  {cell:<width$}", width = width(column));
        }
        let _ = writeln!(text, "{}", line.trim_end());
    }
    text
}

/// The files of the folder, in the order in which they are written.
fn files(results: &Results, patients_table: bool) -> Vec<&'static str> {
    let shares = results.plan.scenario().window.is_some().then_some(SHARES.file);
    let patients = patients_table.then_some(PATIENTS.file);
    [Some(BANDS.file), shares, Some(POPULATION.file), patients, Some(RUN_JSON)].into_iter().flatten().collect()
}

/// The summary for programs: the same facts.
pub(crate) fn json(results: &Results, folder: &Path, patients_table: bool) -> String {
    let scenario = results.plan.scenario();
    let share = |share: Share| {
        json!({
            "share": share.value,
            "standard_error": share.standard_error,
            "mc_lower": share.lower,
            "mc_upper": share.upper,
        })
    };
    let moment = |moment: &Moment<'_>| {
        let shares = |(counts, window)| {
            let [below, within, above] = Share::parts(counts, results.patients, window).map(|part| part.map(share));
            json!({ "below": below, "within": within, "above": above })
        };
        let band = |band: &Band| {
            json!({
                "percentile": band.percentile,
                "value": band.value,
                "mc_lower": band.mc_lower,
                "mc_upper": band.mc_upper,
            })
        };
        json!({
            "time_h": moment.at.time_h,
            "why": moment.why,
            "shares": moment.at.shares.zip(scenario.window.as_ref()).map(shares),
            "bands": moment.at.bands.iter().map(band).collect::<Vec<_>>(),
        })
    };
    let arms: Vec<Value> = scenario
        .arms
        .iter()
        .zip(&results.arms)
        .map(|(arm, result)| {
            json!({ "name": result.name, "times": moments(arm, result).iter().map(moment).collect::<Vec<_>>() })
        })
        .collect();
    let value = json!({
        "neap": VERSION,
        "title": scenario.title,
        "question": scenario.question,
        "drug": scenario.drug.name,
        "patients": results.patients,
        "seed": scenario.population.seed,
        "between_subject_variability": scenario.between_subject,
        "window": names::window(scenario),
        "concentration_unit": scenario.output.concentration.text,
        "methods": { "shares": SHARES_METHOD, "bands": BANDS_METHOD },
        "arms": arms,
        "folder": folder.display().to_string(),
        "files": files(results, patients_table),
        "parameter_uncertainty": PARAMETER_UNCERTAINTY,
        "cautions": CAUTIONS,
    });
    format!("{value:#}\n")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::testing;

    fn shown(results: &Results) -> String {
        text(results, Path::new("tablets-results"), false, testing::look(true))
    }

    #[test]
    fn the_usual_interval_is_not_the_exception() {
        let mut arm = testing::scenario().arms[0].clone();
        assert_eq!(interval(&arm), Some(12.0));
        arm.doses[0].times.remove(3);
        assert_eq!(interval(&arm), Some(12.0));
        arm.doses[0].times.truncate(2);
        assert_eq!(interval(&arm), None);
    }

    #[test]
    fn says_what_has_to_be_said() {
        let text = shown(&testing::results());
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        let flowing = text.split_whitespace().collect::<Vec<_>>().join(" ");
        for wanted in [
            "Twice-daily tablets of an invented antiseizure compound",
            "10,000 simulated patients, seed 41, Compound A (invented)",
            "window of 2 to 8 mg/L",
            "155 h is the last output time before the last dose (at 156 h)",
            "168 h is the last output time.",
            "median is highest",
            "Written to tablets-results: bands.parquet, shares.parquet, population.parquet and run.json.",
            "parameter uncertainty not included",
            "it prescribes for nobody",
        ] {
            assert!(flowing.contains(wanted), "{wanted}\n{text}");
        }
    }

    #[test]
    fn shares_have_intervals_and_fit_eighty_columns() {
        let results = testing::results();
        let scenario = results.plan.scenario();
        let moments = moments(&scenario.arms[0], &results.arms[0]);
        let line = shares(&moments, results.patients, scenario.window.as_ref().unwrap());
        assert!(line.lines().all(|line| line.chars().count() <= 80), "{line}");
        assert_eq!(line.matches(" % (").count(), 9, "{line}");
        let line = shares(&moments, results.patients, &Window { low: Some(2.0), high: None });
        assert!(!line.contains("above"), "nobody can be above an open side: {line}");
    }

    #[test]
    fn without_a_window_percentiles_take_the_place_of_shares() {
        let mut scenario = testing::scenario();
        scenario.window = None;
        let mut results = testing::results_of(scenario);
        results.arms.iter_mut().flat_map(|arm| &mut arm.times).for_each(|at| at.shares = None);
        let text = shown(&results);
        assert!(text.contains("No window, so no shares"), "{text}");
        assert!(text.contains("95th percentile"), "{text}");
        assert!(!text.contains("shares.parquet"), "{text}");
        assert!(!text.contains("window\n"), "{text}");
    }

    #[test]
    fn times_that_coincide_are_shown_once() {
        let results = testing::results();
        let mut arm = results.plan.scenario().arms[0].clone();
        arm.doses[0].times.truncate(1);
        let moments = moments(&arm, &results.arms[0]);
        assert_eq!(moments.len(), 2, "no time stands before the only dose");
        let one = ArmResult { name: arm.name.clone(), times: results.arms[0].times[168..].to_vec() };
        let moments = super::moments(&arm, &one);
        assert_eq!(moments.len(), 1);
        assert_eq!(moments[0].why, "where the median is highest and the last output time");
    }

    #[test]
    fn json_has_the_same_facts() {
        let value: Value = serde_json::from_str(&json(&testing::results(), Path::new("out"), true)).unwrap();
        assert_eq!(value["patients"], 10_000);
        assert_eq!(value["arms"][1]["times"][0]["time_h"], 155.0);
        assert!(value["arms"][0]["times"][0]["shares"]["within"]["mc_lower"].is_f64());
        assert_eq!(value["files"][3], "patients.parquet");
        assert_eq!(value["parameter_uncertainty"], PARAMETER_UNCERTAINTY);
    }
}
