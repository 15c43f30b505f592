//! A small shape mode Y_l of a sphere decays at the rate ω_l = (κ/ζR²)(L/4)(L + λR²/κ), L = l(l+1), when the tension λ
//! is kept by a lipid reservoir and only membrane viscosity resists.
//!
//! The rate is read off log amplitude between two times, after the first steps in which the roughness of the mesh
//! relaxes, and extrapolated linearly to zero amplitude and zero step, as the scheme is of first order in time.
//!
//! # Source
//! Rochal, Lorman & Mennessier, Phys. Rev. E 71 (2005) 021905 (from memory; independently re-derived).

mod evidence;

use evidence::fit::{extrapolate, slope};
use evidence::motion::{start, with_reservoir};
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_physics::Simulation;
use pellicle_surface::mesh::shapes::irregular_sphere;

const SOURCE: &str = "Rochal, Lorman & Mennessier, Phys. Rev. E 71 (2005) 021905, from memory; re-derived";

fn legendre_two(z: f64) -> f64 {
    0.5 * (3.0 * z * z - 1.0)
}

/// Amplitude of P₂ in r/R.
fn amplitude(simulation: &Simulation) -> f64 {
    let area = &simulation.measured.geometry.vertex_area;
    let (mut sum, mut weight, mut radius) = (0.0, 0.0, 0.0);
    for (x, a) in simulation.state.mesh.positions.iter().zip(area) {
        let r = x.norm();
        // Solid angle of the cell.
        let share = a / (r * r);
        sum += share * r * legendre_two(x.z / r);
        radius += share * r;
        weight += share;
    }
    5.0 * sum / weight / (radius / weight)
}

/// Decay rate of l = 2 at the given start amplitude and step.
fn rate(n: usize, tension: f64, size: f64, step: f64) -> Result<f64, Box<dyn std::error::Error>> {
    let mut mesh = irregular_sphere(n, SEED)?;
    for x in &mut mesh.positions {
        *x *= 1.0 + size * legendre_two(x.z);
    }
    let mut parameters = with_reservoir(tension, &mesh);
    parameters.step.first = step;
    parameters.step.longest = step;
    // Steps are equal, so that their error can be extrapolated; the test judges accuracy in time, not the step control.
    parameters.step.tolerance = 10.0;
    let mut simulation = start(parameters, mesh)?;
    let quiet = 0.25 / (0.25 * 6.0 * (6.0 + tension));
    let (mut times, mut logs) = (Vec::new(), Vec::new());
    while simulation.state.time < 4.0 * quiet {
        simulation.advance(step)?;
        if simulation.state.time > quiet {
            times.push(simulation.state.time);
            logs.push(amplitude(&simulation).ln());
        }
    }
    Ok(-slope(&times, &logs))
}

/// Rates at three steps and two amplitudes; error of the extrapolated rate.
fn check(n: usize, tension: f64, limit: f64) -> Fallible {
    let expected = 1.5 * (6.0 + tension);
    let longest = 0.04 / expected;
    let sizes = [0.01, 0.02];
    let steps = [longest, 0.5 * longest, 0.25 * longest];
    let rates = steps.iter().map(|&s| rate(n, tension, sizes[0], s)).collect::<Result<Vec<_>, _>>()?;
    // First order in the step: halving it halves the difference.
    let ratio = (rates[0] - rates[1]) / (rates[1] - rates[2]);
    println!("rates {rates:?} at steps {steps:?}: differences shrink {ratio:.2} times");
    assert!((1.6..2.6).contains(&ratio), "order in time: differences shrink {ratio:.2} times");
    let settled = extrapolate((steps[2], rates[2]), (steps[1], rates[1]), 1.0);
    let larger = rate(n, tension, sizes[1], steps[1])?;
    let by_amplitude = (larger - rates[1]) / (sizes[1] - sizes[0]);
    let found = settled - by_amplitude * sizes[0];
    println!("rate per amplitude {by_amplitude:.3}");
    let quantity = format!("decay rate of l = 2 at tension {tension}");
    Record::of("shape_mode_relaxation", &quantity, SOURCE, expected, "vertices", vec![(n as f64, found)], limit).check();
    Ok(())
}

#[test]
fn second_mode_decays_at_its_rate() -> Fallible {
    check(642, 0.0, 0.02)
}

#[test]
#[ignore = "long: run with --ignored"]
fn second_mode_of_2500_vertices_decays_at_its_rate() -> Fallible {
    check(2562, 0.0, 0.01)?;
    check(2562, 10.0, 0.01)
}
