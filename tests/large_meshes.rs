//! The iterative way of solving the linear systems, meant for large meshes: it gives what the direct one gives, and its
//! number of iterations does not grow with the mesh.
//!
//! `cargo test --test large_meshes -- --ignored --nocapture` prints the whole table.

use pellicle_physics::parameters::{Parameters, Phases, VolumeCondition};
use pellicle_physics::step::connectivity::Connectivity;
use pellicle_physics::step::mechanics::{self, Timings};
use pellicle_physics::step::preconditioner::Way;
use pellicle_physics::{Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes;
use pellicle_surface::{Mesh, Vec3};
use std::time::Instant;

type Fallible = Result<(), Box<dyn std::error::Error>>;

const STEPS: [f64; 3] = [1e-4, 1e-2, 0.3];

fn sphere(vertices: usize, irregular: bool) -> Result<Mesh, Box<dyn std::error::Error>> {
    let edge = (4.0 * std::f64::consts::PI * 1.1547 / vertices as f64).sqrt();
    let mut mesh = shapes::sphere(1.0, edge)?;
    if irregular {
        shapes::perturb(&mut mesh, 0.1, 1)?;
    }
    Ok(mesh)
}

fn moved(mut mesh: Mesh, map: impl Fn(&Vec3) -> Vec3) -> Mesh {
    for x in &mut mesh.positions {
        *x = map(x);
    }
    mesh
}

fn shape(name: &str, size: usize) -> Result<Mesh, Box<dyn std::error::Error>> {
    let waist = |x: &Vec3| {
        let r = 0.3 + 0.7 * (1.7 * x.z).powi(2).min(1.0);
        Vec3::new(x.x * r, x.y * r, 2.0 * x.z)
    };
    Ok(match name {
        "sphere" => sphere(size, false)?,
        "irregular sphere" => sphere(size, true)?,
        "prolate 1:3" => moved(sphere(size, true)?, |x| Vec3::new(x.x, x.y, 3.0 * x.z)),
        "oblate 4:1" => moved(sphere(size, true)?, |x| Vec3::new(x.x, x.y, 0.25 * x.z)),
        "dumb-bell" => moved(sphere(size, true)?, waist),
        _ => shapes::capped_tube(0.3, 6.0, (12.0 * 1.1547 / size as f64).sqrt())?,
    })
}

struct Outcome {
    vertices: usize,
    iterations: u64,
    seconds: [f64; 2],
    apart: f64,
}

/// One system of a step both ways; with `direct` off only the iterative one.
fn compare(mesh: &Mesh, step: f64, direct: bool) -> Result<Outcome, Box<dyn std::error::Error>> {
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.volume = VolumeCondition::Fixed(vec![(0.0, Geometry::new(mesh).volume)]);
    p.phases = Some(Phases { line_tension: 4.0, interface_width: 0.2, diffusion_constant: 1.0, width_per_radius: 0.0 });
    p.mesh = None;
    let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.45 * (4.0 * x.x).tanh()).collect();
    let state = State::at_rest(&p, mesh.clone(), &composition, &[], &[])?;
    let simulation = Simulation::new(p, state)?;
    let mut motions = Vec::new();
    let mut outcome =
        Outcome { vertices: mesh.n_vertices(), iterations: 0, seconds: [0.0; 2], apart: f64::NAN };
    for (k, way) in [Way::Iterative, Way::Direct].into_iter().take(if direct { 2 } else { 1 }).enumerate() {
        let places = simulation.state.mesh.positions.clone();
        let mut connectivity = Connectivity::with_way(&simulation.state, places, way)?;
        let mut timings = Timings::default();
        let clock = Instant::now();
        motions.push(mechanics::solve(
            &simulation.parameters,
            &mut connectivity,
            &simulation.state,
            &simulation.measured,
            step,
            &mut timings,
        )?);
        outcome.seconds[k] = clock.elapsed().as_secs_f64();
        if way == Way::Iterative {
            outcome.iterations = timings.iterations;
        }
    }
    if let [a, b] = motions.as_slice() {
        let size: f64 = b.velocity.iter().map(|v| v.norm_squared()).sum();
        let gap: f64 = a.velocity.iter().zip(&b.velocity).map(|(a, b)| (a - b).norm_squared()).sum();
        outcome.apart = (gap / size).sqrt();
    }
    Ok(outcome)
}

#[test]
fn both_ways_give_the_same_motion() -> Fallible {
    for name in ["irregular sphere", "dumb-bell"] {
        for step in [1e-4, 1e-2] {
            let outcome = compare(&shape(name, 642)?, step, true)?;
            println!("{name}, step {step:.0e}: {} iterations, apart by {:.1e}", outcome.iterations, outcome.apart);
            assert!(outcome.apart < 1e-6, "{name}, step {step:e}: velocities apart by {:.1e}", outcome.apart);
        }
    }
    Ok(())
}

#[test]
#[ignore = "long: run with --ignored"]
fn table_of_iterations() -> Fallible {
    println!("| shape | vertices | step | iterations | iterative, s | direct, s | velocities apart |");
    println!("|---|---|---|---|---|---|---|");
    for size in [642, 2562, 10_242] {
        for name in ["sphere", "irregular sphere", "prolate 1:3", "oblate 4:1", "dumb-bell", "capped tube 1:10"] {
            let mesh = shape(name, size)?;
            for step in STEPS {
                match compare(&mesh, step, size < 5000) {
                    Ok(o) => println!(
                        "| {name} | {} | {step:.0e} | {} | {:.2} | {:.2} | {:.1e} |",
                        o.vertices, o.iterations, o.seconds[0], o.seconds[1], o.apart
                    ),
                    Err(error) => println!("| {name} | {size} | {step:.0e} | {error} |"),
                }
            }
        }
    }
    Ok(())
}
