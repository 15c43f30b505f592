//! `pellicle resume`.

use super::closing;
use crate::args;
use crate::failure::Failure;
use crate::run::progress::Progress;
use crate::run::{resume, start, words};
use serde_json::json;

/// Go on with a run; returns the exit code.
///
/// # Errors
/// See [`Failure`].
pub fn run(arguments: &args::Resume) -> Result<u8, Failure> {
    let until = match &arguments.until {
        None => None,
        Some(text) => Some(
            words::simulated_time(text)
                .map_err(|problem| Failure::Input(format!("--until \"{text}\": {problem}")))?,
        ),
    };
    let folder = &arguments.folder;
    let threads = start::use_threads(arguments.manner.threads)?;
    let driver = resume::resume(folder, until, threads, Progress::new(&arguments.manner))?;
    let scales = driver.plan.scales;
    let (time, until) = (driver.simulation.state.time * scales.time, driver.plan.stop.time * scales.time);
    if driver.cursor.ended.is_none() {
        driver.progress.tell(format_args!(
            "{}: goes on at {} to {}, results in {}",
            driver.plan.title,
            words::with_unit(time, "s"),
            words::with_unit(until, "s"),
            folder.display()
        ));
    }
    driver.progress.event(
        "resumed",
        json!({
            "title": driver.plan.title,
            "time_s": time,
            "until_s": until,
            "folder": folder.to_string_lossy(),
        }),
    );
    let finish = driver.run()?;
    closing::close(folder, &finish)
}
