//! `pellicle run`.

use super::closing;
use crate::args;
use crate::error_bars;
use crate::failure::Failure;
use crate::run::progress::Progress;
use crate::run::{folder, start, words};
use crate::scenario;
use serde_json::json;

/// Run a scenario; returns the exit code.
///
/// # Errors
/// See [`Failure`].
pub fn run(arguments: &args::Run) -> Result<u8, Failure> {
    if let Some(names) = &arguments.error_bars {
        return error_bars::run::run(arguments, &overrides(arguments), names);
    }
    let folder = arguments.out.clone().unwrap_or_else(|| folder::default_folder(&arguments.scenario));
    folder::check_free(&folder, &arguments.scenario, arguments.force)?;
    let threads = start::use_threads(arguments.manner.threads)?;
    let setup = scenario::load(&arguments.scenario, &overrides(arguments))?;
    let progress = Progress::new(&arguments.manner);
    let driver = start::start(setup, &folder, arguments.force, threads, progress)?;
    let until = driver.plan.stop.time * driver.plan.scales.time;
    driver.progress.tell(format_args!(
        "{}: {} vertices to {}, results in {}",
        driver.plan.title,
        driver.simulation.state.mesh.n_vertices(),
        words::with_unit(until, "s"),
        folder.display()
    ));
    driver.progress.event(
        "started",
        json!({ "title": driver.plan.title, "until_s": until, "folder": folder.to_string_lossy() }),
    );
    let finish = driver.run()?;
    closing::close(&folder, &finish)
}

/// What is laid over the scenario.
fn overrides(arguments: &args::Run) -> Vec<String> {
    let mut overrides = arguments.set.clone();
    if let Some(origin) = &arguments.start_from {
        let origin = std::path::absolute(origin).unwrap_or_else(|_| origin.clone());
        overrides.push(format!("start_from={}", toml::Value::String(origin.to_string_lossy().into_owned())));
    }
    overrides
}
