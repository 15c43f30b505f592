//! The mechanical part of a step: one linearised solve for velocity, tension and the scalar unknowns.

use super::assemble::{MatrixInput, assemble};
use super::borders::{PieceMeasure, reservoir_border, solve_bordered, trap_border, volume_border};
use super::connectivity::Connectivity;
use super::forces::{Forces, forces, freedoms, remove_rigid_load};
use crate::PhysicsError;
use crate::dissipation::surroundings::{Friction, Surroundings};
use crate::energy::reservoirs::offered_pressure;
use crate::energy::total::Measured;
use crate::parameters::{AreaCondition, Parameters, Pull, VolumeCondition, along_path};
use crate::state::{State, load_weights, pull_at};
use pellicle_surface::{Topology, Vec3};
use std::time::Instant;

/// Seconds spent in the parts of a step.
#[derive(Clone, Copy, Debug, Default)]
pub struct Timings {
    /// Energies, gradients, geometry.
    pub forces: f64,
    /// Matrix values.
    pub assembly: f64,
    /// Numeric factorisation.
    pub factorisation: f64,
    /// Back-solves.
    pub solves: f64,
    /// Composition, protein diffusion and binding.
    pub transport: f64,
    /// Mesh motion and remap.
    pub remap: f64,
    /// Flips, splits, collapses and new analyses.
    pub remeshing: f64,
}

/// Result of the mechanical solve.
#[derive(Clone, Debug, Default)]
pub struct Motion {
    /// Material velocity.
    pub velocity: Vec<Vec3>,
    /// Tension conjugate to the lipid constraint.
    pub tension: Vec<f64>,
    /// Pressure difference of each piece.
    pub pressure: Vec<f64>,
    /// Relative rate of each closed piece's lipid exchange with a reservoir; empty without.
    pub exchange: Vec<f64>,
    /// Force of each load.
    pub forces: Vec<Vec3>,
    /// Weights of each load patch.
    pub weights: Vec<Vec<(u32, f64)>>,
    /// Energy dissipated during the step by viscosity and surroundings.
    pub dissipated: f64,
    /// Energy dissipated by water permeating through the membrane.
    pub permeation: f64,
    /// ½ dt² vᵀHv: what implicit stepping loses beyond dissipation.
    pub lag: f64,
    /// Relative residual of the linear solve.
    pub residual: f64,
}


