//! Tubes: periodic ones, and ones closed by half-spheres.

use super::relax::settle;
use super::rings::Profile;
use super::surface::{CappedCylinder, PeriodicCylinder};
use super::{affordable, finished, positive};
use crate::{Mesh, MeshError, Vec3};
use std::f64::consts::{FRAC_PI_2, TAU};

/// Cylinder about z that closes on itself after `length`: staggered rings of vertices, z in [0, `length`), with the
/// mesh's period set.
///
/// Vertices lie on the cylinder, so the mesh has a little less area and volume than it.
///
/// # Shapes and units
/// `radius`, `length`, `edge`: lengths. The rings are a whole number of vertices and an even number of rings, so the
/// edges come near `edge`, not exactly there.
/// # Errors
/// [`MeshError::Impossible`] for values that are not positive or an edge too long for six vertices round the tube or
/// four rings along it.
pub fn tube(radius: f64, length: f64, edge: f64) -> Result<Mesh, MeshError> {
    let radius = positive("radius", radius)?;
    let length = positive("length", length)?;
    let edge = positive("edge length", edge)?;
    affordable(edge, TAU * radius * length)?;
    let count = (TAU * radius / edge).round() as usize;
    let rings = 2 * (length / (2.0 * 0.75f64.sqrt() * edge)).round() as usize;
    if count < 6 || rings < 4 {
        return Err(MeshError::Impossible {
            quantity: "edge length",
            value: edge,
            mend: format!(
                "a tube of radius {radius} and length {length} would get {count} vertices round and {rings} rings; use an edge below {:.3e}",
                (TAU * radius / 6.0).min(length / (4.0 * 0.75f64.sqrt()))
            ),
        });
    }
    let mut positions = Vec::with_capacity(rings * count);
    let mut triangles = Vec::with_capacity(2 * rings * count);
    for ring in 0..rings {
        for i in 0..count {
            let place = i as f64 + 0.5 * (ring % 2) as f64;
            let (sine, cosine) = (TAU * place / count as f64).sin_cos();
            positions.push(Vec3::new(
                radius * cosine,
                radius * sine,
                length * ring as f64 / rings as f64,
            ));
            // Odd rings lie half a step ahead of even ones.
            let vertex = |ring: usize, i: usize| ((ring % rings) * count + i % count) as u32;
            let ahead = ring % 2;
            triangles.push([
                vertex(ring, i),
                vertex(ring, i + 1),
                vertex(ring + 1, i + ahead),
            ]);
            triangles.push([
                vertex(ring, i + 1),
                vertex(ring + 1, i + 1 + ahead),
                vertex(ring + 1, i + ahead),
            ]);
        }
    }
    let mut mesh = Mesh::new(positions, triangles);
    mesh.period = Some(length);
    let surface = PeriodicCylinder {
        radius,
        period: length,
    };
    finished(mesh, &surface, 0, edge)
}

/// Cylinder about z of the given `radius`, `length` long between the half-spheres that close it (2·`radius` longer
/// over all); `length` 0 is a sphere.
///
/// # Errors
/// [`MeshError::Impossible`] for values that are not positive or an edge too long for the tube.
pub fn capped_tube(radius: f64, length: f64, edge: f64) -> Result<Mesh, MeshError> {
    let radius = positive("radius", radius)?;
    if length != 0.0 {
        positive("length", length)?;
    }
    let edge = positive("edge length", edge)?;
    affordable(edge, TAU * radius * (length + 2.0 * radius))?;
    const SEGMENTS: usize = 2000;
    let half_length = 0.5 * length;
    let arc = |angle: f64, centre: f64| [radius * angle.cos(), centre + radius * angle.sin()];
    let mut points = vec![[0.0, -half_length - radius]];
    for i in 1..=SEGMENTS {
        let angle = -FRAC_PI_2 * (1.0 - i as f64 / SEGMENTS as f64);
        points.push(arc(angle, -half_length));
    }
    for i in 0..SEGMENTS {
        points.push(arc(FRAC_PI_2 * i as f64 / SEGMENTS as f64, half_length));
    }
    points.push([0.0, half_length + radius]);
    let profile = Profile {
        points,
        closed: false,
        section: [1.0, 1.0],
        edge_length: &|_, _| edge,
    };
    let mut mesh = profile.mesh()?;
    let surface = CappedCylinder {
        radius,
        half_length,
    };
    settle(&mut mesh, &surface)?;
    finished(mesh, &surface, 2, edge)
}
