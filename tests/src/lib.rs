//! What the tests share: reference data, scenarios from text, runs in a pool of a given size, and the comparison of two
//! results bit by bit.

pub mod house;

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use neap_engine::diagnostic::{Diagnostic, Fault, Severity, Source};
use neap_engine::plan::{DEFAULT_MEMORY, Limits, Plan};
use neap_engine::run::{PatientBlock, Results, Watch};
use neap_engine::scenario::Scenario;

/// The top level of the project.
///
/// # Panics
/// Never: the member lies in the workspace.
pub fn top_level() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).parent().expect("the member lies in the workspace").to_owned()
}

/// A file of `tests/reference`, as text.
///
/// # Panics
/// If it cannot be read.
pub fn reference(path: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("reference").join(path);
    std::fs::read_to_string(&path).unwrap_or_else(|cause| panic!("{}: {cause}", path.display()))
}

/// A row of a comma-separated file, by the names in its header.
pub type Record = BTreeMap<String, String>;

/// A comma-separated file of `tests/reference`.
///
/// # Panics
/// If it cannot be read or a row has another number of fields than the header.
pub fn csv(path: &str) -> Vec<Record> {
    let text = reference(path);
    let mut lines = text.lines();
    let header = fields(lines.next().expect("a header"));
    lines
        .map(|line| {
            let fields = fields(line);
            assert_eq!(fields.len(), header.len(), "{path}: {line}");
            header.iter().cloned().zip(fields).collect()
        })
        .collect()
}

/// The fields of one line, of which some may stand in quotation marks.
fn fields(line: &str) -> Vec<String> {
    let mut fields = vec![String::new()];
    let mut quoted = false;
    for character in line.chars() {
        match character {
            '"' => quoted = !quoted,
            ',' if !quoted => fields.push(String::new()),
            other => fields.last_mut().expect("never empty").push(other),
        }
    }
    fields
}

/// A JSON file of `tests/reference`.
///
/// # Panics
/// If it cannot be read.
pub fn json(path: &str) -> serde_json::Value {
    serde_json::from_str(&reference(path)).unwrap_or_else(|cause| panic!("{path}: {cause}"))
}

/// The nearest binary number of a decimal text; `inf` counts.
///
/// # Panics
/// If it is no number.
pub fn number(text: &str) -> f64 {
    text.parse().unwrap_or_else(|_| panic!("`{text}` is no number"))
}

/// A checked scenario.
///
/// # Panics
/// If the text has faults; the message lists them with the text under each.
pub fn scenario(text: &str) -> Scenario {
    let source = Source { name: "test.toml".to_owned(), text: text.to_owned() };
    match Scenario::parse(source) {
        Ok(scenario) => scenario,
        Err(Fault::Scenario { source, diagnostics }) => {
            let said: Vec<String> = diagnostics
                .iter()
                .filter(|diagnostic| diagnostic.severity == Severity::Error)
                .map(|diagnostic| said(&source, diagnostic))
                .collect();
            panic!("{}\nin:\n{text}", said.join("\n"))
        }
        Err(fault) => panic!("{fault}"),
    }
}

fn said(source: &Source, diagnostic: &Diagnostic) -> String {
    let under = diagnostic.span.map_or("", |span| &source.text[span.start..span.end]);
    format!("{} (at `{under}`: {}; {})", diagnostic.message, diagnostic.label, diagnostic.help.join(" "))
}

/// A plan within the usual limits.
///
/// # Panics
/// If it is refused.
pub fn plan(scenario: Scenario) -> Arc<Plan> {
    plan_within(scenario, 2, DEFAULT_MEMORY)
}

/// A plan for some threads within a memory budget in bytes.
///
/// # Panics
/// If it is refused.
pub fn plan_within(scenario: Scenario, threads: usize, memory: u64) -> Arc<Plan> {
    Plan::new(scenario, &Limits { threads, memory }).unwrap_or_else(|fault| panic!("{fault}"))
}

/// Runs a scenario text with the usual limits.
pub fn run(text: &str) -> Results {
    run_within(text, 2, DEFAULT_MEMORY)
}

