//! Diffusion of composition and protein, and binding, on the frozen shape.

use super::advance::{RISE, Simulation};
use super::control::{Loads, Reason};
use crate::PhysicsError;
use crate::energy::interface::GradientEnergy;
use crate::energy::{bending, gaussian, interface};
use crate::parameters::BindingRegion;
use crate::transport::binding::{BendingSlope, bind};
use crate::transport::diffusion::{DiffusionInput, DiffusionSolver};

/// Largest change of composition (in u = 2φ − 1) aimed at per step.
const COMPOSITION_CHANGE: f64 = 0.12;
/// Linearised diffusion and remapping may overshoot an empty or full membrane by this much; their sums stay exact,
/// which clipping would spoil.
const OVERSHOOT: f64 = 1e-4;
/// Largest change of coverage aimed at per step.
const COVERAGE_CHANGE: f64 = 0.1;

impl Simulation {
    /// Diffusion of composition and protein, and binding. Returns what they dissipate.
    pub(super) fn transport(
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
        let defect = (drop - dissipated).abs();
        let allowed = self.parameters.step.tolerance * dissipated.max(settled);
        // Fields interpolated onto a changed mesh relax at once: mesh energy given back.
        let given_back = (defect - allowed).clamp(0.0, self.state.ledger.mesh_debt.max(0.0));
        self.state.ledger.mesh_debt -= given_back;
        self.state.ledger.mesh_energy -= given_back;
        loads.add(Reason::DiffusionAccuracy, (defect - given_back) / allowed.max(1e-300));
        Ok(Ok(dissipated))
    }

    pub(super) fn analyse_diffusion(&mut self) -> Result<(), PhysicsError> {
        if self.diffusion.is_none() {
            self.diffusion = Some(DiffusionSolver::new(&self.connectivity.topology, &self.connectivity.ordered_at)?);
        }
        Ok(())
    }

    pub(super) fn diffuse_composition(&mut self, step: f64, loads: &mut Loads) -> Result<f64, PhysicsError> {
        let Some(phases) = self.parameters.phases else {
            return Ok(0.0);
        };
        self.analyse_diffusion()?;
        let wells = &self.measured.interface.wells;
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
            (0..n).map(|i| area[i] * wells[i].slope(u[i]) + 0.5 * by_composition[i]).collect();
        let curvature: Vec<f64> = (0..n).map(|i| area[i] * wells[i].curvature(u[i])).collect();
        let mobility: Vec<f64> = wells.iter().map(|well| well.mobility(phases.diffusion_constant)).collect();
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
            gradient_energy: self.measured.interface.gamma(),
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

    pub(super) fn add_shape_derivatives(&self, by_composition: Option<&mut [f64]>, by_coverage: Option<&mut [f64]>) {
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
    pub(super) fn diffuse_protein(&mut self, step: f64, loads: &mut Loads) -> Result<Option<f64>, PhysicsError> {
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
            gradient_energy: GradientEnergy::Uniform(protein.gradient_energy),
            mobility: &mobility,
            step,
        })?;
        // Measured from what was there before: diffusion must not be blamed for what a remap left.
        let lowest = theta.iter().copied().fold(0.0, f64::min) - OVERSHOOT;
        let highest = theta.iter().copied().fold(1.0, f64::max) + OVERSHOOT;
        if diffused.field.iter().any(|t| !(lowest..=highest).contains(t)) {
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
    pub(super) fn coverage_curvature(&self, i: usize) -> f64 {
        if self.measured.held[i] {
            return 0.0;
        }
        let c = self.parameters.spontaneous_curvature.per_coverage;
        self.measured.curvature.area[i] * self.measured.material.bending_rigidity[i] * c * c
    }

    pub(super) fn bind_protein(&mut self, step: f64, loads: &mut Loads) -> f64 {
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
        if protein.gradient_energy > 0.0 {
            let gamma = GradientEnergy::Uniform(protein.gradient_energy);
            let pull =
                interface::stiffness_times(&self.state.mesh, &self.measured.geometry, gamma, &self.measured.coverage);
            for (slope, k) in by_coverage.iter_mut().zip(pull) {
                *slope += k;
            }
        }
        let mut own_stiffness = vec![0.0; n];
        for (t, corners) in self.state.mesh.triangles.iter().enumerate() {
            for (c, v) in corners.iter().enumerate() {
                own_stiffness[*v as usize] += protein.gradient_energy
                    * self.measured.geometry.area[t]
                    * self.measured.geometry.gradients[t][c].norm_squared();
            }
        }
        let marker = self.state.marker();
        let mut dissipated = 0.0;
        let mut largest: f64 = 0.0;
        for i in 0..n {
            let m = self.state.lipid[i];
            let theta = self.measured.coverage[i];
            let phi = self.measured.composition.get(i).copied().unwrap_or(0.0);
            // The gradient energy couples neighbours: its own part is implicit, theirs stands still during the step.
            let linear = (self.coverage_curvature(i) + own_stiffness[i]) / m;
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
}
