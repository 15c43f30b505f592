//! One accepted step: diffusion and binding on the frozen shape, the coupled motion, mesh motion and remap.

use super::control::{Loads, Reason};
use super::connectivity::Connectivity;
use super::mechanics::{self, Motion, Timings};
use super::mesh_care::CareReport;
use super::rezone::keeps_orientation;
use super::severing::Severing;
use super::touching::Clearance;
use crate::PhysicsError;
use crate::dissipation::tension_stabilisation;
use crate::energy::total::Measured;
use crate::energy::{Energies, interface, stretching};
use crate::parameters::{Parameters, Pull, SelfContact, VolumeCondition, along_path};
use crate::state::{Ledger, State, pull_at};
use crate::transport::diffusion::DiffusionSolver;
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
    pub(super) diffusion: Option<DiffusionSolver>,
    pub(super) mesh_velocity: Vec<Vec3>,
    pub(super) clearance: Clearance,
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
    /// Energy that the motion leaves unaccounted for, as a share of what it turns over.
    pub lag: f64,
    /// Energy dissipated by each process during the step.
    pub dissipated: f64,
    /// How far from rest: 100 × (energy that would be released in as long a time again at the present rate / all energy
    /// turned over so far). Below 1e-3, going on as long again would change the energy by less than a hundred-thousandth
    /// of what has happened. Infinite while a load or the volume is driven.
    pub unrest: f64,
    /// What was done to the mesh after the step.
    pub care: CareReport,
    /// Necks that were severed after the step.
    pub severed: Vec<Severing>,
}

/// Share of everything dissipated so far within which a step's own defect does not count.
const SETTLED: f64 = 0.01;
/// Rise of free energy, relative to its size, that rounding and remapping may cause.
pub(super) const RISE: f64 = 1e-12;
/// A load beyond this is refused rather than corrected in the next step.
const LATITUDE: f64 = 2.5;
/// So many steps at the start are refused at a load of 1.
const STRICT_STEPS: u64 = 20;
/// How far the defect found after a step may exceed the predicted one and still count as one of time stepping.
const DEFECT_FACTOR: f64 = 4.0;
/// Share of the loads' work that care of the mesh may spend.
const CREDIT: f64 = 0.02;

