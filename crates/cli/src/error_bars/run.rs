//! `pellicle run --error-bars`: the scenario and its coarser levels, each an ordinary run directory.

use super::levels::{LEVELS, Refinement};
use super::{Family, quantities, warnings, write};
use crate::args;
use crate::failure::{Failure, INTERRUPTED};
use crate::run::folder::{self, SCENARIO_FILE, scenario_text};
use crate::run::progress::Progress;
use crate::run::signals::Interrupt;
use crate::scenario;
use crate::study::launch::{self, EndOfRun, Ending, Job};
use serde_json::json;
use std::fs;
use std::path::{Path, PathBuf};

/// Directory of the coarser levels, within that of the run.
const LEVELS_FOLDER: &str = "levels";

/// Run a scenario with error bars; returns the exit code.
///
/// # Errors
/// See [`Failure`]; a level that cannot be run at all ends it.
pub fn run(arguments: &args::Run, overrides: &[String], names: &str) -> Result<u8, Failure> {
    let out = arguments.out.clone().unwrap_or_else(|| folder::default_folder(&arguments.scenario));
    let refinements = names
        .split(',')
        .map(|name| name.trim().parse::<Refinement>().map_err(|problem| Failure::Input(format!("--error-bars {name}: {problem}"))))
        .collect::<Result<Vec<Refinement>, Failure>>()?;
    let setup = scenario::load(&arguments.scenario, overrides)?;
    let resolved: toml::Table = toml::from_str(&setup.resolved)
        .map_err(|error| Failure::Numerical(format!("the scenario cannot be read back: {error}")))?;
    if arguments.force || !is_run_of(&out, &setup.resolved) {
        folder::check_free(&out, &arguments.scenario, arguments.force)?;
        launch::forget(&out)?;
    }
    let progress = Progress::new(&arguments.manner);
    let interrupt = Interrupt::watch().map_err(|error| Failure::Files(format!("cannot watch signals: {error}")))?;
    let threads = arguments.manner.threads.unwrap_or(1);
    let job = |folder: PathBuf, overrides: Vec<String>| Job {
        folder,
        scenario: arguments.scenario.clone(),
        overrides,
        start_from: None,
        threads,
    };
    let bring = |job: &Job, name: &str| -> Result<Option<EndOfRun>, Failure> {
        progress.tell(format_args!("{name}: {}", job.folder.display()));
        let ending = launch::bring_to_end(job, &interrupt, &mut |moment| {
            progress.event("progress", json!({ "level": name, "fraction": moment.fraction }));
        })?;
        Ok(match ending {
            Ending::Ended(end) => Some(end),
            Ending::Interrupted => None,
        })
    };
    let interrupted = || {
        progress.tell("Interrupted. The same command goes on.");
        Ok(INTERRUPTED)
    };
    // Coarse levels first: they are cheap and show early what is wrong.
    let mut coarser = Vec::new();
    for refinement in &refinements {
        let mut ends = Vec::new();
        for level in (1..LEVELS).rev() {
            let more = refinement
                .overrides(&resolved, level)
                .map_err(|problem| Failure::Input(format!("--error-bars {}: {problem}", refinement.name)))?;
            let overrides: Vec<String> = overrides.iter().cloned().chain(more).collect();
            let place = out.join(LEVELS_FOLDER).join(format!("{}-{}", refinement.name, level + 1));
            let resolved = scenario::load(&arguments.scenario, &overrides)?.resolved;
            if arguments.force || !is_run_of(&place, &resolved) {
                launch::forget(&place)?;
            }
            let name = format!("{} level {} of {LEVELS}", refinement.name, level + 1);
            match bring(&job(place, overrides), &name)? {
                Some(end) => ends.push(end),
                None => return interrupted(),
            }
        }
        ends.reverse();
        coarser.push(ends);
    }
    let Some(finest) = bring(&job(out.clone(), overrides.to_vec()), "finest level")? else {
        return interrupted();
    };
    if let Some(why) = finest.trouble() {
        return Err(Failure::Numerical(format!("{why}. Everything up to there is in {}", out.display())));
    }
    let families: Vec<Family> = refinements
        .into_iter()
        .zip(coarser)
        .filter_map(|(refinement, ends)| {
            let ends = <[EndOfRun; LEVELS]>::try_from([vec![finest.clone()], ends].concat()).ok()?;
            Some(Family { refinement, ends })
        })
        .collect();
    let (found, told) = (quantities(&families), warnings(&families));
    write::files(&out, &found, &families, &told)?;
    for warning in &told {
        progress.warn(warning);
    }
    progress.tell(write::table(&found));
    progress.tell(format_args!("Files: {0}/{1}, {0}/{2}", out.display(), write::TABLE_FILE, write::JSON_FILE));
    Ok(0)
}

/// Whether a directory holds a run of just this scenario.
fn is_run_of(folder: &Path, resolved: &str) -> bool {
    fs::read_to_string(folder.join(SCENARIO_FILE)).is_ok_and(|text| text == scenario_text(resolved))
}
