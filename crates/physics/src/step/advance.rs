//! One accepted step: diffusion and binding on the frozen shape, the coupled motion, mesh motion and remap.

use super::control::{Loads, Reason};
use super::mechanics::{self, Connectivity, Motion, Timings};
use crate::PhysicsError;
use crate::dissipation::tension_stabilisation;
use crate::energy::total::Measured;
use crate::energy::{Energies, bending, gaussian, interface, stretching};
use crate::parameters::{AreaCondition, BindingRegion, Parameters, VolumeCondition, along_path};
use crate::state::{State, weighted_mean};
use crate::transport::binding::{BendingSlope, bind};
use crate::transport::diffusion::{DiffusionInput, DiffusionSolver};
use pellicle_surface::geometry::shape_operator::{second_form, shape_operators};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh_motion::{smoothest_velocity, smoothing_target};
use pellicle_surface::remap::{Carried, remap};
use pellicle_surface::{Mesh, Vec3};
use std::time::Instant;

/// A membrane in motion.
pub struct Simulation {
    /// Parameters, validated.
    pub parameters: Parameters,
    /// State.
    pub state: State,
    /// Connectivity and factorisation of the present mesh.
    pub connectivity: Connectivity,
    /// Measures of the present state.
    pub measured: Measured,
    /// Energies of the present state.
    pub energies: Energies,
    /// Chemical potential of the last diffusion step (empty without phases).
    pub chemical_potential: Vec<f64>,
    /// Wanted edge length of each vertex, for smoothing.
    pub wanted_edge: Vec<f64>,
    /// Seconds spent so far.
    pub timings: Timings,
    diffusion: Option<DiffusionSolver>,
    mesh_velocity: Vec<Vec3>,
}

/// What an accepted step did.
#[derive(Clone, Debug)]
pub struct StepReport {
    /// Length of the step.
    pub step: f64,
    /// Free energy after it.
    pub free_energy: f64,
    /// Largest material speed.
    pub speed: f64,
    /// What bounds the next step.
    pub bounded_by: Reason,
    /// Attempts that were refused before, with their lengths.
    pub refused: Vec<(f64, Reason)>,
    /// Relative residual of the linear solve.
    pub residual: f64,
    /// Energy that implicit stepping lost beyond dissipation, as a share of the dissipation.
    pub lag: f64,
    /// Energy dissipated by each process during the step.
    pub dissipated: f64,
}

/// Largest change of composition (in u = 2φ − 1) aimed at per step.
const COMPOSITION_CHANGE: f64 = 0.12;
/// Largest change of coverage aimed at per step.
const COVERAGE_CHANGE: f64 = 0.1;
/// Share of everything dissipated so far within which a step's own defect does not count.
const SETTLED: f64 = 0.01;
/// Rise of free energy, relative to its size, that rounding and remapping may cause.
const RISE: f64 = 1e-7;
/// Smallest cosine between a triangle's normals before and after a step.
const SMALLEST_TURN: f64 = 0.5;

/// The outcome of an attempt that was not an error.
enum Attempt {
    Accepted(Box<StepReport>, f64),
    Refused(Reason),
}

impl Simulation {
    /// Set up a simulation from a state.
    ///
    /// # Errors
    /// Impossible parameters, contradictions between parameters and surface, a broken mesh.
    pub fn new(parameters: Parameters, state: State) -> Result<Self, PhysicsError> {
        parameters.validate()?;
        let connectivity = Connectivity::new(&state)?;
        if connectivity.topology.is_closed() != parameters.rim.is_none() {
            return Err(PhysicsError::Contradiction(
                "a surface with a rim needs a frame (clamped or hinged), a closed one cannot have one",
            ));
        }
        if parameters.phases.is_some() == state.composition_amount.is_empty() {
            return Err(PhysicsError::Contradiction("phases and a start composition go together"));
        }
        if parameters.protein.is_some() == state.bound_amount.is_empty() {
            return Err(PhysicsError::Contradiction("protein and a start coverage go together"));
        }
        let mut simulation = Self {
            measured: Measured::default(),
            energies: Energies::default(),
            chemical_potential: Vec::new(),
            wanted_edge: vec![1.0; state.mesh.n_vertices()],
            timings: Timings::default(),
            diffusion: None,
            mesh_velocity: vec![Vec3::zeros(); state.mesh.n_vertices()],
            parameters,
            state,
            connectivity,
        };
        simulation.measure();
        if simulation.state.ledger.accepted == 0 && simulation.state.ledger.start_energy == 0.0 {
            simulation.state.ledger.start_energy = simulation.energies.total();
        }
        Ok(simulation)
    }

