//! Lipid exchange between the corners of a triangle in proportion to their difference in tension.
//!
//! Equal-order velocity and tension need a stabilisation; written as a flux α A_T/(36 ζ) (λ_j − λ_i) along each side
//! it conserves lipid, has non-negative weights on every triangle and vanishes at second order. Without it tension
//! is wrong by 100 % on irregular meshes.
//!
//! # Source
//! Dohrmann & Bochev, Int. J. Numer. Meth. Fluids 46 (2004) 183, in edge form.

use pellicle_surface::Mesh;
use pellicle_surface::geometry::Geometry;

/// α: measured best between 0.3 and 3 for velocity and tension together.
pub const WEIGHT: f64 = 1.0;

/// Exchange coefficient of each side of a triangle.
#[inline]
pub fn side_coefficient(area: f64, viscosity: f64) -> f64 {
    WEIGHT * area / (36.0 * viscosity)
}

/// Lipid and carried amounts after exchange during `step`: m_i += dt Σ s (λ_j − λ_i)·(−1), with S as in the step.
///
/// Lipid flows towards higher tension (where it is stretched). Carried amounts move with the flux at the mean of
/// both ends' concentrations.
pub fn exchange(
    mesh: &Mesh,
    geometry: &Geometry,
    viscosity: &[f64],
    tension: &[f64],
    step: f64,
    lipid: &mut [f64],
    carried: &mut [&mut Vec<f64>],
) {
    let concentration: Vec<Vec<f64>> = carried
        .iter()
        .map(|amount| amount.iter().zip(lipid.iter()).map(|(n, m)| n / m).collect())
        .collect();
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let zeta = corners.iter().map(|&v| viscosity[v as usize]).sum::<f64>() / 3.0;
        let coefficient = step * side_coefficient(geometry.area[t], zeta);
        for c in 0..3 {
            let (i, j) = (corners[c] as usize, corners[(c + 1) % 3] as usize);
            let into_i = coefficient * (tension[i] - tension[j]);
            lipid[i] += into_i;
            lipid[j] -= into_i;
            for (amount, values) in carried.iter_mut().zip(&concentration) {
                if values.is_empty() {
                    continue;
                }
                let moved = into_i * 0.5 * (values[i] + values[j]);
                amount[i] += moved;
                amount[j] -= moved;
            }
        }
    }
}
