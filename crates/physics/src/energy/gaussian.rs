//! Gaussian bending energy ∫ κ_G K dA = Σ κ_G,i (angle defect)_i over interior vertices.
//!
//! With uniform κ_G on a closed surface it is a topological constant (Gauss–Bonnet) and makes no force.

use crate::coupling::MaterialFields;
use crate::parameters::Parameters;
use pellicle_surface::geometry::{Curvature, Geometry, curvature};
use pellicle_surface::{Mesh, Topology, Vec3};

/// Energy.
pub fn energy(topology: &Topology, curvature: &Curvature, material: &MaterialFields) -> f64 {
    (0..topology.n_vertices)
        .filter(|&i| !topology.on_rim[i])
        .map(|i| material.gaussian_modulus[i] * curvature.angle_defect[i])
        .sum()
}

/// Whether the energy makes forces at all.
pub fn acts(parameters: &Parameters, topology: &Topology) -> bool {
    let modulus = &parameters.gaussian_modulus;
    !modulus.is_uniform() || (modulus.at_zero != 0.0 && !topology.is_closed())
}

/// Exact gradient, added to `gradient`.
pub fn add_gradient(
    mesh: &Mesh,
    topology: &Topology,
    geometry: &Geometry,
    material: &MaterialFields,
    gradient: &mut [Vec3],
) {
    let weight: Vec<f64> = material
        .gaussian_modulus
        .iter()
        .zip(&topology.on_rim)
        .map(|(modulus, rim)| if *rim { 0.0 } else { *modulus })
        .collect();
    curvature::add_angle_defect_gradient(mesh, geometry, &weight, gradient);
}

/// ∂F/∂φ_i and ∂F/∂θ_i at fixed shape, added where present.
pub fn add_field_derivatives(
    parameters: &Parameters,
    topology: &Topology,
    curvature: &Curvature,
    composition: &[f64],
    by_composition: Option<&mut [f64]>,
    by_coverage: Option<&mut [f64]>,
) {
    let modulus = &parameters.gaussian_modulus;
    if let Some(list) = by_composition
        && modulus.at_zero != modulus.at_one
    {
        for (i, value) in list.iter_mut().enumerate().filter(|(i, _)| !topology.on_rim[*i]) {
            *value += modulus.by_composition(composition[i]) * curvature.angle_defect[i];
        }
    }
    if let Some(list) = by_coverage
        && modulus.per_coverage != 0.0
    {
        for (i, value) in list.iter_mut().enumerate().filter(|(i, _)| !topology.on_rim[*i]) {
            *value += modulus.per_coverage * curvature.angle_defect[i];
        }
    }
}
