//! Quality of triangles.

use crate::{Mesh, Vec3};

/// Twice the inradius over the circumradius of each triangle: 1 for equilateral ones, 0 for degenerate ones.
///
/// Dimensionless; one value per triangle. In sides a, b, c and area A: 16 A² / (a b c (a + b + c)), from
/// r = 2A/(a + b + c) and R = abc/4A.
pub fn quality(mesh: &Mesh) -> Vec<f64> {
    (0..mesh.n_triangles())
        .map(|t| triangle_quality(&mesh.corners(t)))
        .collect()
}

/// Quality of one triangle.
pub(super) fn triangle_quality(x: &[Vec3; 3]) -> f64 {
    let (ab, ac) = (x[1] - x[0], x[2] - x[0]);
    let (a, b, c) = ((x[2] - x[1]).norm(), ac.norm(), ab.norm());
    let below = a * b * c * (a + b + c);
    if below > 0.0 {
        4.0 * ab.cross(&ac).norm_squared() / below
    } else {
        0.0
    }
}
