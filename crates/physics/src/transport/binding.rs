//! First-order binding with detailed balance: θ' = a (1 − θ) − d θ exp[(a_p/kT) ∂f_excess/∂θ].
//!
//! Backward Euler in the one unknown of each vertex, solved by a bracketed root: θ stays in (0, 1) and the free
//! energy falls at every step size when f_excess is convex; an attractive (concave) interaction is taken at the
//! old coverage, which keeps that. A factor g of the region multiplies both rates.
//!
//! # Source
//! Langmuir, J. Am. Chem. Soc. 40 (1918) 1361.

use crate::parameters::Protein;

/// Bending as the protein of one vertex feels it, per lipid area: ∂f/∂θ = constant + linear θ.
#[derive(Clone, Copy, Debug, Default)]
pub struct BendingSlope {
    /// Value at θ = 0.
    pub constant: f64,
    /// Slope in θ, not negative for a curved coat.
    pub linear: f64,
}

/// New coverage after `step`.
///
/// # Units
/// `region`: factor on both rates; `bending`: energy/area.
pub fn bind(
    protein: &Protein,
    coverage: f64,
    composition: f64,
    bending: BendingSlope,
    region: f64,
    step: f64,
) -> f64 {
    if region <= 0.0 {
        return coverage;
    }
    let inverse = 1.0 / protein.thermal_density();
    let (implicit, explicit) = if protein.interaction < 0.0 {
        (0.0, protein.interaction * coverage)
    } else {
        (protein.interaction, 0.0)
    };
    let excess = |y: f64| {
        bending.constant + bending.linear * y + implicit * y + explicit
            - protein.phase_preference * composition
    };
    // y − θ − dt·rate(y): negative at 0, positive at 1, so the bracket always holds a root.
    let defect = |y: f64| {
        let leave = protein.detach_rate * y * (inverse * excess(y)).clamp(-600.0, 600.0).exp();
        y - coverage - step * region * (protein.attach_rate * (1.0 - y) - leave)
    };
    let slope = |y: f64| {
        let growth = (inverse * excess(y)).clamp(-600.0, 600.0).exp();
        1.0 + step
            * region
            * (protein.attach_rate
                + protein.detach_rate
                    * growth
                    * (1.0 + y * inverse * (bending.linear + implicit)))
    };
    let (mut low, mut high) = (0.0, 1.0);
    let mut y = coverage.clamp(0.0, 1.0);
    for _ in 0..200 {
        let value = defect(y);
        if value == 0.0 || high - low < 1e-16 {
            break;
        }
        if value < 0.0 {
            low = y;
        } else {
            high = y;
        }
        let newton = y - value / slope(y);
        let next = if newton > low && newton < high {
            newton
        } else {
            0.5 * (low + high)
        };
        if (next - y).abs() <= 1e-16 * next.abs() {
            y = next;
            break;
        }
        y = next;
    }
    y
}
