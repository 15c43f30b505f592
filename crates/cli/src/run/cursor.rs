//! What has been written, what comes next, and how long the next step may be.

use super::plan::Plan;
use super::reasons::Reasons;
use super::words::with_unit;
use crate::scenario::THINNEST_NECK;
use crate::setup::{Cadence, StopRules};
use serde::{Deserialize, Serialize};

/// Output times closer together than this share of their spacing are one.
const SAME: f64 = 1e-9;
/// Least range of the free energy, relative to its size, that frames are spaced by.
const BEGUN: f64 = 0.2;
/// Steps in a row that must be at rest before a run ends for it.
const RESTING_STEPS: u32 = 5;

/// A step shorter than this share of the time passed, and that changes the free energy by less than this share of its
/// range, leads nowhere if longer ones are refused because the energy would rise.
const SHORT: f64 = 1e-3;
const NOTHING: f64 = 1e-9;
/// Weight of a step before which a longer one was refused for its energy against one without; and the sum at which a
/// run is stalled.
const REFUSED: u32 = 4;
const STALLED: u32 = 400;

/// What has been written and what comes next. Part of each checkpoint; nothing in it depends on when checkpoints
/// were written, or on wall time.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Cursor {
    /// Rows in the series.
    pub rows: u64,
    /// Bytes of the series.
    pub series_bytes: u64,
    /// Bytes of the table of pieces; 0 without one.
    pub pieces_bytes: u64,
    /// Frames written.
    pub frames: u64,
    /// Number of the next row time, in units of the cadence.
    pub next_row: u64,
    /// Number of the next frame time.
    pub next_frame: u64,
    /// Time of the last row.
    pub row_time: Option<f64>,
    /// Time of the last frame.
    pub frame_time: Option<f64>,
    /// Length of the last accepted step.
    pub last_step: Option<f64>,
    /// Smallest and largest free energy so far.
    pub energy_range: Option<(f64, f64)>,
    /// Free energy at the last frame.
    pub frame_energy: f64,
    /// Way of the fastest vertex since the last frame.
    pub travel: f64,
    /// Largest number of domains so far.
    pub most_domains: u64,
    /// Steps at rest in a row.
    pub resting: u32,
    /// Free energy after the last step.
    pub last_energy: f64,
    /// How long steps have led nowhere.
    pub stalled: u32,
    /// What bounded accepted steps.
    pub bounded_by: Reasons,
    /// Why attempts were refused.
    pub refused_for: Reasons,
    /// Why the run ended, once it has.
    pub ended: Option<Ended>,
}

/// Why a run ended.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Ended {
    /// The simulated time was reached.
    Time,
    /// A neck became as narrow as asked for.
    Neck(f64),
    /// No more domains than asked for are left.
    Domains(u64),
    /// The membrane passed through itself at a place (solver units).
    SelfContact([f64; 3]),
    /// Nothing moves any more.
    Rest,
    /// Steps lead nowhere: longer ones would raise the free energy.
    Stalled,
    /// The solver gave up, in words.
    Trouble(String),
}

/// The time of an output, exact for whole multiples.
fn output_time(every: f64, number: u64) -> f64 {
    every * number as f64
}

fn due(every: f64, number: u64, time: f64) -> bool {
    time >= output_time(every, number) - SAME * every
}

impl Cursor {
    /// The next time after `time` at which a step has to end.
    pub fn next_event(&self, cadence: &Cadence, stop: &StopRules, time: f64) -> f64 {
        let mut next = stop.time;
        for (every, number) in [(cadence.row_every, self.next_row), (cadence.frame_every, self.next_frame)] {
            if let Some(output) = every.map(|every| output_time(every, number)).filter(|output| *output > time) {
                next = next.min(output);
            }
        }
        // An output just before the end happens at the end.
        if stop.time - next <= SAME * stop.time { stop.time } else { next }
    }

    /// Whether a row is due at a time.
    pub fn row_due(&self, cadence: &Cadence, time: f64) -> bool {
        self.row_time != Some(time) && cadence.row_every.is_none_or(|every| due(every, self.next_row, time))
    }

