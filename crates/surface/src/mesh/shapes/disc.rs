//! Flat discs with one rim.

use super::relax::{Relaxation, Rule};
use super::rings::Profile;
use super::surface::Plane;
use super::{affordable, finished, positive};
use crate::{Mesh, MeshError, Vec3};
use std::f64::consts::PI;

/// Flat disc z = 0 about the origin, normal +z, with edges near `edge`. The rim vertices come first, evenly spaced on
/// the circle of `radius`.
///
/// # Errors
/// [`MeshError::Impossible`] for values that are not positive or an edge too long for the disc.
pub fn disc(radius: f64, edge: f64) -> Result<Mesh, MeshError> {
    let edge = positive("edge length", edge)?;
    disc_graded(radius, &|_| edge)
}

/// Flat disc whose edges follow a given function of the distance from its centre; see [`disc`].
///
/// The function should change by no more than about a third of the distance covered, or triangles between fine and
/// coarse parts get obtuse.
///
/// # Errors
/// [`MeshError::Impossible`] also where `edge_of_r` is not positive or the mesh would get too many vertices.
pub fn disc_graded(radius: f64, edge_of_r: &dyn Fn(f64) -> f64) -> Result<Mesh, MeshError> {
    let radius = positive("radius", radius)?;
    const SEGMENTS: usize = 4000;
    let mut points = Vec::with_capacity(SEGMENTS + 1);
    let mut vertices = 0.0;
    for i in 0..=SEGMENTS {
        let r = radius * (SEGMENTS - i) as f64 / SEGMENTS as f64;
        let edge = positive("edge length", edge_of_r(r))?;
        vertices += 2.0 * PI * r * radius / SEGMENTS as f64 / (edge * edge);
        points.push([r, 0.0]);
    }
    // The edge of a uniform disc with as many vertices.
    let typical = (PI * radius * radius / vertices).sqrt();
    affordable(typical, PI * radius * radius)?;
    let profile = Profile {
        points,
        closed: false,
        section: [1.0, 1.0],
        edge_length: &|rho, _| edge_of_r(rho),
    };
    let mut mesh = profile.mesh()?;
    let fixed: Vec<bool> = mesh
        .positions
        .iter()
        .map(|p| p.norm() > radius * (1.0 - 1e-9))
        .collect();
    let relaxation = Relaxation {
        surface: &Plane,
        fixed: &fixed,
        edge_length: Some(&|p: &Vec3| edge_of_r(p.norm())),
        flip: true,
    };
    relaxation.run(&mut mesh, Rule::Circumcentres, 60)?;
    finished(mesh, &Plane, 1, typical)
}
