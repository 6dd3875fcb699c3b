//! What can be typed. One definition feeds the parser, the help and the completions.

use std::num::NonZeroUsize;
use std::path::PathBuf;

use clap::builder::ValueParser;
use clap::{Args, Parser, Subcommand, ValueEnum};
use clap_complete::Shell;
use neap_engine::plan::{DEFAULT_MEMORY, Limits};
use neap_engine::tables::CAUTIONS;

use crate::size;

/// The job in one paragraph.
const ABOUT: &str = "\
Designs dosing arms. A scenario describes who is enrolled, how their bodies handle the drug, what each arm gives and the \
therapeutic window; neap samples the population, solves the kinetics of every virtual patient in every arm, and tells \
which share of them is below, within and above the window over time, with percentile bands and the Monte Carlo error of \
every number. Results are Parquet tables that R, Python and SQL read as they are.";

/// What everyone has to know, in the words that stand in `run.json` too.
fn cautions() -> String {
    let codes = "Exit codes: 0 done, 2 bad input or a refused request, 3 reading or writing failed, 130 interrupted.";
    format!("Cautions:\n  {}\n\n{codes}", CAUTIONS.join("\n  "))
}

/// Designs dosing arms: what share of a population a regimen keeps within its therapeutic window.
#[derive(Debug, Parser)]
#[command(name = "neap", version, long_about = ABOUT, after_long_help = cautions(), subcommand_required = true)]
#[command(after_help = "neap is for designing studies; it prescribes for nobody. See --help for the cautions.")]
#[command(arg_required_else_help = true, max_term_width = 100)]
pub(crate) struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub(crate) command: Command,
}

/// What to do.
#[derive(Debug, Subcommand)]
pub(crate) enum Command {
    /// Read a scenario, say in plain sentences what it means and what a run would do; run nothing
    #[command(after_long_help = cautions())]
    Check(CheckOptions),
    /// Simulate the population in every arm, write the tables and show a summary
    #[command(after_long_help = cautions())]
    Run(RunOptions),
    /// Print the completions for a shell
    Completions {
        /// The shell
        shell: Shell,
    },
}

/// What every command that reads a scenario takes.
#[derive(Args, Debug)]
pub(crate) struct Common {
    /// The scenario, a TOML file
    pub(crate) scenario: PathBuf,

    /// Use this seed instead of the scenario's
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u64).range(..=i64::MAX as u64))]
    pub(crate) seed: Option<u64>,

    /// Simulate this many patients instead of the scenario's size
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u64).range(1..=i64::MAX as u64))]
    pub(crate) patients: Option<u64>,

    /// Worker threads; changes no number [default: all that this process may use]
    #[arg(long, value_name = "N")]
    pub(crate) threads: Option<NonZeroUsize>,

    /// Memory for kept values, as in 512MiB or 2GB; changes no number
    #[arg(long, value_name = "SIZE", default_value_t = size::Size(DEFAULT_MEMORY), value_parser = ValueParser::new(size::parse))]
    pub(crate) memory: size::Size,

    /// How to show the answer on standard output
    #[arg(long, value_name = "FORMAT", default_value = "table")]
    pub(crate) format: Format,
}

impl Common {
    /// What a run may use.
    pub(crate) fn limits(&self) -> Limits {
        let threads = self.threads.or_else(|| std::thread::available_parallelism().ok());
        Limits { threads: threads.map_or(1, NonZeroUsize::get), memory: self.memory.0 }
    }
}

/// `neap check`.
#[derive(Args, Debug)]
pub(crate) struct CheckOptions {
    /// What every command takes.
    #[command(flatten)]
    pub(crate) common: Common,
}

/// `neap run`.
#[derive(Args, Debug)]
pub(crate) struct RunOptions {
    /// What every command takes.
    #[command(flatten)]
    pub(crate) common: Common,

    /// The folder to make for the tables [default: the scenario's name with "-results", in the current folder]
    #[arg(long, value_name = "DIR")]
    pub(crate) out: Option<PathBuf>,

    /// Replace the folder if it holds an earlier run's results and nothing else
    #[arg(long)]
    pub(crate) replace: bool,

    /// Write patients.parquet too: one row for each patient in each arm
    #[arg(long)]
    pub(crate) patients_table: bool,
}

impl RunOptions {
    /// Where the tables go.
    pub(crate) fn destination(&self) -> PathBuf {
        self.out.clone().unwrap_or_else(|| {
            let mut name = self.common.scenario.file_stem().unwrap_or_default().to_owned();
            name.push("-results");
            name.into()
        })
    }
}

/// How to show an answer.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub(crate) enum Format {
    /// For people
    Table,
    /// For programs: the same facts as JSON
    Json,
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    use super::*;

    #[test]
    fn the_definition_holds_together() {
        Arguments::command().debug_assert();
    }

    #[test]
    fn the_help_has_every_caution() {
        let help = Arguments::command().render_long_help().to_string();
        let words = |text: &str| text.split_whitespace().collect::<Vec<_>>().join(" ");
        for caution in CAUTIONS {
            assert!(words(&help).contains(caution), "{caution}");
        }
    }

    #[test]
    fn the_folder_is_named_after_the_scenario() {
        let options = |line: &[&str]| match Arguments::try_parse_from(line).unwrap().command {
            Command::Run(options) => options,
            other => panic!("{other:?}"),
        };
        let run = options(&["neap", "run", "some/where/tablets.toml"]);
        assert_eq!(run.destination(), PathBuf::from("tablets-results"));
        assert_eq!(run.common.memory.0, DEFAULT_MEMORY);
        let run = options(&["neap", "run", "x.toml", "--out", "there", "--memory", "512 MiB", "--threads", "3"]);
        assert_eq!(run.destination(), PathBuf::from("there"));
        assert_eq!(run.common.limits(), Limits { threads: 3, memory: 512 << 20 });
    }

    #[test]
    fn no_threads_and_no_patients_are_refused() {
        assert!(Arguments::try_parse_from(["neap", "run", "x.toml", "--threads", "0"]).is_err());
        assert!(Arguments::try_parse_from(["neap", "check", "x.toml", "--patients", "0"]).is_err());
        assert!(Arguments::try_parse_from(["neap", "check", "x.toml", "--memory", "1"]).is_err());
    }
}
