//! Ellipsoids of given axes, and spheroids of given area and reduced volume.

use super::relax::settle;
use super::rings::Profile;
use super::sphere::sphere;
use super::surface::Ellipsoid;
use super::{affordable, finished, positive};
use crate::{Mesh, MeshError, Vec3};
use std::f64::consts::PI;

/// Ellipsoid x²/a² + y²/b² + z²/c² = 1 with edges near `edge` everywhere.
///
/// # Shapes and units
/// `axes`: the semi-axes [a, b, c]; `edge`: lengths in the same unit.
/// # Errors
/// [`MeshError::Impossible`] for values that are not positive or an edge too long for the most curved end.
pub fn ellipsoid(axes: [f64; 3], edge: f64) -> Result<Mesh, MeshError> {
    for axis in axes {
        positive("semi-axis", axis)?;
    }
    let edge = positive("edge length", edge)?;
    let (least, most) = (
        axes[0].min(axes[1]).min(axes[2]),
        axes[0].max(axes[1]).max(axes[2]),
    );
    if most - least <= 1e-6 * most {
        return sphere(axes[0], edge);
    }
    let axes = Vec3::from(axes);
    // Thomsen's approximation of the area, good to about one per cent (common practice, no source).
    let power = 1.6075;
    let [ab, bc, ca] = [0, 1, 2].map(|k| (axes[k] * axes[(k + 1) % 3]).powf(power));
    affordable(edge, 4.0 * PI * ((ab + bc + ca) / 3.0).powf(1.0 / power))?;
    // Rings round the axis that leaves the other two most alike (the longest of equals), along which a cyclic
    // exchange of coordinates (x, y, z) → (a third, the other two) keeps the orientation.
    let along = (0..3)
        .min_by(|&i, &j| {
            let of = |k: usize| (axes[(k + 1) % 3] / axes[(k + 2) % 3]).ln().abs();
            (of(i) - 1e-9 * axes[i]).total_cmp(&(of(j) - 1e-9 * axes[j]))
        })
        .unwrap_or(2);
    let (first, second) = ((along + 1) % 3, (along + 2) % 3);
    const SEGMENTS: usize = 4000;
    let profile = Profile {
        points: (0..=SEGMENTS)
            .map(|i| {
                let angle = PI * i as f64 / SEGMENTS as f64;
                let rho = if i % SEGMENTS == 0 { 0.0 } else { angle.sin() };
                [rho, -axes[along] * angle.cos()]
            })
            .collect(),
        closed: false,
        section: [axes[first], axes[second]],
        edge_length: &|_, _| edge,
    };
    let mut mesh = profile.mesh()?;
    for p in &mut mesh.positions {
        let mut turned = Vec3::zeros();
        turned[first] = p.x;
        turned[second] = p.y;
        turned[along] = p.z;
        *p = turned;
    }
    let surface = Ellipsoid { axes };
    settle(&mut mesh, &surface)?;
    finished(mesh, &surface, 2, edge)
}

/// Prolate spheroid about z of area 4π·`area_radius`² and the given reduced volume 3V/(4π·`area_radius`³).
///
/// Area and volume are those of the smooth spheroid; the mesh comes below both by O(`edge`²).
///
/// # Shapes and units
/// `area_radius`, `edge`: lengths; `reduced_volume`: dimensionless, in (0, 1].
/// # Errors
/// [`MeshError::Impossible`] as for [`ellipsoid`], or for a reduced volume outside (0, 1].
pub fn prolate(area_radius: f64, reduced_volume: f64, edge: f64) -> Result<Mesh, MeshError> {
    ellipsoid(spheroid_axes(area_radius, reduced_volume, true)?, edge)
}

/// Oblate spheroid about z of area 4π·`area_radius`² and the given reduced volume; see [`prolate`].
///
/// # Errors
/// As [`prolate`].
pub fn oblate(area_radius: f64, reduced_volume: f64, edge: f64) -> Result<Mesh, MeshError> {
    ellipsoid(spheroid_axes(area_radius, reduced_volume, false)?, edge)
}

/// Semi-axes [a, a, c] of the spheroid with the given area and reduced volume.
fn spheroid_axes(
    area_radius: f64,
    reduced_volume: f64,
    prolate: bool,
) -> Result<[f64; 3], MeshError> {
    let area_radius = positive("area radius", area_radius)?;
    let reduced_volume = positive("reduced volume", reduced_volume)?;
    if reduced_volume > 1.0 {
        return Err(MeshError::Impossible {
            quantity: "reduced volume",
            value: reduced_volume,
            mend: "no surface holds more than a sphere of the same area: give at most 1".into(),
        });
    }
    let reduced = |log_ratio: f64| {
        let ratio = log_ratio.exp();
        ratio / (spheroid_area(1.0, ratio) / (4.0 * PI)).powf(1.5)
    };
    // The reduced volume falls from 1 at the sphere to 0; halve down to the last digit of ln(c/a). Beyond e¹⁵ the
    // eccentricity rounds to 1, and no mesh would do anyway.
    let (mut near, mut far) = (0.0, if prolate { 15.0 } else { -15.0 });
    for _ in 0..200 {
        let middle = 0.5 * (near + far);
        if reduced(middle) > reduced_volume {
            near = middle;
        } else {
            far = middle;
        }
    }
    let ratio = (0.5 * (near + far)).exp();
    let a = area_radius / (spheroid_area(1.0, ratio) / (4.0 * PI)).sqrt();
    Ok([a, a, ratio * a])
}

/// Area of the spheroid with semi-axes a, a, c.
fn spheroid_area(a: f64, c: f64) -> f64 {
    // With e² = |1 − (short/long)²|; both formulas are textbook, the series covers their 0/0 at the sphere.
    let square = 1.0 - (a.min(c) / a.max(c)).powi(2);
    let e = square.sqrt();
    if e < 1e-4 {
        let loss = if c > a { 2.0 / 3.0 } else { 1.0 / 3.0 };
        return 4.0 * PI * a.max(c).powi(2) * (1.0 - loss * square);
    }
    if c > a {
        2.0 * PI * a * a * (1.0 + c / (a * e) * e.asin())
    } else {
        2.0 * PI * a * a * (1.0 + (1.0 - square) / e * e.atanh())
    }
}
