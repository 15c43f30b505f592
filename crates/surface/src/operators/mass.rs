//! Mass matrices M of linear elements: fᵀ M g = ∫ f g dA.

use super::assemble;
use crate::Mesh;
use crate::geometry::Geometry;
use nalgebra_sparse::{CooMatrix, CsrMatrix};

/// Lumped mass: one third of the area of the triangles around each vertex, on the diagonal.
///
/// # Shapes and units
/// vertices × vertices, area. Exact for constants; the error of ∫ f g is of second order.
pub fn lumped_mass(geometry: &Geometry) -> CsrMatrix<f64> {
    let n = geometry.vertex_area.len();
    let mut sum = CooMatrix::new(n, n);
    for (i, area) in geometry.vertex_area.iter().enumerate() {
        sum.push(i, i, *area);
    }
    CsrMatrix::from(&sum)
}

/// Consistent mass: A/6 on the diagonal, A/12 beside it, summed over triangles of area A; exact for products of
/// piecewise linear fields.
///
/// # Shapes and units
/// vertices × vertices, area.
pub fn consistent_mass(mesh: &Mesh, geometry: &Geometry) -> CsrMatrix<f64> {
    assemble(mesh, |t| {
        let (own, other) = (geometry.area[t] / 6.0, geometry.area[t] / 12.0);
        [[own, other, other], [other, own, other], [other, other, own]]
    })
}
