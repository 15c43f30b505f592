//! The mechanical part of a step: one linearised solve for velocity, tension and the scalar unknowns.

use super::assemble::{Freedom, MatrixInput, PositiveStress, assemble};
use super::borders::{Border, solve_bordered};
use super::pattern::BlockPattern;
use crate::PhysicsError;
use crate::dissipation::surroundings::{Friction, Surroundings};
use crate::energy::interface::{self, DoubleWell};
use crate::energy::reservoirs::offered_pressure;
use crate::energy::total::{Measured, rim_condition};
use crate::energy::{bending, gaussian};
use crate::parameters::{AreaCondition, Parameters, Pull, Rim, VolumeCondition, along_path};
use crate::state::{State, load_weights, pull_at};
use pellicle_sparse::{Analysis, Factor};
use pellicle_surface::geometry::{CurvatureGradient, Stencils};
use pellicle_surface::{Topology, Vec3};
use std::sync::Arc;
use std::time::Instant;

/// Everything that belongs to one connectivity.
pub struct Connectivity {
    /// Topology.
    pub topology: Topology,
    /// Stencils.
    pub stencils: Stencils,
    /// Scatter indices.
    pub pattern: BlockPattern,
    /// Symbolic factorisation.
    pub analysis: Arc<Analysis>,
    /// Numeric factorisation, storage reused.
    pub factor: Factor,
    /// Values of the matrix, storage reused.
    pub values: Vec<f64>,
}

impl Connectivity {
    /// Analyse the connectivity of a state.
    ///
    /// # Errors
    /// A mesh that is not a manifold.
    pub fn new(state: &State) -> Result<Self, PhysicsError> {
        let topology = Topology::new(state.mesh.n_vertices(), &state.mesh.triangles)?;
        let stencils = Stencils::new(&topology);
        let pattern = BlockPattern::new(&topology, &stencils);
        let coordinates: Vec<[f64; 3]> =
            state.mesh.positions.iter().map(|p| [p.x, p.y, p.z]).collect();
        let analysis = Arc::new(Analysis::new(pattern.pattern.clone(), 4, &coordinates)?);
        let factor = Factor::new(&analysis);
        let values = vec![0.0; pattern.pattern.row_idx.len()];
        Ok(Self {
            topology,
            stencils,
            pattern,
            analysis,
            factor,
            values,
        })
    }
}

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
    /// Pressure difference.
    pub pressure: f64,
    /// Relative rate of lipid exchange with a closed surface's reservoir.
    pub exchange: f64,
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

/// Freedom of each vertex: rims of patches slide along their conormal when lipid passes there.
pub fn freedoms(parameters: &Parameters, topology: &Topology, state: &State, measured: &Measured) -> Vec<Freedom> {
    let mut freedom = vec![Freedom::Free; topology.n_vertices];
    if topology.is_closed() {
        return freedom;
    }
    let mut along = vec![Vec3::zeros(); topology.n_vertices];
    for edge in &topology.rim_edges {
        let e = state.mesh.edge(edge.i, edge.j);
        along[edge.i as usize] += e;
        along[edge.j as usize] += e;
    }
    let open = matches!(parameters.area, AreaCondition::Reservoir(_));
    for i in (0..topology.n_vertices).filter(|&i| topology.on_rim[i]) {
        let normal = match parameters.rim {
            Some(Rim::Clamped) => state.rim_normals[i],
            _ => measured.geometry.vertex_normal[i],
        };
        freedom[i] = if open {
            Freedom::Along(along[i].cross(&normal).normalize())
        } else {
            Freedom::Pinned
        };
    }
    freedom
}

/// Gradient of all position-dependent energies except stretching (its tension is an unknown), with the rows J.
pub struct Forces {
    /// ∂F/∂x (well balanced where the interface is concerned).
    pub gradient: Vec<Vec3>,
    /// Rows J of the bending residuals.
    pub rows: Vec<Vec3>,
    /// Chemical potential μ̂ of the interface energy; empty without phases.
    pub interface_potential: Vec<f64>,
    /// Positive stress of each triangle for the implicit part.
    pub stress: Vec<PositiveStress>,
}

