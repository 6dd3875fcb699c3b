//! From the file that was named to a scenario, with what was given beside it on the command line.

use neap_engine::diagnostic::Fault;
use neap_engine::scenario::{Overrides, Scenario};

use crate::args::Common;
use crate::diagnostics;
use crate::printer::Printer;

/// Reads the scenario and shows its warnings on standard error.
pub(crate) fn read(common: &Common, printer: &Printer) -> Result<Scenario, Fault> {
    let overrides = Overrides { size: common.patients, seed: common.seed };
    let scenario = Scenario::read_with(&common.scenario, overrides)?;
    if !scenario.warnings.is_empty() {
        printer.err(&diagnostics::list(&scenario.source, &scenario.warnings, printer.look()));
    }
    Ok(scenario)
}
