//! The resting shape of the human red blood cell.

use super::relax::settle;
use super::rings::Profile;
use super::surface::BiconcaveDisc;
use super::{affordable, finished, positive};
use crate::{Mesh, MeshError};
use std::f64::consts::PI;

/// Mean shape of red cells in isotonic solution: thickness D(ρ) = √(1−t)·(c₀ + c₂ t + c₄ t²) with t = (ρ/radius)².
///
/// # Source
/// Evans & Fung, Microvasc. Res. 4 (1972) 335; the numbers are quoted from memory.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RedCellShape {
    /// Radius of the rim in µm.
    pub radius: f64,
    /// c₀, c₂, c₄ in µm.
    pub thickness: [f64; 3],
    /// Published mean area in µm².
    pub published_area: f64,
    /// Published mean volume in µm³.
    pub published_volume: f64,
}

impl RedCellShape {
    /// At 300 mosmol/kg.
    pub const ISOTONIC: Self = Self {
        radius: 3.91,
        thickness: [0.81, 7.83, -4.39],
        published_area: 135.0,
        published_volume: 94.0,
    };

    /// Volume of the profile: πR²(⅔c₀ + 4/15 c₂ + 16/105 c₄) in µm³.
    pub fn volume(&self) -> f64 {
        let [c0, c2, c4] = self.thickness;
        PI * self.radius * self.radius * (2.0 / 3.0 * c0 + 4.0 / 15.0 * c2 + 16.0 / 105.0 * c4)
    }
}

/// Biconcave disc about z with the proportions of [`RedCellShape::ISOTONIC`].
///
/// # Shapes and units
/// `radius`: radius of the rim, in the unit wanted for the mesh (3.91 for µm); `edge`: length in the same unit.
/// # Errors
/// [`MeshError::Impossible`] for values that are not positive or an edge too long for the thin middle.
pub fn red_cell(radius: f64, edge: f64) -> Result<Mesh, MeshError> {
    let radius = positive("radius", radius)?;
    let edge = positive("edge length", edge)?;
    affordable(edge, 4.0 * PI * radius * radius)?;
    let scale = radius / RedCellShape::ISOTONIC.radius;
    let thickness = RedCellShape::ISOTONIC.thickness.map(|c| c * scale);
    let half = |angle: f64| {
        let t = angle.sin().powi(2);
        0.5 * angle.cos() * (thickness[0] + t * (thickness[1] + t * thickness[2]))
    };
    // ρ = radius·sin(angle): from the middle of the lower side over the rim to the middle of the upper side.
    const SEGMENTS: usize = 4000;
    let profile = Profile {
        points: (0..=SEGMENTS)
            .map(|i| {
                let angle = PI * i as f64 / SEGMENTS as f64;
                let rho = if i % SEGMENTS == 0 {
                    0.0
                } else {
                    radius * angle.sin()
                };
                [rho, -half(angle)]
            })
            .collect(),
        closed: false,
        section: [1.0, 1.0],
        edge_length: &|_, _| edge,
    };
    let mut mesh = profile.mesh()?;
    let surface = BiconcaveDisc { radius, thickness };
    settle(&mut mesh, &surface)?;
    finished(mesh, &surface, 2, edge)
}
