//! How material constants follow composition φ and coverage θ.

use crate::parameters::{Blend, Parameters};

/// Smooth step q(φ) = ¼(2 + 3u − u³) with u = 2φ − 1, clipped to [0, 1]; q' = 0 in both phases, so that a phase's
/// constants are exactly its own.
#[inline]
pub fn smooth_step(composition: f64) -> f64 {
    let u = (2.0 * composition - 1.0).clamp(-1.0, 1.0);
    0.25 * (2.0 + 3.0 * u - u * u * u)
}

/// dq/dφ.
#[inline]
pub fn smooth_step_slope(composition: f64) -> f64 {
    let u = (2.0 * composition - 1.0).clamp(-1.0, 1.0);
    1.5 * (1.0 - u * u)
}

impl Blend {
    /// Value at a composition and coverage.
    #[inline]
    pub fn at(&self, composition: f64, coverage: f64) -> f64 {
        self.at_zero
            + (self.at_one - self.at_zero) * smooth_step(composition)
            + self.per_coverage * coverage
    }

    /// ∂/∂φ.
    #[inline]
    pub fn by_composition(&self, composition: f64) -> f64 {
        (self.at_one - self.at_zero) * smooth_step_slope(composition)
    }
}

/// Material constants at every vertex.
#[derive(Clone, Debug, Default)]
pub struct MaterialFields {
    /// κ.
    pub bending_rigidity: Vec<f64>,
    /// C.
    pub spontaneous_curvature: Vec<f64>,
    /// κ_G.
    pub gaussian_modulus: Vec<f64>,
    /// ζ.
    pub shear_viscosity: Vec<f64>,
}

impl MaterialFields {
    /// Evaluate at every vertex. Empty slices mean: no such field (zero).
    pub fn update(
        &mut self,
        parameters: &Parameters,
        n: usize,
        composition: &[f64],
        coverage: &[f64],
    ) {
        let at = |list: &[f64], i: usize| list.get(i).copied().unwrap_or(0.0);
        for (list, blend) in [
            (&mut self.bending_rigidity, &parameters.bending_rigidity),
            (&mut self.spontaneous_curvature, &parameters.spontaneous_curvature),
            (&mut self.gaussian_modulus, &parameters.gaussian_modulus),
            (&mut self.shear_viscosity, &parameters.shear_viscosity),
        ] {
            list.clear();
            list.extend((0..n).map(|i| blend.at(at(composition, i), at(coverage, i))));
        }
    }
}