    /// Whether a frame is due at a time; `size` is that of the surface.
    pub fn frame_due(&self, cadence: &Cadence, time: f64, free_energy: f64, size: f64) -> bool {
        if self.frame_time == Some(time) {
            return false;
        }
        if self.frame_time.is_none() || cadence.frame_every.is_some_and(|every| due(every, self.next_frame, time)) {
            return true;
        }
        let (low, high) = self.energy_range.unwrap_or((free_energy, free_energy));
        // The first steps would otherwise each be a large share of a range that has only begun.
        let range = (high - low).max(BEGUN * high.abs().max(low.abs()));
        cadence.frame_change.is_some_and(|share| {
            self.travel >= share * size || (range > 0.0 && (free_energy - self.frame_energy).abs() >= share * range)
        })
    }

    /// Note an accepted step.
    pub fn stepped(&mut self, step: f64, free_energy: f64, way: f64) {
        self.last_step = Some(step);
        self.travel += way;
        self.note_energy(free_energy);
    }

    /// Note a free energy.
    pub fn note_energy(&mut self, free_energy: f64) {
        let (low, high) = self.energy_range.unwrap_or((free_energy, free_energy));
        self.energy_range = Some((low.min(free_energy), high.max(free_energy)));
    }

    /// Note a row of so many bytes.
    pub fn row_written(&mut self, cadence: &Cadence, time: f64, bytes: u64) {
        self.rows += 1;
        self.series_bytes += bytes;
        self.row_time = Some(time);
        advance(&mut self.next_row, cadence.row_every, time);
    }

    /// Note a frame.
    pub fn frame_written(&mut self, cadence: &Cadence, time: f64, free_energy: f64) {
        self.frames += 1;
        self.frame_time = Some(time);
        self.frame_energy = free_energy;
        self.travel = 0.0;
        advance(&mut self.next_frame, cadence.frame_every, time);
    }

    /// Note whether the last step was at rest; `unrest` is the step report's.
    pub fn note_rest(&mut self, limit: f64, unrest: f64) {
        self.resting = if unrest < limit { self.resting.saturating_add(1) } else { 0 };
    }

    /// Note whether the last step led anywhere; `risen`: a longer one was refused because the free energy would rise.
    /// Called before [`Cursor::stepped`].
    pub fn note_stall(&mut self, time: f64, step: f64, free_energy: f64, risen: bool) {
        let (low, high) = self.energy_range.unwrap_or((free_energy, free_energy));
        let nothing = (free_energy - self.last_energy).abs() <= NOTHING * (high - low);
        self.last_energy = free_energy;
        self.stalled = match (nothing && step < SHORT * time, risen) {
            (true, true) => self.stalled.saturating_add(REFUSED),
            (true, false) => self.stalled.saturating_sub(1),
            (false, _) => 0,
        };
    }

    /// Whether steps lead nowhere.
    pub fn is_stalled(&self) -> bool {
        self.stalled >= STALLED
    }

    /// Whether the run is at rest.
    pub fn at_rest(&self) -> bool {
        self.resting >= RESTING_STEPS
    }
}

/// Number of the first output after a time.
fn advance(number: &mut u64, every: Option<f64>, time: f64) {
    let Some(every) = every else { return };
    if due(every, *number, time) {
        // More than one on when a step went beyond several.
        *number = number.saturating_add(1).max(((time / every + SAME).floor() as u64).saturating_add(1));
    }
}

/// How long the next step may be, so that one ends exactly at `event` and the last ones before it are no slivers
/// (pressure and tension would scale with one over the step).
pub fn longest_step(time: f64, step: f64, event: f64) -> f64 {
    let left = event - time;
    if left <= step || left >= 1.5 * step {
        left
    } else {
        0.5 * left
    }
}

/// The time after a step: exactly that of the event if rounding is all that is between them.
pub fn snapped(time: f64, event: f64) -> f64 {
    if (event - time).abs() <= 8.0 * f64::EPSILON * event.abs() { event } else { time }
}

