//! The binary as a user meets it: exit codes, what goes to which stream, what is left on the disk.

use std::fs;
use std::path::Path;
use std::process::{Command, Output, Stdio};

use tempfile::TempDir;

/// Tablets of an invented compound.
const SCENARIO: &str = r#"neap = 1
title = "Tablets of an invented compound"
[population]
size = 3000
seed = 7
[population.weight]
distribution = "lognormal"
mean = "75 kg"
cv = "20 %"
limits = ["40 kg", "140 kg"]
[drug]
name = "Compound A (invented)"
model = "one-compartment"
[drug.parameter.clearance]
typical = "5 L/h"
cv = "30 %"
scale = [{ covariate = "weight", reference = "70 kg", exponent = 0.75 }]
[drug.parameter.volume]
typical = "60 L"
[drug.parameter.absorption_rate]
typical = "1.2 /h"
[[arm]]
name = "300 mg every 12 h"
[[arm.dose]]
amount = "300 mg"
route = "oral"
every = "12 h"
count = 6
[window]
low = "2 mg/L"
high = "8 mg/L"
[output]
times = { from = "0 h", to = "72 h", step = "1 h" }
percentiles = [5, 25, 50, 75, 95]
"#;

/// A folder of its own with the scenario in it.
fn place() -> TempDir {
    let place = tempfile::tempdir().expect("a temporary folder");
    fs::write(place.path().join("tablets.toml"), SCENARIO).expect("it can be written");
    place
}

fn neap(place: &Path, arguments: &[&str]) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_neap"));
    command.current_dir(place).args(arguments).env_remove("LANG").env("LC_ALL", "C");
    command
}

fn run(place: &Path, arguments: &[&str]) -> Output {
    neap(place, arguments).output().expect("neap starts")
}

fn names(place: &Path) -> Vec<String> {
    let entries = fs::read_dir(place).expect("it can be listed");
    let mut names: Vec<String> =
        entries.map(|entry| entry.expect("an entry").file_name().to_string_lossy().into_owned()).collect();
    names.sort();
    names
}

fn text(bytes: &[u8]) -> &str {
    std::str::from_utf8(bytes).expect("UTF-8")
}

#[test]
fn a_run_writes_its_folder_and_shows_its_summary() {
    let place = place();
    let output = run(place.path(), &["run", "tablets.toml"]);
    assert_eq!((output.status.code(), text(&output.stderr)), (Some(0), ""));
    assert!(output.stdout.is_ascii(), "the locale has no more");
    assert!(text(&output.stdout).contains("Written to tablets-results"), "{}", text(&output.stdout));
    assert_eq!(names(place.path()), ["tablets-results", "tablets.toml"]);
    let written = names(&place.path().join("tablets-results"));
    assert_eq!(written, ["bands.parquet", "population.parquet", "run.json", "shares.parquet"]);
}

#[test]
fn threads_and_memory_change_no_byte() {
    let place = place();
    let tables = ["bands.parquet", "shares.parquet", "population.parquet", "patients.parquet"];
    let bytes = |out: &str, more: &[&str]| {
        let arguments = [&["run", "tablets.toml", "--patients-table", "--out", out], more].concat();
        let output = run(place.path(), &arguments);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
        tables.map(|table| fs::read(place.path().join(out).join(table)).expect("the table is there"))
    };
    let one = bytes("one", &["--threads", "1"]);
    assert!(one == bytes("three", &["--threads", "3", "--memory", "64MiB"]));
    assert!(one != bytes("other", &["--seed", "8"]), "another seed is another population");
}

#[test]
fn a_bad_scenario_is_refused_with_all_its_faults() {
    let place = place();
    let bad = SCENARIO.replace("\"5 L/h\"", "\"5 L\"").replace("\"oral\"", "\"orally\"");
    fs::write(place.path().join("bad.toml"), bad).expect("it can be written");
    let output = run(place.path(), &["run", "bad.toml"]);
    let shown = text(&output.stderr);
    assert_eq!((output.status.code(), text(&output.stdout)), (Some(2), ""));
    assert!(shown.contains("--> bad.toml:15:"), "{shown}");
    assert!(shown.find("5 L").unwrap() < shown.find("orally").unwrap(), "{shown}");
    assert!(shown.trim_end().ends_with("faults; nothing was written"), "{shown}");
    assert!(!shown.contains('\u{1b}'), "no colour where no terminal is");
    assert_eq!(names(place.path()), ["bad.toml", "tablets.toml"]);
}

