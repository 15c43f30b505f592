//! Where the membrane meets itself: seen on every step, at the price of looking only when it could have happened.
//!
//! Smooth sheets that come from apart touch first where they face each other. The least distance between facing parts is
//! measured; until the fastest vertex could have closed a good part of it, nothing needs to be looked at.

use super::advance::Simulation;
use super::mesh_care::CareReport;
use crate::parameters::SelfContact;
use pellicle_surface::contact::{facing, intersections};
use pellicle_surface::{Mesh, Vec3};
use serde::{Deserialize, Serialize};

/// Gaps are measured up to so many mean edges.
const SIGHT: f64 = 2.0;
/// What flat triangles leave open of a gap between resolved surfaces, in edges: twice h²c/8 with hc ≤ 1/3.
const SAG: f64 = 1.0 / 12.0;
/// Way by which a change of the mesh may shift the surface, in edges.
const CARE_SHIFT: f64 = 0.1;
/// Share of the known gap after which it is measured again.
const SPENT: f64 = 0.7;
/// Share of a gap that facing parts may close in a step; a decay length of the repulsion is always allowed.
const CLOSING: f64 = 0.3;

/// How far the surface is known to be from touching itself.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Clearance {
    /// Least gap when it was last measured.
    pub gap: f64,
    /// Way of the fastest vertex since.
    pub moved: f64,
}

impl Simulation {
    /// Length of an edge of an even mesh with as many triangles.
    fn even_edge(&self) -> f64 {
        (2.31 * self.measured.geometry.total_area / self.state.mesh.n_triangles() as f64).sqrt()
    }

    /// Where the surface passes through itself after it has moved from a mesh of the same connectivity.
    pub(super) fn passes_through_itself(&mut self, from: &Mesh) -> Option<Vec3> {
        let mesh = &self.state.mesh;
        let way = |(a, b): (&Vec3, &Vec3)| mesh.nearest_image(b - a).norm_squared();
        let moved = from.positions.iter().zip(&mesh.positions).map(way).fold(0.0, f64::max).sqrt();
        self.clearance.moved += moved;
        let closed = 2.0 * self.clearance.moved;
        if closed < SPENT * self.clearance.gap {
            return None;
        }
        if closed >= self.clearance.gap
            && let Some((one, _)) = intersections(mesh).first()
        {
            let x = mesh.corners(*one as usize);
            return Some((x[0] + x[1] + x[2]) / 3.0);
        }
        let edge = self.even_edge();
        let sight = mesh.period.map_or(SIGHT * edge, |period| (SIGHT * edge).min(0.4 * period));
        let least = facing(mesh, &self.connectivity.topology, &self.measured.geometry, sight)
            .iter()
            .map(|facing| facing.distance)
            .fold(sight, f64::min);
        self.clearance = Clearance { gap: (least - SAG * edge).max(0.0), moved: 0.0 };
        None
    }

    /// A change of the mesh shifts the surface a little.
    pub(super) fn note_care(&mut self, care: &CareReport) {
        if care.flips + care.splits + care.collapses + care.smoothed > 0 {
            self.clearance.moved += CARE_SHIFT * self.even_edge();
        }
    }

    /// Largest share of what they may close by which parts that repel each other come closer in a step.
    pub(super) fn approach(&self, velocity: &[Vec3], step: f64) -> f64 {
        let SelfContact::Repel(law) = &self.parameters.self_contact else {
            return 0.0;
        };
        let triangles = &self.state.mesh.triangles;
        self.measured
            .contacts
            .iter()
            .map(|c| {
                let other = triangles[c.triangle as usize]
                    .iter()
                    .zip(c.share)
                    .fold(Vec3::zeros(), |sum, (&v, share)| sum + velocity[v as usize] * share);
                let closing = (other - velocity[c.vertex as usize]).dot(&c.direction) * step;
                closing / law.decay_length.max(CLOSING * c.distance)
            })
            .fold(0.0, f64::max)
    }
}
