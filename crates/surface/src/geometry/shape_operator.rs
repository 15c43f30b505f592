//! Shape operator (second fundamental form) at vertices from the gradient of the vertex normals.

use super::Geometry;
use crate::{Mesh, Vec3};
use nalgebra::Matrix3;

/// Area-weighted mean of the surface gradient of the vertex normal, symmetrised: S with II(t, t) = tᵀ S t,
/// positive for convex surfaces with outward normals.
///
/// # Shapes and units
/// One 3×3 matrix per vertex, 1/length.
pub fn shape_operators(mesh: &Mesh, geometry: &Geometry) -> Vec<Matrix3<f64>> {
    let mut operators = vec![Matrix3::zeros(); mesh.n_vertices()];
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let mut gradient = Matrix3::zeros();
        for c in 0..3 {
            gradient += geometry.vertex_normal[corners[c] as usize]
                * geometry.gradients[t][c].transpose();
        }
        let share = (gradient + gradient.transpose()) * (geometry.area[t] / 6.0);
        for &v in corners {
            operators[v as usize] += share;
        }
    }
    for (operator, area) in operators.iter_mut().zip(&geometry.vertex_area) {
        *operator /= *area;
    }
    operators
}

/// Normal curvature II(t, t) of the surface along a tangent vector.
#[inline]
pub fn second_form(operator: &Matrix3<f64>, tangent: &Vec3) -> f64 {
    tangent.dot(&(operator * tangent))
}