/// Evaluate forces of a measured state.
pub fn forces(
    parameters: &Parameters,
    connectivity: &Connectivity,
    state: &State,
    measured: &Measured,
) -> Forces {
    let (topology, mesh, geometry) = (&connectivity.topology, &state.mesh, &measured.geometry);
    let n = topology.n_vertices;
    let mut gradient = vec![Vec3::zeros(); n];
    let mut rows = Vec::new();
    let mut derivative = CurvatureGradient::default();
    derivative.update(
        mesh,
        topology,
        &connectivity.stencils,
        geometry,
        rim_condition(parameters, state),
    );
    // Rim vertices slide only as lipid: the frame itself does not move, so bending does no work there.
    bending::rows_and_gradient(
        &connectivity.stencils,
        &measured.curvature,
        &derivative,
        &measured.material,
        &measured.held,
        &topology.on_rim,
        &mut rows,
        &mut gradient,
    );
    if gaussian::acts(parameters, topology) {
        gaussian::add_gradient(mesh, topology, geometry, &measured.material, &mut gradient);
    }
    let mut stress: Vec<PositiveStress> = mesh
        .triangles
        .iter()
        .map(|corners| {
            let tension = corners.iter().map(|&v| state.tension[v as usize]).sum::<f64>() / 3.0;
            PositiveStress {
                along: tension,
                across: tension,
                direction: Vec3::zeros(),
            }
        })
        .collect();
    let mut interface_potential = Vec::new();
    let mut soft = vec![Vec3::zeros(); n];
    if let Some(phases) = &parameters.phases {
        let well = DoubleWell::new(phases);
        let u = &measured.order;
        let local: Vec<f64> = u.iter().map(|u| well.value(*u)).collect();
        interface_potential = interface::potential(mesh, geometry, &well, u);
        let gamma = well.gradient_energy;
        interface::add_balanced_gradient(
            mesh, geometry, &local, gamma, u, &interface_potential, &mut soft,
        );
        for (t, corners) in mesh.triangles.iter().enumerate() {
            let (isotropic, slope) = interface::triangle_stress(geometry, t, corners, &local, gamma, u);
            let steep = slope.norm_squared();
            stress[t].along += isotropic;
            stress[t].across += isotropic - gamma * steep;
            if steep > 0.0 {
                stress[t].direction = slope / steep.sqrt();
            }
        }
    }
    if let Some(protein) = &parameters.protein
        && protein.gradient_energy > 0.0
    {
        let theta = &measured.coverage;
        let potential: Vec<f64> = interface::stiffness_times(mesh, geometry, theta)
            .iter()
            .zip(&geometry.vertex_area)
            .map(|(k, a)| protein.gradient_energy * k / a)
            .collect();
        let local = vec![0.0; n];
        interface::add_balanced_gradient(
            mesh,
            geometry,
            &local,
            protein.gradient_energy,
            theta,
            &potential,
            &mut soft,
        );
    }
    if (parameters.phases.is_some() || parameters.protein.is_some()) && topology.is_closed() {
        remove_rigid_load(state, measured, &mut soft);
    }
    for (g, s) in gradient.iter_mut().zip(&soft) {
        *g += s;
    }
    for s in &mut stress {
        s.along = s.along.max(0.0);
        s.across = s.across.max(0.0);
    }
    Forces {
        gradient,
        rows,
        interface_potential,
        stress,
    }
}