    /// Measure the present state again.
    pub fn measure(&mut self) {
        self.measured.update(&self.parameters, &self.connectivity.topology, &self.state);
        self.energies =
            self.measured.energies(&self.parameters, &self.connectivity.topology, &self.state);
    }

    /// Adopt a mesh with another connectivity (after remeshing); the state's fields are already on it.
    ///
    /// # Errors
    /// A mesh that is not a manifold.
    pub fn reconnect(&mut self) -> Result<(), PhysicsError> {
        self.connectivity = Connectivity::new(&self.state)?;
        self.diffusion = None;
        self.mesh_velocity.clear();
        self.chemical_potential.clear();
        self.measure();
        Ok(())
    }

    /// Relative mismatch of the second law so far: (F − F₀ + dissipated − work) / (largest of their sizes).
    pub fn energy_balance_error(&self) -> f64 {
        let ledger = &self.state.ledger;
        let change = self.energies.total() - ledger.start_energy;
        let scale = change.abs().max(ledger.dissipated.abs()).max(ledger.work.abs());
        if scale == 0.0 {
            0.0
        } else {
            (change + ledger.dissipated - ledger.work) / scale
        }
    }

    /// Take one accepted step, no longer than `longest`.
    ///
    /// # Errors
    /// [`PhysicsError::StepFloor`] when every attempt down to the shortest step was refused.
    pub fn advance(&mut self, longest: f64) -> Result<StepReport, PhysicsError> {
        let longest = longest.min(self.parameters.step.longest);
        let mut step = self.state.step.min(longest);
        let mut refused = Vec::new();
        loop {
            let before = self.state.clone();
            let energies = self.energies;
            match self.attempt(step)? {
                Attempt::Accepted(mut report, growth) => {
                    let wanted = step * growth;
                    // A step cut short by an output time does not set the pace of the next.
                    self.state.step = if step < before.step && refused.is_empty() {
                        before.step.min(wanted.max(before.step * growth.min(1.0)))
                    } else {
                        wanted
                    };
                    self.state.ledger.accepted += 1;
                    report.refused = refused;
                    return Ok(*report);
                }
                Attempt::Refused(reason) => {
                    let ledger_refused = before.ledger.refused + 1;
                    self.state = before;
                    self.state.ledger.refused = ledger_refused;
                    self.measured.update(&self.parameters, &self.connectivity.topology, &self.state);
                    self.energies = energies;
                    refused.push((step, reason));
                    step *= 0.5;
                    if step < self.parameters.step.shortest {
                        return Err(PhysicsError::StepFloor {
                            time: self.state.time,
                            step,
                            floor: self.parameters.step.shortest,
                            reason: reason.words().to_owned(),
                        });
                    }
                }
            }
        }
    }

