//! One run of a study as a child process of this very program: begun, taken up again, or found finished.
//!
//! Whoever needs the end of a run (scans, thresholds, error bars) asks [`bring_to_end`]. It may be asked again after
//! any kind of death of this program or of the child, and by several programs at once: the lock of the run's directory
//! sees to it that one works and the others wait for its result.

use crate::failure::{Failure, INTERRUPTED};
use crate::run::checkpoint::{CHECKPOINT_FILE, PREVIOUS_FILE};
use crate::run::lock::{LOCK_FILE, Lock};
use crate::run::signals::Interrupt;
use crate::run::summary::SUMMARY_FILE;
use serde_json::Value;
use std::fs;
use std::io::{BufRead, BufReader, Read};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::{Receiver, RecvTimeoutError, channel};
use std::thread;
use std::time::Duration;

/// Time between two looks at a child that says nothing.
const PAUSE: Duration = Duration::from_millis(100);
/// Time between two looks at a child that is about to end, or at a lock that others hold.
const SHORT_PAUSE: Duration = Duration::from_millis(10);
/// Bytes of the child's complaints that are kept.
const MOST_COMPLAINTS: u64 = 64 << 10;

/// A run that is wanted.
#[derive(Clone, Debug)]
pub struct Job {
    /// Directory of the run; made when needed.
    pub folder: PathBuf,
    /// The scenario file.
    pub scenario: PathBuf,
    /// Entries laid over it, as for `run --set`.
    pub overrides: Vec<String>,
    /// Directory of another run whose end state this one starts from.
    pub start_from: Option<PathBuf>,
    /// Threads of the child.
    pub threads: u16,
}

/// Where a child is.
#[derive(Clone, Copy, Debug, Default)]
pub struct Moment {
    /// Share of the simulated time that is done.
    pub fraction: f64,
    /// Process number of the child; `None` while another program works on the run.
    pub process: Option<u32>,
}

/// A run that has come to its end, in trouble or not.
#[derive(Clone, Debug)]
pub struct EndOfRun {
    /// Its `summary.json`.
    pub summary: Value,
}

/// What became of a job.
#[derive(Clone, Debug)]
pub enum Ending {
    /// The run has come to its end.
    Ended(EndOfRun),
    /// Someone asked to stop; the run can be taken up again.
    Interrupted,
}

impl EndOfRun {
    /// The finished run in a directory, if there is one.
    pub fn read(folder: &Path) -> Option<Self> {
        let text = fs::read(folder.join(SUMMARY_FILE)).ok()?;
        let summary: Value = serde_json::from_slice(&text).ok()?;
        let end = Self { summary };
        (!matches!(end.stopped_by(), "" | "interrupted")).then_some(end)
    }

    fn text(&self, key: &str) -> &str {
        self.summary.get(key).and_then(Value::as_str).unwrap_or_default()
    }

    /// Why the run ended, in one word.
    pub fn stopped_by(&self) -> &str {
        self.text("stopped_by")
    }

    /// Why the solver gave up, if it did.
    pub fn trouble(&self) -> Option<&str> {
        (self.stopped_by() == "trouble").then(|| self.text("stopped"))
    }

    /// The last value of a column of the series, in SI; `None` where the run has no such thing.
    pub fn end(&self, column: &str) -> Option<f64> {
        self.summary.get("end")?.get(column)?.as_f64()
    }

    /// Warnings of the scenario; those of taking the run up again, which depend on how it was interrupted, are left out.
    pub fn warnings(&self) -> Vec<&str> {
        let list = |value: Option<&'_ Value>| value.and_then(Value::as_array).map_or(0, Vec::len);
        let of_resuming = list(self.summary.pointer("/provenance/warnings_of_resuming"));
        let all: Vec<&str> = match self.summary.get("warnings").and_then(Value::as_array) {
            Some(all) => all.iter().filter_map(Value::as_str).collect(),
            None => Vec::new(),
        };
        let kept = all.len().saturating_sub(of_resuming);
        all.into_iter().take(kept).collect()
    }
}

/// Run a job to its end: take the result that is there, resume what was begun, or begin.
///
/// `on_progress` is told where the run is, about once a second. A run whose solver gave up has ended, too; see
/// [`EndOfRun::trouble`].
///
/// # Errors
/// [`Failure::Input`] when the scenario cannot be run, in the child's words; [`Failure::Files`] for trouble of the
/// machine: files, memory, a child killed by someone else; [`Failure::Numerical`] for a mistake of the program itself.
pub fn bring_to_end(
    job: &Job,
    interrupt: &Interrupt,
    on_progress: &mut dyn FnMut(&Moment),
) -> Result<Ending, Failure> {
    loop {
        wait_for_others(&job.folder, interrupt, on_progress);
        if let Some(end) = EndOfRun::read(&job.folder) {
            return Ok(Ending::Ended(end));
        }
        if interrupt.asked() {
            return Ok(Ending::Interrupted);
        }
        let mut child = start(job)?;
        let heard = listen(&mut child);
        let complaints = child.stderr.take().map(|stream| thread::spawn(move || tail(stream)));
        let status = watch(&mut child, &heard, interrupt, on_progress)?;
        let complaints = complaints.and_then(|reader| reader.join().ok()).unwrap_or_default();
        let ended = EndOfRun::read(&job.folder);
        return match (status.code(), ended) {
            (Some(0 | 1), Some(end)) => Ok(Ending::Ended(end)),
            (Some(code), _) if code == i32::from(INTERRUPTED) => Ok(Ending::Interrupted),
            (None, _) if interrupt.asked() => Ok(Ending::Interrupted),
            (Some(2), _) => Err(Failure::Input(complaints)),
            (Some(3), _) if is_locked(&job.folder) => continue,
            (Some(3), _) => Err(Failure::Files(complaints)),
            (Some(_), _) => Err(Failure::Numerical(complaints)),
            (None, _) => Err(Failure::Files(format!(
                "the run was killed ({status}); the system does so when memory is short"
            ))),
        };
    }
}

