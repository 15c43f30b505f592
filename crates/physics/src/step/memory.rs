//! What a simulation remembers beyond its state, so that one taken up again goes on bit for bit.

use super::advance::Simulation;
use super::connectivity::Connectivity;
use super::linear::{Origin, Tally};
use super::mechanics;
use super::touching::Clearance;
use crate::state::Ledger;
use crate::{Parameters, PhysicsError, State};
use pellicle_surface::Vec3;
use serde::{Deserialize, Serialize};

/// Memory of a simulation: warm starts, the wanted mesh, and where the vertices were when the order of elimination
/// was chosen (another order rounds differently).
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Memory {
    /// Velocity of the mesh in the last step; empty after a change of connectivity.
    pub mesh_velocity: Vec<Vec3>,
    /// Wanted edge length of each vertex.
    pub wanted_edge: Vec<f64>,
    /// Chemical potential of the last diffusion step; empty without phases.
    pub chemical_potential: Vec<f64>,
    /// Positions of the vertices when the present connectivity was analysed.
    pub ordered_at: Vec<Vec3>,
    /// What the factor in use was made from; none when the next step makes a new one.
    pub origin: Option<Origin>,
    /// What it has cost.
    pub tally: Tally,
    /// How far the surface is known to be from touching itself.
    pub clearance: Clearance,
}

impl Simulation {
    /// Begin a simulation from a state that another one left: mesh and lipids stay as they are, the ledger starts anew
    /// with the free energy that `parameters` give the state.
    ///
    /// # Errors
    /// Those of [`Simulation::new`].
    pub fn begin_from(parameters: Parameters, mut state: State) -> Result<Self, PhysicsError> {
        // Steps behind it mark a state as one that has settled; a new one would have its mesh and lipids adapted.
        state.ledger = Ledger { accepted: 1, ..Ledger::default() };
        let mut simulation = Self::new(parameters, state)?;
        simulation.state.ledger = Ledger { start_energy: simulation.energies.total(), ..Ledger::default() };
        Ok(simulation)
    }

    /// What has to be kept beside [`Simulation::state`] to go on later with [`Simulation::restore`].
    pub fn memory(&self) -> Memory {
        let (origin, tally) = self.connectivity.solver.memory();
        Memory {
            mesh_velocity: self.mesh_velocity.clone(),
            wanted_edge: self.wanted_edge.clone(),
            chemical_potential: self.chemical_potential.clone(),
            ordered_at: self.connectivity.ordered_at.clone(),
            origin,
            tally,
            clearance: self.clearance,
        }
    }

    /// Take a simulation up again where [`Simulation::memory`] was read.
    ///
    /// # Shapes
    /// The lists of `memory` have one entry per vertex, or none where their documentation allows it.
    ///
    /// # Errors
    /// Those of [`Simulation::new`]; a memory that does not belong to the state.
    pub fn restore(parameters: Parameters, state: State, memory: Memory) -> Result<Self, PhysicsError> {
        let n = state.mesh.n_vertices();
        let fits = |length: usize| length == 0 || length == n;
        if !fits(memory.mesh_velocity.len())
            || !fits(memory.chemical_potential.len())
            || memory.wanted_edge.len() != n
            || memory.ordered_at.len() != n
            || memory.origin.as_ref().is_some_and(|origin| !origin.fits(&state))
        {
            return Err(PhysicsError::Contradiction(
                "what the simulation remembers does not belong to its surface",
            ));
        }
        let mut simulation = Self::new(parameters, state.clone())?;
        // Setting up may settle the lipids of a state that has not moved yet; this one has been through that.
        simulation.state = state;
        simulation.measure();
        if memory.ordered_at != simulation.connectivity.ordered_at {
            simulation.connectivity = Connectivity::ordered(&simulation.state, memory.ordered_at)?;
        }
        let Self { parameters, connectivity, state, .. } = &mut simulation;
        if let Some(origin) = &memory.origin {
            mechanics::recall(parameters, connectivity, state, origin)?;
        }
        connectivity.solver.take_up(memory.origin, memory.tally);
        simulation.mesh_velocity = memory.mesh_velocity;
        simulation.wanted_edge = memory.wanted_edge;
        simulation.chemical_potential = memory.chemical_potential;
        simulation.clearance = memory.clearance;
        Ok(simulation)
    }
}