    fn attempt(&mut self, step: f64) -> Result<Attempt, PhysicsError> {
        let start = self.energies;
        let mut loads = Loads::default();
        let settled = SETTLED * self.state.ledger.dissipated;
        let tolerance = self.parameters.step.tolerance;
        let clock = Instant::now();
        let transported = match self.transport(step, settled, &mut loads)? {
            Ok(dissipated) => dissipated,
            Err(reason) => return Ok(Attempt::Refused(reason)),
        };
        self.timings.transport += clock.elapsed().as_secs_f64();
        if let Some(reason) = loads.refusal() {
            return Ok(Attempt::Refused(reason));
        }

        let motion = match mechanics::solve(
            &self.parameters,
            &mut self.connectivity,
            &self.state,
            &self.measured,
            step,
            &mut self.timings,
        ) {
            Ok(motion) => motion,
            Err(PhysicsError::Solver(_) | PhysicsError::Contradiction(_)) => {
                return Ok(Attempt::Refused(Reason::Solver));
            }
            Err(error) => return Err(error),
        };
        loads.add(
            Reason::MotionAccuracy,
            motion.lag / (tolerance * motion.dissipated.max(settled)).max(1e-300),
        );
        let clock = Instant::now();
        let mesh_velocity = self.mesh_velocity(&motion.velocity);
        loads.add(Reason::Travel, self.travel(&motion.velocity, &mesh_velocity, step));
        if let Some(reason) = loads.refusal() {
            return Ok(Attempt::Refused(reason));
        }
        let work = self.work(&motion, step);
        if !self.carry(&motion, step) {
            return Ok(Attempt::Refused(Reason::Inversion));
        }
        if let Err(reason) = self.slide(&motion, &mesh_velocity, step) {
            return Ok(Attempt::Refused(reason));
        }
        self.timings.remap += clock.elapsed().as_secs_f64();

        let clock = Instant::now();
        self.measure();
        self.timings.forces += clock.elapsed().as_secs_f64();
        let rise = self.energies.total() - start.total() - work;
        let scale = start.total().abs().max(start.bending.abs()).max(start.phase.abs());
        if rise.is_nan() || rise > RISE * scale {
            return Ok(Attempt::Refused(Reason::EnergyRise));
        }
        let dissipated = motion.dissipated + motion.permeation + transported;
        let ledger = &mut self.state.ledger;
        ledger.dissipated += dissipated;
        ledger.work += work;
        self.state.time += step;
        let speed = motion.velocity.iter().map(|v| v.norm()).fold(0.0, f64::max);
        let (growth, bounded_by) = loads.growth();
        let report = StepReport {
            step,
            free_energy: self.energies.total(),
            speed,
            bounded_by,
            refused: Vec::new(),
            residual: motion.residual,
            lag: motion.lag / motion.dissipated.max(1e-300),
            dissipated,
        };
        self.state.velocity = motion.velocity;
        self.mesh_velocity = mesh_velocity;
        Ok(Attempt::Accepted(Box::new(report), growth))
    }

    /// Diffusion of composition and protein, and binding. Returns what they dissipate.
    fn transport(
        &mut self,
        step: f64,
        settled: f64,
        loads: &mut Loads,
    ) -> Result<Result<f64, Reason>, PhysicsError> {
        if self.parameters.phases.is_none() && self.parameters.protein.is_none() {
            return Ok(Ok(0.0));
        }
        let before = self.energies.total();
        let mut dissipated = 0.0;
        if self.parameters.phases.is_some() {
            match self.diffuse_composition(step, loads) {
                Ok(d) => dissipated += d,
                Err(PhysicsError::Solver(_) | PhysicsError::Contradiction(_)) => return Ok(Err(Reason::Solver)),
                Err(error) => return Err(error),
            }
        }
        if self.parameters.protein.is_some() {
            match self.diffuse_protein(step, loads) {
                Ok(Some(d)) => dissipated += d,
                Ok(None) => return Ok(Err(Reason::Bounds)),
                Err(PhysicsError::Solver(_) | PhysicsError::Contradiction(_)) => return Ok(Err(Reason::Solver)),
                Err(error) => return Err(error),
            }
            dissipated += self.bind_protein(step, loads);
        }
        self.measured.update_fields(&self.parameters, &self.state);
        let after =
            self.measured.energies(&self.parameters, &self.connectivity.topology, &self.state).total();
        let drop = before - after;
        if drop < -RISE * before.abs().max(self.energies.phase.abs()) {
            return Ok(Err(Reason::EnergyRise));
        }
        loads.add(
            Reason::DiffusionAccuracy,
            (drop - dissipated).abs()
                / (self.parameters.step.tolerance * dissipated.max(settled)).max(1e-300),
        );
        Ok(Ok(dissipated))
    }

    fn analyse_diffusion(&mut self) -> Result<(), PhysicsError> {
        if self.diffusion.is_none() {
            self.diffusion = Some(DiffusionSolver::new(&self.connectivity.topology, &self.state.mesh)?);
        }
        Ok(())
    }

