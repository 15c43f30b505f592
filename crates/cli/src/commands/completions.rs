//! `pellicle completions`.

use crate::args::Arguments;
use crate::failure::Failure;
use clap::CommandFactory;
use clap_complete::Shell;
use std::io::Write;

/// Print the completions of a shell; returns the exit code.
///
/// # Errors
/// None.
pub fn run(shell: Shell) -> Result<u8, Failure> {
    // To memory first: the generator panics when its output cannot be written.
    let mut text = Vec::new();
    clap_complete::generate(shell, &mut Arguments::command(), "pellicle", &mut text);
    let _ = std::io::stdout().write_all(&text);
    Ok(0)
}
