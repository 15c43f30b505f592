//! Interface energy Σ A_i W(u_i) + γ/2 Σ A_T |∇u|² of two lipid phases, u = 2φ − 1.
//!
//! With W = (a/4)(1 − u²)², a = 3σ/(2ε), γ = 3σε/4 a flat interface is tanh(x/ε) and costs σ per length.
//! Areas, not lipid amounts, weight W: then the stress has no component across the interface.
//!
//! The exact position gradient of this discrete energy must not drive the tangential motion: vertices would slide
//! off the interface and the energy fall under its true minimum. [`add_balanced_gradient`] keeps its normal part
//! and replaces the tangential part by u ∇μ̂, which vanishes at uniform chemical potential.
//!
//! # Source
//! Cahn & Hilliard, J. Chem. Phys. 28 (1958) 258.

use crate::parameters::Phases;
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Mesh, Vec3};

/// Double well at a place.
#[derive(Clone, Copy, Debug)]
pub struct DoubleWell {
    /// a in W = (a/4)(1 − u²)² [energy/area].
    pub depth: f64,
}

impl DoubleWell {
    /// From line tension and the interface width there.
    pub fn new(line_tension: f64, width: f64) -> Self {
        Self { depth: 1.5 * line_tension / width }
    }

    /// Mobility M = D/W''(±1) for fluxes −M∇μ of u.
    pub fn mobility(&self, diffusion_constant: f64) -> f64 {
        diffusion_constant / (2.0 * self.depth)
    }

    /// W(u).
    #[inline]
    pub fn value(&self, u: f64) -> f64 {
        let w = 1.0 - u * u;
        0.25 * self.depth * w * w
    }

    /// W'(u).
    #[inline]
    pub fn slope(&self, u: f64) -> f64 {
        self.depth * (u * u * u - u)
    }

    /// W''(u).
    #[inline]
    pub fn curvature(&self, u: f64) -> f64 {
        self.depth * (3.0 * u * u - 1.0)
    }
}

/// Double well at each vertex and gradient energy of each triangle, for an interface width that may vary in space.
///
/// The line tension does not depend on the width, so that an interface is not driven to where it is narrow (to first
/// order in the change of width across it).
#[derive(Clone, Debug, Default)]
pub struct InterfaceFields {
    /// Well of each vertex.
    pub wells: Vec<DoubleWell>,
    /// γ of each triangle [energy], of the mean width of its corners.
    pub gradient_energy: Vec<f64>,
}

impl InterfaceFields {
    /// From line tension and the width at each vertex.
    pub fn update(&mut self, mesh: &Mesh, phases: &Phases, width: &[f64]) {
        self.wells.clear();
        self.wells.extend(width.iter().map(|w| DoubleWell::new(phases.line_tension, *w)));
        self.gradient_energy.clear();
        self.gradient_energy.extend(mesh.triangles.iter().map(|corners| {
            0.25 * phases.line_tension * corners.iter().map(|&v| width[v as usize]).sum::<f64>()
        }));
    }

    /// γ of triangles.
    pub fn gamma(&self) -> GradientEnergy<'_> {
        GradientEnergy::PerTriangle(&self.gradient_energy)
    }

    /// W(u) of each vertex.
    pub fn local_energy(&self, u: &[f64]) -> Vec<f64> {
        self.wells.iter().zip(u).map(|(well, u)| well.value(*u)).collect()
    }
}

/// γ in γ/2 |∇f|² [energy].
#[derive(Clone, Copy, Debug)]
pub enum GradientEnergy<'a> {
    /// The same everywhere.
    Uniform(f64),
    /// One value per triangle.
    PerTriangle(&'a [f64]),
}

impl GradientEnergy<'_> {
    /// γ of triangle `t`.
    #[inline]
    pub fn of(&self, t: usize) -> f64 {
        match self {
            Self::Uniform(gamma) => *gamma,
            Self::PerTriangle(gamma) => gamma[t],
        }
    }
}

/// Gradient of a linear field on a triangle.
#[inline]
pub fn triangle_gradient(geometry: &Geometry, t: usize, corners: &[u32; 3], field: &[f64]) -> Vec3 {
    let g = &geometry.gradients[t];
    g[0] * field[corners[0] as usize] + g[1] * field[corners[1] as usize] + g[2] * field[corners[2] as usize]
}

/// γ/2 Σ A_T |∇f|².
pub fn gradient_energy(mesh: &Mesh, geometry: &Geometry, gamma: GradientEnergy, field: &[f64]) -> f64 {
    mesh.triangles
        .iter()
        .enumerate()
        .map(|(t, corners)| {
            0.5 * gamma.of(t)
                * geometry.area[t]
                * triangle_gradient(geometry, t, corners, field).norm_squared()
        })
        .sum()
}

