//! The program: arguments → command → exit code.

mod args;
mod commands;
mod error_bars;
mod failure;
mod run;
mod scenario;
mod setup;
mod study;
mod units;

use args::{Arguments, Command};
use clap::Parser;
use failure::Failure;
use run::progress::complain;
use std::panic::{AssertUnwindSafe, PanicHookInfo, catch_unwind};
use std::process::ExitCode;

/// Exit code after an error of the program itself.
const INTERNAL: u8 = 1;

fn main() -> ExitCode {
    std::panic::set_hook(Box::new(apologise));
    // Clap prints help and mistakes of the command line by itself, the latter with exit code 2.
    let arguments = Arguments::parse();
    let outcome = catch_unwind(AssertUnwindSafe(|| dispatch(&arguments)));
    ExitCode::from(match outcome {
        Ok(Ok(code)) => code,
        Ok(Err(failure)) => {
            complain(format_args!("error: {failure}"));
            failure.exit_code()
        }
        Err(_) => INTERNAL,
    })
}

fn dispatch(arguments: &Arguments) -> Result<u8, Failure> {
    match &arguments.command {
        Command::Run(run) => commands::run::run(run),
        Command::Resume(resume) => commands::resume::run(resume),
        Command::Check(check) => commands::check::run(check),
        Command::Measure(measure) => commands::measure::run(measure),
        Command::Report(report) => commands::report::run(report),
        Command::Scan(scan) => commands::scan::run(scan),
        Command::Schema { of } => commands::schema::run(*of),
        Command::Completions { shell } => commands::completions::run(*shell),
    }
}

/// What a user reads instead of a panic.
fn apologise(panic: &PanicHookInfo<'_>) {
    let what = panic
        .payload()
        .downcast_ref::<&str>()
        .copied()
        .or_else(|| panic.payload().downcast_ref::<String>().map(String::as_str))
        .unwrap_or("no message");
    let place = panic.location().map(ToString::to_string).unwrap_or_default();
    complain(format_args!(
        "error: the program made a mistake of its own; this is not your fault.\n\
         What is on the disk is complete up to the last checkpoint (`pellicle resume DIR` goes on from there).\n\
         Please report it with the scenario and these lines:\n  \
         pellicle {}, {place}: {what}",
        env!("CARGO_PKG_VERSION")
    ));
}
