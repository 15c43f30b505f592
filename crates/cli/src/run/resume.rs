//! Taking a run up again where its newest checkpoint left it.

use super::checkpoint::{self, CHECKPOINT_FILE, Checkpoint, PREVIOUS_FILE, hexadecimal};
use super::cursor::Ended;
use super::drive::Driver;
use super::folder::{self, SCENARIO_FILE};
use super::frames::FrameWriter;
use super::lock::Lock;
use super::log::Log;
use super::progress::Progress;
use super::columns::COLUMNS;
use super::series::{PIECE_COLUMNS, PIECES_FILE, SERIES_FILE, SeriesFile};
use super::signals::Interrupt;
use super::summary::SUMMARY_FILE;
use super::words::with_unit;
use crate::failure::Failure;
use pellicle_physics::Simulation;
use sha2::{Digest, Sha256};
use std::fs;
use std::path::Path;

/// Make a run ready to go on. `until` is another end [s].
///
/// # Errors
/// [`Failure::Input`] when `until` is past or nothing is left to do; [`Failure::Files`] when the directory holds no run
/// that can be taken up.
pub fn resume(
    folder: &Path,
    until: Option<f64>,
    threads: u64,
    progress: Progress,
) -> Result<Driver, Failure> {
    if !folder.is_dir() {
        return Err(Failure::Input(format!("there is no directory {}", folder.display())));
    }
    if !folder.join(CHECKPOINT_FILE).exists() && !folder.join(PREVIOUS_FILE).exists() {
        // Says what is missing without leaving a lock file in a directory that is not a run's.
        checkpoint::newest(folder)?;
    }
    let lock = Lock::take(folder)?;
    let (found, problem) = checkpoint::newest(folder)?;
    let Checkpoint { program, mut plan, state, memory, mut cursor, mut accounts, .. } = found;
    let mut warnings: Vec<String> = problem.into_iter().collect();
    let time = with_unit(state.time * plan.scales.time, "s");
    if let Some(until) = until {
        let until = until / plan.scales.time;
        if until <= state.time {
            return Err(Failure::Input(format!("the run is at {time} already; give a later --until")));
        }
        plan.stop.time = until;
        if cursor.ended == Some(Ended::Time) {
            cursor.ended = None;
        }
    }
    if matches!(cursor.ended, Some(Ended::Trouble(_))) {
        // Another version of the program may do better; the same one ends at the same place.
        cursor.ended = None;
    }
    if program != env!("CARGO_PKG_VERSION") {
        warnings.push(format!(
            "the run was begun by version {program}; results of version {} may differ in the last digits",
            env!("CARGO_PKG_VERSION")
        ));
    }
    let scenario = fs::read(folder.join(SCENARIO_FILE)).unwrap_or_default();
    if hexadecimal(&Sha256::digest(&scenario)) != plan.scenario_sha256 {
        warnings.push(format!("{SCENARIO_FILE} was changed since the run began; the run goes on as it began"));
    }
    let simulation = Simulation::restore(plan.parameters.clone(), state, memory)
        .map_err(|error| Failure::Files(format!("the checkpoint cannot be used: {error}")))?;
    let interrupt = Interrupt::watch().map_err(|error| Failure::Files(format!("cannot watch signals: {error}")))?;
    let series = SeriesFile::open(folder, SERIES_FILE, &COLUMNS, cursor.series_bytes)?;
    let pieces = match plan.parameters.fission {
        Some(_) => Some(SeriesFile::open(folder, PIECES_FILE, &PIECE_COLUMNS, cursor.pieces_bytes)?),
        None => None,
    };
    folder::sweep(folder);
    let frames = FrameWriter::open(folder, cursor.frames)?;
    // It told of an end that is none any more; the new one is written at the end.
    let summary = folder.join(SUMMARY_FILE);
    if summary.exists() {
        fs::remove_file(&summary).map_err(|error| Failure::system("delete", &summary, &error))?;
    }
    let mut log = Log::open(folder)?;
    log.line(format_args!("pellicle {} goes on at {time} ({threads} threads)", env!("CARGO_PKG_VERSION")));
    for warning in &warnings {
        log.line(format_args!("warning: {warning}"));
        progress.warn(warning);
    }
    accounts.resumed += 1;
    accounts.threads = threads;
    Ok(Driver {
        folder: folder.to_owned(),
        plan,
        simulation,
        cursor,
        accounts,
        series,
        pieces,
        frames,
        log,
        progress,
        interrupt,
        warnings,
        lock,
    })
}
