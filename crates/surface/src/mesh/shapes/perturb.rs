//! Smooth displacements of a mesh: seeded random ones, and a single mode of a tube.

use super::surface::wrap;
use crate::geometry::Geometry;
use crate::{Mesh, MeshError, Vec3};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use std::f64::consts::TAU;

/// Number of axial modes in the perturbation of a tube.
const AXIAL_MODES: usize = 4;

/// Displace vertices along their normals by a smooth random function whose largest value is `amplitude`.
///
/// Closed surfaces get spherical harmonics of degree 2 to 4 about the centroid (no change of size or place to first
/// order on a sphere); periodic tubes the first four axial modes with random phases; open surfaces long waves that
/// fade out towards the rim, which stays where it is, slope included.
///
/// # Shapes and units
/// `amplitude`: length, ≥ 0; the same `seed` gives the same displacement.
/// # Errors
/// [`MeshError::Impossible`] for an amplitude that is negative or not finite; those of [`crate::Topology::new`].
pub fn perturb(mesh: &mut Mesh, amplitude: f64, seed: u64) -> Result<(), MeshError> {
    if !(amplitude >= 0.0 && amplitude.is_finite()) {
        return Err(MeshError::Impossible {
            quantity: "amplitude",
            value: amplitude,
            mend: "give a finite length of at least 0".into(),
        });
    }
    let topology = crate::Topology::new(mesh.n_vertices(), &mesh.triangles)?;
    let geometry = Geometry::new(mesh);
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    let mut height = match mesh.period {
        Some(period) => axial(mesh, period, &mut random),
        None if topology.is_closed() => harmonics(mesh, &mut random),
        None => waves(mesh, &topology.on_rim, &mut random),
    };
    let largest = height.iter().fold(0.0f64, |most, h| most.max(h.abs()));
    if largest > 0.0 {
        height.iter_mut().for_each(|h| *h *= amplitude / largest);
    }
    for (vertex, h) in height.into_iter().enumerate() {
        let place = &mut mesh.positions[vertex];
        *place += geometry.vertex_normal[vertex] * h;
        if let Some(period) = mesh.period {
            place.z = wrap(place.z, period);
        }
    }
    Ok(())
}

/// Σ aₙ cos(2πn z/L + phase), n = 1 … 4.
fn axial(mesh: &Mesh, period: f64, random: &mut ChaCha8Rng) -> Vec<f64> {
    let modes: Vec<(f64, f64)> = (0..AXIAL_MODES)
        .map(|_| {
            (
                random.random_range(-1.0..1.0),
                random.random_range(0.0..TAU),
            )
        })
        .collect();
    let wave = |z: f64| {
        modes
            .iter()
            .zip(1..)
            .map(|((size, phase), n)| size * (TAU * f64::from(n) * z / period + phase).cos())
            .sum()
    };
    mesh.positions.iter().map(|p| wave(p.z)).collect()
}

/// Σ a P_l(d·x̂) over random directions d, l = 2, 3, 4: zonal harmonics about random axes span all of them.
fn harmonics(mesh: &Mesh, random: &mut ChaCha8Rng) -> Vec<f64> {
    let centre = mesh.positions.iter().sum::<Vec3>() / mesh.n_vertices() as f64;
    let mut terms = Vec::new();
    for degree in 2..=4 {
        for _ in 0..=degree {
            let z = random.random_range(-1.0..=1.0f64);
            let (sine, cosine) = random.random_range(0.0..TAU).sin_cos();
            let wide = (1.0 - z * z).sqrt();
            let axis = Vec3::new(wide * cosine, wide * sine, z);
            terms.push((degree, axis, random.random_range(-1.0..1.0)));
        }
    }
    mesh.positions
        .iter()
        .map(|p| {
            let direction = (p - centre).try_normalize(0.0).unwrap_or_default();
            terms
                .iter()
                .map(|(degree, axis, size)| size * legendre(*degree, direction.dot(axis)))
                .sum()
        })
        .collect()
}

/// Legendre polynomial of degree 2, 3 or 4.
fn legendre(degree: u32, x: f64) -> f64 {
    match degree {
        2 => 0.5 * (3.0 * x * x - 1.0),
        3 => 0.5 * x * (5.0 * x * x - 3.0),
        _ => 0.125 * (x * x * (35.0 * x * x - 30.0) + 3.0),
    }
}

/// Plane waves no shorter than the size of the patch, times (1 − e^(−d²/δ²)) with d the distance from the rim.
fn waves(mesh: &Mesh, on_rim: &[bool], random: &mut ChaCha8Rng) -> Vec<f64> {
    let rim: Vec<Vec3> = (0..mesh.n_vertices())
        .filter(|&v| on_rim[v])
        .map(|v| mesh.positions[v])
        .collect();
    let centre = rim.iter().sum::<Vec3>() / rim.len().max(1) as f64;
    let size = mesh
        .positions
        .iter()
        .fold(0.0f64, |most, p| most.max((p - centre).norm()));
    let terms: Vec<(Vec3, f64, f64)> = (0..6)
        .map(|_| {
            let wave = Vec3::from_fn(|_, _| random.random_range(-1.0..1.0)) * (0.5 * TAU / size);
            (
                wave,
                random.random_range(0.0..TAU),
                random.random_range(-1.0..1.0),
            )
        })
        .collect();
    mesh.positions
        .iter()
        .zip(on_rim)
        .map(|(p, &fixed)| {
            if fixed {
                return 0.0;
            }
            let nearest = rim
                .iter()
                .fold(f64::INFINITY, |least, q| least.min((p - q).norm_squared()));
            let fade = 1.0 - (-nearest / (0.5 * size).powi(2)).exp();
            let sum: f64 = terms
                .iter()
                .map(|(wave, phase, size)| size * (wave.dot(&(p - centre)) + phase).cos())
                .sum();
            fade * sum
        })
        .collect()
}

/// Give a periodic tube about z the shape r = R(1 + a cos(2πn z/L)); the enclosed volume is not corrected.
///
/// # Shapes and units
/// `relative_amplitude` a: dimensionless, |a| < 1; `mode_count` n: number of waves along the period.
/// # Errors
/// [`MeshError::Impossible`] when the mesh has no period or |a| ≥ 1.
pub fn displace_mode_tube(
    mesh: &mut Mesh,
    relative_amplitude: f64,
    mode_count: u32,
) -> Result<(), MeshError> {
    let Some(period) = mesh.period else {
        return Err(MeshError::Impossible {
            quantity: "number of waves",
            value: f64::from(mode_count),
            mend: "the mesh is not a periodic tube (it has no period along z)".into(),
        });
    };
    if relative_amplitude.is_nan() || relative_amplitude.abs() >= 1.0 {
        return Err(MeshError::Impossible {
            quantity: "relative amplitude",
            value: relative_amplitude,
            mend: "the tube would pinch off: give a value between −1 and 1".into(),
        });
    }
    for p in &mut mesh.positions {
        let factor = 1.0 + relative_amplitude * (TAU * f64::from(mode_count) * p.z / period).cos();
        p.x *= factor;
        p.y *= factor;
    }
    Ok(())
}
