//! `pellicle scan`.

mod progress;

use crate::args;
use crate::failure::{Failure, INTERRUPTED};
use crate::run::lock::Lock;
use crate::run::progress::{complain, say};
use crate::run::signals::Interrupt;
use crate::study::expand::{Run, expand};
use crate::study::launch::Job;
use crate::study::pool::{Event, Pool};
use crate::study::record::{State, retry, settle};
use crate::study::{Study, branch, read, results};
use progress::Progress;
use std::fs;
use std::path::{Path, PathBuf};

/// Directory of the runs within that of the study.
const RUNS_FOLDER: &str = "runs";
/// Failed runs that are told one by one.
const MOST_TOLD: usize = 20;

/// A study, its runs, and where they are.
struct Scan<'a> {
    study: &'a Study,
    runs: &'a [Run],
    folder: PathBuf,
    threads: u16,
}

impl Scan<'_> {
    fn job(&self, run: &Run) -> Job {
        Job {
            folder: self.folder.join(RUNS_FOLDER).join(&run.id),
            scenario: self.study.scenario.clone(),
            overrides: run.overrides.clone(),
            start_from: None,
            threads: self.threads,
        }
    }

    fn state(&self, run: &Run) -> State {
        State::read(&self.folder.join(RUNS_FOLDER).join(&run.id))
    }
}

/// Run a study; returns the exit code.
///
/// # Errors
/// See [`Failure`].
pub fn run(arguments: &args::Scan) -> Result<u8, Failure> {
    let study = read::load(&arguments.study)?;
    let runs = expand(&study)?;
    let folder = arguments.out.clone().unwrap_or_else(|| default_folder(&arguments.study));
    let threads = arguments.threads.unwrap_or(study.limits.threads);
    let scan = Scan { study: &study, runs: &runs, folder, threads };
    if arguments.list {
        list(&scan);
        return Ok(0);
    }
    if arguments.gather {
        if !scan.folder.join(RUNS_FOLDER).is_dir() {
            return Err(Failure::Input(format!("{} holds no runs of a study", scan.folder.display())));
        }
        let states: Vec<State> = runs.iter().map(|run| scan.state(run)).collect();
        results::write(&study, &runs, &states, &scan.folder)?;
        closing(&scan, &states, arguments.quiet);
        return Ok(0);
    }
    prepare(&scan.folder)?;
    let interrupt = Interrupt::watch().map_err(|error| Failure::Files(format!("cannot watch signals: {error}")))?;
    if !arguments.only.is_empty() {
        return some(&scan, arguments, &interrupt);
    }
    let varied = !study.axes.is_empty() || !study.seeds.is_empty();
    let code = if varied { all(&scan, arguments, &interrupt)? } else { 0 };
    if code != 0 || study.branches.is_empty() {
        return Ok(code);
    }
    let _lock = Lock::take(&scan.folder)?;
    branch::run(&study, &scan.folder, scan.threads, arguments.quiet, &interrupt)
}

/// The directory a study's results go to when none is given: its name with `-scan`.
fn default_folder(study: &Path) -> PathBuf {
    let mut name = study.file_stem().unwrap_or_default().to_owned();
    name.push("-scan");
    PathBuf::from(name)
}

/// Make the directory; one with other things in it is left alone.
fn prepare(folder: &Path) -> Result<(), Failure> {
    let runs = folder.join(RUNS_FOLDER);
    if !runs.is_dir() && fs::read_dir(folder).is_ok_and(|mut entries| entries.next().is_some()) {
        return Err(Failure::Input(format!(
            "{} holds other things than the runs of a study; choose another directory with --out",
            folder.display()
        )));
    }
    fs::create_dir_all(&runs).map_err(|error| Failure::system("create the directory", &runs, &error))
}

/// `--list`: a table with tabs, for people and scripts.
fn list(scan: &Scan<'_>) {
    let keys = scan.study.axes.iter().flat_map(|axis| &axis.keys).map(|(path, _)| path.as_str());
    let head: Vec<&str> = ["id", "state"].into_iter().chain(keys).chain(["seed"]).collect();
    say(head.join("\t"));
    for run in scan.runs {
        let state = match scan.state(run) {
            State::Unfinished => "unfinished",
            state if state.failure().is_some() => "failed",
            _ => "ended",
        };
        let mut cells = vec![run.id.clone(), state.to_owned()];
        cells.extend(run.cells.iter().map(|cell| cell.given.clone()));
        cells.push(run.seed.to_string());
        say(cells.join("\t"));
    }
}

/// `--only`: some runs, one after the other, without the table.
fn some(scan: &Scan<'_>, arguments: &args::Scan, interrupt: &Interrupt) -> Result<u8, Failure> {
    let chosen = arguments.only.iter().map(|id| find(scan.runs, id)).collect::<Result<Vec<_>, _>>()?;
    for run in chosen {
        let job = scan.job(run);
        if arguments.retry_failed && State::read(&job.folder).failure().is_some() {
            retry(&job.folder)?;
        }
        match settle(&job, &scan.study.folder, interrupt, &mut |_| {})? {
            State::Unfinished => return Ok(INTERRUPTED),
            State::Failed { reason, lasting: false } => return Err(Failure::Files(format!("{}: {reason}", run.id))),
            state => {
                let outcome = results::outcome(scan.study, &state);
                match state.failure() {
                    Some(reason) => complain(format_args!("warning: {} failed: {reason}", run.id)),
                    None if arguments.quiet => {}
                    None => say(format_args!("{}: {outcome}", run.id)),
                }
            }
        }
    }
    Ok(0)
}

