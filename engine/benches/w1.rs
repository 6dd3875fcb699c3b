//! Where the time of a run goes: a linear model by mouth, two compartments, six random numbers a patient, 169 output times, five
//! percentiles with their intervals, three shares.
//!
//! `cargo bench -p neap-engine --bench w1 -- [patients] [threads] [repeats]`
//!
//! Beside the engine it times the least that could work: the same patients through the textbook sum of exponentials by the
//! platform's own functions, every value stored, every time sorted. The ratio of the two, taken in one run, is what to compare
//! between machines and versions. `NEAP_YARDSTICK="command with arguments"` runs another program that prints a line of JSON with a
//! number `"seconds"`, and prints the ratio to that too.

#![expect(clippy::print_stdout, reason = "a bench reports on the terminal")]

use std::process::Command;
use std::sync::Arc;
use std::time::{Instant, SystemTime};

use neap_engine::diagnostic::Source;
use neap_engine::plan::{DEFAULT_MEMORY, Limits, Plan};
use neap_engine::run::{Effort, Watch};
use neap_engine::scenario::{Overrides, Scenario};
use neap_engine::tables::WriteOptions;
use rayon::ThreadPool;

/// Patients of the plain computation: it is slow, and its cost a patient does not depend on their number.
const PLAIN_PATIENTS: u64 = 20_000;

fn plan(patients: u64, threads: usize, intervals: bool) -> Arc<Plan> {
    let source = Source { name: "w1.toml".to_owned(), text: include_str!("data/w1.toml").to_owned() };
    let overrides = Overrides { size: Some(patients), ..Overrides::default() };
    let scenario = Scenario::parse_with(source, overrides).expect("the scenario has no faults");
    let limits = Limits { threads, memory: DEFAULT_MEMORY };
    let mut plan = Plan::new(scenario, &limits).expect("it fits into the default budget");
    Arc::get_mut(&mut plan).expect("nobody else has it yet").intervals = intervals;
    plan
}

/// Runs a plan some times after a warm-up; fastest first.
fn timed(pool: &ThreadPool, plan: &Arc<Plan>, repeats: u64) -> Vec<Effort> {
    let mut efforts: Vec<Effort> =
        (0..=repeats).map(|_| pool.install(|| plan.run(&Watch::new())).expect("nobody interrupts").effort).collect();
    efforts.remove(0);
    efforts.sort_by(|a, b| a.total.total_cmp(&b.total));
    efforts
}

fn main() {
    let numbers: Vec<u64> = std::env::args().filter_map(|argument| argument.parse().ok()).collect();
    let patients = numbers.first().copied().unwrap_or(1_000_000);
    let threads = numbers.get(1).map_or(2, |&threads| threads as usize);
    let repeats = numbers.get(2).copied().unwrap_or(7);
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("a pool of threads");
    let with = plan(patients, threads, true);
    let efforts = timed(&pool, &with, repeats);
    let without = timed(&pool, &plan(patients, threads, false), repeats);
    let (median, bare) = (&efforts[efforts.len() / 2], &without[without.len() / 2]);
    println!("{patients} patients, {threads} threads, median of {repeats}");
    println!("  whole run          {:8.1} ms   (fastest {:.1} ms)", 1e3 * median.total, 1e3 * efforts[0].total);
    println!("  a patient          {:8.1} ns", 1e9 * median.total / patients as f64);
    println!("  pilot              {:8.1} ms   wall", 1e3 * median.pilot);
    let share = 1e3 / threads as f64;
    println!("  sampling           {:8.1} ms   a thread", share * median.sampling);
    println!("  solving            {:8.1} ms   a thread", share * median.solving);
    println!("  counting, keeping  {:8.1} ms   a thread", share * median.counting);
    println!("  selecting          {:8.1} ms   wall, four order statistics a percentile", 1e3 * median.selecting);
    println!("    two of them only {:8.1} ms   wall, without intervals", 1e3 * bare.selecting);
    println!("  writing            {:8.1} ms   wall", 1e3 * writing(&pool, &with));
    println!("  passes             {:8}      of which repeated: {}", median.passes, median.repeats);
    println!("without intervals    {:8.1} ms   (fastest {:.1} ms)", 1e3 * bare.total, 1e3 * without[0].total);

    let start = Instant::now();
    let middle = plain(&self::plan(PLAIN_PATIENTS, 1, false));
    let plain = start.elapsed().as_secs_f64() / PLAIN_PATIENTS as f64;
    let each = median.total * threads as f64 / patients as f64;
    println!("plain loop, one thread: {:.0} ns a patient (median at the end {middle:.3} mg/L)", 1e9 * plain);
    println!("  ratio engine / plain, thread seconds a patient: {:.4}", each / plain);
    if let Ok(command) = std::env::var("NEAP_YARDSTICK") {
        yardstick(&command, efforts[0].total, median.total);
    }
}

