//! What is shown while a run goes on.

use super::words::{duration, with_unit};
use crate::args::{Manner, Shown};
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use serde_json::{Value, json};
use std::fmt::Display;
use std::io::{IsTerminal, Write};
use std::time::{Duration, Instant};

/// Time between two signs of life.
const PAUSE: Duration = Duration::from_millis(200);
/// Time between two JSON lines.
const JSON_PAUSE: Duration = Duration::from_secs(1);
/// Length of the bar: thousandths of the simulated time.
const LENGTH: u64 = 1000;

/// Print a line for the user; a closed pipe is no trouble.
pub fn say(text: impl Display) {
    let _ = writeln!(std::io::stdout(), "{text}");
}

/// Print a warning or an error.
pub fn complain(text: impl Display) {
    let _ = writeln!(std::io::stderr(), "{text}");
}

/// Where the run is, in SI.
#[derive(Clone, Copy, Debug)]
pub struct Moment {
    /// Simulated time [s].
    pub time: f64,
    /// Simulated time at which it ends [s].
    pub until: f64,
    /// Simulated time at which this program took it up [s].
    pub from: f64,
    /// Length of the last step [s].
    pub step: f64,
    /// Accepted steps.
    pub steps: u64,
    /// Free energy [J].
    pub free_energy: f64,
    /// Free energy [kBT].
    pub free_energy_thermal: f64,
}

impl Moment {
    /// Wall time left if it goes on as before [s].
    fn left(&self, spent: f64) -> Option<f64> {
        let done = (self.time - self.from) / (self.until - self.from);
        (done > 0.0).then(|| spent * (1.0 - done).max(0.0) / done)
    }
}

#[derive(Debug)]
enum Kind {
    Bar(ProgressBar),
    Json,
    Silent,
}

/// What is shown while a run goes on.
#[derive(Debug)]
pub struct Progress {
    kind: Kind,
    quiet: bool,
    started: Instant,
    shown: Option<Instant>,
}

impl Progress {
    /// Show progress as asked.
    pub fn new(manner: &Manner) -> Self {
        let kind = match manner.progress {
            Shown::Json => Kind::Json,
            Shown::None => Kind::Silent,
            Shown::Auto if manner.quiet || !std::io::stderr().is_terminal() => Kind::Silent,
            Shown::Auto | Shown::Bar => Kind::Bar(bar()),
        };
        Self { kind, quiet: manner.quiet, started: Instant::now(), shown: None }
    }

    /// A line before or after the run, for people.
    pub fn tell(&self, text: impl Display) {
        if !self.quiet && !matches!(self.kind, Kind::Json) {
            say(text);
        }
    }

    /// A line for programs.
    pub fn event(&self, name: &str, value: Value) {
        if matches!(self.kind, Kind::Json) {
            let mut line = json!({ "event": name });
            if let (Value::Object(line), Value::Object(value)) = (&mut line, value) {
                line.extend(value);
            }
            say(line);
        }
    }

    /// A warning, whatever is shown otherwise.
    pub fn warn(&self, text: impl Display) {
        if self.quiet {
            return;
        }
        match &self.kind {
            Kind::Bar(bar) => bar.suspend(|| complain(format_args!("warning: {text}"))),
            _ => complain(format_args!("warning: {text}")),
        }
    }

    /// The run has come to a moment.
    pub fn update(&mut self, moment: &Moment) {
        let pause = if matches!(self.kind, Kind::Json) { JSON_PAUSE } else { PAUSE };
        if matches!(self.kind, Kind::Silent) || self.shown.is_some_and(|at| at.elapsed() < pause) {
            return;
        }
        self.shown = Some(Instant::now());
        let spent = self.started.elapsed().as_secs_f64();
        let left = moment.left(spent);
        match &self.kind {
            Kind::Silent => {}
            Kind::Bar(bar) => {
                bar.set_position((LENGTH as f64 * (moment.time / moment.until).clamp(0.0, 1.0)) as u64);
                bar.set_message(format!(
                    "{} of {}, step {}, F = {:.2} kBT, {} left",
                    with_unit(moment.time, "s"),
                    with_unit(moment.until, "s"),
                    with_unit(moment.step, "s"),
                    moment.free_energy_thermal,
                    left.map_or("?".to_owned(), duration),
                ));
            }
            Kind::Json => self.event(
                "progress",
                json!({
                    "time_s": moment.time,
                    "until_s": moment.until,
                    "fraction": moment.time / moment.until,
                    "step_s": moment.step,
                    "steps": moment.steps,
                    "free_energy_J": moment.free_energy,
                    "wall_s": spent,
                    "left_s": left,
                }),
            ),
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
    let bar = ProgressBar::with_draw_target(Some(LENGTH), ProgressDrawTarget::stderr());
    if let Ok(style) = ProgressStyle::with_template("{bar:24} {percent:>3} %  {msg}") {
        bar.set_style(style.progress_chars("=> "));
    }
    bar
}