/// Throw away what is there of a run, so that it begins anew.
///
/// # Errors
/// [`Failure::Files`] when another program works on it or files cannot be deleted.
pub fn forget(folder: &Path) -> Result<(), Failure> {
    if !folder.is_dir() {
        return Ok(());
    }
    let _lock = Lock::take(folder)?;
    crate::run::folder::clear(folder)
}

fn is_locked(folder: &Path) -> bool {
    // Looking must not leave a lock file in a directory that has none.
    folder.join(LOCK_FILE).exists() && Lock::take(folder).is_err()
}

fn wait_for_others(folder: &Path, interrupt: &Interrupt, on_progress: &mut dyn FnMut(&Moment)) {
    let mut waited = 0u32;
    while is_locked(folder) && !interrupt.asked() {
        if waited % 100 == 0 {
            on_progress(&Moment::default());
        }
        waited = waited.wrapping_add(1);
        thread::sleep(SHORT_PAUSE);
    }
}

/// Begin or take up a run.
fn start(job: &Job) -> Result<Child, Failure> {
    let program = std::env::current_exe()
        .map_err(|error| Failure::Files(format!("cannot find the program's own file: {error}")))?;
    let begun = [CHECKPOINT_FILE, PREVIOUS_FILE].iter().any(|name| job.folder.join(name).exists());
    let mut command = Command::new(&program);
    if begun {
        command.arg("resume").arg(&job.folder);
    } else {
        // What a run left that died before its first checkpoint is replaced.
        command.arg("run").arg(&job.scenario).arg("--force").arg("--out").arg(&job.folder);
        for option in &job.overrides {
            command.arg("--set").arg(option);
        }
        if let Some(origin) = &job.start_from {
            command.arg("--start-from").arg(origin);
        }
    }
    command.args(["--quiet", "--progress", "json", "--threads"]).arg(job.threads.to_string());
    command.stdin(Stdio::null()).stdout(Stdio::piped()).stderr(Stdio::piped());
    // Ctrl-C reaches this program only, which then asks its children to end, once.
    #[cfg(unix)]
    std::os::unix::process::CommandExt::process_group(&mut command, 0);
    command.spawn().map_err(|error| Failure::system("start", &program, &error))
}

/// The moments that a child reports.
fn listen(child: &mut Child) -> Receiver<Moment> {
    let (sender, receiver) = channel();
    let process = Some(child.id());
    if let Some(stream) = child.stdout.take() {
        thread::spawn(move || {
            for line in BufReader::new(stream).lines().map_while(Result::ok) {
                let Ok(event) = serde_json::from_str::<Value>(&line) else { continue };
                let fraction = event.get("fraction").and_then(Value::as_f64).unwrap_or(0.0);
                // The other end is gone when the child is no longer watched.
                if sender.send(Moment { fraction, process }).is_err() {
                    return;
                }
            }
        });
    }
    receiver
}

/// What a child complains of, without the word "error".
fn tail(stream: impl Read) -> String {
    let mut bytes = Vec::new();
    let mut stream = stream;
    let _ = stream.by_ref().take(MOST_COMPLAINTS).read_to_end(&mut bytes);
    let _ = std::io::copy(&mut stream, &mut std::io::sink());
    let text = String::from_utf8_lossy(&bytes);
    let text = text.trim();
    text.strip_prefix("error: ").unwrap_or(text).to_owned()
}

fn watch(
    child: &mut Child,
    heard: &Receiver<Moment>,
    interrupt: &Interrupt,
    on_progress: &mut dyn FnMut(&Moment),
) -> Result<ExitStatus, Failure> {
    let mut asked = false;
    loop {
        match heard.recv_timeout(PAUSE) {
            Ok(moment) => on_progress(&moment),
            Err(RecvTimeoutError::Timeout) => {}
            Err(RecvTimeoutError::Disconnected) => thread::sleep(SHORT_PAUSE),
        }
        if interrupt.asked() && !asked {
            asked = true;
            ask_to_end(child);
        }
        let status = child.try_wait();
        if let Some(status) = status.map_err(|error| Failure::Files(format!("cannot watch a run: {error}")))? {
            return Ok(status);
        }
    }
}

/// Ask a child to write a checkpoint and end.
#[cfg(unix)]
fn ask_to_end(child: &mut Child) {
    use rustix::process::{Pid, Signal, kill_process};
    if let Some(pid) = i32::try_from(child.id()).ok().and_then(Pid::from_raw) {
        let _ = kill_process(pid, Signal::TERM);
    }
}

/// Where there are no such signals, the run goes on from its last checkpoint.
#[cfg(not(unix))]
fn ask_to_end(child: &mut Child) {
    let _ = child.kill();
}
