//! What belongs to one connectivity: analysed once, used in every step until the mesh changes.

use super::linear::LinearSolver;
use super::pattern::BlockPattern;
use super::preconditioner::Preconditioner;
use crate::PhysicsError;
use crate::state::State;
use pellicle_sparse::{Analysis, Factor};
use pellicle_surface::geometry::Stencils;
use pellicle_surface::{Topology, Vec3};
use std::sync::Arc;

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
        let topology = Topology::new(state.mesh.n_vertices(), &state.mesh.triangles)?;
        let stencils = Stencils::new(&topology);
        let pattern = BlockPattern::new(&topology, &stencils);
        let coordinates: Vec<[f64; 3]> = ordered_at.iter().map(|p| [p.x, p.y, p.z]).collect();
        let analysis = Arc::new(Analysis::new(pattern.pattern(), 4, &coordinates)?);
        let solver = LinearSolver::new(Preconditioner::Direct(Box::new(Factor::new(&analysis))));
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