/// Interface energy.
pub fn energy(mesh: &Mesh, geometry: &Geometry, fields: &InterfaceFields, u: &[f64]) -> f64 {
    let bulk: f64 = geometry
        .vertex_area
        .iter()
        .zip(fields.wells.iter().zip(u))
        .map(|(a, (well, u))| a * well.value(*u))
        .sum();
    bulk + gradient_energy(mesh, geometry, fields.gamma(), u)
}

/// Σ_j K_ij f_j with the cotangent (stiffness) matrix K weighted by γ.
pub fn stiffness_times(mesh: &Mesh, geometry: &Geometry, gamma: GradientEnergy, field: &[f64]) -> Vec<f64> {
    let mut out = vec![0.0; field.len()];
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let gradient = triangle_gradient(geometry, t, corners, field) * (gamma.of(t) * geometry.area[t]);
        for c in 0..3 {
            out[corners[c] as usize] += geometry.gradients[t][c].dot(&gradient);
        }
    }
    out
}

/// Local part of the chemical potential, μ̂_i = W'(u_i) + (K u)_i / A_i [energy/area], K weighted by γ.
pub fn potential(mesh: &Mesh, geometry: &Geometry, fields: &InterfaceFields, u: &[f64]) -> Vec<f64> {
    stiffness_times(mesh, geometry, fields.gamma(), u)
        .iter()
        .zip(&geometry.vertex_area)
        .zip(fields.wells.iter().zip(u))
        .map(|((k, a), (well, u))| well.slope(*u) + k / a)
        .collect()
}

/// In-plane interface stress of a triangle as (isotropic part, ∇u): T = isotropic P − γ ∇u⊗∇u.
#[inline]
pub fn triangle_stress(
    geometry: &Geometry,
    t: usize,
    corners: &[u32; 3],
    local: &[f64],
    gamma: f64,
    field: &[f64],
) -> (f64, Vec3) {
    let gradient = triangle_gradient(geometry, t, corners, field);
    let mean = (local[corners[0] as usize] + local[corners[1] as usize] + local[corners[2] as usize]) / 3.0;
    (mean + 0.5 * gamma * gradient.norm_squared(), gradient)
}

/// Exact position gradient of Σ A_i `local`_i + γ/2 Σ A_T |∇f|², added to `out`.
pub fn add_exact_gradient(
    mesh: &Mesh,
    geometry: &Geometry,
    local: &[f64],
    gamma: GradientEnergy,
    field: &[f64],
    out: &mut [Vec3],
) {
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let (isotropic, gradient) = triangle_stress(geometry, t, corners, local, gamma.of(t), field);
        for c in 0..3 {
            let g = geometry.gradients[t][c];
            out[corners[c] as usize] += (g * isotropic - gradient * (gamma.of(t) * gradient.dot(&g))) * geometry.area[t];
        }
    }
}

/// Well-balanced force of an interface (as a gradient), added to `out`.
///
/// Normal part: n nᵀ [∂F/∂x − Bᵀ(μ̂ f)]; tangential part: Σ_T (A_T/3) f̄_T ∇μ̂_T. The tension conjugate to it is
/// λ + μ̂ f, which has no Laplace jump at an interface.
///
/// # Shapes and units
/// `local`: W(f) per vertex (zero for a pure gradient energy); `potential`: μ̂ per vertex [energy/area].
pub fn add_balanced_gradient(
    mesh: &Mesh,
    geometry: &Geometry,
    local: &[f64],
    gamma: GradientEnergy,
    field: &[f64],
    potential: &[f64],
    out: &mut [Vec3],
) {
    let n = field.len();
    let mut whole = vec![Vec3::zeros(); n];
    add_exact_gradient(mesh, geometry, local, gamma, field, &mut whole);
    let mut slide = vec![Vec3::zeros(); n];
    for (t, corners) in mesh.triangles.iter().enumerate() {
        let [a, b, c] = corners.map(|v| v as usize);
        let area = geometry.area[t];
        let weight = (potential[a] * field[a] + potential[b] * field[b] + potential[c] * field[c]) / 3.0;
        let mean = (field[a] + field[b] + field[c]) / 3.0;
        let push = triangle_gradient(geometry, t, corners, potential) * (area * mean / 3.0);
        for (corner, v) in [a, b, c].into_iter().enumerate() {
            whole[v] -= geometry.gradients[t][corner] * (area * weight);
            slide[v] += push;
        }
    }
    for i in 0..n {
        let normal = geometry.vertex_normal[i];
        let along = slide[i] - normal * slide[i].dot(&normal);
        out[i] += normal * whole[i].dot(&normal) + along;
    }
}
