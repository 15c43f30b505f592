//! Errors of the physics.

use pellicle_sparse::SparseError;
use pellicle_surface::{MeshError, Vec3};
use thiserror::Error;

/// What can go wrong while setting up or stepping.
#[non_exhaustive]
#[derive(Debug, Error)]
pub enum PhysicsError {
    /// A material constant or limit that cannot be.
    #[error("{name} = {value}: {mend}")]
    Parameter {
        /// Name of the parameter.
        name: &'static str,
        /// Its value, in the run's units.
        value: f64,
        /// What would do.
        mend: &'static str,
    },
    /// Parameters that contradict each other or the surface.
    #[error("{0}")]
    Contradiction(&'static str),
    /// A field that is not finite or out of its bounds.
    #[error("{field} at vertex {vertex} is {value}, outside its bounds")]
    Field {
        /// Name of the field.
        field: &'static str,
        /// Vertex.
        vertex: usize,
        /// Value.
        value: f64,
    },
    /// A defect of the mesh.
    #[error(transparent)]
    Mesh(#[from] MeshError),
    /// The linear solver failed.
    #[error("linear system: {0}")]
    Solver(#[from] SparseError),
    /// The membrane passes through itself, and no law says what happens there.
    #[error("the membrane touches itself at time {time}, near {place:?}")]
    SelfContact {
        /// Time.
        time: f64,
        /// Where.
        place: Vec3,
    },
    /// The step size fell to its floor.
    #[error("the time step fell to {step:e}, below the floor {floor:e}, at time {time}: {reason}")]
    StepFloor {
        /// Time.
        time: f64,
        /// Last step tried.
        step: f64,
        /// Floor.
        floor: f64,
        /// Why the last step was refused.
        reason: String,
    },
}
