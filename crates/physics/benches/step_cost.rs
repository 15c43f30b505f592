//! What a coupled step costs, all physics on, in units of one factorisation of the same matrix in the same run; and the
//! memory of the process per vertex.
//!
//! `cargo bench -p pellicle-physics --bench step_cost [-- 2562 10242]`

use pellicle_physics::parameters::{BindingRegion, Blend, Parameters, Phases, Protein, VolumeCondition};
use pellicle_physics::step::mechanics::Timings;
use pellicle_physics::{Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes;
use std::time::Instant;

/// Steps averaged over.
const STEPS: usize = 12;

/// Peak resident memory of the process [bytes], where the system tells.
fn peak_memory() -> Option<f64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find(|l| l.starts_with("VmHWM"))?;
    Some(line.split_whitespace().nth(1)?.parse::<f64>().ok()? * 1024.0)
}

fn simulation(vertices: usize) -> Result<Simulation, Box<dyn std::error::Error>> {
    let edge = (4.0 * std::f64::consts::PI * 1.1547 / vertices as f64).sqrt();
    let mut mesh = shapes::sphere(1.0, edge)?;
    shapes::perturb(&mut mesh, 0.1, 1)?;
    let mut p = Parameters::bare(1.0, 1.0, 3e4);
    p.volume = VolumeCondition::Fixed(vec![(0.0, Geometry::new(&mesh).volume)]);
    p.phases = Some(Phases { line_tension: 4.0, interface_width: 0.2, diffusion_constant: 1.0, width_per_radius: 0.0 });
    p.spontaneous_curvature = Blend { at_zero: 0.0, at_one: 0.0, per_coverage: 0.5 };
    p.gaussian_modulus = Blend { at_zero: 0.0, at_one: 0.5, per_coverage: 0.0 };
    p.protein = Some(Protein {
        attach_rate: 1.0,
        detach_rate: 1.0,
        site_area: 1e-2,
        thermal_energy: 0.05,
        interaction: 0.0,
        gradient_energy: 0.01,
        phase_preference: 0.1,
        diffusion_constant: 0.5,
        region: BindingRegion::Everywhere,
    });
    p.friction = 0.1;
    let n = mesh.n_vertices();
    let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.45 * (4.0 * x.z).tanh()).collect();
    let state = State::at_rest(&p, mesh, &composition, &vec![0.1; n], &[])?;
    Ok(Simulation::new(p, state)?)
}

fn measure(vertices: usize) -> Result<(), Box<dyn std::error::Error>> {
    let mut simulation = simulation(vertices)?;
    let n = simulation.state.mesh.n_vertices();
    simulation.advance(f64::INFINITY)?;
    // Accepted and refused attempts both cost; the ratio counts every attempt.
    simulation.timings = Timings::default();
    let (accepted, refused) = (simulation.state.ledger.accepted, simulation.state.ledger.refused);
    let clock = Instant::now();
    for _ in 0..STEPS {
        simulation.advance(f64::INFINITY)?;
    }
    let total = clock.elapsed().as_secs_f64();
    let ledger = &simulation.state.ledger;
    let attempts = (ledger.accepted - accepted + ledger.refused - refused) as f64;
    let t = simulation.timings;
    println!(
        "{n:>7} vertices, {} thread(s): {:.3} s per attempt = {:.2} x one factorisation",
        rayon::current_num_threads(),
        total / attempts,
        total / t.factorisation
    );
    for (part, seconds) in [
        ("forces and energies", t.forces),
        ("assembly", t.assembly),
        ("factorisation", t.factorisation),
        ("solves", t.solves),
        ("phases and protein", t.transport),
        ("mesh motion and remap", t.remap),
    ] {
        println!("        {part:<24}{:>9.4} s {:>6.1} %", seconds / attempts, 100.0 * seconds / total);
    }
    if let Some(bytes) = peak_memory() {
        println!("        peak memory so far {:.1} MB = {:.1} KB per vertex", bytes / 1e6, bytes / 1e3 / n as f64);
    }
    Ok(())
}

fn main() {
    let sizes: Vec<usize> = std::env::args().skip(1).filter_map(|a| a.parse().ok()).collect();
    for vertices in if sizes.is_empty() { vec![2562, 10_242] } else { sizes } {
        if let Err(error) = measure(vertices) {
            eprintln!("{vertices} vertices: {error}");
        }
    }
}
