//! `neap completions`: what a shell needs to complete neap's words.

use clap::CommandFactory;
use clap_complete::Shell;
use neap_engine::diagnostic::Fault;

use crate::args::Arguments;
use crate::printer::Printer;

/// Prints the completions for `shell`.
pub(crate) fn run(shell: Shell, printer: &Printer) -> Result<(), Fault> {
    let mut text = Vec::new();
    clap_complete::generate(shell, &mut Arguments::command(), "neap", &mut text);
    printer.out(&String::from_utf8_lossy(&text))
}
