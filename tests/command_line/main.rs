//! The real binary in a fresh folder: exit codes, what goes to which stream, what is written and what is not.

use std::collections::BTreeMap;
use std::path::Path;
use std::process::{Command, Output};

use tempfile::TempDir;

const SCENARIO: &str = r#"
neap = 1
title = "A test"

[population]
size = 20_000
seed = 5

[population.weight]
distribution = "normal"
mean = "75 kg"
sd = "12 kg"
limits = ["45 kg", "120 kg"]

[drug]
name = "Compound T (invented)"
model = "one-compartment"

[drug.parameter.clearance]
typical = "5 L/h"
cv = "30 %"
scale = [{ covariate = "weight", reference = "70 kg", exponent = 0.75 }]

[drug.parameter.volume]
typical = "40 L"
cv = "20 %"

[drug.parameter.absorption_rate]
typical = "1 /h"

[[arm]]
name = "300 mg every 8 h"
[[arm.dose]]
amount = "300 mg"
route = "oral"
every = "8 h"
count = 9

[[arm]]
name = "40 mg/h"
[[arm.dose]]
amount = "2880 mg"
route = "infusion"
over = "72 h"

[window]
low = "4 mg/L"
high = "10 mg/L"

[output]
times = { from = "0 h", to = "72 h", step = "0.5 h" }
percentiles = [5, 50, 95]
"#;

/// A folder with the scenario in it.
fn fresh(text: &str) -> TempDir {
    let folder = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(folder.path().join("arm.toml"), text).expect("the scenario is written");
    folder
}

fn neap(folder: &TempDir) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_neap"));
    command.current_dir(folder);
    command
}

fn run(folder: &TempDir, arguments: &[&str]) -> Output {
    neap(folder).args(arguments).output().expect("the binary starts")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).expect("UTF-8")
}

/// Names in a folder, sorted.
fn names(folder: impl AsRef<Path>) -> Vec<String> {
    let entries = std::fs::read_dir(folder).expect("the folder can be read");
    let mut names: Vec<String> =
        entries.map(|entry| entry.expect("an entry").file_name().to_string_lossy().into_owned()).collect();
    names.sort();
    names
}

/// Every file of a folder of results but `run.json`, which holds times.
fn tables(folder: impl AsRef<Path>) -> BTreeMap<String, Vec<u8>> {
    let folder = folder.as_ref();
    let tables = names(folder).into_iter().filter(|name| name != "run.json");
    tables.map(|name| (name.clone(), std::fs::read(folder.join(&name)).expect("a table"))).collect()
}

/// Exit code, and nothing new in the folder.
fn refused(folder: &TempDir, arguments: &[&str], code: i32) -> String {
    let before = names(folder);
    let output = run(folder, arguments);
    let said = text(&output.stderr);
    assert_eq!(output.status.code(), Some(code), "{arguments:?}: {said}");
    assert!(output.stdout.is_empty(), "{arguments:?} wrote to standard output: {}", text(&output.stdout));
    assert!(!said.trim().is_empty(), "{arguments:?} says why");
    assert!(!said.contains("panicked"), "{said}");
    assert_eq!(names(folder), before, "{arguments:?} wrote something");
    said
}

