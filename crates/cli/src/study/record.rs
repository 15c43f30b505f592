//! What is known of a run of a study: its end, its failure, or nothing yet.

use super::launch::{EndOfRun, Ending, Job, Moment, bring_to_end, forget};
use crate::failure::Failure;
use crate::run::signals::Interrupt;
use crate::run::summary::replace;
use serde_json::{Value, json};
use std::fs;
use std::path::Path;

/// Tells of a run that could not be run. It stands in the directory of the run.
pub const FAILURE_FILE: &str = "failure.json";

/// What is known of a run.
#[derive(Clone, Debug)]
pub enum State {
    /// Not begun, or not at its end.
    Unfinished,
    /// At its end, in trouble or not.
    Ended(EndOfRun),
    /// It could not be run. `lasting`: it would fail again.
    Failed {
        /// Why, in words.
        reason: String,
        /// Whether the scenario is at fault and not the machine.
        lasting: bool,
    },
}

impl State {
    /// What the directory of a run tells.
    pub fn read(folder: &Path) -> Self {
        if let Some(end) = EndOfRun::read(folder) {
            return Self::Ended(end);
        }
        let found = fs::read(folder.join(FAILURE_FILE)).ok();
        let found: Option<Value> = found.and_then(|bytes| serde_json::from_slice(&bytes).ok());
        match found.as_ref().and_then(|found| Some((found, found.get("reason")?.as_str()?))) {
            None => Self::Unfinished,
            Some((found, reason)) => Self::Failed {
                reason: reason.to_owned(),
                lasting: found.get("lasting").and_then(Value::as_bool).unwrap_or(false),
            },
        }
    }

    /// Why there is no regular end, if the run failed.
    pub fn failure(&self) -> Option<&str> {
        match self {
            Self::Unfinished => None,
            Self::Ended(end) => end.trouble(),
            Self::Failed { reason, .. } => Some(reason),
        }
    }

    /// Whether nothing is left to do for the run.
    pub fn is_settled(&self) -> bool {
        matches!(self, Self::Ended(_) | Self::Failed { lasting: true, .. })
    }
}

/// Bring a run to its end and write down why, if it has none. `here` is the directory of the study file, which is left
/// out in reasons.
///
/// # Errors
/// [`Failure::Files`] when the failure cannot be written down.
pub fn settle(
    job: &Job,
    here: &Path,
    interrupt: &Interrupt,
    on_progress: &mut dyn FnMut(&Moment),
) -> Result<State, Failure> {
    let known = State::read(&job.folder);
    if known.is_settled() {
        return Ok(known);
    }
    match bring_to_end(job, interrupt, on_progress) {
        Ok(Ending::Ended(end)) => {
            let _ = fs::remove_file(job.folder.join(FAILURE_FILE));
            Ok(State::Ended(end))
        }
        Ok(Ending::Interrupted) => Ok(State::Unfinished),
        Err(failure) => {
            let lasting = !matches!(failure, Failure::Files(_));
            fail(&job.folder, in_short(&failure.to_string(), here), lasting)
        }
    }
}

/// Write down that a run failed.
///
/// # Errors
/// [`Failure::Files`].
pub fn fail(folder: &Path, reason: String, lasting: bool) -> Result<State, Failure> {
    fs::create_dir_all(folder).map_err(|error| Failure::system("create the directory", folder, &error))?;
    let text = format!("{:#}\n", json!({ "reason": reason, "lasting": lasting }));
    replace(&folder.join(FAILURE_FILE), text.as_bytes())?;
    Ok(State::Failed { reason, lasting })
}

/// Throw a failed run away, so that it begins anew.
///
/// # Errors
/// [`Failure::Files`].
pub fn retry(folder: &Path) -> Result<(), Failure> {
    forget(folder)?;
    match fs::remove_file(folder.join(FAILURE_FILE)) {
        Err(error) if error.kind() != std::io::ErrorKind::NotFound => {
            Err(Failure::system("delete", &folder.join(FAILURE_FILE), &error))
        }
        _ => Ok(()),
    }
}

/// The first line of each fault, on one line, without the place on this machine.
fn in_short(message: &str, here: &Path) -> String {
    let lines: Vec<&str> = message
        .split("\n\n")
        .filter_map(|part| part.lines().next())
        .map(|line| line.trim().trim_start_matches("error: "))
        .filter(|line| !line.is_empty())
        .collect();
    let text = lines.join("; ");
    let full = fs::canonicalize(here).or_else(|_| std::path::absolute(here)).unwrap_or_default();
    let text = text.replace(&format!("{}/", full.display()), "");
    if text.is_empty() { "it ended without a word".to_owned() } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reasons_are_one_line() {
        let told = "a: must be above zero\n --> x.toml:3:1\n  |\n\nerror: b is unknown\n  help: c";
        assert_eq!(in_short(told, Path::new("/nowhere")), "a: must be above zero; b is unknown");
        assert_eq!(in_short("", Path::new("/nowhere")), "it ended without a word");
    }

    #[test]
    fn failures_are_written_and_read() -> Result<(), Box<dyn std::error::Error>> {
        let place = tempfile::tempdir()?;
        let folder = place.path().join("run");
        assert!(matches!(State::read(&folder), State::Unfinished));
        fail(&folder, "too bold".into(), true)?;
        let state = State::read(&folder);
        assert_eq!(state.failure(), Some("too bold"));
        assert!(state.is_settled());
        retry(&folder)?;
        assert!(matches!(State::read(&folder), State::Unfinished));
        Ok(())
    }
}
