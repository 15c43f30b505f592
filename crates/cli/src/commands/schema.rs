//! `pellicle schema`.

use crate::args::Described;
use crate::failure::Failure;
use crate::run::progress::say;
use crate::scenario;
use crate::study::keys::STUDY;

/// Print a JSON schema; returns the exit code.
///
/// # Errors
/// None.
pub fn run(of: Described) -> Result<u8, Failure> {
    say(match of {
        Described::Scenario => scenario::schema(),
        Described::Study => scenario::schema_of(STUDY, "Study of pellicle"),
    });
    Ok(0)
}
