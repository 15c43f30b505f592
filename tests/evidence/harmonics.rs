//! Real spherical harmonics, orthonormal on the unit sphere.

use pellicle_surface::Vec3;
use std::f64::consts::PI;

/// Associated Legendre function P_l^m(x), m ≥ 0, without the Condon–Shortley sign.
fn legendre(l: usize, m: usize, x: f64) -> f64 {
    let sine = (1.0 - x * x).max(0.0).sqrt();
    let mut start = 1.0;
    for k in 0..m {
        start *= (2 * k + 1) as f64 * sine;
    }
    if l == m {
        return start;
    }
    let (mut before, mut now) = (start, x * (2 * m + 1) as f64 * start);
    for k in m + 2..=l {
        let next = ((2 * k - 1) as f64 * x * now - (k + m - 1) as f64 * before) / (k - m) as f64;
        (before, now) = (now, next);
    }
    now
}

/// Y_lm at a unit vector; cos(mφ) for m ≥ 0, sin(|m|φ) for m < 0.
pub fn harmonic(l: usize, m: i32, x: &Vec3) -> f64 {
    let order = m.unsigned_abs() as usize;
    let ratio: f64 = (l - order + 1..=l + order).map(|k| 1.0 / k as f64).product();
    let norm = ((2 * l + 1) as f64 / (4.0 * PI) * ratio).sqrt();
    let azimuth = x.y.atan2(x.x);
    let angular = match m {
        0 => 1.0,
        m if m > 0 => (f64::from(m) * azimuth).cos() * 2f64.sqrt(),
        m => (f64::from(-m) * azimuth).sin() * 2f64.sqrt(),
    };
    norm * legendre(l, order, x.z) * angular
}

/// Tangential gradient of Y_lm at a unit vector, by central differences along the sphere (error 1e-9).
pub fn gradient(l: usize, m: i32, x: &Vec3) -> Vec3 {
    let h = 1e-5;
    let (a, b) = tangents(x);
    let along = |t: &Vec3| {
        let at = |s: f64| harmonic(l, m, &(x + t * s).normalize());
        (at(h) - at(-h)) / (2.0 * h)
    };
    a * along(&a) + b * along(&b)
}

/// Two unit vectors at right angles to x and to each other.
pub fn tangents(x: &Vec3) -> (Vec3, Vec3) {
    let other = if x.z.abs() < 0.9 { Vec3::z() } else { Vec3::x() };
    let a = x.cross(&other).normalize();
    (a, x.cross(&a))
}