#[test]
fn a_folder_that_exists_is_refused_and_an_earlier_run_replaced() {
    let place = place();
    let out = place.path().join("out");
    fs::create_dir(&out).expect("it can be made");
    fs::write(out.join("notes.txt"), "mine").expect("it can be written");
    let refused = run(place.path(), &["run", "tablets.toml", "--out", "out"]);
    assert_eq!(refused.status.code(), Some(2));
    assert!(text(&refused.stderr).contains("--replace"));
    let foreign = run(place.path(), &["run", "tablets.toml", "--out", "out", "--replace"]);
    assert_eq!(foreign.status.code(), Some(2));
    assert!(text(&foreign.stderr).contains("notes.txt"));
    assert_eq!(names(&out), ["notes.txt"]);

    let again = ["run", "tablets.toml", "--out", "new/results", "--replace"];
    assert_eq!(run(place.path(), &again).status.code(), Some(0));
    assert_eq!(run(place.path(), &again).status.code(), Some(0));
    assert_eq!(names(&place.path().join("new")), ["results"]);
}

#[test]
fn what_cannot_be_read_or_written_is_an_io_failure() {
    let place = place();
    let output = run(place.path(), &["run", "absent.toml"]);
    assert_eq!(output.status.code(), Some(3));
    assert!(text(&output.stderr).contains("absent.toml"));
    let output = run(place.path(), &["run", "tablets.toml", "--out", "tablets.toml/results"]);
    assert_eq!(output.status.code(), Some(3), "{}", text(&output.stderr));
    assert_eq!(names(place.path()), ["tablets.toml"]);
}

#[test]
fn a_usage_error_is_bad_input() {
    let place = place();
    for arguments in [&["frobnicate"][..], &["run"], &["run", "tablets.toml", "--memory", "lots"]] {
        assert_eq!(run(place.path(), arguments).status.code(), Some(2), "{arguments:?}");
    }
}

#[test]
fn a_reader_that_went_away_is_no_failure() {
    let place = place();
    let mut child = neap(place.path(), &["run", "tablets.toml"])
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("neap starts");
    drop(child.stdout.take());
    let output = child.wait_with_output().expect("it ends");
    assert_eq!((output.status.code(), text(&output.stderr)), (Some(0), ""));
    assert!(place.path().join("tablets-results").exists());
}

#[test]
fn check_explains_and_writes_nothing() {
    let place = place();
    let output = run(place.path(), &["check", "tablets.toml"]);
    assert_eq!((output.status.code(), text(&output.stderr)), (Some(0), ""));
    assert!(text(&output.stdout).contains("clearance: typically 5 L/h"), "{}", text(&output.stdout));
    let json = run(place.path(), &["check", "tablets.toml", "--format", "json", "--patients", "500"]);
    let value: serde_json::Value = serde_json::from_slice(&json.stdout).expect("JSON");
    assert_eq!(value["patients"], 500);
    assert_eq!(names(place.path()), ["tablets.toml"]);
}

#[test]
fn json_is_all_of_standard_output() {
    let place = place();
    let output = run(place.path(), &["run", "tablets.toml", "--format", "json"]);
    let value: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    let shares = &value["arms"][0]["times"][0]["shares"];
    let part = |name: &str| shares[name]["share"].as_f64().expect("a share");
    assert!((part("below") + part("within") + part("above") - 1.0).abs() < 1e-12);
}

#[cfg(unix)]
#[test]
fn a_signal_stops_it_and_leaves_nothing() {
    for signal in ["-INT", "-TERM"] {
        let place = place();
        let long = ["run", "tablets.toml", "--patients", "2000000000"];
        let mut command = neap(place.path(), &long);
        let child = command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().expect("neap starts");
        std::thread::sleep(std::time::Duration::from_millis(500));
        let sent = Command::new("kill").args([signal, &child.id().to_string()]).status().expect("kill starts");
        assert!(sent.success());
        let output = child.wait_with_output().expect("it ends");
        assert_eq!(output.status.code(), Some(130), "{signal}: {}", text(&output.stderr));
        assert_eq!(text(&output.stdout), "");
        assert_eq!(names(place.path()), ["tablets.toml"]);
    }
}