    fn diffuse_composition(&mut self, step: f64, loads: &mut Loads) -> Result<f64, PhysicsError> {
        let Some(phases) = self.parameters.phases else {
            return Ok(0.0);
        };
        self.analyse_diffusion()?;
        let well = interface::DoubleWell::new(&phases);
        let n = self.measured.order.len();
        // Derivatives with respect to u = 2φ − 1: half of those with respect to φ.
        let mut by_composition = vec![0.0; n];
        self.add_shape_derivatives(Some(&mut by_composition), None);
        if let Some(protein) = &self.parameters.protein {
            for i in 0..n {
                by_composition[i] -=
                    protein.phase_preference * self.measured.coverage[i] * self.state.lipid[i];
            }
        }
        let area = &self.measured.geometry.vertex_area;
        let u = &self.measured.order;
        let slope: Vec<f64> =
            (0..n).map(|i| area[i] * well.slope(u[i]) + 0.5 * by_composition[i]).collect();
        let curvature: Vec<f64> = (0..n).map(|i| area[i] * well.curvature(u[i])).collect();
        let mobility = vec![well.mobility(phases.diffusion_constant); n];
        let Some(solver) = self.diffusion.as_mut() else {
            return Ok(0.0);
        };
        let diffused = solver.step(&DiffusionInput {
            mesh: &self.state.mesh,
            geometry: &self.measured.geometry,
            lipid: &self.state.lipid,
            field: u,
            slope: &slope,
            curvature: &curvature,
            gradient_energy: well.gradient_energy,
            mobility: &mobility,
            step,
        })?;
        let change = diffused
            .field
            .iter()
            .zip(u)
            .map(|(a, b)| (a - b).abs())
            .fold(0.0, f64::max);
        loads.add(Reason::CompositionChange, change / COMPOSITION_CHANGE);
        for i in 0..n {
            self.state.composition_amount[i] = 0.5 * (1.0 + diffused.field[i]) * self.state.lipid[i];
        }
        self.chemical_potential = diffused.potential;
        Ok(diffused.dissipated)
    }

    fn add_shape_derivatives(&self, by_composition: Option<&mut [f64]>, by_coverage: Option<&mut [f64]>) {
        let (mut by_composition, mut by_coverage) = (by_composition, by_coverage);
        bending::add_field_derivatives(
            &self.parameters,
            &self.measured.curvature,
            &self.measured.material,
            &self.measured.held,
            &self.measured.composition,
            by_composition.as_deref_mut(),
            by_coverage.as_deref_mut(),
        );
        gaussian::add_field_derivatives(
            &self.parameters,
            &self.connectivity.topology,
            &self.measured.curvature,
            &self.measured.composition,
            by_composition,
            by_coverage,
        );
    }

    /// `None`: a coverage would leave (0, 1).
    fn diffuse_protein(&mut self, step: f64, loads: &mut Loads) -> Result<Option<f64>, PhysicsError> {
        let Some(protein) = self.parameters.protein else {
            return Ok(Some(0.0));
        };
        if protein.diffusion_constant == 0.0 {
            return Ok(Some(0.0));
        }
        self.analyse_diffusion()?;
        self.measured.update_fields(&self.parameters, &self.state);
        let n = self.measured.coverage.len();
        let mut slope = vec![0.0; n];
        self.add_shape_derivatives(None, Some(&mut slope));
        let theta = &self.measured.coverage;
        let lipid = &self.state.lipid;
        let mut curvature = vec![0.0; n];
        let mut mobility = vec![0.0; n];
        for i in 0..n {
            let t = theta[i].clamp(1e-12, 1.0 - 1e-12);
            let phi = self.measured.composition.get(i).copied().unwrap_or(0.0);
            slope[i] += lipid[i] * (protein.mixing_slope(t) + protein.excess_slope(theta[i], phi));
            curvature[i] = lipid[i] * (protein.thermal_density() / (t * (1.0 - t)) + protein.interaction)
                + self.coverage_curvature(i);
            mobility[i] = protein.diffusion_constant * t * (1.0 - t) / protein.thermal_density();
        }
        let Some(solver) = self.diffusion.as_mut() else {
            return Ok(Some(0.0));
        };
        let diffused = solver.step(&DiffusionInput {
            mesh: &self.state.mesh,
            geometry: &self.measured.geometry,
            lipid,
            field: theta,
            slope: &slope,
            curvature: &curvature,
            gradient_energy: protein.gradient_energy,
            mobility: &mobility,
            step,
        })?;
        if diffused.field.iter().any(|t| !(0.0..=1.0).contains(t)) {
            return Ok(None);
        }
        let change = diffused
            .field
            .iter()
            .zip(theta)
            .map(|(a, b)| (a - b).abs())
            .fold(0.0, f64::max);
        loads.add(Reason::CoverageChange, change / COVERAGE_CHANGE);
        for (amount, (t, m)) in self
            .state
            .bound_amount
            .iter_mut()
            .zip(diffused.field.iter().zip(lipid))
        {
            *amount = t * m;
        }
        Ok(Some(diffused.dissipated))
    }