/// Subtract the rigid load A (c + ω × x) that carries a load's net force and torque: forces within the membrane have
/// neither, and without drag the smallest net force would make the whole surface drift.
pub fn remove_rigid_load(state: &State, measured: &Measured, load: &mut [Vec3]) {
    let area = &measured.geometry.vertex_area;
    let positions = &state.mesh.positions;
    let total: f64 = area.iter().sum();
    let centre = positions.iter().zip(area).fold(Vec3::zeros(), |s, (x, a)| s + x * *a) / total;
    let periodic = state.mesh.period.is_some();
    // Columns: three translations and the rotations the surface has (only about its axis when periodic).
    let rotations: Vec<Vec3> = if periodic {
        vec![Vec3::z()]
    } else {
        vec![Vec3::x(), Vec3::y(), Vec3::z()]
    };
    let motion = |k: usize, x: &Vec3| -> Vec3 {
        if k < 3 {
            let mut e = Vec3::zeros();
            e[k] = 1.0;
            e
        } else {
            rotations[k - 3].cross(&(x - centre))
        }
    };
    let m = 3 + rotations.len();
    let mut gram = nalgebra::DMatrix::<f64>::zeros(m, m);
    let mut right = nalgebra::DVector::<f64>::zeros(m);
    for ((x, a), f) in positions.iter().zip(area).zip(load.iter()) {
        for r in 0..m {
            let mr = motion(r, x);
            right[r] += mr.dot(f);
            for c in 0..=r {
                gram[(r, c)] += a * mr.dot(&motion(c, x));
            }
        }
    }
    for r in 0..m {
        for c in 0..r {
            gram[(c, r)] = gram[(r, c)];
        }
    }
    if let Some(amount) = gram.cholesky().map(|c| c.solve(&right)) {
        for ((x, a), f) in positions.iter().zip(area).zip(load.iter_mut()) {
            for r in 0..m {
                *f -= motion(r, x) * (a * amount[r]);
            }
        }
    }
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
    let target_volume = match &parameters.volume {
        VolumeCondition::Pressure(pressure) => {
            for (f, g) in push.iter_mut().zip(&geometry.volume_gradient) {
                *f += g * *pressure;
            }
            None
        }
        VolumeCondition::Fixed(path) => along_path(path, state.time + step),
        VolumeCondition::Osmotic { .. } => None,
    };
    if let Some(border) = volume_border(parameters, geometry, &freedom, target_volume, step) {
        borders.push(border);
    }
    let has_volume = borders.len() == 1;
    let exchanging = match parameters.area {
        AreaCondition::Reservoir(tension) if topology.is_closed() => {
            borders.push(reservoir_border(state, measured, &forces, tension));
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
    if parameters.loads.is_empty() && topology.is_closed() && parameters.friction == 0.0 {
        remove_rigid_load(state, measured, &mut push);
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
    let pressure = if has_volume {
        next.next().copied().unwrap_or(0.0)
    } else {
        offered_pressure(&parameters.volume, geometry.volume).unwrap_or(0.0)
    };
    let exchange = if exchanging { next.next().copied().unwrap_or(0.0) } else { 0.0 };
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
    let stiff = implicit_work(connectivity, &forces, geometry, &velocity, step)
        + tension_work(parameters, state, &tension, step);
    let volume_rate: f64 = geometry
        .volume_gradient
        .iter()
        .zip(&velocity)
        .map(|(g, v)| g.dot(v))
        .sum();
    let permeation = match &parameters.volume {
        VolumeCondition::Osmotic {
            permeability: Some(permeability),
            ..
        } => volume_rate * volume_rate / (permeability * geometry.total_area),
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
    0.5 * step * step * (bending + stress)
}

/// What implicit stepping loses through the change of lipid tension.
fn tension_work(parameters: &Parameters, state: &State, tension: &[f64], step: f64) -> f64 {
    let _ = step;
    0.5 / parameters.area_compression_modulus
        * state
            .lipid
            .iter()
            .zip(tension)
            .zip(&state.tension)
            .map(|((m, new), old)| m * (new - old) * (new - old))
            .sum::<f64>()
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

fn volume_border(
    parameters: &Parameters,
    geometry: &pellicle_surface::geometry::Geometry,
    freedom: &[Freedom],
    target: Option<f64>,
    step: f64,
) -> Option<Border> {
    let (diagonal, right) = match (&parameters.volume, target) {
        (VolumeCondition::Fixed(_), Some(target)) => (0.0, -(target - geometry.volume) / step),
        (
            VolumeCondition::Osmotic {
                inside,
                permeability,
                ..
            },
            _,
        ) => {
            // ∇V·v (1/(A L_p) − dt dΠ/dV) + p = Π(V).
            let slope = -inside / (geometry.volume * geometry.volume);
            let resistance = permeability.map_or(0.0, |l| 1.0 / (l * geometry.total_area)) - step * slope;
            let offered = offered_pressure(&parameters.volume, geometry.volume).unwrap_or(0.0);
            (-1.0 / resistance, -offered / resistance)
        }
        _ => return None,
    };
    let mut column = vec![0.0; 4 * freedom.len()];
    for (i, (f, g)) in freedom.iter().zip(&geometry.volume_gradient).enumerate() {
        column[4 * i..4 * i + 3].copy_from_slice(&f.reduce(&-g));
    }
    Some(Border {
        column,
        diagonal,
        target: right,
    })
}

/// Mean tension of a closed surface equals the reservoir's; the interface's share μ̂u is taken off.
fn reservoir_border(state: &State, measured: &Measured, forces: &Forces, tension: f64) -> Border {
    let n = state.lipid.len();
    let mut column = vec![0.0; 4 * n];
    let mut target = 0.0;
    for i in 0..n {
        column[4 * i + 3] = -state.lipid[i];
        let shift = forces
            .interface_potential
            .get(i)
            .map_or(0.0, |p| p * measured.order[i]);
        target -= state.lipid[i] * (tension + shift);
    }
    Border {
        column,
        diagonal: 0.0,
        target,
    }
}

/// f = k (gap − dt w·v) along one axis.
fn trap_border(
    patch: &[(u32, f64)],
    freedom: &[Freedom],
    n: usize,
    axis: usize,
    stiffness: f64,
    gap: f64,
    step: f64,
) -> Border {
    let mut column = vec![0.0; 4 * n];
    let mut unit = Vec3::zeros();
    unit[axis] = -1.0;
    for (i, w) in patch {
        let i = *i as usize;
        let reduced = freedom[i].reduce(&(unit * *w));
        column[4 * i..4 * i + 3].copy_from_slice(&reduced);
    }
    Border {
        column,
        diagonal: -1.0 / (stiffness * step),
        target: -gap / step,
    }
}