/// Runs a scenario text by some threads within a memory budget in bytes.
///
/// # Panics
/// If it does not run.
pub fn run_within(text: &str, threads: usize, memory: u64) -> Results {
    let plan = plan_within(scenario(text), threads, memory);
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("a pool");
    pool.install(|| plan.run(&Watch::new())).expect("nobody stops it")
}

/// The smallest budget in bytes with which a scenario text can be planned for some threads, to 4 KiB.
pub fn least_memory(text: &str, threads: usize) -> u64 {
    let scenario = scenario(text);
    let fits = |memory| Plan::new(scenario.clone(), &Limits { threads, memory }).is_ok();
    let (mut no, mut yes) = (0, DEFAULT_MEMORY);
    while yes - no > 4096 {
        let middle = no.midpoint(yes);
        if fits(middle) { yes = middle } else { no = middle }
    }
    yes
}

/// Every patient of a population: covariates and parameters, quantity by quantity.
///
/// # Panics
/// If it does not run.
pub fn patients(plan: &Plan) -> PatientBlock {
    let mut all = PatientBlock {
        first: 0,
        count: 0,
        covariates: vec![Vec::new(); plan.cohort.len()],
        parameters: vec![Vec::new(); plan.individuals.len()],
    };
    plan.for_each_block(&Watch::new(), &mut |block| {
        assert_eq!(block.first, all.count as u64, "blocks come in order and without gaps");
        all.count += block.count;
        let columns = all.covariates.iter_mut().chain(&mut all.parameters);
        for (column, more) in columns.zip(block.covariates.iter().chain(&block.parameters)) {
            assert_eq!(more.len(), block.count, "every column has every patient of the block");
            column.extend_from_slice(more);
        }
        Ok(())
    })
    .expect("nobody stops it");
    all
}

/// Every number of some results that is under the contract of identical bytes, named.
///
/// # Panics
/// If two facts have one name.
pub fn facts(results: &Results) -> BTreeMap<String, u64> {
    let mut facts = BTreeMap::new();
    let mut add = |name: String, bits: u64| assert!(facts.insert(name.clone(), bits).is_none(), "two facts `{name}`");
    add("patients".to_owned(), results.patients);
    let bits = |value: Option<f64>| value.map_or(u64::MAX, f64::to_bits);
    for arm in &results.arms {
        for at in &arm.times {
            let place = format!("{} at {} h", arm.name, at.time_h);
            for band in &at.bands {
                add(format!("{place}: percentile {}", band.percentile), band.value.to_bits());
                add(format!("{place}: percentile {} lower", band.percentile), bits(band.mc_lower));
                add(format!("{place}: percentile {} upper", band.percentile), bits(band.mc_upper));
            }
            if let Some(shares) = at.shares {
                add(format!("{place}: below"), shares.below);
                add(format!("{place}: within"), shares.within);
                add(format!("{place}: above"), shares.above);
            }
        }
    }
    for row in &results.population {
        add(format!("{} asked {} {}", row.quantity, row.statistic, row.unit), bits(row.asked));
        add(format!("{} realised {} {}", row.quantity, row.statistic, row.unit), row.realised.to_bits());
    }
    facts
}

/// Checks that two sets of facts are the same to the last bit.
///
/// # Panics
/// If they are not; the message names the first few that differ.
pub fn assert_same(one: &BTreeMap<String, u64>, other: &BTreeMap<String, u64>, what: &str) {
    let names: Vec<&String> = one.keys().chain(other.keys().filter(|name| !one.contains_key(*name))).collect();
    let different: Vec<String> = names
        .into_iter()
        .filter(|name| one.get(*name) != other.get(*name))
        .map(|name| format!("{name}: {:x?} and {:x?}", one.get(name), other.get(name)))
        .collect();
    assert!(
        different.is_empty(),
        "{what}: {} of {} facts differ, such as\n{}",
        different.len(),
        one.len(),
        different[..different.len().min(8)].join("\n")
    );
}