/// Solve for the motion over one step from a measured state.
///
/// # Errors
/// A singular or non-finite system.
pub fn solve(
    parameters: &Parameters,
    connectivity: &mut Connectivity,
    state: &State,
    measured: &Measured,
    step: f64,
    timings: &mut Timings,
) -> Result<Motion, PhysicsError> {
    let clock = Instant::now();
    let forces = forces(parameters, connectivity, state, measured);
    let topology = &connectivity.topology;
    let n = topology.n_vertices;
    let geometry = &measured.geometry;
    let freedom = freedoms(parameters, topology, state, measured);
    let surroundings = Friction {
        coefficient: regularised_friction(parameters, geometry.total_area),
    };
    let friction = surroundings.surrogate(geometry);
    let deviatoric = matches!(parameters.area, AreaCondition::Reservoir(_));
    timings.forces += clock.elapsed().as_secs_f64();

    let clock = Instant::now();
    assemble(
        &MatrixInput {
            topology,
            geometry,
            pattern: &connectivity.pattern,
            bending_rows: &forces.rows,
            stress: &forces.stress,
            viscosity: &measured.material.shear_viscosity,
            friction: &friction,
            lipid: &state.lipid,
            area_compression_modulus: parameters.area_compression_modulus,
            step,
            deviatoric,
            freedom: &freedom,
            repulsion: &forces.repulsion_stiffness,
        },
        &mut connectivity.values,
    );
    timings.assembly += clock.elapsed().as_secs_f64();

    let clock = Instant::now();
    connectivity.factor.factorise(&connectivity.values)?;
    timings.factorisation += clock.elapsed().as_secs_f64();

    let clock = Instant::now();
    let mut push: Vec<Vec3> = forces.gradient.iter().map(|g| -g).collect();
    if let AreaCondition::Reservoir(tension) = parameters.area {
        add_rim_traction(topology, geometry, tension, &mut push);
    }
    let mut borders = Vec::new();
    let volume_after = match &parameters.volume {
        VolumeCondition::Pressure(pressure) => {
            for (f, g) in push.iter_mut().zip(&geometry.volume_gradient) {
                *f += g * *pressure;
            }
            None
        }
        VolumeCondition::Fixed(path) => along_path(path, state.time + step),
        VolumeCondition::Osmotic { .. } => None,
    };
    let pieces: Vec<PieceMeasure> = (measured.piece_volume.iter().zip(geometry.piece_areas(topology)))
        .zip(&state.pieces)
        .zip(0..)
        .map(|(((volume, area), piece), index)| PieceMeasure { index, volume: *volume, area, share: piece.share })
        .collect();
    for piece in &pieces {
        let target = volume_after.map(|volume| volume * piece.share);
        borders.extend(volume_border(parameters, topology, geometry, &freedom, *piece, target, step));
    }
    let has_volume = !borders.is_empty();
    let exchanging = match parameters.area {
        AreaCondition::Reservoir(tension) if topology.is_closed() => {
            for piece in &pieces {
                borders.push(reservoir_border(state, topology, measured, &forces, tension, piece.index));
            }
            true
        }
        _ => false,
    };
    let mut weights = Vec::new();
    for (load, place) in parameters.loads.iter().zip(&state.loads) {
        let patch = load_weights(&state.mesh, geometry, topology, place.centre, load.patch_radius);
        match &load.pull {
            Pull::Force(_) => {
                let force = pull_at(&load.pull, state.time + step);
                for (i, w) in &patch {
                    push[*i as usize] += force * *w;
                }
            }
            Pull::Trap { stiffness, .. } => {
                let gap = place.start + pull_at(&load.pull, state.time + step) - place.position;
                for axis in 0..3 {
                    borders.push(trap_border(&patch, &freedom, n, axis, *stiffness, gap[axis], step));
                }
            }
        }
        weights.push(patch);
    }
    if parameters.loads.is_empty() && parameters.friction == 0.0 {
        remove_rigid_load(topology, state, measured, &mut push);
    }
    // Pieces may push each other away.
    for (f, g) in push.iter_mut().zip(&forces.repulsion) {
        *f -= g;
    }
    let mut y = vec![0.0; 4 * n];
    for i in 0..n {
        y[4 * i..4 * i + 3].copy_from_slice(&freedom[i].reduce(&push[i]));
        y[4 * i + 3] = -(geometry.vertex_area[i] - state.lipid[i]) / step;
    }
    let mut residual: f64 = 0.0;
    let (factor, values) = (&mut connectivity.factor, &connectivity.values);
    let scalars = solve_bordered(&borders, &mut y, |right| {
        residual = residual.max(factor.solve_refined(values, right));
        Ok(())
    })?;
    if y.iter().any(|v| !v.is_finite()) {
        return Err(PhysicsError::Contradiction("the linear solve gave a value that is not finite"));
    }
    timings.solves += clock.elapsed().as_secs_f64();

    let velocity: Vec<Vec3> = (0..n).map(|i| freedom[i].expand(&y[4 * i..4 * i + 3])).collect();
    let tension: Vec<f64> = (0..n).map(|i| y[4 * i + 3]).collect();
    let mut next = scalars.iter();
    let pressure = pieces
        .iter()
        .map(|piece| {
            if has_volume {
                next.next().copied().unwrap_or(0.0)
            } else {
                offered_pressure(&parameters.volume, piece.volume, piece.share).unwrap_or(0.0)
            }
        })
        .collect();
    let exchange =
        if exchanging { pieces.iter().map(|_| next.next().copied().unwrap_or(0.0)).collect() } else { Vec::new() };
    let mut load_forces = Vec::new();
    for load in &parameters.loads {
        load_forces.push(match &load.pull {
            Pull::Force(_) => pull_at(&load.pull, state.time + step),
            Pull::Trap { .. } => {
                let mut force = Vec3::zeros();
                for axis in 0..3 {
                    force[axis] = next.next().copied().unwrap_or(0.0);
                }
                force
            }
        });
    }
    let viscous = boussinesq_rate(state, measured, &velocity, deviatoric);
    let drag = surroundings.dissipation(geometry, &velocity);
    let stiff = implicit_work(connectivity, &forces, geometry, &velocity, step);
    let mut volume_rate = vec![0.0; pieces.len()];
    for ((g, v), piece) in geometry.volume_gradient.iter().zip(&velocity).zip(&topology.piece) {
        volume_rate[*piece as usize] += g.dot(v);
    }
    let permeation = match &parameters.volume {
        VolumeCondition::Osmotic {
            permeability: Some(permeability),
            ..
        } => volume_rate.iter().zip(&pieces).map(|(rate, piece)| rate * rate / (permeability * piece.area)).sum(),
        _ => 0.0,
    };
    Ok(Motion {
        velocity,
        tension,
        pressure,
        exchange,
        forces: load_forces,
        weights,
        dissipated: step * (viscous + drag),
        permeation: step * permeation,
        lag: stiff,
        residual,
    })
}

