//! The mechanical part of a step: one linearised solve for velocity, tension and the scalar unknowns.

use super::assemble::{Freedom, MatrixInput, assemble};
use super::borders::{Border, PieceMeasure, reservoir_border, trap_border, volume_border};
use super::connectivity::Connectivity;
use super::linear::{LinearSystem, Origin};
use super::pattern::BlockPattern;
use super::forces::{Forces, forces, freedoms, remove_rigid_load};
use crate::PhysicsError;
use crate::dissipation::surroundings::{Friction, Surroundings};
use crate::energy::reservoirs::offered_pressure;
use crate::energy::total::Measured;
use crate::parameters::{AreaCondition, Parameters, Pull, VolumeCondition, along_path};
use crate::state::{State, load_weights, pull_at};
use pellicle_surface::geometry::{Geometry, Stencils};
use pellicle_surface::{Topology, Vec3};
use std::time::Instant;

/// Seconds spent in the parts of a step, and counts.
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
    /// Connectivities analysed because the mesh changed.
    pub analyses: u64,
    /// Linear systems of the motion solved.
    pub systems: u64,
    /// Factors made for them.
    pub factors: u64,
    /// Krylov iterations for them.
    pub iterations: u64,
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


/// What the linear system of a step is made of, beside the values of its matrix.
struct Parts {
    forces: Forces,
    freedom: Vec<Freedom>,
    surroundings: Friction,
    friction: Vec<f64>,
    deviatoric: bool,
    borders: Vec<Border>,
    pieces: Vec<PieceMeasure>,
    has_volume: bool,
    exchanging: bool,
    weights: Vec<Vec<(u32, f64)>>,
}

impl Parts {
    fn matrix<'a>(
        &'a self,
        parameters: &Parameters,
        topology: &'a Topology,
        pattern: &'a BlockPattern,
        state: &'a State,
        measured: &'a Measured,
        step: f64,
    ) -> MatrixInput<'a> {
        MatrixInput {
            topology,
            positions: &state.mesh.positions,
            geometry: &measured.geometry,
            pattern,
            bending_rows: &self.forces.rows,
            bending_rigidity: &measured.material.bending_rigidity,
            stress: &self.forces.stress,
            viscosity: &measured.material.shear_viscosity,
            friction: &self.friction,
            lipid: &state.lipid,
            area_compression_modulus: parameters.area_compression_modulus,
            step,
            deviatoric: self.deviatoric,
            freedom: &self.freedom,
            repulsion: &self.forces.repulsion_stiffness,
        }
    }
}

fn parts(
    parameters: &Parameters,
    connectivity: &Connectivity,
    state: &State,
    measured: &Measured,
    step: f64,
) -> Parts {
    let topology = &connectivity.topology;
    let geometry = &measured.geometry;
    let freedom = freedoms(parameters, topology, state, measured);
    let forces = forces(parameters, connectivity, state, measured);
    let surroundings = Friction {
        coefficient: regularised_friction(parameters, geometry.total_area),
    };
    let mut borders = Vec::new();
    let target_volume = match &parameters.volume {
        VolumeCondition::Fixed(path) => along_path(path, state.time + step),
        _ => None,
    };
    let pieces: Vec<PieceMeasure> = (measured.piece_volume.iter().zip(geometry.piece_areas(topology)))
        .zip(&state.pieces)
        .zip(0..)
        .map(|(((volume, area), piece), index)| PieceMeasure { index, volume: *volume, area, share: piece.share })
        .collect();
    for piece in &pieces {
        let target = target_volume.map(|volume| volume * piece.share);
        borders.extend(volume_border(parameters, topology, geometry, &freedom, *piece, target, step));
    }
    let has_volume = !borders.is_empty();
    let mut exchanging = false;
    if let AreaCondition::Reservoir(tension) = parameters.area
        && topology.is_closed()
    {
        for piece in &pieces {
            borders.push(reservoir_border(state, topology, measured, &forces, tension, piece.index));
        }
        exchanging = true;
    }
    let mut weights = Vec::new();
    for (load, place) in parameters.loads.iter().zip(&state.loads) {
        let patch = load_weights(&state.mesh, geometry, topology, place.centre, load.patch_radius);
        if let Pull::Trap { stiffness, .. } = &load.pull {
            let gap = place.start + pull_at(&load.pull, state.time + step) - place.position;
            for axis in 0..3 {
                let n = topology.n_vertices;
                borders.push(trap_border(&patch, &freedom, n, axis, *stiffness, gap[axis], step));
            }
        }
        weights.push(patch);
    }
    Parts {
        friction: surroundings.surrogate(geometry),
        deviatoric: matches!(parameters.area, AreaCondition::Reservoir(_)),
        forces,
        freedom,
        surroundings,
        borders,
        pieces,
        has_volume,
        exchanging,
        weights,
    }
}

/// Forces that the bulk, the rim and the loads exert on the vertices, with the membrane's own.
fn push(parameters: &Parameters, topology: &Topology, state: &State, measured: &Measured, parts: &Parts, end: f64) -> Vec<Vec3> {
    let geometry = &measured.geometry;
    let mut push: Vec<Vec3> = parts.forces.gradient.iter().map(|g| -g).collect();
    if let AreaCondition::Reservoir(tension) = parameters.area {
        add_rim_traction(topology, geometry, tension, &mut push);
    }
    if let VolumeCondition::Pressure(pressure) = &parameters.volume {
        for (f, g) in push.iter_mut().zip(&geometry.volume_gradient) {
            *f += g * *pressure;
        }
    }
    for (load, patch) in parameters.loads.iter().zip(&parts.weights) {
        if let Pull::Force(_) = &load.pull {
            let force = pull_at(&load.pull, end);
            for (i, w) in patch {
                push[*i as usize] += force * *w;
            }
        }
    }
    if parameters.loads.is_empty() && parameters.friction == 0.0 {
        remove_rigid_load(topology, state, measured, &mut push);
    }
    // Pieces may push each other away.
    for (f, g) in push.iter_mut().zip(&parts.forces.repulsion) {
        *f -= g;
    }
    push
}

