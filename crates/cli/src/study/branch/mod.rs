//! Parts of a study in which one run follows from another: continuation, which carries the end state along while a
//! parameter moves up and down again, and thresholds, bisected for the value at which the outcome changes.
//!
//! Data flow: [`wish`] reads what is wanted, [`bench`] runs trials (children, named by their content, so that whatever
//! was interrupted goes on), [`search`] decides which come next, [`thresholds`] and [`continuation`] put it together and
//! write it down.

pub mod bench;
pub mod continuation;
pub mod picture;
pub mod search;
pub mod thresholds;
pub mod wish;

pub use wish::Wishes;

use super::Study;
use crate::failure::{Failure, INTERRUPTED};
use crate::run::signals::Interrupt;
use bench::{Bench, Stop};
use std::path::Path;

/// Do the continuations and thresholds of a study in a directory; returns the exit code.
///
/// # Errors
/// See [`Failure`].
pub fn run(study: &Study, folder: &Path, threads: u16, quiet: bool, interrupt: &Interrupt) -> Result<u8, Failure> {
    let bench = Bench { study, runs: folder.join("runs"), threads, quiet, interrupt };
    let work = || -> Result<(), Stop> {
        continuation::all(&bench, folder)?;
        thresholds::all(&bench, folder)
    };
    match work() {
        Ok(()) => Ok(0),
        Err(Stop::Interrupted) => {
            bench.tell("Interrupted. The same command goes on.");
            Ok(INTERRUPTED)
        }
        Err(Stop::Failed(failure)) => Err(failure),
    }
}