/// Friction that keeps rigid motions of a free surface determined: 1e-6 of the viscous scale where none is given.
fn regularised_friction(parameters: &Parameters, area: f64) -> f64 {
    parameters
        .friction
        .max(1e-6 * parameters.shear_viscosity.smallest() * 4.0 * std::f64::consts::PI / area)
}

fn boussinesq_rate(state: &State, measured: &Measured, velocity: &[Vec3], deviatoric: bool) -> f64 {
    crate::dissipation::boussinesq_scriven::rate(
        &state.mesh,
        &measured.geometry,
        &measured.material.shear_viscosity,
        velocity,
        deviatoric,
    )
}

/// ½ dt² vᵀ(JᵀJ + H_λ)v.
fn implicit_work(
    connectivity: &Connectivity,
    forces: &Forces,
    geometry: &pellicle_surface::geometry::Geometry,
    velocity: &[Vec3],
    step: f64,
) -> f64 {
    let stencils = &connectivity.stencils;
    let bending: f64 = (0..connectivity.topology.n_vertices)
        .map(|i| {
            let rate: f64 = stencils
                .range(i)
                .map(|p| forces.rows[p].dot(&velocity[stencils.members[p] as usize]))
                .sum();
            rate * rate
        })
        .sum();
    let stress: f64 = connectivity
        .topology
        .triangles
        .iter()
        .enumerate()
        .map(|(t, corners)| {
            let normal = geometry.normal[t];
            let mut slope = Vec3::zeros();
            for c in 0..3 {
                slope += geometry.gradients[t][c] * velocity[corners[c] as usize].dot(&normal);
            }
            let s = &forces.stress[t];
            let across = slope.dot(&s.direction);
            geometry.area[t] * (s.along * slope.norm_squared() + (s.across - s.along) * across * across)
        })
        .sum();
    let repulsion: f64 =
        forces.repulsion_stiffness.iter().zip(velocity).map(|(stiff, v)| v.dot(&(stiff * v))).sum();
    0.5 * step * step * (bending + stress + repulsion)
}

fn add_rim_traction(
    topology: &Topology,
    geometry: &pellicle_surface::geometry::Geometry,
    tension: f64,
    push: &mut [Vec3],
) {
    for (t, corners) in topology.triangles.iter().enumerate() {
        for c in 0..3 {
            let v = corners[c] as usize;
            if topology.on_rim[v] {
                push[v] += geometry.gradients[t][c] * (geometry.area[t] * tension);
            }
        }
    }
}
