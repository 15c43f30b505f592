//! Trials of a study as runs: begun from the scenario or from the end state of another trial.

use super::search;
use crate::failure::Failure;
use crate::run::progress::say;
use crate::run::signals::Interrupt;
use crate::run::words::with_unit;
use crate::scenario::keys::Kind;
use crate::study::axes::Axis;
use crate::study::expand::{file_hash, name_of};
use crate::study::launch::{EndOfRun, Ending, Job, bring_to_end};
use crate::study::{Setting, Study, shown};
use std::path::PathBuf;

/// Why work stops.
pub enum Stop {
    /// Someone asked to.
    Interrupted,
    /// Something went wrong.
    Failed(Failure),
}

impl From<Failure> for Stop {
    fn from(failure: Failure) -> Self {
        Self::Failed(failure)
    }
}

/// Where trials are run.
pub struct Bench<'a> {
    /// The study.
    pub study: &'a Study,
    /// Directory of the runs.
    pub runs: PathBuf,
    /// Threads of each run.
    pub threads: u16,
    /// Whether nothing is told.
    pub quiet: bool,
    /// Whether someone has asked to stop.
    pub interrupt: &'a Interrupt,
}

/// A trial that has come to its end.
#[derive(Clone, Debug)]
pub struct Trial {
    /// Name of its run.
    pub id: String,
    /// Share of the way.
    pub share: f64,
    /// Value of the parameter as given.
    pub given: String,
    /// The same in SI.
    pub value: f64,
    /// Class of its outcome.
    pub outcome: String,
    /// How it ended.
    pub end: EndOfRun,
}

impl search::Trial for Trial {
    fn share(&self) -> f64 {
        self.share
    }

    fn value(&self) -> f64 {
        self.value
    }

    fn outcome(&self) -> &str {
        &self.outcome
    }
}

impl Bench<'_> {
    /// Tell the user something.
    pub fn tell(&self, text: impl std::fmt::Display) {
        if !self.quiet {
            say(text);
        }
    }

    /// The trial at a share of the way along an axis, with more entries laid over the scenario, from the end state of
    /// another trial or anew.
    pub fn trial(&self, axis: &Axis, share: f64, more: &[String], origin: Option<&Trial>) -> Result<Trial, Stop> {
        let study = self.study;
        let nodes = axis.at(share, study.thermal_energy);
        let value = axis.value(&nodes, study.thermal_energy);
        let given: Vec<String> = nodes.iter().map(shown).collect();
        let mut overrides: Vec<String> = study.shared.iter().map(Setting::option).collect();
        overrides.extend(more.iter().cloned());
        for ((path, _), node) in axis.keys.iter().zip(nodes) {
            overrides.push(Setting { path: path.clone(), node }.option());
        }
        let (content, _) = crate::scenario::content(&study.texts, &study.base, &overrides, &file_hash)
            .map_err(Failure::from)?;
        let id = match origin {
            Some(origin) => name_of(&format!("{content}\nstarts from the end of {}\n", origin.id)),
            None => name_of(&content),
        };
        let job = Job {
            folder: self.runs.join(&id),
            scenario: study.scenario.clone(),
            overrides,
            start_from: origin.map(|origin| self.runs.join(&origin.id)),
            threads: self.threads,
        };
        match bring_to_end(&job, self.interrupt, &mut |_| {})? {
            Ending::Interrupted => Err(Stop::Interrupted),
            Ending::Ended(end) => {
                let outcome = study.rules.classify(&end).to_owned();
                let given = given.join(", ");
                let time = end.end("time_s").map(|time| with_unit(time, "s")).unwrap_or_default();
                self.tell(format_args!("  {given}: {outcome} ({} at {time}, {id})", end.stopped_by().replace('_', " ")));
                Ok(Trial { id, share, given, value, outcome, end })
            }
        }
    }

    /// What an axis is called.
    pub fn name(&self, axis: &Axis) -> String {
        match (&axis.name, axis.keys.first()) {
            (Some(name), _) => name.clone(),
            (None, Some((path, _))) => path.clone(),
            (None, None) => String::new(),
        }
    }

    /// Unit in which an axis is given, and its size in SI.
    pub fn unit(&self, axis: &Axis) -> (String, f64) {
        let first = axis.at(0.0, self.study.thermal_energy);
        match (axis.keys.first().map(|(_, key)| key.kind), first.first().map(shown)) {
            (Some(Kind::Quantity(measure, _)), Some(text)) => {
                let unit = text[crate::units::number_length(&text)..].trim().to_owned();
                let one = crate::units::parse_as(&format!("1 {unit}"), &measure, Some(self.study.thermal_energy));
                (unit, one.unwrap_or(1.0))
            }
            _ => (String::new(), 1.0),
        }
    }
}
