//! Spherical harmonics of nearly spherical vesicles.

use pellicle_surface::{Mesh, Vec3};
use std::f64::consts::PI;

/// Highest degree that is fitted and shown.
pub const HIGHEST: usize = 8;
/// Fewest vertices per coefficient of the fit.
const LEAST_SHARE: usize = 4;
/// Largest departure of a radius from the mean, relative to it.
const NEARLY: f64 = 0.5;

/// Shape of a nearly spherical vesicle, r(n) = R (1 + Σ a_lm Y_lm(n)) about the centre of its volume.
#[derive(Clone, Debug)]
pub struct Spectrum {
    /// R, the mean of the radius over directions [length].
    pub radius: f64,
    /// Σ_m a_lm²/(2l + 1) for l = 2 … [`HIGHEST`].
    pub power: Vec<f64>,
}

/// The spectrum, or why there is none. The surface must be closed and in one piece.
///
/// Weighted least squares over the vertices, with solid angles as weights, for all degrees up to [`HIGHEST`] at once.
pub fn spectrum(mesh: &Mesh) -> Result<Spectrum, String> {
    let size = (HIGHEST + 1) * (HIGHEST + 1);
    if mesh.n_vertices() < LEAST_SHARE * size {
        return Err(format!("fewer than {} vertices", LEAST_SHARE * size));
    }
    let centre = centre_of_volume(mesh);
    let rays: Vec<Vec3> = mesh.positions.iter().map(|x| x - centre).collect();
    let mut weights = vec![0.0; rays.len()];
    for corners in &mesh.triangles {
        let [a, b, c] = corners.map(|v| rays[v as usize].normalize());
        // Oosterom & Strackee, IEEE Trans. Biomed. Eng. 30 (1983) 125.
        let angle = 2.0 * a.dot(&b.cross(&c)).atan2(1.0 + a.dot(&b) + b.dot(&c) + c.dot(&a));
        if angle.is_nan() || angle <= 0.0 {
            return Err("some directions from its centre meet it more than once".into());
        }
        for v in corners {
            weights[*v as usize] += angle / 3.0;
        }
    }
    let total: f64 = weights.iter().sum();
    let radius = rays.iter().zip(&weights).map(|(ray, weight)| weight * ray.norm()).sum::<f64>() / total;
    if rays.iter().any(|ray| (ray.norm() / radius - 1.0).abs() > NEARLY) {
        return Err("it is too far from a sphere (some radius differs from the mean by more than a half)".into());
    }
    let mut matrix = vec![0.0; size * size];
    let mut right = vec![0.0; size];
    for (ray, weight) in rays.iter().zip(&weights) {
        let basis = harmonics(&ray.normalize());
        let value = ray.norm() / radius - 1.0;
        for i in 0..size {
            right[i] += weight * basis[i] * value;
            for j in 0..=i {
                matrix[i * size + j] += weight * basis[i] * basis[j];
            }
        }
    }
    let fitted = solve(matrix, right).ok_or("its vertices do not cover all directions")?;
    let power = (2..=HIGHEST)
        .map(|l| fitted[l * l..(l + 1) * (l + 1)].iter().map(|a| a * a).sum::<f64>() / (2 * l + 1) as f64)
        .collect();
    Ok(Spectrum { radius, power })
}

/// Centre of the enclosed volume.
fn centre_of_volume(mesh: &Mesh) -> Vec3 {
    let origin = mesh.positions.first().copied().unwrap_or_default();
    let (mut volume, mut moment) = (0.0, Vec3::zeros());
    for t in 0..mesh.n_triangles() {
        let [a, b, c] = mesh.corners(t).map(|x| x - origin);
        let share = a.dot(&b.cross(&c)) / 6.0;
        volume += share;
        moment += share / 4.0 * (a + b + c);
    }
    origin + moment / volume
}

/// Real orthonormal spherical harmonics up to [`HIGHEST`]; Y_lm at l² + l + m.
fn harmonics(n: &Vec3) -> Vec<f64> {
    let mut values = vec![0.0; (HIGHEST + 1) * (HIGHEST + 1)];
    // (x + iy)^m stands for sin^m θ e^{imφ}, so that the poles need no care.
    let (mut real, mut imaginary) = (1.0, 0.0);
    let mut start = 1.0;
    for m in 0..=HIGHEST {
        // P_l^m/sin^m θ by the recurrence in l, without the Condon–Shortley sign.
        let (mut before, mut now) = (0.0, start);
        for l in m..=HIGHEST {
            let ratio: f64 = (l - m + 1..=l + m).map(|k| 1.0 / k as f64).product();
            let norm = ((2 * l + 1) as f64 / (4.0 * PI) * ratio).sqrt() * if m == 0 { 1.0 } else { 2f64.sqrt() };
            values[l * l + l + m] = norm * now * real;
            if m > 0 {
                values[l * l + l - m] = norm * now * imaginary;
            }
            let next = ((2 * l + 1) as f64 * n.z * now - (l + m) as f64 * before) / (l + 1 - m) as f64;
            (before, now) = (now, next);
        }
        start *= (2 * m + 1) as f64;
        (real, imaginary) = (real * n.x - imaginary * n.y, real * n.y + imaginary * n.x);
    }
    values
}

/// Solution of a positive definite system, of which the lower half is given, by Cholesky's method; `None` if it is
/// not positive definite.
fn solve(mut a: Vec<f64>, mut x: Vec<f64>) -> Option<Vec<f64>> {
    let n = x.len();
    for i in 0..n {
        for j in 0..=i {
            let sum: f64 = (0..j).map(|k| a[i * n + k] * a[j * n + k]).sum();
            let left = a[i * n + j] - sum;
            if i == j {
                // Relative to the orthonormal basis, whose diagonal is 1.
                if left.is_nan() || left <= 1e-8 {
                    return None;
                }
                a[i * n + i] = left.sqrt();
            } else {
                a[i * n + j] = left / a[j * n + j];
            }
        }
    }
    for i in 0..n {
        let sum: f64 = (0..i).map(|k| a[i * n + k] * x[k]).sum();
        x[i] = (x[i] - sum) / a[i * n + i];
    }
    for i in (0..n).rev() {
        let sum: f64 = (i + 1..n).map(|k| a[k * n + i] * x[k]).sum();
        x[i] = (x[i] - sum) / a[i * n + i];
    }
    Some(x)
}
