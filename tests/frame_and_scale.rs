//! The same membrane turned, moved, or measured with another ruler gives the same numbers.
//!
//! # Source
//! Invariance of the equations; common practice, no source.

mod evidence;

use evidence::motion::{rotated, start, vesicle};
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_physics::Simulation;
use pellicle_physics::parameters::{Blend, Parameters};
use pellicle_surface::mesh::shapes::irregular_ellipsoid;
use pellicle_surface::{Mesh, Vec3};

const STEPS: usize = 6;

/// Energy, time and pressure after some steps.
fn run(parameters: Parameters, mesh: Mesh) -> Result<[f64; 3], Box<dyn std::error::Error>> {
    let mut s: Simulation = start(parameters, mesh)?;
    for _ in 0..STEPS {
        s.advance(f64::INFINITY)?;
    }
    Ok([s.energies.total(), s.state.time, s.state.pressure])
}

fn record(quantity: &str, here: [f64; 3], there: [f64; 3], limit: f64) {
    let error = here.iter().zip(&there).map(|(a, b)| (b / a - 1.0).abs()).fold(0.0, f64::max);
    Record::of("frame_and_scale", quantity, "invariance; common practice, no source", 1.0, "steps", vec![(STEPS as f64, 1.0 + error)], limit).check();
}

#[test]
fn turned_and_moved() -> Fallible {
    let mesh = irregular_ellipsoid([1.0, 0.8, 1.6], 500, SEED)?;
    let mut other = rotated(&mesh, Vec3::new(0.3, -1.0, 0.5), 1.1);
    for x in &mut other.positions {
        *x += Vec3::new(3.0, -2.0, 5.0);
    }
    let here = run(vesicle(&mesh), mesh)?;
    let there = run(vesicle(&other), other)?;
    // Rounding, amplified by the conditioning of the nearly incompressible system.
    record("energy, time, pressure of a turned and moved vesicle", here, there, 1e-7);
    Ok(())
}

/// Lengths times s, energies times e, times times t.
#[test]
fn other_units() -> Fallible {
    let mesh = irregular_ellipsoid([1.0, 0.8, 1.6], 500, SEED)?;
    let (s, e, t) = (1e-3, 4e2, 7.0);
    let mut other = mesh.clone();
    for x in &mut other.positions {
        *x *= s;
    }
    let here = run(vesicle(&mesh), mesh)?;
    let mut parameters = vesicle(&other);
    let first = Parameters::bare(1.0, 1.0, 1.0).step.first;
    parameters.bending_rigidity = Blend::uniform(e);
    parameters.shear_viscosity = Blend::uniform(e * t / (s * s));
    parameters.area_compression_modulus *= e / (s * s);
    parameters.step.first = first * t;
    let there = run(parameters, other)?;
    record("energy, time, pressure in other units", here, [there[0] / e, there[1] / t, there[2] * s * s * s / e], 1e-7);
    Ok(())
}