impl Ended {
    /// Why, in words.
    pub fn words(&self, plan: &Plan) -> String {
        let scales = &plan.scales;
        match self {
            Self::Time => format!(
                "the simulated time of {} was reached",
                with_unit(plan.stop.time * scales.time, "s")
            ),
            Self::Neck(radius) => {
                let narrowed =
                    format!("a neck narrowed to a radius of {}", with_unit(radius * scales.length, "m"));
                let shortest = plan.parameters.mesh.map_or(0.0, |care| care.shortest);
                // Half as much again: the neck may have been above its limit a step ago.
                if radius * scales.length > 1.5 * THINNEST_NECK.max(2.0 * shortest * scales.length) {
                    return narrowed;
                }
                format!(
                    "{narrowed}: at so few nanometres or edges the model cannot say whether it opens, stays or parts; \
                     a section [fission] severs it and goes on"
                )
            }
            Self::SelfContact(place) => format!(
                "the membrane touches itself near ({} um): what happens where two bilayers meet (adhesion, fusion, \
                 rupture) is not in the model; [self_contact] response = \"repel\" keeps them apart",
                place.map(|x| format!("{:.3}", x * scales.length * 1e6)).join(", ")
            ),
            Self::Domains(count) => format!("the number of domains fell to {count}"),
            Self::Rest => "the membrane came to rest".to_owned(),
            Self::Stalled => "no step lowers the free energy any further: at rest to the accuracy of this mesh; a finer \
                              mesh, or a narrower interface with it, may tell more"
                .to_owned(),
            Self::Trouble(why) => why.clone(),
        }
    }

    /// One word for programs.
    pub fn word(&self) -> &'static str {
        match self {
            Self::Time => "time",
            Self::Neck(_) => "neck_radius",
            Self::Domains(_) => "domain_count",
            Self::SelfContact(_) => "self_contact",
            Self::Rest | Self::Stalled => "at_rest",
            Self::Trouble(_) => "trouble",
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cadence(row_every: Option<f64>, frame_every: Option<f64>) -> Cadence {
        Cadence { row_every, frame_every, frame_change: None, checkpoint_seconds: 60.0 }
    }

    /// Walk to the end with steps that grow, as the solver's do; returns row times and the smallest ratio of a step to
    /// the one before.
    fn walk(cadence: &Cadence, end: f64) -> (Vec<f64>, f64) {
        let stop = StopRules { time: end, ..StopRules::default() };
        let mut cursor = Cursor::default();
        cursor.row_written(cadence, 0.0, 1);
        let (mut time, mut step, mut rows, mut worst) = (0.0, 1e-4, Vec::new(), f64::INFINITY);
        let mut before: Option<f64> = None;
        while time < end {
            let event = cursor.next_event(cadence, &stop, time);
            let taken = longest_step(time, step, event).min(step);
            worst = worst.min(before.map_or(1.0, |before| taken / before));
            before = Some(taken);
            time = snapped(time + taken, event);
            if cursor.row_due(cadence, time) {
                cursor.row_written(cadence, time, 1);
                rows.push(time);
            }
            if cursor.frame_due(cadence, time, 0.0, 1.0) {
                cursor.frame_written(cadence, time, 0.0);
            }
            step *= 1.07;
        }
        (rows, worst)
    }

    #[test]
    fn rows_fall_on_their_times_without_slivers() {
        let (rows, worst) = walk(&cadence(Some(0.1), None), 1.0);
        assert_eq!(rows, (1..=10).map(|i| 0.1 * f64::from(i)).collect::<Vec<_>>());
        assert!(worst >= 0.5 - 1e-9, "a step shrank to {worst} of the one before");
    }

    #[test]
    fn frames_and_rows_at_the_same_time_share_a_step() {
        // 0.1 · 3 is not 0.3 in binary: the two must still be one event.
        let cadence = cadence(Some(0.1), Some(0.3));
        let (rows, worst) = walk(&cadence, 0.9);
        assert_eq!(rows.len(), 9);
        assert!(worst >= 0.5 - 1e-9, "a step shrank to {worst} of the one before");
    }

    #[test]
    fn a_forced_row_does_not_shift_the_next() {
        let cadence = cadence(Some(1.0), None);
        let mut cursor = Cursor::default();
        cursor.row_written(&cadence, 0.0, 10);
        assert_eq!(cursor.next_row, 1);
        cursor.row_written(&cadence, 0.4, 10);
        assert_eq!(cursor.next_row, 1);
        cursor.row_written(&cadence, 1.0, 10);
        assert_eq!((cursor.next_row, cursor.rows, cursor.series_bytes), (2, 3, 30));
    }

    #[test]
    fn rest_needs_several_steps_in_a_row() {
        let mut cursor = Cursor::default();
        for _ in 0..4 {
            cursor.note_rest(1e-3, 1e-4);
        }
        assert!(!cursor.at_rest());
        cursor.note_rest(1e-3, 1.0);
        for _ in 0..5 {
            cursor.note_rest(1e-3, 1e-4);
        }
        assert!(cursor.at_rest());
    }
}
