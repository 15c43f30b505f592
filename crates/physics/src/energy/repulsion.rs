//! Repulsion of membranes that face each other closely: pressure P₀ exp(−d/λ), energy per area P₀ λ exp(−d/λ).
//!
//! # Source
//! Law: Rand & Parsegian, Biochim. Biophys. Acta 988 (1989) 351. The distance d of a vertex is that to the nearest place
//! of the mesh that it faces ([`pellicle_surface::contact::facing`]); each of two facing sheets carries half of the
//! energy, on its vertex areas. Beyond [`REACH`] decay lengths the law is cut off, value and slope going to zero.

use crate::parameters::Repulsion;
use nalgebra::Matrix3;
use pellicle_surface::contact::Facing;
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Topology, Vec3};

/// Range in decay lengths: exp(−25) is 1e-11.
pub const REACH: f64 = 25.0;

/// Energy per area at a distance.
pub fn per_area(law: &Repulsion, distance: f64) -> f64 {
    let d = distance / law.decay_length;
    if d >= REACH {
        return 0.0;
    }
    law.pressure * law.decay_length * ((-d).exp() - (-REACH).exp() * (1.0 + REACH - d))
}

/// Pressure at a distance.
pub fn pressure(law: &Repulsion, distance: f64) -> f64 {
    let d = distance / law.decay_length;
    if d >= REACH { 0.0 } else { law.pressure * ((-d).exp() - (-REACH).exp()) }
}

/// Energy.
pub fn energy(law: &Repulsion, vertex_area: &[f64], contacts: &[Facing]) -> f64 {
    contacts.iter().map(|c| 0.5 * vertex_area[c.vertex as usize] * per_area(law, c.distance)).sum()
}

/// Exact gradient, added to `gradient`.
///
/// # Shapes
/// `gradient`: one entry per vertex; `contacts` must have been measured on `topology` and `geometry`.
pub fn add_gradient(
    law: &Repulsion,
    topology: &Topology,
    geometry: &Geometry,
    contacts: &[Facing],
    gradient: &mut [Vec3],
) {
    let mut on_vertex = vec![0.0; topology.n_vertices];
    for c in contacts {
        on_vertex[c.vertex as usize] = 0.5 * per_area(law, c.distance);
        // The nearest point moves along its triangle without changing the distance to first order.
        let push = c.direction * (0.5 * geometry.vertex_area[c.vertex as usize] * pressure(law, c.distance));
        gradient[c.vertex as usize] -= push;
        for (corner, share) in topology.triangles[c.triangle as usize].iter().zip(c.share) {
            gradient[*corner as usize] += push * share;
        }
    }
    if contacts.is_empty() {
        return;
    }
    for (t, corners) in topology.triangles.iter().enumerate() {
        let sum: f64 = corners.iter().map(|&v| on_vertex[v as usize]).sum();
        if sum != 0.0 {
            for c in 0..3 {
                gradient[corners[c] as usize] += geometry.gradients[t][c] * (geometry.area[t] * sum / 3.0);
            }
        }
    }
}

/// A positive block for each vertex whose sum bounds the second derivative of the energy along the gaps; empty
/// without contacts. (u − v)² ≤ 2u² + 2v²: gaps couple vertices that the matrix does not.
pub fn stiffness(law: &Repulsion, topology: &Topology, geometry: &Geometry, contacts: &[Facing]) -> Vec<Matrix3<f64>> {
    if contacts.is_empty() {
        return Vec::new();
    }
    let mut blocks = vec![Matrix3::zeros(); topology.n_vertices];
    for c in contacts {
        if c.distance >= REACH * law.decay_length {
            continue;
        }
        let second = law.pressure / law.decay_length * (-c.distance / law.decay_length).exp();
        let block = c.direction * c.direction.transpose() * (geometry.vertex_area[c.vertex as usize] * second);
        blocks[c.vertex as usize] += block;
        for (corner, share) in topology.triangles[c.triangle as usize].iter().zip(c.share) {
            blocks[*corner as usize] += block * share;
        }
    }
    blocks
}
