//! Two domains at rest on a deflated vesicle stay at rest: nothing stirs at the interface, no energy is lost, the mesh
//! does not slide away.
//!
//! An interface that pulls on a mesh along the surface may drive flows that never end. They are measured as the
//! dissipation, in units of κ²/(ζR²), of a vesicle with line tension λR/κ = 4 and reduced volume 0.95.
//!
//! # Source
//! At equilibrium nothing dissipates; common practice, no source. The bound of 1e-4 κ²/(ζR²) is a goal; measured with
//! 2.7 edges across the interface: 2.5e-4, with 4: 5.5e-5.

mod evidence;

use evidence::Fallible;
use evidence::record::Record;
use pellicle_physics::parameters::{MeshCare, Phases, VolumeCondition};
use pellicle_physics::{Parameters, Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes::sphere;
use pellicle_surface::remesh::quality;
use std::f64::consts::PI;

const WIDTH: f64 = 0.2;
const ACROSS: f64 = 4.0;
/// Time in which the vesicle is deflated.
const RAMP: f64 = 5.0;

fn start() -> Result<Simulation, Box<dyn std::error::Error>> {
    let edge = 2.0 * WIDTH / ACROSS;
    let mesh = sphere(1.0, edge)?;
    let geometry = Geometry::new(&mesh);
    let round = geometry.total_area.powf(1.5) / (6.0 * PI.sqrt());
    let parameters = Parameters {
        phases: Some(Phases {
            line_tension: 4.0,
            interface_width: WIDTH,
            diffusion_constant: 1.0,
            width_per_radius: 0.0,
        }),
        volume: VolumeCondition::Fixed(vec![(0.0, geometry.volume), (RAMP, 0.95 * round)]),
        mesh: Some(MeshCare {
            adapt: false,
            edge,
            shortest: 0.3 * edge,
            edges_per_radius: 4.0,
            edges_per_interface: ACROSS,
            most_vertices: 4 * mesh.n_vertices(),
        }),
        ..Parameters::bare(1.0, 1.0, 1e4)
    };
    let angle = PI / 3.0;
    let composition: Vec<f64> =
        mesh.positions.iter().map(|x| 0.5 * (1.0 + ((angle - x.z.acos()) / WIDTH).tanh())).collect();
    let state = State::at_rest(&parameters, mesh, &composition, &[], &[])?;
    Ok(Simulation::new(parameters, state)?)
}

/// Come to rest, then watch for `while_at_rest` more relaxation times ζR²/κ.
fn stay(while_at_rest: f64) -> Fallible {
    let mut s = start()?;
    while s.state.time < RAMP || s.advance(f64::INFINITY)?.unrest > 1e-3 {
        if s.state.time < RAMP {
            s.advance(f64::INFINITY)?;
        }
    }
    let poorest = |s: &Simulation| quality(&s.state.mesh).into_iter().fold(1.0, f64::min);
    let (begun, energy, quality) = (s.state.time, s.energies.total(), poorest(&s));
    let mut fastest: f64 = 0.0;
    let mut highest = energy;
    while s.state.time < begun + while_at_rest {
        let report = s.advance(f64::INFINITY)?;
        fastest = fastest.max(report.dissipated / report.step);
        highest = highest.max(report.free_energy);
    }
    let level = s.state.mesh.n_vertices() as f64;
    println!(
        "rest at t = {begun:.2}; {} steps; energy {energy} → {}, highest {highest}; quality {quality} → {}",
        s.state.ledger.accepted,
        s.energies.total(),
        poorest(&s)
    );
    let source = "equilibrium; common practice, no source";
    let record = |quantity: &str, value: f64, limit: f64| {
        Record::of("two_domain_rest", quantity, source, 0.0, "vertices", vec![(level, value)], limit).absolute().check();
    };
    record(&format!("dissipation at rest, λ = 4, {while_at_rest} relaxation times [κ²/ζR²]"), fastest, 1e-4);
    // Measured: 6e-7 κ in 3 relaxation times after rest, falling off.
    record(&format!("energy lost at rest in {while_at_rest} relaxation times [κ]"), energy - s.energies.total(), 1e-4);
    record("rise of the energy above that at rest [κ]", highest - energy, 1e-6);
    record(&format!("quality lost at rest in {while_at_rest} relaxation times"), (quality - poorest(&s)).max(0.0), 1e-3);
    Ok(())
}

#[test]
fn two_domains_stay_at_rest() -> Fallible {
    stay(1.0)
}

#[test]
#[ignore = "long: run with --ignored"]
fn two_domains_stay_at_rest_for_thirty_relaxation_times() -> Fallible {
    stay(30.0)
}
