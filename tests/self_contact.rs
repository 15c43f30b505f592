//! Where the membrane meets itself: the run stops and says so, or the parts keep apart by the pressure that was asked for.
//!
//! # Source
//! Law of the repulsion: Rand & Parsegian, Biochim. Biophys. Acta 988 (1989) 351.

mod common;

use common::{Fallible, Place, assert_code, summary};
use pellicle_physics::energy::repulsion;
use pellicle_physics::parameters::{Pull, Load, MeshCare, Repulsion, SelfContact};
use pellicle_physics::{Parameters, PhysicsError, Simulation, State};
use pellicle_surface::Vec3;
use pellicle_surface::contact::intersections;
use pellicle_surface::mesh::shapes::oblate;
use std::f64::consts::PI;

/// A flat vesicle whose poles are pressed together.
fn pressed(self_contact: SelfContact) -> Result<Simulation, PhysicsError> {
    let mesh = oblate(1.0, 0.62, 0.2)?;
    let top = mesh.positions.iter().map(|x| x.z).fold(0.0, f64::max);
    let push = |sign: f64| Load {
        centre: Vec3::new(0.0, 0.0, sign * top),
        patch_radius: 0.3,
        pull: Pull::Force(vec![(0.0, Vec3::new(0.0, 0.0, -40.0 * sign))]),
    };
    let mut parameters = Parameters::bare(1.0, 1.0, 3e4);
    parameters.loads = vec![push(1.0), push(-1.0)];
    parameters.self_contact = self_contact;
    parameters.step.tolerance = 0.1;
    parameters.mesh = Some(MeshCare {
        adapt: false,
        edge: 0.2,
        shortest: 0.05,
        edges_per_radius: 3.0,
        edges_per_interface: 3.0,
        most_vertices: 2000,
    });
    let state = State::at_rest(&parameters, mesh, &[], &[], &[])?;
    Simulation::new(parameters, state)
}

const MOST_STEPS: usize = 400;

#[test]
fn without_a_law_the_run_stops_before_the_surface_passes_through_itself() -> Fallible {
    let mut simulation = pressed(SelfContact::Stop)?;
    let mut stopped = None;
    for _ in 0..MOST_STEPS {
        match simulation.advance(f64::INFINITY) {
            Ok(_) => {}
            Err(PhysicsError::SelfContact { place, .. }) => {
                stopped = Some(place);
                break;
            }
            Err(error) => return Err(error.into()),
        }
    }
    let place = stopped.ok_or("the poles never met")?;
    println!("stopped at {:.3e} near {place:?}", simulation.state.time);
    assert!(place.xy().norm() < 0.6 && place.z.abs() < 0.2, "not at the poles: {place:?}");
    assert!(intersections(&simulation.state.mesh).is_empty(), "the state that is kept is sound");
    Ok(())
}

#[test]
fn repulsion_keeps_the_parts_apart_and_the_ledger_balanced() -> Fallible {
    let law = Repulsion { pressure: 3e4, decay_length: 0.02 };
    let mut simulation = pressed(SelfContact::Repel(law))?;
    let mut least = f64::INFINITY;
    for _ in 0..MOST_STEPS {
        let report = simulation.advance(f64::INFINITY)?;
        let gap = simulation.measured.contacts.iter().map(|c| c.distance).fold(f64::INFINITY, f64::min);
        least = least.min(gap);
        if report.unrest < 0.1 && gap < 0.3 {
            break;
        }
    }
    assert!(intersections(&simulation.state.mesh).is_empty());
    let contacts = &simulation.measured.contacts;
    let pressed: f64 = contacts
        .iter()
        .map(|c| 0.5 * simulation.measured.geometry.vertex_area[c.vertex as usize] * repulsion::pressure(&law, c.distance))
        .sum();
    println!(
        "t {:.2e}, least gap {least:.3}, contact force {pressed:.2}, repulsion {:.3}, balance {:.4}, dissipated {:.3}",
        simulation.state.time, simulation.energies.repulsion, simulation.energy_balance_error(),
        simulation.state.ledger.dissipated
    );
    assert!(least > 0.0 && least < 0.3, "gap {least}");
    assert!(simulation.energies.repulsion > 0.0);
    // The load is 40; bending carries the rest.
    assert!((1.0..40.0 * 1.2).contains(&pressed), "contact force {pressed}");
    assert!(simulation.energy_balance_error().abs() < 0.1, "{}", simulation.energy_balance_error());
    Ok(())
}

/// Two flat sheets a distance d apart: energy per area P₀ λ exp(−d/λ), each sheet carrying half.
#[test]
fn facing_sheets_have_the_energy_of_the_law() -> Fallible {
    let law = Repulsion { pressure: 5.0, decay_length: 0.1 };
    let mesh = pellicle_surface::mesh::shapes::sphere(1.0, 0.1)?;
    let offset = mesh.n_vertices() as u32;
    // A sphere within a sphere turned inside out: sheets at a distance of 0.2 everywhere.
    let mut both = mesh.clone();
    both.positions.extend(mesh.positions.iter().map(|x| x * 1.2));
    both.triangles.extend(mesh.triangles.iter().map(|[a, b, c]| [a + offset, c + offset, b + offset]));
    let topology = pellicle_surface::Topology::new(both.n_vertices(), &both.triangles)?;
    let geometry = pellicle_surface::geometry::Geometry::new(&both);
    let contacts = pellicle_surface::contact::facing(&both, &topology, &geometry, 1.0);
    let energy = repulsion::energy(&law, &geometry.vertex_area, &contacts);
    let area = 2.0 * PI * (1.0 + 1.44);
    let exact = area * 5.0 * 0.1 * (-2.0f64).exp();
    // Second order in the edge: the sag of the triangles, h²/8 of 0.1, changes the distance by 1 %.
    assert!((energy / exact - 1.0).abs() < 0.02, "{energy} against {exact}");
    Ok(())
}

/// Through the program: the default stop, in words, and the mend that it names.
#[test]
fn the_program_says_what_happened_and_the_mend_works() -> Fallible {
    let scenario = r#"
title = "Pressed flat"
[surface]
shape = "oblate"
radius = "1 um"
reduced_volume = 0.62
edge_length = "0.22 um"
[membrane]
bending_rigidity = "20 kBT"
[volume]
condition = "free"
[time]
end = "20 ms"
tolerance = 0.1
[mesh]
adapt = false
[[load]]
direction = [0, 0, 1]
patch_radius = "0.3 um"
path = [{ time = "0 s", force = ["0 pN", "0 pN", "-3.5 pN"] }]
[[load]]
direction = [0, 0, -1]
patch_radius = "0.3 um"
path = [{ time = "0 s", force = ["0 pN", "0 pN", "3.5 pN"] }]
[output]
row_every = "1 ms"
"#;
    let place = Place::new(scenario)?;
    assert_code(&place.run("stops", &[]).output()?, 0);
    let told = summary(&place.path("stops"))?;
    assert_eq!(told["stopped_by"], "self_contact");
    let words = told["stopped"].as_str().unwrap_or_default();
    assert!(words.contains("touches itself near") && words.contains("[self_contact]"), "{words}");

    let repel = [
        "--set", "self_contact.response=\"repel\"", "--set", "self_contact.pressure=\"2 kPa\"",
        "--set", "self_contact.decay_length=\"20 nm\"", "--set", "time.end=\"1.2 ms\"",
    ];
    assert_code(&place.run("repels", &repel).output()?, 0);
    assert_eq!(summary(&place.path("repels"))?["stopped_by"], "time");
    Ok(())
}
