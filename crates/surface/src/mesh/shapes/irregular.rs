//! Irregular meshes: random points, a few smoothing steps, Delaunay triangles. For tests of what regular meshes
//! flatter.

use super::relax::{Relaxation, Rule};
use super::surface::{Ellipsoid, PeriodicCylinder, Surface, Torus};
use super::{delaunay, finished, positive};
use crate::{Mesh, MeshError, Vec3};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use std::f64::consts::{PI, TAU};

/// Smoothing steps after which valences still scatter (about 26 % five, 21 % seven) but no triangle is a sliver.
const STEPS: usize = 8;

/// Irregular mesh of the unit sphere about the origin.
///
/// # Shapes and units
/// `n_vertices`: exactly so many; the same `seed` gives the same mesh.
/// # Errors
/// [`MeshError::Impossible`] for too few vertices.
pub fn irregular_sphere(n_vertices: usize, seed: u64) -> Result<Mesh, MeshError> {
    irregular_ellipsoid([1.0; 3], n_vertices, seed)
}

/// Irregular mesh of the ellipsoid with semi-axes `axes`, points spread evenly over its area; see
/// [`irregular_sphere`].
///
/// # Errors
/// [`MeshError::Impossible`] for axes that are not positive or too few vertices for the most curved end.
pub fn irregular_ellipsoid(
    axes: [f64; 3],
    n_vertices: usize,
    seed: u64,
) -> Result<Mesh, MeshError> {
    for axis in axes {
        positive("semi-axis", axis)?;
    }
    enough(n_vertices, 20)?;
    let axes = Vec3::from(axes);
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    let shortest = axes.min();
    let mut directions = Vec::with_capacity(n_vertices);
    while directions.len() < n_vertices {
        let z = random.random_range(-1.0..=1.0f64);
        let (sine, cosine) = random.random_range(0.0..TAU).sin_cos();
        let wide = (1.0 - z * z).sqrt();
        let direction = Vec3::new(wide * cosine, wide * sine, z);
        // The map from the sphere stretches areas by abc·|n/axes|, at most abc/shortest.
        let stretch = shortest * direction.component_div(&axes).norm();
        if random.random::<f64>() < stretch {
            directions.push(direction);
        }
    }
    let triangles = delaunay::spherical(&directions)?;
    let positions = directions.iter().map(|d| d.component_mul(&axes)).collect();
    smoothed(Mesh::new(positions, triangles), &Ellipsoid { axes }, 2)
}

/// Irregular mesh of the ring torus about z; see [`irregular_sphere`].
///
/// # Errors
/// [`MeshError::Impossible`] unless 0 < `minor` < `major` with enough vertices to go round the tube.
pub fn irregular_torus(
    major: f64,
    minor: f64,
    n_vertices: usize,
    seed: u64,
) -> Result<Mesh, MeshError> {
    super::torus::check_radii(major, minor)?;
    enough(n_vertices, 20)?;
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    // Conformal coordinates: w = ∫ minor dv/(major + minor cos v) has the period 2π/√(c²−1), c = major/minor, so
    // Delaunay triangles of the plane are nearly those of the surface.
    let ratio = major / minor;
    let stretch = ((ratio - 1.0) / (ratio + 1.0)).sqrt();
    let height = TAU / (ratio * ratio - 1.0).sqrt();
    let (mut flat, mut positions) = (Vec::new(), Vec::new());
    while positions.len() < n_vertices {
        let (u, v) = (random.random_range(0.0..TAU), random.random_range(-PI..PI));
        let rho = major + minor * v.cos();
        if random.random_range(0.0..major + minor) < rho {
            let w = height / PI * (stretch * (0.5 * v).tan()).atan();
            flat.push([u, w]);
            positions.push(Vec3::new(rho * u.cos(), rho * u.sin(), minor * v.sin()));
        }
    }
    let triangles = delaunay::periodic(&flat, TAU, height)?;
    smoothed(Mesh::new(positions, triangles), &Torus { major, minor }, 0)
}

/// Irregular mesh of the periodic tube about z; see [`irregular_sphere`] and [`super::tube`].
///
/// # Errors
/// [`MeshError::Impossible`] for lengths that are not positive or too few vertices to go round and along.
pub fn irregular_tube(
    radius: f64,
    length: f64,
    n_vertices: usize,
    seed: u64,
) -> Result<Mesh, MeshError> {
    let radius = positive("radius", radius)?;
    let period = positive("length", length)?;
    enough(n_vertices, 20)?;
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    let width = TAU * radius;
    let flat: Vec<[f64; 2]> = (0..n_vertices)
        .map(|_| {
            [
                random.random_range(0.0..width),
                random.random_range(0.0..period),
            ]
        })
        .collect();
    let triangles = delaunay::periodic(&flat, width, period)?;
    let positions = flat
        .iter()
        .map(|[s, z]| {
            let (sine, cosine) = (s / radius).sin_cos();
            Vec3::new(radius * cosine, radius * sine, *z)
        })
        .collect();
    let mut mesh = Mesh::new(positions, triangles);
    mesh.period = Some(period);
    smoothed(mesh, &PeriodicCylinder { radius, period }, 0)
}

fn enough(n_vertices: usize, least: usize) -> Result<(), MeshError> {
    if n_vertices >= least && n_vertices as f64 <= super::MAX_VERTICES {
        return Ok(());
    }
    Err(MeshError::Impossible {
        quantity: "number of vertices",
        value: n_vertices as f64,
        mend: format!("give between {least} and {:.0e}", super::MAX_VERTICES),
    })
}

fn smoothed(mut mesh: Mesh, surface: &dyn Surface, characteristic: i64) -> Result<Mesh, MeshError> {
    let relaxation = Relaxation {
        surface,
        fixed: &[],
        edge_length: None,
        flip: true,
    };
    relaxation
        .run(&mut mesh, Rule::Centroids, STEPS)
        .map_err(|error| MeshError::Impossible {
            quantity: "number of vertices",
            value: mesh.n_vertices() as f64,
            mend: format!("they are too few to cover the shape ({error}); give more"),
        })?;
    let edge = mesh.mean_edge_length();
    finished(mesh, surface, characteristic, edge)
}
