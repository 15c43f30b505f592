//! What does not change during a run.

use crate::setup::{Cadence, Origin, Scales, Setup, StopRules};
use pellicle_physics::Parameters;
use serde::{Deserialize, Serialize};

/// What does not change during a run.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Plan {
    /// One line that says what the scenario is about.
    pub title: String,
    /// Units.
    pub scales: Scales,
    /// Physics.
    pub parameters: Parameters,
    /// When to stop.
    pub stop: StopRules,
    /// How often what is written.
    pub cadence: Cadence,
    /// Seed of all randomness.
    pub seed: u64,
    /// SHA-256 of `scenario.toml`, in hexadecimal.
    pub scenario_sha256: String,
    /// What the user was told before the run, one per line.
    pub warnings: String,
    /// The run whose end state this one started from.
    pub origin: Option<Origin>,
}

impl Plan {
    /// The plan of a scenario whose file has the given hash.
    pub fn new(setup: &Setup, scenario_sha256: String) -> Self {
        Self {
            title: setup.title.clone(),
            scales: setup.scales,
            parameters: setup.parameters.clone(),
            stop: setup.stop,
            cadence: setup.cadence,
            seed: setup.seed,
            scenario_sha256,
            warnings: setup.warnings.join("\n"),
            origin: setup.origin.clone(),
        }
    }

    /// What cannot be in a plan, if anything: for plans read from a file.
    pub fn fault(&self) -> Option<&'static str> {
        let scales = &self.scales;
        let positive = |x: f64| x > 0.0 && x.is_finite();
        if ![scales.length, scales.energy, scales.time, scales.thermal_energy].into_iter().all(positive) {
            return Some("its units are no positive numbers");
        }
        if !positive(self.stop.time) {
            return Some("its end time is no positive number");
        }
        let cadences = [self.cadence.row_every, self.cadence.frame_every, self.cadence.frame_change];
        if !cadences.into_iter().flatten().all(positive) {
            return Some("its output times are no positive numbers");
        }
        None
    }
}
