//! A narrower interface where the membrane curves tightly.
//!
//! A phase boundary in a neck is only resolved while its width stays well below the neck's radius. The width follows
//! the radius of curvature down, the line tension stays; the edges follow the width ([`super::mesh_care`]).

use super::advance::Simulation;
use crate::PhysicsError;
use crate::parameters::{MeshCare, Phases};
use pellicle_surface::remesh::{SizingRequest, curvature_size, sizing_field};

/// Largest relative change of the width at a time: the profile stays near its own energy minimum, of which the energy
/// exceeds it by half the square of this.
const CHANGE: f64 = 0.03;
/// The width is left alone while it is within this share of the wanted one, wherever the interface is.
const HYSTERESIS: f64 = 0.05;
/// |u| below which a vertex counts as part of the interface.
const WITHIN: f64 = 0.9;

impl Simulation {
    /// Change the interface width towards what curvature asks for, unless that raises the energy by more than
    /// `allowance`. Returns whether it changed.
    pub(super) fn narrow_interface(&mut self, care: &MeshCare, allowance: f64) -> Result<bool, PhysicsError> {
        let Some(phases) = self.parameters.phases.filter(|phases| phases.width_per_radius > 0.0) else {
            return Ok(false);
        };
        let wanted = self.wanted_widths(&phases, care)?;
        let present = &self.state.interface_width;
        let due = present
            .iter()
            .zip(&wanted)
            .zip(&self.measured.order)
            .any(|((have, want), u)| u.abs() < WITHIN && (want / have - 1.0).abs() > HYSTERESIS);
        if !due {
            return Ok(false);
        }
        let changed: Vec<f64> = present
            .iter()
            .zip(&wanted)
            .map(|(have, want)| have * (want / have).clamp(1.0 - CHANGE, 1.0 + CHANGE))
            .collect();
        let before = std::mem::replace(&mut self.state.interface_width, changed);
        let energies = self.energies;
        self.measure_fields();
        let change = self.energies.total() - energies.total();
        if change.is_nan() || change > allowance {
            self.state.interface_width = before;
            self.measure_fields();
            return Ok(false);
        }
        Ok(true)
    }

    /// The largest widths that stay below the share of the radius of curvature and change slowly along the surface.
    fn wanted_widths(&self, phases: &Phases, care: &MeshCare) -> Result<Vec<f64>, PhysicsError> {
        let (mesh, topology) = (&self.state.mesh, &self.connectivity.topology);
        let radius = curvature_size(mesh, topology, &self.measured.geometry, 1.0)?;
        let wanted = radius.iter().map(|r| phases.width_per_radius * r).collect();
        // What the shortest edges can resolve.
        let narrowest = (0.5 * care.edges_per_interface * care.shortest).min(phases.interface_width);
        Ok(sizing_field(mesh, topology, &SizingRequest::new(wanted, narrowest, phases.interface_width))?)
    }
}
