//! Bending energy ∫ κ/2 (2H − C)² dA.
//!
//! Discretely Σ_i ½ r_i², r_i = √(κ_i/A_i) (b_i − C_i A_i), with the integrated curvature b_i and the mixed cell
//! area A_i of [`pellicle_surface::geometry::curvature`]. The rows J_i = ∂r_i/∂x give the exact gradient Jᵀr and
//! the Gauss–Newton matrix JᵀJ.
//!
//! # Source
//! Helfrich, Z. Naturforsch. C 28 (1973) 693.

use crate::coupling::MaterialFields;
use crate::parameters::Parameters;
use pellicle_surface::Vec3;
use pellicle_surface::geometry::{Curvature, CurvatureGradient, Stencils};

/// Bending energy. `held` marks vertices whose residual is dropped (hinged rims).
pub fn energy(curvature: &Curvature, material: &MaterialFields, held: &[bool]) -> f64 {
    (0..curvature.area.len())
        .filter(|&i| !held[i])
        .map(|i| {
            let (b, a) = (curvature.integrated[i], curvature.area[i]);
            let excess = b - material.spontaneous_curvature[i] * a;
            0.5 * material.bending_rigidity[i] * excess * excess / a
        })
        .sum()
}

/// Rows J_i over the stencils (zero at `fixed` members and at `held` owners), and the exact energy gradient,
/// added to `gradient`.
///
/// # Shapes and units
/// `rows`: one vector per stencil entry, √energy/length; `gradient`: one vector per vertex, energy/length.
pub fn rows_and_gradient(
    stencils: &Stencils,
    curvature: &Curvature,
    derivative: &CurvatureGradient,
    material: &MaterialFields,
    held: &[bool],
    fixed: &[bool],
    rows: &mut Vec<Vec3>,
    gradient: &mut [Vec3],
) {
    rows.clear();
    rows.resize(stencils.members.len(), Vec3::zeros());
    for i in 0..curvature.area.len() {
        if held[i] {
            continue;
        }
        let (kappa, c) = (
            material.bending_rigidity[i],
            material.spontaneous_curvature[i],
        );
        let (b, a) = (curvature.integrated[i], curvature.area[i]);
        let scale = (kappa / a).sqrt();
        let residual = scale * (b - c * a);
        let by_area = 0.5 * (b / a + c);
        for place in stencils.range(i) {
            let member = stencils.members[place] as usize;
            if fixed[member] {
                continue;
            }
            let row = (derivative.integrated[place] - derivative.area[place] * by_area) * scale;
            rows[place] = row;
            gradient[member] += row * residual;
        }
    }
}

/// ∂F/∂φ_i and ∂F/∂θ_i of the bending energy at fixed shape, added to the given lists where present.
///
/// # Units
/// Energy (integrated over the cell).
pub fn add_field_derivatives(
    parameters: &Parameters,
    curvature: &Curvature,
    material: &MaterialFields,
    held: &[bool],
    composition: &[f64],
    by_composition: Option<&mut [f64]>,
    by_coverage: Option<&mut [f64]>,
) {
    let excess = |i: usize| curvature.integrated[i] / curvature.area[i] - material.spontaneous_curvature[i];
    let slope = |i: usize, rigidity_slope: f64, curvature_slope: f64| {
        let e = excess(i);
        curvature.area[i]
            * (0.5 * rigidity_slope * e * e - material.bending_rigidity[i] * e * curvature_slope)
    };
    let (rigidity, spontaneous) = (&parameters.bending_rigidity, &parameters.spontaneous_curvature);
    if let Some(list) = by_composition
        && (rigidity.at_zero != rigidity.at_one || spontaneous.at_zero != spontaneous.at_one)
    {
        for (i, value) in list.iter_mut().enumerate().filter(|(i, _)| !held[*i]) {
            *value += slope(
                i,
                rigidity.by_composition(composition[i]),
                spontaneous.by_composition(composition[i]),
            );
        }
    }
    if let Some(list) = by_coverage
        && (rigidity.per_coverage != 0.0 || spontaneous.per_coverage != 0.0)
    {
        for (i, value) in list.iter_mut().enumerate().filter(|(i, _)| !held[*i]) {
            *value += slope(i, rigidity.per_coverage, spontaneous.per_coverage);
        }
    }
}
