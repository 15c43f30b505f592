//! Approximate or exact inverses of the coupled matrix.

use super::linear::LinearSystem;
use crate::PhysicsError;
use pellicle_sparse::Factor;

/// Cost of a factorisation [applications of the factor] per multiplication and stored number: an application reads the
/// factor twice, at the speed of the memory, while the factorisation runs at that of the processor. Measured: a
/// factorisation takes 7 to 10 applications at 2562 vertices, 12 to 14 at 10,242, 25 to 30 at 40,962.
const FLOPS_PER_NUMBER: f64 = 60.0;

/// An inverse of the matrix of some step.
pub enum Preconditioner {
    /// Exact, by factorisation.
    Direct(Box<Factor>),
}

impl Preconditioner {
    /// Fill it from a system.
    ///
    /// # Errors
    /// A singular matrix.
    pub fn prepare(&mut self, system: &LinearSystem) -> Result<(), PhysicsError> {
        match self {
            Self::Direct(factor) => Ok(factor.factorise(system.values)?),
        }
    }

    /// Replace a vector (four numbers per vertex) by the inverse times it.
    pub fn apply(&mut self, vector: &mut [f64]) {
        match self {
            Self::Direct(factor) => factor.solve_in_place(vector),
        }
    }

    /// Cost of filling it, in applications.
    pub fn cost(&self) -> f64 {
        match self {
            Self::Direct(factor) => {
                let analysis = factor.analysis();
                analysis.flops() / (FLOPS_PER_NUMBER * analysis.factor_entries() as f64)
            }
        }
    }

    /// Iterations that even a fresh one may need; none if it is exact.
    pub fn most_iterations(&self) -> Option<usize> {
        match self {
            Self::Direct(_) => None,
        }
    }
}
