//! What the checks against laws and published results share: a recorder, orders of convergence, functions on the
//! sphere, and measures of a bare mesh.
#![allow(dead_code, reason = "each test file uses its part")]

pub mod fit;
pub mod geometry;
pub mod harmonics;
pub mod motion;
pub mod phases;
pub mod record;
pub mod viscous;

pub type Fallible = Result<(), Box<dyn std::error::Error>>;

/// Vertices of the three levels of the default run, a factor of four apart.
pub const SMALL: [usize; 3] = [162, 642, 2562];
/// Vertices of the three levels of the long run.
pub const LARGE: [usize; 3] = [642, 2562, 10242];

/// One seed for all irregular meshes, so that every run sees the same ones.
pub const SEED: u64 = 20;
