//! The directory of a run: what in it is ours.

use super::checkpoint::{CHECKPOINT_FILE, PREVIOUS_FILE, UNFINISHED_FILE};
use super::frames::{COLLECTION_FILE, frame_files};
use super::log::LOG_FILE;
use super::series::{PIECES_FILE, SERIES_FILE};
use super::summary::SUMMARY_FILE;
use crate::failure::Failure;
use std::fs;
use std::io::Read;
use std::path::{Path, PathBuf};

/// The scenario as it was run. Written first and deleted last: it marks a directory as ours.
pub const SCENARIO_FILE: &str = "scenario.toml";
/// How the marked file begins.
const MARK: &str = "# Scenario as run by pellicle ";
/// The other files of a run, but for its frames, log and lock.
const RESULTS: [&str; 6] =
    [SERIES_FILE, PIECES_FILE, SUMMARY_FILE, COLLECTION_FILE, CHECKPOINT_FILE, PREVIOUS_FILE];

/// `scenario.toml` as it is written into the directory.
pub fn scenario_text(resolved: &str) -> String {
    format!("{MARK}{}, every default filled in.\n{resolved}", env!("CARGO_PKG_VERSION"))
}

/// The directory a scenario's results go to when none is given: its name with `-run`.
pub fn default_folder(scenario: &Path) -> PathBuf {
    let mut name = scenario.file_stem().unwrap_or_default().to_owned();
    name.push("-run");
    PathBuf::from(name)
}

fn is_marked(path: &Path) -> bool {
    let mut start = vec![0; MARK.len()];
    fs::File::open(path).is_ok_and(|mut file| file.read_exact(&mut start).is_ok() && start == MARK.as_bytes())
}

/// See that a new run may be written into a directory, which need not exist.
///
/// # Errors
/// [`Failure::Input`] when it holds a run and `force` is not given, or files of a run's names that are not ours;
/// [`Failure::Files`] when it cannot be looked at.
pub fn check_free(folder: &Path, scenario: &Path, force: bool) -> Result<(), Failure> {
    let here = folder.display();
    match fs::metadata(folder) {
        Ok(found) if !found.is_dir() => {
            return Err(Failure::Input(format!("{here} is a file; choose another place with --out")));
        }
        Ok(_) => {}
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => return Ok(()),
        Err(error) => return Err(Failure::system("look at", folder, &error)),
    }
    let marked = folder.join(SCENARIO_FILE);
    if let (Ok(a), Ok(b)) = (fs::canonicalize(&marked), fs::canonicalize(scenario))
        && a == b
    {
        return Err(Failure::Input(format!(
            "{} would be overwritten by its own run; copy it elsewhere, or choose another directory with --out",
            scenario.display()
        )));
    }
    let present = RESULTS.iter().find(|name| folder.join(name).exists());
    let holds_scenario = marked.exists();
    if !holds_scenario && present.is_none() && frame_files(folder)?.is_empty() {
        return Ok(());
    }
    if !is_marked(&marked) {
        let name = if holds_scenario { SCENARIO_FILE } else { present.copied().unwrap_or("surface_*.vtu") };
        return Err(Failure::Input(format!(
            "{here} holds a file {name} that no run wrote; choose another directory with --out"
        )));
    }
    if force {
        return Ok(());
    }
    Err(Failure::Input(format!(
        "{here} holds a run already; go on with it (`pellicle resume {here}`), choose another directory with --out, \
         or replace it with --force"
    )))
}

/// Delete the files of a run, and nothing else.
///
/// # Errors
/// [`Failure::Files`].
pub fn clear(folder: &Path) -> Result<(), Failure> {
    let mut files: Vec<PathBuf> = RESULTS.iter().chain(&[UNFINISHED_FILE, LOG_FILE]).map(|name| folder.join(name)).collect();
    files.extend(frame_files(folder)?.into_iter().map(|(_, path)| path));
    files.push(folder.join(SCENARIO_FILE));
    for path in files {
        match fs::remove_file(&path) {
            Ok(()) => {}
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => {}
            Err(error) => return Err(Failure::system("delete", &path, &error)),
        }
    }
    sweep(folder);
    Ok(())
}

/// Remove what a killed program left half-written.
pub fn sweep(folder: &Path) {
    let Ok(entries) = fs::read_dir(folder) else { return };
    for entry in entries.flatten() {
        let name = entry.file_name();
        let name = name.to_string_lossy();
        let ours = (name.starts_with(".unfinished-") && name.ends_with(".tmp"))
            || name == UNFINISHED_FILE
            || name == "checkpoint.link"
            || name == "summary.json.unfinished"
            || name == "scenario.toml.unfinished";
        if ours {
            let _ = fs::remove_file(entry.path());
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_our_own_files_are_deleted() -> Result<(), Box<dyn std::error::Error>> {
        let place = tempfile::tempdir()?;
        let folder = place.path();
        let scenario = folder.join("mine.toml");
        fs::write(&scenario, "x")?;
        fs::write(folder.join("surface_notes.vtu"), "x")?;
        assert!(check_free(folder, &scenario, false).is_ok(), "a directory with other files is free");

        fs::write(folder.join(SCENARIO_FILE), scenario_text("title = 1"))?;
        fs::write(folder.join("surface_000003.vtu"), "x")?;
        assert!(check_free(folder, &scenario, false).is_err());
        assert!(check_free(folder, &scenario, true).is_ok());
        assert!(check_free(folder, &folder.join(SCENARIO_FILE), true).is_err(), "its own scenario");
        clear(folder)?;
        let mut left: Vec<_> = fs::read_dir(folder)?.flatten().map(|entry| entry.file_name()).collect();
        left.sort();
        assert_eq!(left, ["mine.toml", "surface_notes.vtu"]);
        Ok(())
    }

    #[test]
    fn files_of_others_are_never_replaced() -> Result<(), Box<dyn std::error::Error>> {
        for name in [SCENARIO_FILE, SERIES_FILE, CHECKPOINT_FILE] {
            let place = tempfile::tempdir()?;
            fs::write(place.path().join(name), "someone's work")?;
            for force in [false, true] {
                let refused = check_free(place.path(), Path::new("mine.toml"), force);
                assert!(matches!(refused, Err(Failure::Input(_))), "{name}");
            }
        }
        Ok(())
    }
}
