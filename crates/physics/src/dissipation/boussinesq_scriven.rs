//! In-plane shear viscosity of a curved fluid film, ½ vᵀKv = ∫ ζ d:d with stress 2ζ d.
//!
//! On a triangle with basis gradients g_a and projector P = I − n nᵀ the block of corners (a, b) is
//! K_ab = ζ A [(g_a·g_b) P + g_b g_aᵀ]; the facets supply the coupling of normal motion to curvature by themselves
//! and rigid motions lie in the kernel. Where lipid enters, the trace part ζ A g_a g_bᵀ is subtracted, so that
//! dilation costs nothing.
//!
//! # Source
//! Scriven, Chem. Eng. Sci. 12 (1960) 98; for linear triangles the derivation is elementary.

use nalgebra::Matrix3;
use pellicle_surface::operators::strain_rate;
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Mesh, Vec3};

/// Block (a, b) of a triangle's viscous matrix.
#[inline]
pub fn block(
    gradients: &[Vec3; 3],
    projector: &Matrix3<f64>,
    weight: f64,
    a: usize,
    b: usize,
    deviatoric: bool,
) -> Matrix3<f64> {
    let (ga, gb) = (&gradients[a], &gradients[b]);
    let mut block = projector * ga.dot(gb) + gb * ga.transpose();
    if deviatoric {
        block -= ga * gb.transpose();
    }
    block * weight
}

/// Dissipation 2ζ d:d per area of each triangle (deviatoric d where asked).
pub fn density(
    mesh: &Mesh,
    geometry: &Geometry,
    viscosity: &[f64],
    velocity: &[Vec3],
    deviatoric: bool,
) -> Vec<f64> {
    mesh.triangles
        .iter()
        .enumerate()
        .map(|(t, corners)| {
            let zeta = corners.iter().map(|&v| viscosity[v as usize]).sum::<f64>() / 3.0;
            let d = strain_rate(
                &geometry.gradients[t],
                &geometry.normal[t],
                corners.map(|v| velocity[v as usize]),
            );
            let trace = if deviatoric { d.trace() } else { 0.0 };
            2.0 * zeta * (d.norm_squared() - 0.5 * trace * trace)
        })
        .collect()
}

/// Rate of dissipation ∫ 2ζ d:d = vᵀKv.
pub fn rate(
    mesh: &Mesh,
    geometry: &Geometry,
    viscosity: &[f64],
    velocity: &[Vec3],
    deviatoric: bool,
) -> f64 {
    density(mesh, geometry, viscosity, velocity, deviatoric)
        .iter()
        .zip(&geometry.area)
        .map(|(d, a)| d * a)
        .sum()
}
