//! Two phases on a frozen shape.

use super::geometry::Bare;
use pellicle_physics::PhysicsError;
use pellicle_physics::energy::interface::{self, DoubleWell, InterfaceFields};
use pellicle_physics::parameters::Phases;
use pellicle_physics::transport::diffusion::{DiffusionInput, DiffusionSolver};

/// Composition u = 2φ − 1 on a surface that does not move.
pub struct FrozenPhases<'a> {
    bare: &'a Bare,
    well: DoubleWell,
    fields: InterfaceFields,
    mobility: Vec<f64>,
    solver: DiffusionSolver,
}

impl<'a> FrozenPhases<'a> {
    pub fn new(bare: &'a Bare, phases: &Phases) -> Result<Self, PhysicsError> {
        let n = bare.mesh.n_vertices();
        let mut fields = InterfaceFields::default();
        fields.update(&bare.mesh, phases, &vec![phases.interface_width; n]);
        let well = DoubleWell::new(phases.line_tension, phases.interface_width);
        Ok(Self {
            bare,
            well,
            fields,
            mobility: vec![well.mobility(phases.diffusion_constant); n],
            solver: DiffusionSolver::new(&bare.topology, &bare.mesh.positions)?,
        })
    }

    /// Interface energy.
    pub fn energy(&self, u: &[f64]) -> f64 {
        interface::energy(&self.bare.mesh, &self.bare.geometry, &self.fields, u)
    }

    /// One step of diffusion.
    pub fn diffuse(&mut self, u: &[f64], step: f64) -> Result<Vec<f64>, PhysicsError> {
        let area = &self.bare.geometry.vertex_area;
        let of = |law: &dyn Fn(f64) -> f64| -> Vec<f64> { area.iter().zip(u).map(|(a, u)| a * law(*u)).collect() };
        let slope = of(&|u| self.well.slope(u));
        let curvature = of(&|u| self.well.curvature(u));
        let diffused = self.solver.step(&DiffusionInput {
            mesh: &self.bare.mesh,
            geometry: &self.bare.geometry,
            lipid: area,
            field: u,
            slope: &slope,
            curvature: &curvature,
            gradient_energy: self.fields.gamma(),
            mobility: &self.mobility,
            step,
        })?;
        Ok(diffused.field)
    }
}
