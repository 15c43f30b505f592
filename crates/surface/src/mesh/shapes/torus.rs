//! Ring tori.

use super::relax::settle;
use super::rings::Profile;
use super::surface::Torus;
use super::{affordable, finished, positive};
use crate::{Mesh, MeshError};
use std::f64::consts::{PI, TAU};

/// Ring torus about z: a tube of radius `minor` whose centre line is a circle of radius `major`, with edges near
/// `edge` on the inner side as well as on the outer.
///
/// # Errors
/// [`MeshError::Impossible`] unless 0 < `minor` < `major`, or for an edge too long for the tube or the hole.
pub fn torus(major: f64, minor: f64, edge: f64) -> Result<Mesh, MeshError> {
    check_radii(major, minor)?;
    let edge = positive("edge length", edge)?;
    affordable(edge, TAU * TAU * major * minor)?;
    const SEGMENTS: usize = 4000;
    let profile = Profile {
        points: (0..SEGMENTS)
            .map(|i| {
                let (sine, cosine) = (TAU * i as f64 / SEGMENTS as f64 - PI).sin_cos();
                [major + minor * cosine, minor * sine]
            })
            .collect(),
        closed: true,
        section: [1.0, 1.0],
        edge_length: &|_, _| edge,
    };
    let mut mesh = profile.mesh()?;
    let surface = Torus { major, minor };
    settle(&mut mesh, &surface)?;
    finished(mesh, &surface, 0, edge)
}

/// Refuse radii that make no ring torus.
pub(super) fn check_radii(major: f64, minor: f64) -> Result<(), MeshError> {
    positive("major radius", major)?;
    positive("minor radius", minor)?;
    if minor < major {
        return Ok(());
    }
    Err(MeshError::Impossible {
        quantity: "minor radius",
        value: minor,
        mend: format!("a ring torus needs it below the major radius {major}"),
    })
}
