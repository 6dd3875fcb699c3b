//! Where numbers come from: what every file says about itself, and `run.json`.

use std::fmt::Write;
use std::time::{Duration, SystemTime};

use parquet::file::metadata::KeyValue;
use serde_json::{Value, json};
use sha2::{Digest, Sha256};

use super::names;
use crate::diagnostic::{Diagnostic, Severity, Source};
use crate::quantity::to_f64;
use crate::run::Results;
use crate::scenario::Scenario;

/// Name of the file that tells how a folder of results came about.
pub const RUN_JSON: &str = "run.json";

/// Version of neap, a part of what decides the bytes of a table.
pub const VERSION: &str = env!("CARGO_PKG_VERSION");

/// What the numbers leave out, to be said wherever they are shown.
pub const PARAMETER_UNCERTAINTY: &str = "parameter uncertainty not included";

/// What everyone who sees results has to know; shown in the help, the summary and `run.json`.
pub const CAUTIONS: [&str; 4] = [
    "neap is for designing studies; it prescribes for nobody.",
    "Results depend on the model and the data given: check them with a qualified clinical pharmacologist.",
    "The protocol, ethics approval, product labelling and local rules decide.",
    "The compounds of the demo scenarios are invented.",
];

/// SHA-256 of a text, in hexadecimal.
pub fn sha256(text: &str) -> String {
    hexadecimal(&Sha256::digest(text.as_bytes()))
}

/// Bytes in hexadecimal.
pub(super) fn hexadecimal(bytes: &[u8]) -> String {
    bytes.iter().fold(String::new(), |mut text, byte| {
        let _ = write!(text, "{byte:02x}");
        text
    })
}

/// What the key-value metadata of every Parquet file says. The seed and the size are those that were used, which may
/// have been given beside the scenario.
pub(super) fn key_values(scenario: &Scenario) -> Vec<KeyValue> {
    [
        ("version", format!("neap {VERSION}")),
        ("scenario sha256", sha256(&scenario.source.text)),
        ("seed", scenario.population.seed.to_string()),
        ("patients", scenario.population.size.to_string()),
        ("parameter uncertainty", "not included".to_owned()),
    ]
    .into_iter()
    .map(|(key, value)| KeyValue::new(key.to_owned(), value))
    .collect()
}

/// One file that was written.
pub(super) struct Written {
    pub(super) file: &'static str,
    pub(super) rows: u64,
    pub(super) bytes: u64,
    pub(super) sha256: String,
}

/// The text of `run.json`. It holds times, so it is outside the contract of identical bytes.
pub(super) fn run_json(results: &Results, started: SystemTime, writing: Duration, written: &[Written]) -> String {
    let scenario = results.plan.scenario();
    let limits = results.plan.limits();
    let effort = &results.effort;
    let times = results.arms.first().map_or(0, |arm| arm.times.len());
    let value = json!({
        "neap": VERSION,
        "title": scenario.title,
        "question": scenario.question,
        "cautions": CAUTIONS,
        "parameter_uncertainty": PARAMETER_UNCERTAINTY,
        "scenario": {
            "name": scenario.source.name,
            "sha256": sha256(&scenario.source.text),
            "text": scenario.source.text,
        },
        "seed": scenario.population.seed,
        "patients": results.patients,
        "drug": scenario.drug.name,
        "arms": results.arms.iter().map(|arm| arm.name.as_str()).collect::<Vec<_>>(),
        "window": names::window(scenario),
        "concentration_unit": scenario.output.concentration.text,
        "percentiles": scenario.output.percentiles.iter().map(to_f64).collect::<Vec<_>>(),
        "between_subject_variability": scenario.between_subject,
        "defaults": scenario.defaults.iter().map(|d| json!({ "key": d.key, "value": d.value })).collect::<Vec<_>>(),
        "warnings": scenario.warnings.iter().map(|w| diagnostic(&scenario.source, w)).collect::<Vec<_>>(),
        "counts": {
            "arms": results.arms.len(),
            "output_times": times,
            "values": results.patients * (times * results.arms.len()) as u64,
            "passes": effort.passes,
            "repeated_passes": effort.repeats,
        },
        "tables": written.iter().map(|table| json!({
            "file": table.file,
            "rows": table.rows,
            "bytes": table.bytes,
            "sha256": table.sha256,
        })).collect::<Vec<_>>(),
        "started": utc(started),
        "threads": effort.threads,
        "memory_budget_bytes": limits.memory,
        "seconds": {
            "run": effort.total,
            "pilot": effort.pilot,
            "selecting": effort.selecting,
            "writing": writing.as_secs_f64(),
            "sampling_summed_over_threads": effort.sampling,
            "solving_summed_over_threads": effort.solving,
            "counting_summed_over_threads": effort.counting,
        },
    });
    format!("{value:#}\n")
}