    /// ∂²F/∂θ² of bending at a vertex, where it is convex.
    fn coverage_curvature(&self, i: usize) -> f64 {
        if self.measured.held[i] {
            return 0.0;
        }
        let c = self.parameters.spontaneous_curvature.per_coverage;
        self.measured.curvature.area[i] * self.measured.material.bending_rigidity[i] * c * c
    }

    fn bind_protein(&mut self, step: f64, loads: &mut Loads) -> f64 {
        let Some(protein) = self.parameters.protein else {
            return 0.0;
        };
        if !protein.exchanges() {
            return 0.0;
        }
        self.measured.update_fields(&self.parameters, &self.state);
        let n = self.measured.coverage.len();
        let mut by_coverage = vec![0.0; n];
        self.add_shape_derivatives(None, Some(&mut by_coverage));
        let marker = self.state.marker();
        let mut dissipated = 0.0;
        let mut largest: f64 = 0.0;
        for i in 0..n {
            let m = self.state.lipid[i];
            let theta = self.measured.coverage[i];
            let phi = self.measured.composition.get(i).copied().unwrap_or(0.0);
            let linear = self.coverage_curvature(i) / m;
            let bending = BendingSlope {
                constant: by_coverage[i] / m - linear * theta,
                linear,
            };
            let region = match protein.region {
                BindingRegion::Everywhere => 1.0,
                BindingRegion::PhaseOne => phi.clamp(0.0, 1.0),
                BindingRegion::PhaseZero => (1.0 - phi).clamp(0.0, 1.0),
                BindingRegion::Marked => marker.get(i).copied().unwrap_or(0.0).clamp(0.0, 1.0),
            };
            let new = bind(&protein, theta, phi, bending, region, step);
            let slope = protein.mixing_slope(new) + protein.excess_slope(new, phi) - protein.bulk_potential()
                + bending.constant
                + bending.linear * new;
            dissipated -= m * slope * (new - theta);
            largest = largest.max((new - theta).abs());
            self.state.bound_amount[i] = new * m;
        }
        loads.add(Reason::CoverageChange, largest / COVERAGE_CHANGE);
        dissipated
    }

    /// Velocity of the mesh: the smoothest field with the membrane's normal velocity.
    fn mesh_velocity(&self, velocity: &[Vec3]) -> Vec<Vec3> {
        let normals = &self.measured.geometry.vertex_normal;
        let speed: Vec<f64> = velocity.iter().zip(normals).map(|(v, n)| v.dot(n)).collect();
        smoothest_velocity(
            &self.connectivity.topology,
            normals,
            &speed,
            &self.connectivity.topology.on_rim,
            &self.mesh_velocity,
            1e-4,
        )
    }

    /// Largest way of a vertex, and of lipid past it, per local edge length, relative to the limit.
    fn travel(&self, velocity: &[Vec3], mesh_velocity: &[Vec3], step: f64) -> f64 {
        let size = &self.measured.geometry.vertex_area;
        velocity
            .iter()
            .zip(mesh_velocity)
            .zip(size)
            .map(|((v, w), a)| {
                let way = (v - w).norm().max(0.5 * w.norm());
                way * step / a.sqrt()
            })
            .fold(0.0, f64::max)
            / self.parameters.step.travel
    }

