//! Approximate or exact inverses of the coupled matrix.

use super::linear::LinearSystem;
use super::pattern::BlockPattern;
use super::split::Split;
use crate::PhysicsError;
use pellicle_sparse::{Analysis, Factor};
use pellicle_surface::{Topology, Vec3};
use std::sync::Arc;

/// Vertices above which the factor of the coupled matrix takes more time or memory than it is worth.
pub const DIRECT_VERTICES: usize = 40_000;
/// Cost of filling [`Split`], in applications; most of it are the products with sixty coarse vectors.
const SPLIT_COST: f64 = 20.0;
/// Iterations after which a fresh [`Split`] has failed.
const SPLIT_ITERATIONS: usize = 150;

/// How linear systems are solved.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Way {
    /// By a factor of the coupled matrix.
    Direct,
    /// By a Krylov iteration with factors of its diagonal blocks.
    Iterative,
}

impl Way {
    /// The way for a mesh of a size.
    pub fn for_vertices(vertices: usize) -> Self {
        if vertices > DIRECT_VERTICES { Self::Iterative } else { Self::Direct }
    }

    /// In words, for logs.
    pub fn words(self) -> &'static str {
        match self {
            Self::Direct => "a factor of the coupled matrix, reused while few iterations suffice",
            Self::Iterative => "iterations with factors for normal and tangential motion",
        }
    }
}

/// Cost of a factorisation [applications of the factor] per multiplication and stored number: an application reads the
/// factor twice, at the speed of the memory, while the factorisation runs at that of the processor. Measured: a
/// factorisation takes 7 to 10 applications at 2562 vertices, 12 to 14 at 10,242, 25 to 30 at 40,962.
const FLOPS_PER_NUMBER: f64 = 60.0;

/// An inverse of the matrix of some step.
pub enum Preconditioner {
    /// Exact, by factorisation.
    Direct(Box<Factor>),
    /// Approximate.
    Split(Box<Split>),
}

impl Preconditioner {
    /// Analyse a connectivity.
    ///
    /// # Errors
    /// Those of the symbolic factorisation.
    pub fn new(
        way: Way,
        topology: &Topology,
        pattern: &BlockPattern,
        ordered_at: &[Vec3],
    ) -> Result<Self, PhysicsError> {
        let coordinates: Vec<[f64; 3]> = ordered_at.iter().map(|p| [p.x, p.y, p.z]).collect();
        Ok(match way {
            Way::Direct => {
                let analysis = Arc::new(Analysis::new(pattern.pattern(), 4, &coordinates)?);
                Self::Direct(Box::new(Factor::new(&analysis)))
            }
            Way::Iterative => Self::Split(Box::new(Split::new(topology, &coordinates)?)),
        })
    }

    /// The way it belongs to.
    pub fn way(&self) -> Way {
        match self {
            Self::Direct(_) => Way::Direct,
            Self::Split(_) => Way::Iterative,
        }
    }

    /// Fill it from a system.
    ///
    /// # Errors
    /// A singular matrix.
    pub fn prepare(&mut self, system: &LinearSystem) -> Result<(), PhysicsError> {
        match self {
            Self::Direct(factor) => Ok(factor.factorise(system.values)?),
            Self::Split(split) => split.prepare(system.input, system.values),
        }
    }

    /// Replace a vector (four numbers per vertex) by the inverse times it. An approximate one looks at the present
    /// system as it goes.
    pub fn apply(&mut self, system: &LinearSystem, vector: &mut [f64]) {
        match self {
            Self::Direct(factor) => factor.solve_in_place(vector),
            Self::Split(split) => split.apply(system.input, system.values, vector),
        }
    }

    /// Give the memory back; it must be filled before it is applied again.
    pub(super) fn release(&mut self) {
        match self {
            Self::Direct(factor) => factor.release(),
            Self::Split(split) => split.release(),
        }
    }

    /// Cost of filling it, in applications.
    pub fn cost(&self) -> f64 {
        match self {
            Self::Direct(factor) => {
                let analysis = factor.analysis();
                analysis.flops() / (FLOPS_PER_NUMBER * analysis.factor_entries() as f64)
            }
            Self::Split(_) => SPLIT_COST,
        }
    }

    /// Iterations that even a fresh one may need; none if it is exact.
    pub fn most_iterations(&self) -> Option<usize> {
        match self {
            Self::Direct(_) => None,
            Self::Split(_) => Some(SPLIT_ITERATIONS),
        }
    }
}
