//! Starting a run: checks first, then the directory.

use super::checkpoint::hexadecimal;
use super::cursor::Cursor;
use super::drive::Driver;
use super::folder::{self, SCENARIO_FILE};
use super::frames::FrameWriter;
use super::lock::Lock;
use super::log::{self, Log};
use super::plan::Plan;
use super::progress::Progress;
use super::columns::COLUMNS;
use super::series::{PIECE_COLUMNS, PIECES_FILE, SERIES_FILE, SeriesFile};
use super::signals::Interrupt;
use super::summary::{self, Accounts};
use crate::failure::Failure;
use crate::setup::Setup;
use pellicle_physics::Simulation;
use sha2::{Digest, Sha256};
use std::fs;
use std::path::Path;

/// Use so many threads from now on; returns how many.
///
/// # Errors
/// [`Failure::Files`] when the system refuses them.
pub fn use_threads(threads: Option<u16>) -> Result<u64, Failure> {
    let count = match threads {
        Some(threads) => usize::from(threads),
        None => std::thread::available_parallelism().map_or(1, usize::from),
    };
    rayon::ThreadPoolBuilder::new()
        .num_threads(count)
        .build_global()
        .map_err(|error| Failure::Files(format!("cannot start {count} threads: {error}")))?;
    Ok(count as u64)
}

/// Make a run ready to start in a directory. Nothing is touched before the scenario has proved to be possible.
///
/// # Errors
/// [`Failure::Input`] for an impossible scenario or a directory that holds a run; [`Failure::Files`].
pub fn start(
    setup: Setup,
    folder: &Path,
    force: bool,
    threads: u64,
    progress: Progress,
) -> Result<Driver, Failure> {
    let text = folder::scenario_text(&setup.resolved);
    let plan = Plan::new(&setup, hexadecimal(&Sha256::digest(text.as_bytes())));
    if let Some(fault) = plan.fault() {
        return Err(Failure::Input(format!("the scenario cannot be run: {fault}")));
    }
    let warnings = setup.warnings;
    let begin = if setup.origin.is_some() { Simulation::begin_from } else { Simulation::new };
    let simulation = begin(setup.parameters, setup.state)
        .map_err(|error| Failure::Input(format!("the scenario cannot be run: {error}")))?;
    let interrupt = Interrupt::watch().map_err(|error| Failure::Files(format!("cannot watch signals: {error}")))?;
    fs::create_dir_all(folder).map_err(|error| Failure::system("create the directory", folder, &error))?;
    let lock = Lock::take(folder)?;
    if force {
        folder::clear(folder)?;
    }
    summary::replace(&folder.join(SCENARIO_FILE), text.as_bytes())?;
    let mut log = Log::open(folder)?;
    log.line(format_args!(
        "pellicle {} starts: {} ({} vertices, {threads} threads)",
        env!("CARGO_PKG_VERSION"),
        plan.title,
        simulation.state.mesh.n_vertices()
    ));
    log.line(format_args!("linear systems: {}", simulation.connectivity.solver.way().words()));
    for warning in &warnings {
        log.line(format_args!("warning: {warning}"));
        progress.warn(warning);
    }
    Ok(Driver {
        folder: folder.to_owned(),
        series: SeriesFile::create(folder, SERIES_FILE, &COLUMNS)?,
        pieces: match plan.parameters.fission {
            Some(_) => Some(SeriesFile::create(folder, PIECES_FILE, &PIECE_COLUMNS)?),
            None => None,
        },
        frames: FrameWriter::create(folder)?,
        plan,
        simulation,
        cursor: Cursor::default(),
        accounts: Accounts { started: log::now(), threads, ..Accounts::default() },
        log,
        progress,
        interrupt,
        warnings: Vec::new(),
        lock,
    })
}