/// Make again the factor that a simulation remembers.
///
/// # Errors
/// A singular system.
pub(super) fn recall(
    parameters: &Parameters,
    connectivity: &mut Connectivity,
    state: &State,
    origin: &Origin,
) -> Result<(), PhysicsError> {
    let then = origin.state(state);
    let mut measured = Measured::default();
    measured.update(parameters, &connectivity.topology, &then);
    let parts = parts(parameters, connectivity, &then, &measured, origin.step);
    let Connectivity { topology, pattern, values, solver, .. } = connectivity;
    let input = parts.matrix(parameters, topology, pattern, &then, &measured, origin.step);
    assemble(&input, values);
    solver.factorise(&LinearSystem { values, borders: &parts.borders, input: &input })
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
    let parts = parts(parameters, connectivity, state, measured, step);
    timings.forces += clock.elapsed().as_secs_f64();

    let clock = Instant::now();
    let Connectivity { topology, pattern, stencils, values, solver, .. } = connectivity;
    let input = parts.matrix(parameters, topology, pattern, state, measured, step);
    assemble(&input, values);
    timings.assembly += clock.elapsed().as_secs_f64();

    let n = topology.n_vertices;
    let geometry = &measured.geometry;
    let Parts { freedom, borders, pieces, forces, weights, .. } = &parts;
    let push = push(parameters, topology, state, measured, &parts, state.time + step);
    let mut y = vec![0.0; 4 * n + borders.len()];
    let mut guess = vec![0.0; 4 * n + borders.len()];
    for i in 0..n {
        y[4 * i..4 * i + 3].copy_from_slice(&freedom[i].reduce(&push[i]));
        y[4 * i + 3] = -(geometry.vertex_area[i] - state.lipid[i]) / step;
        guess[4 * i..4 * i + 3].copy_from_slice(&freedom[i].reduce(&state.velocity[i]));
        guess[4 * i + 3] = state.tension[i];
    }
    for (k, border) in borders.iter().enumerate() {
        y[4 * n + k] = border.target;
    }
    if parts.has_volume {
        for (guess, piece) in guess[4 * n..].iter_mut().zip(&state.pieces) {
            *guess = piece.pressure;
        }
    }
    let system = LinearSystem { values, borders, input: &input };
    let residual = solver.solve(&system, &guess, &mut y, || Origin::of(state, step), timings)?;
    if y.iter().any(|v| !v.is_finite()) {
        return Err(PhysicsError::Contradiction("the linear solve gave a value that is not finite"));
    }
    let (y, scalars) = y.split_at(4 * n);

    let velocity: Vec<Vec3> = (0..n).map(|i| freedom[i].expand(&y[4 * i..4 * i + 3])).collect();
    let tension: Vec<f64> = (0..n).map(|i| y[4 * i + 3]).collect();
    let mut next = scalars.iter();
    let pressure = pieces
        .iter()
        .map(|piece| {
            if parts.has_volume {
                next.next().copied().unwrap_or(0.0)
            } else {
                offered_pressure(&parameters.volume, piece.volume, piece.share).unwrap_or(0.0)
            }
        })
        .collect();
    let exchange =
        if parts.exchanging { pieces.iter().map(|_| next.next().copied().unwrap_or(0.0)).collect() } else { Vec::new() };
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
    let viscous = boussinesq_rate(state, measured, &velocity, parts.deviatoric);
    let drag = parts.surroundings.dissipation(geometry, &velocity);
    let stiff = implicit_work(topology, stencils, forces, geometry, &velocity, step);
    let mut volume_rate = vec![0.0; pieces.len()];
    for ((g, v), piece) in geometry.volume_gradient.iter().zip(&velocity).zip(&topology.piece) {
        volume_rate[*piece as usize] += g.dot(v);
    }
    let (mut permeation, mut baths) = (0.0, 0.0);
    if let VolumeCondition::Osmotic { inside, permeability, .. } = &parameters.volume {
        for (rate, piece) in volume_rate.iter().zip(pieces) {
            permeation += permeability.map_or(0.0, |permeability| rate * rate / (permeability * piece.area));
            // Half of how far the osmotic energy bends along the way, as the stiff parts below.
            baths += 0.5 * inside * piece.share * (step * rate / piece.volume).powi(2);
        }
    }
    Ok(Motion {
        velocity,
        tension,
        pressure,
        exchange,
        forces: load_forces,
        weights: weights.clone(),
        dissipated: step * (viscous + drag),
        permeation: step * permeation,
        lag: stiff + baths,
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
    topology: &Topology,
    stencils: &Stencils,
    forces: &Forces,
    geometry: &Geometry,
    velocity: &[Vec3],
    step: f64,
) -> f64 {
    let bending: f64 = (0..topology.n_vertices)
        .map(|i| {
            let rate: f64 = stencils
                .range(i)
                .map(|p| forces.rows[p].dot(&velocity[stencils.members[p] as usize]))
                .sum();
            rate * rate
        })
        .sum();
    let stress: f64 = topology
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
    geometry: &Geometry,
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
