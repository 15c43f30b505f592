//! The free energy of a state, term by term.

use super::interface::{GradientEnergy, InterfaceFields};
use super::{bending, gaussian, interface, protein, repulsion, reservoirs, stretching};
use crate::coupling::MaterialFields;
use crate::parameters::{AreaCondition, Parameters, Rim, SelfContact};
use crate::state::State;
use pellicle_surface::Topology;
use pellicle_surface::contact::{Facing, facing};
use pellicle_surface::geometry::{Curvature, Geometry, RimCondition};
use serde::{Deserialize, Serialize};

/// Free energy by term.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Energies {
    /// ∫ κ/2 (2H − C)².
    pub bending: f64,
    /// ∫ κ_G K.
    pub gaussian: f64,
    /// Interface energy of the phases.
    pub phase: f64,
    /// Bound protein, with its bath.
    pub protein: f64,
    /// Stretching of the lipids.
    pub stretching: f64,
    /// Pressure, osmotic and lipid reservoirs.
    pub reservoirs: f64,
    /// Repulsion of facing parts of the membrane.
    pub repulsion: f64,
}

impl Energies {
    /// Sum of all terms.
    pub fn total(&self) -> f64 {
        self.bending + self.gaussian + self.phase + self.protein + self.stretching + self.reservoirs + self.repulsion
    }
}

/// How many times more viscous the membrane is in the middle of a load patch.
const GRIP: f64 = 30.0;

/// Geometry and material of a state, measured together and reused from step to step.
#[derive(Clone, Debug, Default)]
pub struct Measured {
    /// First-order geometry.
    pub geometry: Geometry,
    /// Curvature.
    pub curvature: Curvature,
    /// Material constants.
    pub material: MaterialFields,
    /// Composition φ (empty without phases).
    pub composition: Vec<f64>,
    /// u = 2φ − 1 (empty without phases).
    pub order: Vec<f64>,
    /// Double wells and gradient energies of the phases (empty without).
    pub interface: InterfaceFields,
    /// Coverage θ (empty without protein).
    pub coverage: Vec<f64>,
    /// Vertices whose bending residual is dropped: hinged rims.
    pub held: Vec<bool>,
    /// Enclosed volume of each piece.
    pub piece_volume: Vec<f64>,
    /// Vertices that face another part of the membrane within the range of the repulsion.
    pub contacts: Vec<Facing>,
}

/// The rim condition of a state.
pub fn rim_condition<'a>(parameters: &Parameters, state: &'a State) -> RimCondition<'a> {
    match parameters.rim {
        Some(Rim::Clamped) if !state.rim_normals.is_empty() => RimCondition::Clamped(&state.rim_normals),
        _ => RimCondition::Free,
    }
}

impl Measured {
    /// Measure a state.
    pub fn update(&mut self, parameters: &Parameters, topology: &Topology, state: &State) {
        self.geometry.update(&state.mesh);
        self.piece_volume = self.geometry.piece_volumes(&state.mesh, topology);
        self.contacts.clear();
        if let SelfContact::Repel(law) = &parameters.self_contact {
            let reach = repulsion::REACH * law.decay_length;
            let reach = state.mesh.period.map_or(reach, |period| reach.min(0.4 * period));
            self.contacts = facing(&state.mesh, topology, &self.geometry, reach);
        }
        self.curvature.update(
            &state.mesh,
            topology,
            &self.geometry,
            rim_condition(parameters, state),
        );
        self.held.clear();
        let hinged = parameters.rim != Some(Rim::Clamped);
        self.held.extend(topology.on_rim.iter().map(|rim| *rim && hinged));
        self.update_fields(parameters, state);
    }

    /// Measure only the fields again (shape unchanged).
    pub fn update_fields(&mut self, parameters: &Parameters, state: &State) {
        self.composition.clear();
        self.composition.extend(state.composition_amount.iter().zip(&state.lipid).map(|(n, m)| n / m));
        self.order.clear();
        self.order.extend(self.composition.iter().map(|c| 2.0 * c - 1.0));
        if let Some(phases) = &parameters.phases {
            self.interface.update(&state.mesh, phases, &state.interface_width);
        }
        self.coverage.clear();
        self.coverage.extend(state.bound_amount.iter().zip(&state.lipid).map(|(n, m)| n / m));
        self.material.update(
            parameters,
            state.mesh.n_vertices(),
            &self.composition,
            &self.coverage,
        );
        self.grip(parameters, state);
    }

    /// Stiffen the membrane against flow where a load holds it. A load on fluid lipids has a part within the surface
    /// that would stir them for ever, dissipating without end; what really pulls (an adhering bead) holds its patch
    /// together.
    fn grip(&mut self, parameters: &Parameters, state: &State) {
        for (load, place) in parameters.loads.iter().zip(&state.loads) {
            let reach = 2.0 * load.patch_radius * load.patch_radius;
            for (viscosity, x) in self.material.shear_viscosity.iter_mut().zip(&state.mesh.positions) {
                let d = state.mesh.nearest_image(x - place.centre).norm_squared() / reach;
                *viscosity *= 1.0 + GRIP * (-d).exp();
            }
        }
    }

    /// Free energy of the measured state.
    pub fn energies(&self, parameters: &Parameters, topology: &Topology, state: &State) -> Energies {
        let mut energies = Energies {
            bending: bending::energy(&self.curvature, &self.material, &self.held),
            gaussian: gaussian::energy(topology, &self.curvature, &self.material),
            stretching: stretching::energy(
                parameters.area_compression_modulus,
                &self.geometry.vertex_area,
                &state.lipid,
            ),
            reservoirs: self
                .piece_volume
                .iter()
                .zip(&state.pieces)
                .map(|(volume, piece)| reservoirs::energy(&parameters.volume, *volume, piece.share))
                .sum(),
            ..Energies::default()
        };
        if let SelfContact::Repel(law) = &parameters.self_contact {
            energies.repulsion = repulsion::energy(law, &self.geometry.vertex_area, &self.contacts);
        }
        if parameters.phases.is_some() {
            energies.phase = interface::energy(&state.mesh, &self.geometry, &self.interface, &self.order);
        }
        if let Some(protein) = &parameters.protein {
            energies.protein =
                protein::energy(protein, &state.lipid, &self.coverage, &self.composition)
                    + interface::gradient_energy(
                        &state.mesh,
                        &self.geometry,
                        GradientEnergy::Uniform(protein.gradient_energy),
                        &self.coverage,
                    );
        }
        if let AreaCondition::Reservoir(tension) = parameters.area {
            let per_area = stretching::reservoir_potential(parameters.area_compression_modulus, tension);
            energies.reservoirs += per_area * state.lipid.iter().sum::<f64>();
        }
        energies
    }
}