/// The run that an id, or its beginning, means.
fn find<'a>(runs: &'a [Run], id: &str) -> Result<&'a Run, Failure> {
    let mut found = runs.iter().filter(|run| !id.is_empty() && run.id.starts_with(id));
    match (found.next(), found.next()) {
        (Some(run), None) => Ok(run),
        (None, _) => Err(Failure::Input(format!(
            "the study has no run {id}; `pellicle scan STUDY --list` shows all (they change with the study and its scenario)"
        ))),
        (Some(_), Some(_)) => Err(Failure::Input(format!("{id} begins the names of several runs; give more of it"))),
    }
}

/// All runs, then table, diagram and page.
fn all(scan: &Scan<'_>, arguments: &args::Scan, interrupt: &Interrupt) -> Result<u8, Failure> {
    let _lock = Lock::take(&scan.folder)?;
    let mut states = Vec::new();
    let jobs: Vec<Job> = scan.runs.iter().map(|run| scan.job(run)).collect();
    for job in &jobs {
        let mut state = State::read(&job.folder);
        if arguments.retry_failed && state.failure().is_some() {
            retry(&job.folder)?;
        }
        if arguments.retry_failed && state.failure().is_some() || !state.is_settled() {
            state = State::Unfinished;
        }
        states.push(state);
    }
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    let parallel = arguments.parallel.map(usize::from).or(scan.study.limits.parallel);
    let pool = Pool {
        parallel: parallel.unwrap_or_else(|| (cores / usize::from(scan.threads)).max(1)),
        memory: match &arguments.memory {
            Some(text) => Some(read::bytes(text).ok_or_else(|| {
                Failure::Input(format!("--memory \"{text}\" is no amount of memory; write for example \"8 GB\""))
            })?),
            None => scan.study.limits.memory,
        },
        here: &scan.study.folder,
        interrupt,
    };
    let mut progress = Progress::new(arguments.progress, arguments.quiet);
    progress.begin(&scan.study.title, &scan.folder, &states);
    let states = pool.settle_all(&jobs, states, &mut |event| match event {
        Event::Moment(overview) => progress.update(&overview),
        Event::Settled(index, state, overview) => {
            progress.settled(&scan.runs[index].id, results::outcome(scan.study, state), state, &overview);
        }
    })?;
    progress.clear();
    results::write(scan.study, scan.runs, &states, &scan.folder)?;
    progress.end(&states, &scan.folder);
    closing(scan, &states, arguments.quiet || progress.is_for_programs());
    Ok(match &states {
        states if states.iter().any(|state| matches!(state, State::Unfinished)) => INTERRUPTED,
        // The machine, not the study, was at fault: the next start tries again.
        states if states.iter().any(|state| matches!(state, State::Failed { lasting: false, .. })) => 3,
        _ => 0,
    })
}

/// The last lines: how many ended how, what failed, where the files are.
fn closing(scan: &Scan<'_>, states: &[State], quiet: bool) {
    if quiet {
        return;
    }
    let mut parts = Vec::new();
    for class in scan.study.rules.classes() {
        let count = states.iter().filter(|state| results::outcome(scan.study, state) == class).count();
        if count > 0 {
            parts.push(format!("{count} {class}"));
        }
    }
    say(format_args!("{}: {} of {} runs.", scan.study.title, parts.join(", "), states.len()));
    let failed: Vec<(&Run, &str)> = scan.runs.iter().zip(states).filter_map(|(run, state)| Some((run, state.failure()?))).collect();
    for (run, reason) in failed.iter().take(MOST_TOLD) {
        let values: Vec<&str> = run.cells.iter().map(|cell| cell.given.as_str()).collect();
        say(format_args!("  failed: {} ({}): {reason}", run.id, values.join(", ")));
    }
    if failed.len() > MOST_TOLD {
        say(format_args!("  and {} more; the table has all reasons", failed.len() - MOST_TOLD));
    }
    let here = scan.folder.display();
    say(format_args!("Files: {here}/table.csv, {here}/table.parquet, {here}/phase_diagram.svg, {here}/report.html"));
    let left_over = left_over(scan);
    if left_over > 0 {
        say(format_args!("Note:  {left_over} directories in {here}/{RUNS_FOLDER} belong to no run of the study as it is now"));
    }
    if states.iter().any(|state| matches!(state, State::Unfinished)) {
        say("Next:  the same command again goes on where this one stopped");
    }
}

/// Directories of runs that the study once had.
fn left_over(scan: &Scan<'_>) -> usize {
    let Ok(entries) = fs::read_dir(scan.folder.join(RUNS_FOLDER)) else { return 0 };
    let known = |name: &std::ffi::OsStr| scan.runs.iter().any(|run| name == run.id.as_str());
    entries.flatten().filter(|entry| entry.path().is_dir() && !known(&entry.file_name())).count()
}
