//! Scalar unknowns beside the mesh: pressure, exchange with a lipid reservoir, load forces.
//!
//! A border adds a column c and a row r: A y + Σ c_k z_k = f, r_k·y + Σ D_kl z_l = g_k. The dense rows never enter the
//! factorisation: each border costs one back-solve.

use crate::PhysicsError;
use nalgebra::{DMatrix, DVector};

/// One scalar unknown with its equation.
#[derive(Clone, Debug)]
pub struct Border {
    /// Column and row (all borders here are symmetric), one entry per unknown of the mesh.
    pub column: Vec<f64>,
    /// Diagonal entry.
    pub diagonal: f64,
    /// Right-hand side.
    pub target: f64,
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

/// Solve the bordered system. `solve` replaces a right-hand side by A⁻¹ times it; `y` holds f on entry and the
/// mesh unknowns on exit. Returns the scalar unknowns.
///
/// # Errors
/// [`PhysicsError::Contradiction`] when the borders are dependent.
pub fn solve_bordered(
    borders: &[Border],
    y: &mut [f64],
    mut solve: impl FnMut(&mut [f64]) -> Result<(), PhysicsError>,
) -> Result<Vec<f64>, PhysicsError> {
    solve(y)?;
    if borders.is_empty() {
        return Ok(Vec::new());
    }
    let mut responses = Vec::with_capacity(borders.len());
    for border in borders {
        let mut response = border.column.clone();
        solve(&mut response)?;
        responses.push(response);
    }
    let k = borders.len();
    let matrix = DMatrix::from_fn(k, k, |r, c| {
        let diagonal = if r == c { borders[r].diagonal } else { 0.0 };
        diagonal - dot(&borders[r].column, &responses[c])
    });
    let right = DVector::from_fn(k, |r, _| borders[r].target - dot(&borders[r].column, y));
    let scalars = matrix.lu().solve(&right).filter(|z| z.iter().all(|v| v.is_finite())).ok_or(
        PhysicsError::Contradiction(
            "volume, reservoir and loads cannot all be met at once (dependent constraints)",
        ),
    )?;
    for (response, z) in responses.iter().zip(scalars.iter()) {
        for (value, r) in y.iter_mut().zip(response) {
            *value -= z * r;
        }
    }
    Ok(scalars.iter().copied().collect())
}
