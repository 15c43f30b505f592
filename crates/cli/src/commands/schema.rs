//! `pellicle schema`.

use crate::failure::Failure;
use crate::run::progress::say;
use crate::scenario;

/// Print the JSON schema of scenarios; returns the exit code.
///
/// # Errors
/// None.
pub fn run() -> Result<u8, Failure> {
    say(scenario::schema());
    Ok(0)
}
