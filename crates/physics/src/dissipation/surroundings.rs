//! Drag of what surrounds the membrane.
//!
//! The step sees it through one small interface, [`Surroundings`]: the traction for a given velocity and a sparse
//! surrogate of it for the matrix. Local friction −ξ v is both. A solvent with long-ranged flow would give the
//! traction of its own solve and keep a local surrogate.

use pellicle_surface::Vec3;
use pellicle_surface::geometry::Geometry;

/// The surroundings as the step sees them.
pub trait Surroundings: Send + Sync {
    /// Weight of v at each vertex in the sparse surrogate: a friction coefficient times area.
    fn surrogate(&self, geometry: &Geometry) -> Vec<f64>;
    /// Rate of dissipation at a velocity.
    fn dissipation(&self, geometry: &Geometry, velocity: &[Vec3]) -> f64;
}

/// Local friction ½ ξ |v|² per area.
#[derive(Clone, Copy, Debug)]
pub struct Friction {
    /// ξ [energy·time/length⁴].
    pub coefficient: f64,
}

impl Surroundings for Friction {
    fn surrogate(&self, geometry: &Geometry) -> Vec<f64> {
        geometry.vertex_area.iter().map(|a| a * self.coefficient).collect()
    }

    fn dissipation(&self, geometry: &Geometry, velocity: &[Vec3]) -> f64 {
        geometry
            .vertex_area
            .iter()
            .zip(velocity)
            .map(|(a, v)| a * self.coefficient * v.norm_squared())
            .sum()
    }
}
