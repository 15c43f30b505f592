//! What belongs to one connectivity: analysed once, used in every step until the mesh changes.

use super::linear::LinearSolver;
use super::pattern::BlockPattern;
use super::preconditioner::{Preconditioner, Way};
use crate::PhysicsError;
use crate::state::State;
use pellicle_surface::geometry::Stencils;
use pellicle_surface::{Topology, Vec3};

/// Everything that belongs to one connectivity.
pub struct Connectivity {
    /// Topology.
    pub topology: Topology,
    /// Stencils.
    pub stencils: Stencils,
    /// Scatter indices.
    pub pattern: BlockPattern,
    /// Solver of the linear systems.
    pub solver: LinearSolver,
    /// Values of the matrix, storage reused.
    pub values: Vec<f64>,
    /// Positions of the vertices that the order of elimination was chosen by.
    pub ordered_at: Vec<Vec3>,
}

impl Connectivity {
    /// Analyse the connectivity of a state.
    ///
    /// # Errors
    /// A mesh that is not a manifold.
    pub fn new(state: &State) -> Result<Self, PhysicsError> {
        Self::ordered(state, state.mesh.positions.clone())
    }

    /// Analyse the connectivity of a state, ordering by other positions than the present ones.
    ///
    /// # Errors
    /// A mesh that is not a manifold.
    pub fn ordered(state: &State, ordered_at: Vec<Vec3>) -> Result<Self, PhysicsError> {
        Self::with_way(state, ordered_at, Way::for_vertices(state.mesh.n_vertices()))
    }

    /// Analyse the connectivity of a state for a given way of solving the linear systems.
    ///
    /// # Errors
    /// A mesh that is not a manifold.
    pub fn with_way(state: &State, ordered_at: Vec<Vec3>, way: Way) -> Result<Self, PhysicsError> {
        let topology = Topology::new(state.mesh.n_vertices(), &state.mesh.triangles)?;
        let stencils = Stencils::new(&topology);
        let pattern = BlockPattern::new(&topology, &stencils);
        let solver = LinearSolver::new(Preconditioner::new(way, &topology, &pattern, &ordered_at)?);
        let values = vec![0.0; pattern.entries()];
        Ok(Self {
            topology,
            stencils,
            pattern,
            solver,
            values,
            ordered_at,
        })
    }
}
