//! Fields of a state, per vertex and per triangle, for viewing.

use crate::dissipation::boussinesq_scriven;
use crate::energy::interface;
use crate::energy::{bending, gaussian};
use crate::parameters::AreaCondition;
use crate::step::advance::Simulation;
use pellicle_surface::Vec3;
use pellicle_surface::remesh::quality;

/// Fields in the coherent units of the run. What a run does not have is `None`.
#[derive(Clone, Debug, PartialEq)]
pub struct Fields {
    /// Mean curvature H = ½(c₁ + c₂) per vertex [1/length]; on a hinged rim, which is free of bending moment, C/2.
    pub mean_curvature: Vec<f64>,
    /// Gaussian curvature per vertex, angle defect over cell area [1/length²]; on a rim the mean of the inner
    /// neighbours' values.
    pub gaussian_curvature: Vec<f64>,
    /// Composition φ per vertex.
    pub composition: Option<Vec<f64>>,
    /// Coverage θ per vertex.
    pub coverage: Option<Vec<f64>>,
    /// Tension of the membrane per vertex [energy/area].
    pub tension: Vec<f64>,
    /// Material velocity per vertex [length/time].
    pub velocity: Vec<Vec3>,
    /// Its size [length/time].
    pub speed: Vec<f64>,
    /// Chemical potential ∂F/∂(φ m) of composition per vertex [energy/area].
    pub chemical_potential: Option<Vec<f64>>,
    /// Unit outward normal per vertex.
    pub normal: Vec<Vec3>,
    /// κ/2 (2H − C)² per vertex [energy/area].
    pub bending_density: Vec<f64>,
    /// Spontaneous curvature C per vertex [1/length].
    pub spontaneous_curvature: Vec<f64>,
    /// Shear rate √(2 d:d) of the deviatoric rate of strain d per triangle [1/time]; γ̇ in simple shear.
    pub shear_rate: Vec<f64>,
    /// Viscous dissipation 2ζ d:d per triangle [energy/(area·time)].
    pub dissipation: Vec<f64>,
    /// Quality per triangle, twice the inradius over the circumradius.
    pub quality: Vec<f64>,
}

/// Read the fields off a simulation whose own measures are up to date.
pub fn fields(simulation: &Simulation) -> Fields {
    let (state, measured) = (&simulation.state, &simulation.measured);
    let (geometry, curvature, material) =
        (&measured.geometry, &measured.curvature, &measured.material);
    let n = state.mesh.n_vertices();
    let mean_curvature: Vec<f64> = (0..n)
        .map(|i| {
            if measured.held[i] {
                0.5 * material.spontaneous_curvature[i]
            } else {
                0.5 * curvature.integrated[i] / curvature.area[i]
            }
        })
        .collect();
    let bending_density = (0..n)
        .map(|i| {
            let excess = 2.0 * mean_curvature[i] - material.spontaneous_curvature[i];
            0.5 * material.bending_rigidity[i] * excess * excess
        })
        .collect();
    let deviatoric_dissipation = matches!(simulation.parameters.area, AreaCondition::Reservoir(_));
    // Twice d:d is the dissipation of unit viscosity.
    let shear_rate = boussinesq_scriven::density(&state.mesh, geometry, &vec![1.0; n], &state.velocity, true)
        .into_iter()
        // Rounding may leave a tiny negative square.
        .map(|twice_square| twice_square.max(0.0).sqrt())
        .collect();
    let present = |list: &Vec<f64>| (!list.is_empty()).then(|| list.clone());
    Fields {
        gaussian_curvature: gaussian_curvature(simulation),
        composition: present(&measured.composition),
        coverage: present(&measured.coverage),
        tension: simulation.membrane_tension(),
        velocity: state.velocity.clone(),
        speed: state.velocity.iter().map(|v| v.norm()).collect(),
        chemical_potential: chemical_potential(simulation),
        normal: geometry.vertex_normal.clone(),
        bending_density,
        spontaneous_curvature: material.spontaneous_curvature.clone(),
        shear_rate,
        dissipation: boussinesq_scriven::density(
            &state.mesh,
            geometry,
            &material.shear_viscosity,
            &state.velocity,
            deviatoric_dissipation,
        ),
        quality: quality(&state.mesh),
        mean_curvature,
    }
}

fn gaussian_curvature(simulation: &Simulation) -> Vec<f64> {
    let topology = &simulation.connectivity.topology;
    let curvature = &simulation.measured.curvature;
    let inner = |i: usize| curvature.angle_defect[i] / curvature.area[i];
    (0..topology.n_vertices)
        .map(|i| {
            if !topology.on_rim[i] {
                return inner(i);
            }
            let (mut sum, mut count) = (0.0, 0);
            for &j in topology.neighbours.of(i) {
                if !topology.on_rim[j as usize] {
                    sum += inner(j as usize);
                    count += 1;
                }
            }
            sum / f64::from(count.max(1))
        })
        .collect()
}

/// ∂F/∂(φ_i m_i) at fixed shape: interface, bending, Gaussian and protein terms [energy/area]. `None` without
/// phases. Twice the potential that is conjugate to u = 2φ − 1.
pub fn chemical_potential(simulation: &Simulation) -> Option<Vec<f64>> {
    let (parameters, state, measured) =
        (&simulation.parameters, &simulation.state, &simulation.measured);
    parameters.phases.as_ref()?;
    let local = interface::potential(&state.mesh, &measured.geometry, &measured.interface, &measured.order);
    let mut slope: Vec<f64> = local
        .iter()
        .zip(&measured.geometry.vertex_area)
        .map(|(potential, area)| 2.0 * potential * area)
        .collect();
    bending::add_field_derivatives(
        parameters,
        &measured.curvature,
        &measured.material,
        &measured.held,
        &measured.composition,
        Some(&mut slope),
        None,
    );
    gaussian::add_field_derivatives(
        parameters,
        &simulation.connectivity.topology,
        &measured.curvature,
        &measured.composition,
        Some(&mut slope),
        None,
    );
    if let Some(protein) = &parameters.protein {
        for (value, (theta, m)) in slope.iter_mut().zip(measured.coverage.iter().zip(&state.lipid)) {
            *value -= protein.phase_preference * theta * m;
        }
    }
    Some(slope.iter().zip(&state.lipid).map(|(s, m)| s / m).collect())
}
