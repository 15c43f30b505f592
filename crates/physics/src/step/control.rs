//! How long the next step may be, and why.

use serde::{Deserialize, Serialize};

/// What bounds or refuses a step.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
pub enum Reason {
    /// Nothing: the step may grow.
    None,
    /// The longest step allowed, or the next output time.
    Longest,
    /// Vertices would travel too far for their edges.
    Travel,
    /// Implicit stepping would lose too much beyond what is dissipated.
    MotionAccuracy,
    /// Composition would change too much at once.
    CompositionChange,
    /// The energy drop of diffusion differs too much from what it dissipates.
    DiffusionAccuracy,
    /// Coverage would change too much at once.
    CoverageChange,
    /// The free energy would rise.
    EnergyRise,
    /// A triangle would invert or vanish.
    Inversion,
    /// A field would leave its bounds.
    Bounds,
    /// The linear system could not be solved.
    Solver,
    /// Facing parts of the membrane would come too close at once, or pass through each other.
    SelfContact,
}

impl Reason {
    /// In words, for logs and reports.
    pub fn words(self) -> &'static str {
        match self {
            Reason::None => "free to grow",
            Reason::Longest => "the longest step allowed or the next output time",
            Reason::Travel => "vertices travel too far for their edges",
            Reason::MotionAccuracy => "accuracy of the motion in time",
            Reason::CompositionChange => "composition changes too fast",
            Reason::DiffusionAccuracy => "accuracy of diffusion in time",
            Reason::CoverageChange => "coverage changes too fast",
            Reason::EnergyRise => "the free energy would rise",
            Reason::Inversion => "a triangle would invert",
            Reason::Bounds => "a field would leave its bounds",
            Reason::Solver => "the linear system could not be solved",
            Reason::SelfContact => "facing parts of the membrane come too close at once",
        }
    }
}

/// Each limit as a load: 1 means exactly at its target.
#[derive(Clone, Copy, Debug)]
pub struct Loads {
    entries: [(Reason, f64); 12],
    used: usize,
}

impl Default for Loads {
    fn default() -> Self {
        Self {
            entries: [(Reason::None, 0.0); 12],
            used: 0,
        }
    }
}

impl Loads {
    /// Add a limit.
    pub fn add(&mut self, reason: Reason, load: f64) {
        if self.used < self.entries.len() {
            self.entries[self.used] = (reason, load);
            self.used += 1;
        }
    }

    /// The heaviest load.
    pub fn heaviest(&self) -> (Reason, f64) {
        self.entries[..self.used]
            .iter()
            .copied()
            .fold((Reason::None, 0.0), |best, entry| if entry.1 > best.1 { entry } else { best })
    }

    /// The reason to refuse the step: a load beyond `latitude`.
    pub fn refusal(&self, latitude: f64) -> Option<Reason> {
        let (reason, load) = self.heaviest();
        (load > latitude || load.is_nan()).then_some(reason)
    }

    /// Factor for the next step and what sets it.
    pub fn growth(&self) -> (f64, Reason) {
        let (reason, load) = self.heaviest();
        let factor = (0.9 / load.max(1e-300)).clamp(0.4, 1.3);
        (factor, if factor >= 1.3 { Reason::None } else { reason })
    }
}
