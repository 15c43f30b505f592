//! Stretching energy ½ K_A Σ m_i (A_i/m_i − 1)² of nearly incompressible lipids, with relaxed areas m_i.
//!
//! # Source
//! Evans & Skalak, Mechanics and Thermodynamics of Biomembranes (1980), area dilation of a fluid bilayer.

/// Energy.
pub fn energy(modulus: f64, vertex_area: &[f64], lipid: &[f64]) -> f64 {
    vertex_area
        .iter()
        .zip(lipid)
        .map(|(a, m)| 0.5 * modulus * (a - m) * (a - m) / m)
        .sum()
}

/// Isotropic tension λ_i = K_A (A_i/m_i − 1) of each vertex.
pub fn tension(modulus: f64, vertex_area: &[f64], lipid: &[f64]) -> Vec<f64> {
    vertex_area
        .iter()
        .zip(lipid)
        .map(|(a, m)| modulus * (a / m - 1.0))
        .collect()
}

/// Energy per relaxed area at which a reservoir of tension σ gives lipid: σ + σ²/2K_A, the value at which the
/// stretching energy is stationary in the lipid amount when λ = σ.
pub fn reservoir_potential(modulus: f64, tension: f64) -> f64 {
    tension + 0.5 * tension * tension / modulus
}
