//! Rate of strain d = ½ P (∇v + ∇vᵀ) P of a surface moving with the velocity v.
//!
//! The velocity has all three components; on the flat triangle the part from normal motion on a curved surface,
//! (v·n) times the second fundamental form, is in the differences of v between corners.
//!
//! # Source
//! Scriven, Chem. Eng. Sci. 12 (1960) 98.

use crate::geometry::Geometry;
use crate::{Mesh, Vec3};
use nalgebra::Matrix3;

/// Rate of strain on a triangle with basis `gradients` and unit `normal` from its corner velocities.
///
/// # Shapes and units
/// Symmetric 3×3 with the normal in its kernel, 1/time. Its trace is the surface divergence.
#[inline]
pub fn strain_rate(gradients: &[Vec3; 3], normal: &Vec3, velocity: [Vec3; 3]) -> Matrix3<f64> {
    let mut gradient = Matrix3::zeros();
    for c in 0..3 {
        gradient += velocity[c] * gradients[c].transpose();
    }
    // The gradients are tangent already, so only the velocity needs projecting.
    let projector = Matrix3::identity() - normal * normal.transpose();
    let flat = projector * gradient;
    (flat + flat.transpose()) * 0.5
}

/// [`strain_rate`] of a vertex velocity on every triangle.
///
/// # Shapes and units
/// `velocity`: one per vertex. Returns one matrix per triangle, 1/time.
pub fn strain_rates(mesh: &Mesh, geometry: &Geometry, velocity: &[Vec3]) -> Vec<Matrix3<f64>> {
    mesh.triangles
        .iter()
        .enumerate()
        .map(|(t, corners)| {
            let at_corners = corners.map(|v| velocity[v as usize]);
            strain_rate(&geometry.gradients[t], &geometry.normal[t], at_corners)
        })
        .collect()
}