#[test]
fn a_run_leaves_a_folder_and_a_summary() {
    let folder = fresh(SCENARIO);
    let output = run(&folder, &["run", "arm.toml"]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    assert_eq!(names(&folder), ["arm-results", "arm.toml"]);
    let files = ["bands.parquet", "population.parquet", "run.json", "shares.parquet"];
    assert_eq!(names(folder.path().join("arm-results")), files);
    let (said, aside) = (text(&output.stdout), text(&output.stderr));
    for arm in ["300 mg every 8 h", "40 mg/h"] {
        assert!(said.contains(arm), "{said}");
    }
    assert!(!said.contains('\u{1b}') && !aside.contains('\u{1b}'), "no colour where there is no terminal");
    assert!(!aside.contains('\r'), "no bar where there is no terminal: {aside:?}");
    assert!(said.contains("Written to arm-results"), "{said}");
}

#[test]
fn a_plain_locale_gets_plain_characters() {
    let folder = fresh(SCENARIO);
    let output = neap(&folder).args(["run", "arm.toml"]).env_remove("LANG").env("LC_ALL", "C").output().unwrap();
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    assert!(output.stdout.is_ascii(), "{}", text(&output.stdout));
}

#[test]
fn patients_are_written_on_request() {
    let folder = fresh(SCENARIO);
    let output = run(&folder, &["run", "arm.toml", "--patients-table", "--patients", "500", "--out", "out"]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    assert!(names(folder.path().join("out")).contains(&"patients.parquet".to_owned()));
}

#[test]
fn json_is_json_and_nothing_else() {
    let folder = fresh(SCENARIO);
    for command in [&["run", "arm.toml", "--out", "out"][..], &["check", "arm.toml"][..]] {
        let output = run(&folder, &[command, &["--format", "json"]].concat());
        assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
        let value: serde_json::Value = serde_json::from_slice(&output.stdout).expect("one JSON document");
        assert!(value.is_object());
        // In the answer of a run the three parts of the population make up the whole.
        if command[0] == "run" {
            let shares = &value["arms"][0]["times"][0]["shares"];
            let part = |name: &str| shares[name]["share"].as_f64().expect("a share");
            assert!((part("below") + part("within") + part("above") - 1.0).abs() < 1e-12, "{shares}");
        }
    }
}

#[test]
fn check_writes_nothing() {
    let folder = fresh(SCENARIO);
    let output = run(&folder, &["check", "arm.toml"]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    for part in ["20,000", "clearance: typically 5 L/h"] {
        assert!(text(&output.stdout).contains(part), "`{part}` in {}", text(&output.stdout));
    }
    assert_eq!(names(&folder), ["arm.toml"]);
}

#[test]
fn a_faulty_scenario_is_refused_with_all_its_faults() {
    let faulty = SCENARIO
        .replace("\"5 L/h\"", "\"5 mg\"")
        .replace("low = \"4 mg/L\"", "low = \"40 mg/L\"")
        .replace("cv =", "cvv =");
    let folder = fresh(&faulty);
    for command in ["run", "check"] {
        let said = refused(&folder, &[command, "arm.toml"], 2);
        for part in ["arm.toml:", "5 mg", "cvv", "40 mg/L"] {
            assert!(said.contains(part), "`{part}` in {said}");
        }
        assert!(said.find("5 mg") < said.find("40 mg/L"), "in the order of the file: {said}");
        assert!(said.trim_end().ends_with("faults; nothing was written"), "{said}");
    }
}

#[test]
fn what_cannot_be_a_scenario_is_refused() {
    let folder = fresh("");
    refused(&folder, &["run", "arm.toml"], 2);
    std::fs::write(folder.path().join("bytes.toml"), b"neap = 1\ntitle = \"\xff\xfe\"\n").unwrap();
    refused(&folder, &["run", "bytes.toml"], 2);
    std::fs::write(folder.path().join("syntax.toml"), "neap = = 1\n").unwrap();
    refused(&folder, &["run", "syntax.toml"], 2);
    refused(&folder, &["run", "absent.toml"], 3);
    refused(&folder, &["run", "."], 3);
}

#[test]
fn a_patient_that_no_body_can_be_is_named_by_check_and_by_run() {
    // A straight line through the weights: below zero for the lightest.
    let effect = r#"covariate = "weight", reference = "70 kg", slope = "0.05 /kg""#;
    let faulty = SCENARIO.replace(r#"covariate = "weight", reference = "70 kg", exponent = 0.75"#, effect);
    assert_ne!(faulty, SCENARIO);
    let folder = fresh(&faulty);
    let said = ["check", "run"].map(|command| refused(&folder, &[command, "arm.toml"], 2));
    let patient = said.each_ref().map(|said| {
        let (_, rest) = said.split_once("patient ").expect("a patient is named");
        assert!(rest.contains("`clearance` of -"), "{said}");
        rest.split(' ').next().map(str::to_owned)
    });
    assert_eq!(patient[0], patient[1], "the same patient, the first one");
}

#[test]
fn usage_errors_are_bad_input() {
    let folder = fresh(SCENARIO);
    for arguments in [
        &["run"][..],
        &["walk", "arm.toml"],
        &["run", "arm.toml", "--threads", "0"],
        &["run", "arm.toml", "--patients", "0"],
        &["run", "arm.toml", "--patients", "-3"],
        &["run", "arm.toml", "--memory", "much"],
        &["run", "arm.toml", "--memory", "1KiB"],
        &["run", "arm.toml", "--seed", "x"],
        &["run", "arm.toml", "--format", "pdf"],
        &["run", "arm.toml", "--out", ""],
        &["run", "arm.toml", "--out", "/"],
    ] {
        refused(&folder, arguments, 2);
    }
}

#[test]
fn a_folder_that_exists_is_kept_unless_it_may_be_replaced() {
    let folder = fresh(SCENARIO);
    let out = folder.path().join("out");
    assert!(run(&folder, &["run", "arm.toml", "--out", "out"]).status.success());
    let first = tables(&out);
    let before = std::fs::read(out.join("run.json")).unwrap();
    refused(&folder, &["run", "arm.toml", "--out", "out"], 2);
    assert_eq!(std::fs::read(out.join("run.json")).unwrap(), before, "a refused run touches nothing");

    assert!(run(&folder, &["run", "arm.toml", "--out", "out", "--replace", "--seed", "6"]).status.success());
    let second = tables(&out);
    assert_ne!(first["bands.parquet"], second["bands.parquet"]);
    assert_eq!(names(&folder), ["arm.toml", "out"], "nothing is left beside it");

    // What is not neap's own is never deleted.
    std::fs::write(out.join("notes.txt"), "mine").unwrap();
    refused(&folder, &["run", "arm.toml", "--out", "out", "--replace"], 2);
    assert_eq!(std::fs::read_to_string(out.join("notes.txt")).unwrap(), "mine");
    assert_eq!(tables(&out)["bands.parquet"], second["bands.parquet"]);

    std::fs::write(folder.path().join("file"), "mine").unwrap();
    refused(&folder, &["run", "arm.toml", "--out", "file", "--replace"], 2);
    assert_eq!(std::fs::read_to_string(folder.path().join("file")).unwrap(), "mine");
}

/// Nobody, not even the superuser, can make a folder in the kernel's table of processes.
#[test]
#[cfg(target_os = "linux")]
fn where_nothing_can_be_written_is_an_input_output_failure() {
    let folder = fresh(SCENARIO);
    refused(&folder, &["run", "arm.toml", "--out", "/proc/neap-results"], 3);
    refused(&folder, &["run", "arm.toml", "--out", "arm.toml/below"], 3);
}

/// A disk that fills up, as a limit on the size of files makes it look.
#[test]
#[cfg(target_os = "linux")]
fn a_full_disk_is_an_input_output_failure_and_leaves_nothing() {
    let folder = fresh(SCENARIO);
    let output = Command::new("bash")
        .args(["-c", "trap '' XFSZ; ulimit -f 2; exec \"$0\" run arm.toml", env!("CARGO_BIN_EXE_neap")])
        .current_dir(&folder)
        .output()
        .expect("bash starts");
    assert_eq!(output.status.code(), Some(3), "{}", text(&output.stderr));
    assert!(output.stdout.is_empty());
    assert_eq!(names(&folder), ["arm.toml"], "{}", text(&output.stderr));
}

/// The state of a process: whether it has a handler for a signal.
#[cfg(target_os = "linux")]
fn handles(process: u32, signal: u32) -> bool {
    let status = std::fs::read_to_string(format!("/proc/{process}/status")).unwrap_or_default();
    let caught = status.lines().find_map(|line| line.strip_prefix("SigCgt:")).unwrap_or("0").trim().to_owned();
    u64::from_str_radix(&caught, 16).unwrap_or(0) >> (signal - 1) & 1 == 1
}

/// SIGINT and SIGTERM in the middle of a run that would take hours: 130, and no folder. The signal is sent when its handler
/// stands, and the work starts with it.
#[test]
#[cfg(target_os = "linux")]
fn an_interrupted_run_leaves_nothing() {
    for (name, number) in [("INT", 2), ("TERM", 15)] {
        let folder = fresh(SCENARIO);
        let child = neap(&folder)
            .args(["run", "arm.toml", "--patients", "1000000000000"])
            .stdout(std::process::Stdio::piped())
            .stderr(std::process::Stdio::piped())
            .spawn()
            .expect("the binary starts");
        while !handles(child.id(), number) {
            std::thread::sleep(std::time::Duration::from_millis(2));
        }
        std::thread::sleep(std::time::Duration::from_millis(150));
        let sent =
            Command::new("bash").args(["-c", &format!("kill -{name} {}", child.id())]).status().expect("bash starts");
        assert!(sent.success());
        let output = child.wait_with_output().expect("it ends");
        assert_eq!(output.status.code(), Some(130), "SIG{name}: {}", text(&output.stderr));
        assert!(output.stdout.is_empty(), "nothing was found, so nothing is said");
        assert_eq!(names(&folder), ["arm.toml"]);
    }
}

/// A reader that goes away (`neap ... | head -1`) is no crash.
#[test]
#[cfg(target_os = "linux")]
fn a_reader_that_goes_away_is_no_crash() {
    let folder = fresh(SCENARIO);
    let output = Command::new("bash")
        .args(["-c", "\"$0\" check arm.toml | head -1", env!("CARGO_BIN_EXE_neap")])
        .current_dir(&folder)
        .output()
        .expect("bash starts");
    assert!(!text(&output.stderr).contains("panicked"), "{}", text(&output.stderr));
}

/// A run whose reader is gone from the start still leaves its folder, and is no failure.
#[test]
fn a_run_that_nobody_reads_is_no_failure() {
    let folder = fresh(SCENARIO);
    let piped = std::process::Stdio::piped;
    let mut child = neap(&folder)
        .args(["run", "arm.toml", "--out", "new/results"])
        .stdout(piped())
        .stderr(piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    let output = child.wait_with_output().expect("it ends");
    assert_eq!((output.status.code(), text(&output.stderr)), (Some(0), String::new()));
    assert_eq!(names(folder.path().join("new")), ["results"]);
}

#[test]
fn threads_and_memory_change_no_byte() {
    let folder = fresh(SCENARIO);
    let least = least_memory(&folder);
    let table_of = |out: &str, more: &[&str]| {
        let arguments = [&["run", "arm.toml", "--patients", "60000", "--patients-table", "--out", out], more].concat();
        let output = run(&folder, &arguments);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
        tables(folder.path().join(out))
    };
    let one = table_of("one", &["--threads", "1"]);
    assert_eq!(one.len(), 4, "{:?}", one.keys());
    for (out, more) in [
        ("two", &["--threads", "2"][..]),
        ("seven", &["--threads", "7"]),
        ("again", &["--threads", "1"]),
        ("tight", &["--threads", "1", "--memory", &least]),
        ("wide", &["--threads", "2", "--memory", "2GiB"]),
    ] {
        let other = table_of(out, more);
        for (name, bytes) in &one {
            assert!(*bytes == other[name], "{name} differs between `one` and `{out}`");
        }
    }
    let passes = |out: &str| {
        let run: serde_json::Value =
            serde_json::from_slice(&std::fs::read(folder.path().join(out).join("run.json")).unwrap()).unwrap();
        run["counts"]["passes"].as_u64().unwrap()
    };
    assert!(passes("tight") > passes("one"), "the tight budget takes {} passes", passes("tight"));
}

/// The least budget with which the scenario runs on one thread: what the refusal of a smaller one asks for.
fn least_memory(folder: &TempDir) -> String {
    let said = refused(folder, &["run", "arm.toml", "--threads", "1", "--memory", "1MiB"], 2);
    let wanted = said.split("at least ").nth(1).and_then(|rest| rest.split(" MiB").next());
    format!("{}MiB", wanted.unwrap_or_else(|| panic!("how much would do: {said}")))
}

/// Memory is bounded by the budget, not by the number of values: the 180 million of this run would take 1.4 GB if they were
/// stored, and the process may have 700 MB of addresses, of which threads and their heaps reserve some 300 without using them.
#[test]
#[cfg(target_os = "linux")]
fn memory_is_bounded_by_the_budget() {
    let folder = fresh(SCENARIO);
    let line = "ulimit -v 700000; exec \"$0\" run arm.toml --patients 620000 --memory 40MiB --threads 2 --out out";
    let output = Command::new("bash")
        .args(["-c", line, env!("CARGO_BIN_EXE_neap")])
        .current_dir(&folder)
        .output()
        .expect("bash starts");
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    assert!(folder.path().join("out/bands.parquet").is_file());
}

#[test]
fn help_holds_the_cautions() {
    let folder = fresh(SCENARIO);
    let output = run(&folder, &["--help"]);
    assert_eq!(output.status.code(), Some(0));
    let words = text(&output.stdout).split_whitespace().collect::<Vec<_>>().join(" ");
    for part in ["prescribes for nobody", "qualified clinical pharmacologist", "invented"] {
        assert!(words.contains(part), "`{part}`");
    }
}