/// Seconds from results to closed files.
fn writing(pool: &ThreadPool, plan: &Arc<Plan>) -> f64 {
    let results = pool.install(|| plan.run(&Watch::new())).expect("nobody interrupts");
    let options = WriteOptions { replace: false, patients: false, started: SystemTime::now() };
    let folder = tempfile::tempdir().expect("a folder to write to");
    let start = Instant::now();
    results.write(&folder.path().join("out"), &options, &Watch::new()).expect("the tables are written");
    start.elapsed().as_secs_f64()
}

fn yardstick(command: &str, fastest: f64, median: f64) {
    let mut words = command.split_whitespace();
    let program = words.next().expect("a command");
    let output = Command::new(program).args(words).output().expect("the yardstick runs");
    let text = String::from_utf8_lossy(&output.stdout);
    let seconds = text.split("\"seconds\":").nth(1).and_then(|rest| rest.split(',').next()).map(str::trim);
    let seconds: f64 = seconds.and_then(|number| number.parse().ok()).expect("a line with \"seconds\"");
    println!("yardstick {command}: {:.1} ms", 1e3 * seconds);
    println!("  ratio engine / yardstick: {:.2} (fastest {:.2})", median / seconds, fastest / seconds);
}

/// The textbook sum over doses by the platform's exponential, stored and sorted.
#[expect(clippy::disallowed_methods, reason = "the plain loop uses what the platform has")]
fn plain(plan: &Plan) -> f64 {
    let mut rows: Vec<Vec<f64>> = (0..169).map(|_| Vec::with_capacity(PLAIN_PATIENTS as usize)).collect();
    plan.for_each_block(&Watch::new(), &mut |block| {
        for patient in 0..block.count {
            let [cl, v1, q, v2, ka] = [0, 1, 2, 3, 4].map(|column: usize| block.parameters[column][patient]);
            let (k10, k12, k21) = (cl / v1, q / v1, q / v2);
            let sum = k10 + k12 + k21;
            let root = (sum * sum - 4.0 * k10 * k21).sqrt();
            let (alpha, beta) = (0.5 * (sum + root), 0.5 * (sum - root));
            let a = 500.0 * ka / v1 * (k21 - alpha) / ((ka - alpha) * (beta - alpha));
            let b = 500.0 * ka / v1 * (k21 - beta) / ((ka - beta) * (alpha - beta));
            for (hour, row) in rows.iter_mut().enumerate() {
                let mut concentration = 0.0;
                for dose in (0..=hour.min(156)).step_by(12) {
                    let t = (hour - dose) as f64;
                    concentration += a * (-alpha * t).exp() + b * (-beta * t).exp() - (a + b) * (-ka * t).exp();
                }
                row.push(concentration);
            }
        }
        Ok(())
    })
    .expect("nobody interrupts");
    for row in &mut rows {
        row.sort_by(f64::total_cmp);
    }
    rows[168][rows[168].len() / 2]
}
