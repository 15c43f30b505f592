//! Surface gradient of vertex fields on triangles, and surface divergence of vertex vector fields.

use crate::geometry::Geometry;
use crate::{Mesh, Vec3};
use nalgebra_sparse::{CooMatrix, CsrMatrix};

/// Surface gradient ∇f of a piecewise linear vertex field: one tangent vector per triangle.
///
/// # Shapes and units
/// `field`: one per vertex. Returns one vector per triangle, field/length. First order.
pub fn gradient(mesh: &Mesh, geometry: &Geometry, field: &[f64]) -> Vec<Vec3> {
    mesh.triangles
        .iter()
        .zip(&geometry.gradients)
        .map(|(corners, g)| {
            (0..3).fold(Vec3::zeros(), |sum, c| sum + g[c] * field[corners[c] as usize])
        })
        .collect()
}

/// The matrix of [`gradient`].
///
/// # Shapes and units
/// 3·triangles × vertices, 1/length; rows 3t, 3t + 1, 3t + 2 are x, y, z on triangle t.
pub fn gradient_matrix(mesh: &Mesh, geometry: &Geometry) -> CsrMatrix<f64> {
    let mut sum = CooMatrix::new(3 * mesh.n_triangles(), mesh.n_vertices());
    for (t, corners) in mesh.triangles.iter().enumerate() {
        for c in 0..3 {
            for axis in 0..3 {
                sum.push(3 * t + axis, corners[c] as usize, geometry.gradients[t][c][axis]);
            }
        }
    }
    CsrMatrix::from(&sum)
}

/// Integrated surface divergence B: row i of B v is ∫ ψ_i ∇·v dA for the linear basis function ψ_i, with ∇·v =
/// P:∇v of the three-dimensional vector field v, so that a normal velocity v = w n counts as 2H w.
///
/// B v is also the rate of each vertex area (one third of the triangles around) in the motion v, and the sum over
/// all rows is the rate of the total area. B v over the vertex areas is the divergence at vertices.
///
/// # Shapes and units
/// vertices × 3·vertices, length.
pub fn divergence(mesh: &Mesh, geometry: &Geometry) -> CsrMatrix<f64> {
    let n = mesh.n_vertices();
    let mut sum = CooMatrix::new(n, 3 * n);
    for (t, corners) in mesh.triangles.iter().enumerate() {
        for row in corners {
            for c in 0..3 {
                for axis in 0..3 {
                    let entry = geometry.gradients[t][c][axis] * geometry.area[t] / 3.0;
                    sum.push(*row as usize, 3 * corners[c] as usize + axis, entry);
                }
            }
        }
    }
    CsrMatrix::from(&sum)
}
