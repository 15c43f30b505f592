//! Free energy of bound protein: lattice gas on sites carried by the lipids,
//! Σ m_i { (kT/a_p)[θ ln θ + (1−θ) ln(1−θ)] + χ/2 θ² − w φ θ − (μ_bulk/a_p) θ } + γ_θ/2 Σ A_T |∇θ|².
//!
//! Sites are counted per relaxed lipid area m, so the local part makes no force on the membrane by itself.
//! μ_bulk = kT ln(k_on c/k_off) belongs to the bath and is left out when nothing is exchanged.
//!
//! # Source
//! Langmuir, J. Am. Chem. Soc. 40 (1918) 1361; curvature coupling after Leibler, J. Phys. 47 (1986) 507.

use crate::parameters::Protein;

impl Protein {
    /// Whether protein is exchanged with the bulk.
    pub fn exchanges(&self) -> bool {
        self.attach_rate > 0.0 && self.detach_rate > 0.0
    }

    /// Energy that a bound protein gives back to the bulk, per membrane area: μ_bulk/a_p.
    pub fn bulk_potential(&self) -> f64 {
        if self.exchanges() {
            self.thermal_energy / self.site_area * (self.attach_rate / self.detach_rate).ln()
        } else {
            0.0
        }
    }

    /// kT/a_p.
    pub fn thermal_density(&self) -> f64 {
        self.thermal_energy / self.site_area
    }

    /// Local energy per relaxed area, without bending and gradients.
    pub fn local_energy(&self, coverage: f64, composition: f64) -> f64 {
        let x_ln_x = |x: f64| if x > 0.0 { x * x.ln() } else { 0.0 };
        self.thermal_density() * (x_ln_x(coverage) + x_ln_x(1.0 - coverage))
            + 0.5 * self.interaction * coverage * coverage
            - self.phase_preference * composition * coverage
            - self.bulk_potential() * coverage
    }

    /// ∂/∂θ of the local energy beyond ideal mixing and without the bath.
    pub fn excess_slope(&self, coverage: f64, composition: f64) -> f64 {
        self.interaction * coverage - self.phase_preference * composition
    }

    /// ∂/∂θ of ideal mixing.
    pub fn mixing_slope(&self, coverage: f64) -> f64 {
        let theta = coverage.clamp(1e-300, 1.0 - 1e-16);
        self.thermal_density() * (theta / (1.0 - theta)).ln()
    }
}

/// Local energy summed over the surface.
pub fn energy(protein: &Protein, lipid: &[f64], coverage: &[f64], composition: &[f64]) -> f64 {
    lipid
        .iter()
        .zip(coverage)
        .enumerate()
        .map(|(i, (m, theta))| {
            m * protein.local_energy(*theta, composition.get(i).copied().unwrap_or(0.0))
        })
        .sum()
}