    /// Work done on the membrane by loads and by a driven volume.
    fn work(&self, motion: &Motion, step: f64) -> f64 {
        let loads: f64 = motion
            .forces
            .iter()
            .zip(&motion.weights)
            .map(|(force, weights)| {
                let velocity = weights
                    .iter()
                    .fold(Vec3::zeros(), |s, (i, w)| s + motion.velocity[*i as usize] * *w);
                step * force.dot(&velocity)
            })
            .sum();
        let driven = match &self.parameters.volume {
            VolumeCondition::Fixed(path) => {
                match (along_path(path, self.state.time), along_path(path, self.state.time + step)) {
                    (Some(a), Some(b)) => motion.pressure * (b - a),
                    _ => 0.0,
                }
            }
            _ => 0.0,
        };
        loads + driven
    }

    /// Move the membrane with its material; exchange lipid. `false`: a triangle would invert.
    fn carry(&mut self, motion: &Motion, step: f64) -> bool {
        let state = &mut self.state;
        for (x, v) in state.mesh.positions.iter_mut().zip(&motion.velocity) {
            *x += v * step;
        }
        if !keeps_orientation(&state.mesh, &self.measured.geometry) {
            return false;
        }
        let State {
            mesh,
            lipid,
            composition_amount,
            bound_amount,
            marker_amount,
            ..
        } = state;
        tension_stabilisation::exchange(
            mesh,
            &self.measured.geometry,
            &self.measured.material.shear_viscosity,
            &motion.tension,
            step,
            lipid,
            &mut [composition_amount, bound_amount, marker_amount],
        );
        if motion.exchange != 0.0 {
            let factor = 1.0 + step * motion.exchange;
            let before: f64 = lipid.iter().sum();
            for list in [lipid, composition_amount, bound_amount, marker_amount] {
                list.iter_mut().for_each(|m| *m *= factor);
            }
            state.ledger.lipid_drawn += before * (factor - 1.0);
        }
        state.tension.clone_from(&motion.tension);
        state.pressure = motion.pressure;
        for (k, load) in state.loads.iter_mut().enumerate() {
            let velocity = motion.weights[k]
                .iter()
                .fold(Vec3::zeros(), |s, (i, w)| s + motion.velocity[*i as usize] * *w);
            load.centre += velocity * step;
            load.position += velocity * step;
            load.force = motion.forces[k];
        }
        true
    }

    /// Slide the mesh along the moved surface: against the lipid flow, with the mesh velocity.
    fn slide(&mut self, motion: &Motion, mesh_velocity: &[Vec3], step: f64) -> Result<(), Reason> {
        let geometry = Geometry::new(&self.state.mesh);
        let slide: Vec<Vec3> = (0..self.state.mesh.n_vertices())
            .map(|i| (mesh_velocity[i] - motion.velocity[i]) * step)
            .collect();
        let volume = match &self.parameters.volume {
            VolumeCondition::Fixed(path) => along_path(path, self.state.time + step),
            _ => None,
        };
        self.move_vertices(&geometry, &slide, volume.unwrap_or(geometry.volume))
    }

    /// Smooth the mesh by `share` of the way to its neighbours' mean at vertices where `chosen`.
    ///
    /// # Errors
    /// The reason why the moved mesh would not do; the state is then unchanged.
    pub fn smooth(&mut self, share: f64, chosen: &[bool]) -> Result<(), Reason> {
        let geometry = Geometry::new(&self.state.mesh);
        let mut target =
            smoothing_target(&self.state.mesh, &self.connectivity.topology, &geometry, &self.wanted_edge);
        for (t, chosen) in target.iter_mut().zip(chosen) {
            *t *= if *chosen { share } else { 0.0 };
        }
        let saved = self.state.clone();
        let outcome = self.move_vertices(&geometry, &target, geometry.volume);
        if outcome.is_err() {
            self.state = saved;
        }
        self.measure();
        outcome
    }

