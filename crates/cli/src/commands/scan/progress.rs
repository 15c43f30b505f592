//! What is shown while a study goes on.

use crate::args::Shown;
use crate::run::progress::say;
use crate::run::words::duration;
use crate::study::pool::Overview;
use crate::study::record::State;
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use serde_json::json;
use std::io::IsTerminal;
use std::path::Path;
use std::time::{Duration, Instant};

/// Time between two JSON lines.
const JSON_PAUSE: Duration = Duration::from_secs(1);
/// Length of the bar.
const LENGTH: f64 = 1000.0;

enum Kind {
    Bar(ProgressBar),
    /// A line for every run that ends.
    Lines,
    Json,
    Silent,
}

/// What is shown while a study goes on.
pub struct Progress {
    kind: Kind,
    shown: Option<Instant>,
}

impl Progress {
    /// Show progress as asked.
    pub fn new(wanted: Shown, quiet: bool) -> Self {
        let kind = match wanted {
            Shown::Json => Kind::Json,
            Shown::None => Kind::Silent,
            Shown::Bar => Kind::Bar(bar()),
            Shown::Auto if quiet => Kind::Silent,
            Shown::Auto if std::io::stderr().is_terminal() => Kind::Bar(bar()),
            Shown::Auto => Kind::Lines,
        };
        Self { kind, shown: None }
    }

    /// Whether the standard output is read by a program.
    pub fn is_for_programs(&self) -> bool {
        matches!(self.kind, Kind::Json)
    }

    /// The study begins or goes on.
    pub fn begin(&self, title: &str, folder: &Path, states: &[State]) {
        let done = states.iter().filter(|state| !matches!(state, State::Unfinished)).count();
        match &self.kind {
            Kind::Json => say(json!({
                "event": "started", "title": title, "folder": folder.to_string_lossy(), "total": states.len(), "done": done,
            })),
            Kind::Silent => {}
            _ if done > 0 => say(format_args!("{title}: {} runs, {done} of them done before", states.len())),
            _ => say(format_args!("{title}: {} runs", states.len())),
        }
    }

    /// Time has passed.
    pub fn update(&mut self, overview: &Overview) {
        match &self.kind {
            Kind::Bar(bar) => {
                bar.set_position((LENGTH * overview.fraction.clamp(0.0, 1.0)) as u64);
                let failed = match overview.failed {
                    0 => String::new(),
                    failed => format!(", {failed} failed"),
                };
                bar.set_message(format!(
                    "{} of {} runs, {} at work{failed}, {} left",
                    overview.done,
                    overview.total,
                    overview.running,
                    overview.left.map_or("?".to_owned(), duration)
                ));
            }
            Kind::Json if self.shown.is_none_or(|at| at.elapsed() >= JSON_PAUSE) => {
                self.shown = Some(Instant::now());
                say(json!({
                    "event": "progress", "total": overview.total, "done": overview.done, "failed": overview.failed,
                    "running": overview.running, "fraction": overview.fraction, "left_s": overview.left,
                }));
            }
            _ => {}
        }
    }

    /// A run has been settled, or was interrupted.
    pub fn settled(&mut self, id: &str, outcome: &str, state: &State, overview: &Overview) {
        let because = state.failure().map(|reason| format!(": {reason}")).unwrap_or_default();
        match &self.kind {
            Kind::Lines => say(format_args!("{id}  {outcome}{because} ({} of {})", overview.done, overview.total)),
            Kind::Json => {
                say(json!({ "event": "run", "id": id, "outcome": outcome, "failure": state.failure() }));
            }
            _ => self.update(overview),
        }
    }

    /// The study has ended or was interrupted.
    pub fn end(&self, states: &[State], folder: &Path) {
        if let Kind::Json = self.kind {
            say(json!({
                "event": "ended",
                "total": states.len(),
                "done": states.iter().filter(|state| !matches!(state, State::Unfinished)).count(),
                "failed": states.iter().filter(|state| state.failure().is_some()).count(),
                "folder": folder.to_string_lossy(),
            }));
        }
    }

    /// Take the bar away.
    pub fn clear(&self) {
        if let Kind::Bar(bar) = &self.kind {
            bar.finish_and_clear();
        }
    }
}

fn bar() -> ProgressBar {
    let bar = ProgressBar::with_draw_target(Some(LENGTH as u64), ProgressDrawTarget::stderr());
    if let Ok(style) = ProgressStyle::with_template("{bar:24} {percent:>3} %  {msg}") {
        bar.set_style(style.progress_chars("=> "));
    }
    bar
}
