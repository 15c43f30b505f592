//! Running a simulation to where something can be read off.

use pellicle_physics::parameters::{AreaCondition, MeshCare, VolumeCondition};
use pellicle_physics::{Parameters, PhysicsError, Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Mesh, Vec3};

/// Unit rigidity and viscosity, lipid reservoir of tension σ, volume held.
pub fn with_reservoir(tension: f64, mesh: &Mesh) -> Parameters {
    Parameters {
        area: AreaCondition::Reservoir(tension),
        volume: VolumeCondition::Fixed(vec![(0.0, Geometry::new(mesh).volume)]),
        ..Parameters::bare(1.0, 1.0, 1e5)
    }
}

/// Unit rigidity and viscosity, lipids and volume held: a vesicle.
pub fn vesicle(mesh: &Mesh) -> Parameters {
    Parameters {
        volume: VolumeCondition::Fixed(vec![(0.0, Geometry::new(mesh).volume)]),
        ..Parameters::bare(1.0, 1.0, 1e4)
    }
}

/// Flips and smoothing, no splits or collapses.
pub fn flips_only(mesh: &Mesh) -> MeshCare {
    MeshCare {
        adapt: false,
        edge: mesh.mean_edge_length(),
        shortest: 0.3 * mesh.mean_edge_length(),
        edges_per_radius: 4.0,
        edges_per_interface: 4.0,
        most_vertices: 4 * mesh.n_vertices(),
    }
}

/// A simulation of a membrane without fields, at rest on a mesh.
pub fn start(parameters: Parameters, mesh: Mesh) -> Result<Simulation, PhysicsError> {
    let state = State::at_rest(&parameters, mesh, &[], &[], &[])?;
    Simulation::new(parameters, state)
}

/// Advance until a time, ending exactly there.
pub fn until(simulation: &mut Simulation, time: f64) -> Result<usize, PhysicsError> {
    let mut steps = 0;
    while simulation.state.time < time * (1.0 - 1e-12) {
        let left = time - simulation.state.time;
        let longest = if left < 1.5 * simulation.state.step { 0.5 * left } else { left };
        // Two equal last steps instead of a sliver.
        let longest = if left < 1e-6 * time { left } else { longest };
        let longest = if left <= simulation.state.step { left } else { longest };
        simulation.advance(longest)?;
        steps += 1;
    }
    Ok(steps)
}

/// Advance until what a step dissipates per time, relative to the energy, is below `least`, or `most` steps are done.
/// Returns the number of steps.
pub fn to_rest(simulation: &mut Simulation, least: f64, most: usize) -> Result<usize, PhysicsError> {
    for step in 1..=most {
        let report = simulation.advance(f64::INFINITY)?;
        if report.dissipated / report.step < least * simulation.energies.bending.abs() {
            return Ok(step);
        }
    }
    Ok(most)
}

/// Rotate a mesh about an axis through the origin.
pub fn rotated(mesh: &Mesh, axis: Vec3, angle: f64) -> Mesh {
    let rotation = nalgebra::Rotation3::new(axis.normalize() * angle);
    Mesh { positions: mesh.positions.iter().map(|x| rotation * x).collect(), ..mesh.clone() }
}
