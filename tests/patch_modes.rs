//! A flat framed patch under tension σ and local friction ξ: a small mode n decays at ω = (α⁴ + σα²)/ξ (κ = R = 1), as
//! a flat fluid membrane has no viscous drag against normal motion.
//!
//! Clamped: αJ_{n+1}(α)/J_n(α) + βI_{n+1}(β)/I_n(β) = 0 with β² = α² + σ; hinged: J_n(α) = 0.
//!
//! # Source
//! Elementary; plates under tension as in Leissa, Vibration of Plates (1969) (from memory).

mod evidence;

use evidence::fit::slope;
use evidence::record::Record;
use evidence::Fallible;
use pellicle_physics::parameters::{AreaCondition, Rim};
use pellicle_physics::{Parameters, Simulation, State};
use pellicle_surface::mesh::shapes::disc;

const SOURCE: &str = "elementary; Leissa, Vibration of Plates (1969), from memory";

/// J_n (sign −1) or I_n (sign +1) by their power series.
fn bessel(n: i32, x: f64, sign: f64) -> f64 {
    let mut term = (1..=n).fold(1.0, |t, k| t * 0.5 * x / f64::from(k));
    let mut sum = term;
    for k in 1..200 {
        term *= sign * 0.25 * x * x / (f64::from(k) * f64::from(k + n));
        sum += term;
    }
    sum
}

/// Condition of the rim as a function of α; its first root is wanted.
fn rim_condition(rim: Rim, n: i32, tension: f64, alpha: f64) -> f64 {
    let j = bessel(n, alpha, -1.0);
    match rim {
        Rim::Hinged => j,
        Rim::Clamped => {
            let beta = (alpha * alpha + tension).sqrt();
            // Multiplied by J_n to have no poles.
            alpha * bessel(n + 1, alpha, -1.0) + j * beta * bessel(n + 1, beta, 1.0) / bessel(n, beta, 1.0)
        }
    }
}

fn first_root(rim: Rim, n: i32, tension: f64) -> f64 {
    let f = |x: f64| rim_condition(rim, n, tension, x);
    let mut low = 1.0;
    while f(low) * f(low + 0.05) > 0.0 {
        low += 0.05;
    }
    let mut high = low + 0.05;
    for _ in 0..60 {
        let mid = 0.5 * (low + high);
        if f(low) * f(mid) <= 0.0 { high = mid } else { low = mid }
    }
    0.5 * (low + high)
}

/// Shape of the mode at (x, y).
fn shape(rim: Rim, n: i32, tension: f64, alpha: f64, x: f64, y: f64) -> f64 {
    let r = x.hypot(y);
    let beta = (alpha * alpha + tension).sqrt();
    let radial = match rim {
        Rim::Hinged => bessel(n, alpha * r, -1.0),
        Rim::Clamped => {
            bessel(n, alpha * r, -1.0) - bessel(n, alpha, -1.0) / bessel(n, beta, 1.0) * bessel(n, beta * r, 1.0)
        }
    };
    radial * (f64::from(n) * y.atan2(x)).cos()
}

fn rate(rim: Rim, n: i32, tension: f64, edge: f64) -> Result<(f64, f64, f64), Box<dyn std::error::Error>> {
    let alpha = first_root(rim, n, tension);
    let friction = 100.0;
    let expected = (alpha.powi(4) + tension * alpha * alpha) / friction;
    let flat = disc(1.0, edge)?;
    let mut parameters = Parameters {
        area: AreaCondition::Reservoir(tension),
        rim: Some(rim),
        friction,
        ..Parameters::bare(1.0, 1.0, 1e5)
    };
    let step = 2e-3 / expected;
    parameters.step.first = step;
    parameters.step.longest = step;
    parameters.step.tolerance = 10.0;
    let mut mesh = flat;
    for x in &mut mesh.positions {
        if x.norm() < 1.0 - 1e-9 {
            x.z = 0.005 * shape(rim, n, tension, alpha, x.x, x.y);
        }
    }
    let mut state = State::at_rest(&parameters, mesh, &[], &[], &[])?;
    // The frame holds the patch level, whatever the displaced triangles at the rim say.
    for normal in &mut state.rim_normals {
        if normal.norm_squared() > 0.0 {
            *normal = pellicle_surface::Vec3::z();
        }
    }
    let mut s = Simulation::new(parameters, state)?;
    let project = |s: &Simulation| -> f64 {
        s.state
            .mesh
            .positions
            .iter()
            .zip(&s.measured.geometry.vertex_area)
            .map(|(x, a)| a * x.z * shape(rim, n, tension, alpha, x.x, x.y))
            .sum()
    };
    let (mut times, mut logs) = (Vec::new(), Vec::new());
    for round in 0..40 {
        s.advance(step)?;
        if round >= 10 {
            times.push(s.state.time);
            logs.push(project(&s).ln());
        }
    }
    // Each implicit step multiplies by 1/(1 + ω dt).
    let apparent = -slope(&times, &logs);
    let found = ((apparent * step).exp() - 1.0) / step;
    Ok((s.state.mesh.n_vertices() as f64, found, expected))
}

fn check(rim: Rim, n: i32, tension: f64, edges: &[f64], limit: f64) -> Fallible {
    let found = edges.iter().map(|&e| rate(rim, n, tension, e)).collect::<Result<Vec<_>, _>>()?;
    let measured = found.iter().map(|(v, rate, _)| (*v, *rate)).collect();
    let quantity = format!("decay rate of a patch, {rim:?}, n = {n}, σ = {tension}");
    Record::of("patch_modes", &quantity, SOURCE, found[0].2, "vertices", measured, limit)
        .with_order()
        .check_with_order(1.4);
    Ok(())
}

const EDGES: [f64; 3] = [0.14, 0.085, 0.05];

#[test]
fn roots_are_those_of_the_tables() {
    // First zero of J_0 and first eigenvalue of the clamped plate without tension (Leissa: 10.2158 = 3.19622²).
    assert!((first_root(Rim::Hinged, 0, 1.0) - 2.404825557695773).abs() < 1e-10);
    assert!((first_root(Rim::Clamped, 0, 0.0) - 3.196220616582541).abs() < 1e-6);
    assert!((first_root(Rim::Hinged, 2, 1.0) - 5.135622301840683).abs() < 1e-10);
}

#[test]
fn hinged_patch() -> Fallible {
    check(Rim::Hinged, 0, 1.0, &EDGES, 0.012)
}

#[test]
fn clamped_patch() -> Fallible {
    check(Rim::Clamped, 2, 1.0, &EDGES, 0.025)
}

#[test]
#[ignore = "long: run with --ignored"]
fn patches_in_all_cases() -> Fallible {
    check(Rim::Hinged, 2, 1.0, &EDGES, 0.025)?;
    check(Rim::Clamped, 0, 1.0, &EDGES, 0.012)?;
    for rim in [Rim::Hinged, Rim::Clamped] {
        check(rim, 0, 50.0, &EDGES, 0.012)?;
        check(rim, 2, 50.0, &EDGES, 0.025)?;
    }
    Ok(())
}
