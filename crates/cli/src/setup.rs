//! A run ready to start: what the scenario became, in the coherent units of the solver.

use pellicle_physics::{Parameters, State};
use serde::{Deserialize, Serialize};

/// The units of the solver in SI. The scenario's numbers are divided by these on the way in and multiplied on the
/// way out.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Scales {
    /// Length [m].
    pub length: f64,
    /// Energy [J].
    pub energy: f64,
    /// Time [s].
    pub time: f64,
    /// kT of the scenario [J].
    pub thermal_energy: f64,
}

/// When a run ends before its time.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct StopRules {
    /// Simulated time (solver units).
    pub time: f64,
    /// Narrowest neck radius (solver units).
    pub neck_radius: Option<f64>,
    /// Number of domains of the minority phase, at or below which the run ends, once there were more.
    pub domain_count: Option<usize>,
    /// At rest: `StepReport::unrest` below this for several steps.
    pub at_rest: Option<f64>,
}

/// How often what is written.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Cadence {
    /// Row of the series every so much time (solver units); `None`: every accepted step.
    pub row_every: Option<f64>,
    /// Frame (VTU) every so much time (solver units).
    pub frame_every: Option<f64>,
    /// Frame whenever the free energy has changed by this share of its range since the last frame, or any vertex
    /// has moved by this share of the size of the surface.
    pub frame_change: Option<f64>,
    /// Seconds of wall time between checkpoints.
    pub checkpoint_seconds: f64,
}

/// The run whose end state another one starts from.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Origin {
    /// Its directory.
    pub folder: String,
    /// `provenance.state_sha256` of its newest state.
    pub state_sha256: String,
}

/// A run ready to start.
#[derive(Clone, Debug)]
pub struct Setup {
    /// One line that says what the scenario is about.
    pub title: String,
    /// Units.
    pub scales: Scales,
    /// Physics.
    pub parameters: Parameters,
    /// State at the start.
    pub state: State,
    /// The run that left this state, if one did.
    pub origin: Option<Origin>,
    /// When to stop.
    pub stop: StopRules,
    /// How often what is written.
    pub cadence: Cadence,
    /// Seed of all randomness.
    pub seed: u64,
    /// The scenario with every default filled in, as TOML.
    pub resolved: String,
    /// What the user should know before the run.
    pub warnings: Vec<String>,
}
