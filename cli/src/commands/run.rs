//! `neap run`: simulate, write the tables, show the summary.

use std::time::SystemTime;

use neap_engine::diagnostic::Fault;
use neap_engine::plan::Plan;
use neap_engine::tables::{self, WriteOptions};

use crate::args::{Format, RunOptions};
use crate::printer::Printer;
use crate::{scenario, session, summary};

/// Everything that can be refused is refused before the first patient is drawn.
pub(crate) fn run(options: &RunOptions, printer: &Printer) -> Result<(), Fault> {
    let started = SystemTime::now();
    let scenario = scenario::read(&options.common, printer)?;
    let folder = options.destination();
    tables::check_destination(&folder, options.replace)?;
    let patients = options.patients_table || scenario.output.patients;
    if patients {
        tables::check_patients(&scenario)?;
    }
    let limits = options.common.limits();
    let plan = Plan::new(scenario, &limits)?;
    let write = WriteOptions { replace: options.replace, patients, started };
    let results = session::during(&limits, printer.look(), |watch| {
        let results = plan.run(watch)?;
        results.write(&folder, &write, watch)?;
        Ok(results)
    })?;
    printer.out(&match options.common.format {
        Format::Table => summary::text(&results, &folder, patients, printer.look()),
        Format::Json => summary::json(&results, &folder, patients),
    })
}