/// A diagnostic as JSON, its place as line and column from 1.
pub fn diagnostic(source: &Source, diagnostic: &Diagnostic) -> Value {
    let place = diagnostic.span.map(|span| source.position(span.start));
    json!({
        "severity": match diagnostic.severity { Severity::Error => "error", Severity::Warning => "warning" },
        "message": diagnostic.message,
        "label": diagnostic.label,
        "file": source.name,
        "line": place.map(|(line, _)| line),
        "column": place.map(|(_, column)| column),
        "help": diagnostic.help,
        "replacement": diagnostic.mend.as_ref().map(|mend| mend.replacement.as_str()),
    })
}

/// A time of day in UTC, as in 2026-03-01T08:05:09Z.
fn utc(time: SystemTime) -> String {
    let seconds = time.duration_since(SystemTime::UNIX_EPOCH).map_or(0, |since| since.as_secs());
    let (days, of_day) = (seconds / 86_400, seconds % 86_400);
    // The civil date from a count of days, in the Gregorian calendar, counted from 1 March of year 0 so that the leap day ends
    // a year: 146,097 days are 400 years, and (5 d + 2) / 153 is the month of a day in a year that begins in March.
    let day = days + 719_468;
    let era = day / 146_097;
    let of_era = day % 146_097;
    let year_of_era = (of_era - of_era / 1_460 + of_era / 36_524 - of_era / 146_096) / 365;
    let of_year = of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    let month = (5 * of_year + 2) / 153;
    let day_of_month = of_year - (153 * month + 2) / 5 + 1;
    let (month, turn) = if month < 10 { (month + 3, 0) } else { (month - 9, 1) };
    let year = era * 400 + year_of_era + turn;
    let (hour, minute, second) = (of_day / 3600, of_day / 60 % 60, of_day % 60);
    format!("{year:04}-{month:02}-{day_of_month:02}T{hour:02}:{minute:02}:{second:02}Z")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diagnostic::Span;

    #[test]
    fn dates_of_the_calendar() {
        let at = |seconds| utc(SystemTime::UNIX_EPOCH + Duration::from_secs(seconds));
        assert_eq!(at(0), "1970-01-01T00:00:00Z");
        assert_eq!(at(951_782_399), "2000-02-28T23:59:59Z");
        assert_eq!(at(951_782_400), "2000-02-29T00:00:00Z");
        assert_eq!(at(1_796_137_559), "2026-12-01T15:05:59Z");
        assert_eq!(at(4_107_542_400), "2100-03-01T00:00:00Z");
    }

    #[test]
    fn hash_of_the_standard_example() {
        // FIPS 180-2, appendix B.1.
        assert_eq!(sha256("abc"), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    }

    #[test]
    fn a_diagnostic_tells_its_line_and_column() {
        let source = Source { name: "x.toml".to_owned(), text: "a = 1\n\u{b5}g = 1\n".to_owned() };
        let value = diagnostic(&source, &Diagnostic::warning(Span { start: 8, end: 9 }, "odd"));
        assert_eq!((value["line"].as_u64(), value["column"].as_u64()), (Some(2), Some(2)));
        assert_eq!(value["severity"], "warning");
    }
}
