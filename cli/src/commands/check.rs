//! `neap check`: what a scenario means and what a run would do, in plain sentences. Nothing is run or written.

use neap_engine::diagnostic::Fault;
use neap_engine::plan::Plan;

use crate::args::{CheckOptions, Format};
use crate::printer::Printer;
use crate::scenario;
use crate::sentences::{self, Checked};

/// Patients drawn to show the population: enough for the percentiles shown, drawn in well under a second.
const SAMPLE: u64 = 10_000;

/// Reads, plans, draws a sample, explains.
pub(crate) fn run(options: &CheckOptions, printer: &Printer) -> Result<(), Fault> {
    let scenario = scenario::read(&options.common, printer)?;
    let limits = options.common.limits();
    let plan = Plan::new(scenario, &limits)?;
    let sampled = SAMPLE.min(plan.scenario().population.size);
    let population = plan.sample(sampled)?;
    let explanation = plan.explain();
    let checked = Checked { plan: &plan, explanation: &explanation, population: &population, sampled };
    printer.out(&match options.common.format {
        Format::Table => sentences::text(&checked),
        Format::Json => sentences::json(&checked),
    })
}