/// Work during a step: with the force at its end, by which the implicit step can only lose energy; and with the force
/// along the way (the mean of the ends where it grows or falls steadily), which goes into the ledger.
#[derive(Clone, Copy, Debug, Default)]
struct Work {
    with_final_force: f64,
    with_mean_force: f64,
}

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
        if state.pieces.len() != connectivity.topology.n_pieces {
            return Err(PhysicsError::Contradiction("the pieces of the state are not those of its surface"));
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
            clearance: Clearance::default(),
            parameters,
            state,
            connectivity,
        };
        simulation.measure();
        if simulation.state.ledger.accepted == 0 && simulation.state.ledger.start_energy == 0.0 {
            // Neither the mesh's adaptation to the start shape nor the lipids' is part of what happens.
            simulation.care(f64::INFINITY)?;
            simulation.state.ledger = Ledger::default();
            simulation.settle_lipids()?;
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

    /// Measure fields and energies again (shape unchanged).
    pub(super) fn measure_fields(&mut self) {
        self.measured.update_fields(&self.parameters, &self.state);
        self.energies =
            self.measured.energies(&self.parameters, &self.connectivity.topology, &self.state);
    }

    /// Drop what belonged to the connectivity before.
    pub(super) fn forget_connectivity(&mut self) {
        self.diffusion = None;
        self.mesh_velocity.clear();
        self.chemical_potential.clear();
    }

    /// Relative mismatch of the second law so far: (F − F₀ − severing + dissipated − work) / (largest of their sizes).
    /// What F jumps by where a neck is severed is an entry of its own: nothing resolves on which way it is spent.
    pub fn energy_balance_error(&self) -> f64 {
        let ledger = &self.state.ledger;
        let change = self.energies.total() - ledger.start_energy - ledger.severing;
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
            let (energies, clearance) = (self.energies, self.clearance);
            let outcome = match self.attempt(step, &before.mesh) {
                Ok(outcome) => outcome,
                Err(error) => {
                    self.state = before;
                    self.clearance = clearance;
                    self.measure();
                    return Err(error);
                }
            };
            match outcome {
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
                    let clock = Instant::now();
                    let released = energies.total() + self.state.ledger.work
                        - before.ledger.work
                        - self.energies.total();
                    report.care = self.care(released)?;
                    self.note_care(&report.care);
                    report.severed = self.sever_thin_necks()?;
                    report.free_energy = self.energies.total();
                    self.timings.remeshing += clock.elapsed().as_secs_f64();
                    return Ok(*report);
                }
                Attempt::Refused(reason) => {
                    let ledger_refused = before.ledger.refused + 1;
                    self.state = before;
                    self.clearance = clearance;
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

    fn attempt(&mut self, step: f64, from: &Mesh) -> Result<Attempt, PhysicsError> {
        let start = self.energies;
        let mut loads = Loads::default();
        let ledger = &self.state.ledger;
        let settled = SETTLED * ledger.dissipated.max(ledger.work.abs());
        let tolerance = self.parameters.step.tolerance;
        // The first steps make up the whole ledger: they get no latitude.
        let latitude = if ledger.accepted < STRICT_STEPS { 1.0 } else { LATITUDE };
        let clock = Instant::now();
        let transported = match self.transport(step, settled, &mut loads)? {
            Ok(dissipated) => dissipated,
            Err(reason) => return Ok(Attempt::Refused(reason)),
        };
        self.timings.transport += clock.elapsed().as_secs_f64();
        if let Some(reason) = loads.refusal(latitude) {
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
        let mut work = self.work(&motion, step);
        // The exact balance of the implicit step is ΔF = work with the final force − dissipation − lag. Against an elastic
        // membrane the force grows along the way and the lag is half of its growth; against viscous drag the force
        // jumps at once and there is no lag.
        let growth = work.with_final_force - work.with_mean_force;
        if growth > 0.0 {
            work.with_mean_force = work.with_final_force - motion.lag.min(growth);
        }
        // What the step will leave unaccounted for: half of it is the growth of the load's own force.
        let defect = (motion.lag - (work.with_final_force - work.with_mean_force)).abs();
        let turnover = motion.dissipated.max(work.with_mean_force.abs()).max(settled);
        // The roughness of a changed mesh relaxes at once: that is mesh energy given back, not physics.
        let given_back = (defect - tolerance * turnover).clamp(0.0, self.state.ledger.mesh_debt.max(0.0));
        loads.add(Reason::MotionAccuracy, (defect - given_back) / (tolerance * turnover).max(1e-300));
        let clock = Instant::now();
        let mesh_velocity = self.mesh_velocity(&motion.velocity);
        loads.add(Reason::Travel, self.travel(&motion.velocity, &mesh_velocity, step));
        loads.add(Reason::SelfContact, self.approach(&motion.velocity, step));
        if let Some(reason) = loads.refusal(latitude) {
            return Ok(Attempt::Refused(reason));
        }
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
        let rise = self.energies.total() - start.total() - work.with_final_force;
        let scale = start.total().abs().max(start.bending.abs()).max(start.phase.abs());
        let dissipated = motion.dissipated + motion.permeation + transported;
        if rise.is_nan() || rise > RISE * scale {
            return Ok(Attempt::Refused(Reason::EnergyRise));
        }
        // Where the shape is unstable the true defect exceeds the prediction, which knows only the positive part of the
        // second variation. What is far beyond it is noise of the mesh, which shorter steps would not cure.
        let found = (start.total() + work.with_mean_force - dissipated - self.energies.total()).abs() - given_back;
        let scale = tolerance * turnover.max(dissipated);
        loads.add(Reason::MotionAccuracy, found.min(DEFECT_FACTOR * defect) / scale.max(1e-300));
        if let Some(reason) = loads.refusal(latitude) {
            return Ok(Attempt::Refused(reason));
        }
        if let Some(place) = self.passes_through_itself(from) {
            return match self.parameters.self_contact {
                SelfContact::Stop => Err(PhysicsError::SelfContact { time: self.state.time, place }),
                SelfContact::Repel(_) => Ok(Attempt::Refused(Reason::SelfContact)),
            };
        }
        let ledger = &mut self.state.ledger;
        ledger.dissipated += dissipated;
        ledger.work += work.with_mean_force;
        ledger.mesh_energy -= given_back;
        ledger.mesh_debt -= given_back;
        ledger.mesh_credit += CREDIT * work.with_mean_force.abs();
        self.state.time += step;
        let speed = motion.velocity.iter().map(|v| v.norm()).fold(0.0, f64::max);
        let released = start.total() + work.with_mean_force - self.energies.total();
        let unrest = self.unrest(released.abs() / step);
        let (growth, bounded_by) = loads.growth();
        let report = StepReport {
            step,
            free_energy: self.energies.total(),
            speed,
            bounded_by,
            refused: Vec::new(),
            residual: motion.residual,
            lag: defect / turnover.max(1e-300),
            dissipated,
            unrest,
            care: CareReport::default(),
            severed: Vec::new(),
        };
        self.state.velocity = motion.velocity;
        self.mesh_velocity = mesh_velocity;
        Ok(Attempt::Accepted(Box::new(report), growth))
    }

    /// See [`StepReport::unrest`]; `rate` is the energy released per time.
    fn unrest(&self, rate: f64) -> f64 {
        let ends = |path: &[(f64, Vec3)]| path.last().map_or(0.0, |p| p.0);
        let loads = self.parameters.loads.iter().map(|load| match &load.pull {
            Pull::Force(path) | Pull::Trap { path, .. } => ends(path),
        });
        let volume = match &self.parameters.volume {
            VolumeCondition::Fixed(path) => path.last().map_or(0.0, |p| p.0),
            _ => 0.0,
        };
        if self.state.time < loads.fold(volume, f64::max) {
            return f64::INFINITY;
        }
        let ledger = &self.state.ledger;
        let change = (self.energies.total() - ledger.start_energy).abs();
        // Rounding of the energies must not pass for motion of a membrane that was at rest from the start.
        let turned_over = change.max(ledger.work.abs()).max(1e-9 * ledger.start_energy.abs());
        100.0 * rate * self.state.time / turned_over.max(f64::MIN_POSITIVE)
    }

    /// Work done on the membrane by loads and by a driven volume.
    fn work(&self, motion: &Motion, step: f64) -> Work {
        let mut work = Work::default();
        for (k, (force, weights)) in motion.forces.iter().zip(&motion.weights).enumerate() {
            let way = weights
                .iter()
                .fold(Vec3::zeros(), |s, (i, w)| s + motion.velocity[*i as usize] * (*w * step));
            let before = match &self.parameters.loads[k].pull {
                // A given force may jump; a spring's cannot.
                pull @ Pull::Force(_) => pull_at(pull, self.state.time),
                Pull::Trap { .. } => self.state.loads[k].force,
            };
            work.with_final_force += force.dot(&way);
            work.with_mean_force += 0.5 * (force + before).dot(&way);
        }
        if let VolumeCondition::Fixed(path) = &self.parameters.volume
            && let (Some(a), Some(b)) =
                (along_path(path, self.state.time), along_path(path, self.state.time + step))
        {
            let first = self.state.ledger.accepted == 0;
            for (piece, now) in self.state.pieces.iter().zip(&motion.pressure) {
                let before = if first { *now } else { piece.pressure };
                work.with_final_force += now * piece.share * (b - a);
                work.with_mean_force += 0.5 * (now + before) * piece.share * (b - a);
            }
        }
        work
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
        if !motion.exchange.is_empty() {
            let piece = &self.connectivity.topology.piece;
            let before: f64 = lipid.iter().sum();
            let factor = |v: usize| 1.0 + step * motion.exchange[piece[v] as usize];
            for list in [&mut *lipid, composition_amount, bound_amount, marker_amount] {
                list.iter_mut().enumerate().for_each(|(v, m)| *m *= factor(v));
            }
            state.ledger.lipid_drawn += lipid.iter().sum::<f64>() - before;
        }
        state.tension.clone_from(&motion.tension);
        state.set_pressures(&motion.pressure);
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
        if self.parameters.phases.is_none() {
            return self.state.tension.clone();
        }
        let potential =
            interface::potential(&self.state.mesh, &self.measured.geometry, &self.measured.interface, &self.measured.order);
        self.state
            .tension
            .iter()
            .zip(potential.iter().zip(&self.measured.order))
            .map(|(t, (p, u))| t - p * u)
            .collect()
    }
}
