//! `neap`: designs dosing arms. A scenario comes in, a summary and a folder of tables come out.
//!
//! The engine does the work; here are the commands, the progress, and the words on the terminal. `main` turns what
//! became of a command into an exit code.

mod args;
mod commands;
mod diagnostics;
mod exit;
mod numbers;
mod picture;
mod printer;
mod progress;
mod scenario;
mod sentences;
mod session;
mod size;
mod summary;
#[cfg(test)]
mod testing;

use std::process::ExitCode;

use clap::Parser;
use neap_engine::diagnostic::Fault;

use args::{Arguments, Command};
use printer::Printer;

fn main() -> ExitCode {
    let arguments = Arguments::parse(); // usage errors end here, with 2 as every bad input
    let printer = Printer::of_this_process();
    match run(&arguments, &printer) {
        Ok(()) => ExitCode::SUCCESS,
        Err(fault) => {
            printer.err(&diagnostics::fault(&fault, printer.look()));
            ExitCode::from(exit::code(&fault))
        }
    }
}

fn run(arguments: &Arguments, printer: &Printer) -> Result<(), Fault> {
    match &arguments.command {
        Command::Check(options) => commands::check::run(options, printer),
        Command::Run(options) => commands::run::run(options, printer),
        Command::Completions { shell } => commands::completions::run(*shell, printer),
    }
}
