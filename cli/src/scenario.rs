//! From the file that was named to a scenario, with what was given beside it on the command line.

use neap_engine::diagnostic::Fault;
use neap_engine::scenario::Scenario;

use crate::args::Common;
use crate::diagnostics;
use crate::printer::Printer;

/// Reads the scenario and shows its warnings on standard error.
pub(crate) fn read(common: &Common, printer: &Printer) -> Result<Scenario, Fault> {
    let scenario = load(common)?;
    if !scenario.warnings.is_empty() {
        printer.err(&diagnostics::list(&scenario.source, &scenario.warnings, printer.look()));
    }
    Ok(scenario)
}

/// The door to the reader of scenarios.
fn load(common: &Common) -> Result<Scenario, Fault> {
    let path = &common.scenario;
    let text = std::fs::read_to_string(path).map_err(|cause| Fault::Io {
        doing: "read".to_owned(),
        path: path.clone(),
        cause,
    })?;
    todo!("{} {:?} {:?}", text.len(), common.seed, common.patients)
}
