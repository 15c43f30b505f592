//! The Laplace–Beltrami operator in cotangent form.
//!
//! # Source
//! Dziuk, in: Partial Differential Equations and Calculus of Variations (1988) 142; cotangents: Duffin, J. Math.
//! Mech. 8 (1959) 793.

use super::assemble;
use crate::Mesh;
use crate::geometry::Geometry;
use nalgebra_sparse::CsrMatrix;

/// Stiffness matrix K, fᵀ K g = ∫ ∇f·∇g dA: K_ij = −½(cot α + cot β) for an edge with opposite angles α, β.
///
/// # Shapes and units
/// vertices × vertices, dimensionless; symmetric, positive semidefinite, constants in its kernel.
pub fn stiffness(mesh: &Mesh, geometry: &Geometry) -> CsrMatrix<f64> {
    assemble(mesh, |t| {
        let g = &geometry.gradients[t];
        [0, 1, 2].map(|a| [0, 1, 2].map(|b| geometry.area[t] * g[a].dot(&g[b])))
    })
}

/// Laplace–Beltrami operator −M⁻¹K with the lumped mass M: values of Δf at vertices.
///
/// On rims this is the weak operator with no flux through the rim. Pointwise values do not converge on irregular
/// meshes; integrals against smooth functions do, at second order.
///
/// # Shapes and units
/// vertices × vertices, 1/length².
pub fn laplace_beltrami(mesh: &Mesh, geometry: &Geometry) -> CsrMatrix<f64> {
    assemble(mesh, |t| {
        let g = &geometry.gradients[t];
        [0, 1, 2].map(|a| {
            let weight = -geometry.area[t] / geometry.vertex_area[mesh.triangles[t][a] as usize];
            [0, 1, 2].map(|b| weight * g[a].dot(&g[b]))
        })
    })
}