    /// Displace vertices along the surface, keep the given volume, remap everything carried.
    fn move_vertices(&mut self, geometry: &Geometry, slide: &[Vec3], volume: f64) -> Result<(), Reason> {
        let topology = &self.connectivity.topology;
        let before = self.state.mesh.clone();
        let shape = shape_operators(&before, geometry);
        let mut after = before.clone();
        let open = topology.on_rim.iter().any(|r| *r);
        for i in 0..topology.n_vertices {
            if topology.on_rim[i] {
                // Back onto the frame: exactly where the vertex was before the material moved.
                after.positions[i] += slide[i];
                continue;
            }
            let normal = geometry.vertex_normal[i];
            let mut t = slide[i] - normal * slide[i].dot(&normal);
            let cap = 0.5 * geometry.vertex_area[i].sqrt();
            let length = t.norm();
            if length > cap {
                t *= cap / length;
            }
            after.positions[i] += t - normal * (0.5 * second_form(&shape[i], &t));
        }
        let mut after_geometry = Geometry::new(&after);
        for _ in 0..4 {
            let gap = volume - after_geometry.volume;
            if gap.abs() <= 1e-13 * volume.abs() || (open && volume == 0.0) {
                break;
            }
            let free = |i: usize| !topology.on_rim[i];
            let sweep: f64 = (0..topology.n_vertices)
                .filter(|&i| free(i))
                .map(|i| after_geometry.volume_gradient[i].norm())
                .sum();
            for i in (0..topology.n_vertices).filter(|&i| free(i)) {
                after.positions[i] += after_geometry.vertex_normal[i] * (gap / sweep);
            }
            after_geometry.update(&after);
        }
        if !keeps_orientation(&after, geometry) {
            return Err(Reason::Inversion);
        }
        let density = match self.parameters.area {
            AreaCondition::Reservoir(tension) if open => {
                Some(1.0 / (1.0 + tension / self.parameters.area_compression_modulus))
            }
            _ => None,
        };
        let State {
            lipid,
            composition_amount,
            bound_amount,
            marker_amount,
            ..
        } = &mut self.state;
        let drawn = remap(
            &before,
            &after,
            topology,
            geometry,
            &after_geometry,
            density,
            Carried {
                lipid,
                amounts: vec![composition_amount, bound_amount, marker_amount],
            },
        );
        self.state.ledger.lipid_drawn += drawn;
        if self.state.lipid.iter().any(|m| !(*m > 0.0)) {
            return Err(Reason::Bounds);
        }
        self.state.mesh = after;
        wrap(&mut self.state.mesh);
        for (load, parameters) in self.state.loads.iter_mut().zip(&self.parameters.loads) {
            let weights = crate::state::load_weights(
                &self.state.mesh,
                &after_geometry,
                topology,
                load.centre,
                parameters.patch_radius,
            );
            load.position = weighted_mean(&self.state.mesh, &weights, load.position);
        }
        Ok(())
    }

    /// Tension of each vertex from the strain of its lipids.
    pub fn lipid_tension(&self) -> Vec<f64> {
        stretching::tension(
            self.parameters.area_compression_modulus,
            &self.measured.geometry.vertex_area,
            &self.state.lipid,
        )
    }

    /// Tension of each vertex as the membrane feels it: the lipid constraint's, without the interface's share.
    pub fn membrane_tension(&self) -> Vec<f64> {
        let Some(phases) = &self.parameters.phases else {
            return self.state.tension.clone();
        };
        let well = interface::DoubleWell::new(phases);
        let potential =
            interface::potential(&self.state.mesh, &self.measured.geometry, &well, &self.measured.order);
        self.state
            .tension
            .iter()
            .zip(potential.iter().zip(&self.measured.order))
            .map(|(t, (p, u))| t - p * u)
            .collect()
    }
}

/// Keep z of a periodic tube within one period.
fn wrap(mesh: &mut Mesh) {
    if let Some(period) = mesh.period {
        for x in &mut mesh.positions {
            x.z -= period * (x.z / period).floor();
        }
    }
}

/// Whether every triangle still faces the way it did and has not vanished.
fn keeps_orientation(mesh: &Mesh, before: &Geometry) -> bool {
    (0..mesh.n_triangles()).all(|t| {
        let x = mesh.corners(t);
        let cross = (x[1] - x[0]).cross(&(x[2] - x[0]));
        let length = cross.norm();
        length > 0.2 * before.area[t] && cross.dot(&before.normal[t]) > SMALLEST_TURN * length
    })
}
