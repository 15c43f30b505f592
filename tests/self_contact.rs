//! Where the membrane meets itself: the run stops and says so, or the parts keep apart by the pressure that was asked for.
//!
//! # Source
//! Law of the repulsion: Rand & Parsegian, Biochim. Biophys. Acta 988 (1989) 351.

mod common;

use common::{Fallible, Place, assert_code, summary};
use pellicle_physics::energy::repulsion;
use pellicle_physics::parameters::{MeshCare, Repulsion, SelfContact, VolumeCondition};
use pellicle_physics::{Parameters, PhysicsError, Simulation, State};
use pellicle_surface::contact::intersections;
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes::oblate;
use std::f64::consts::PI;

/// Reduced volume that the vesicle is deflated to.
const DEFLATED: f64 = 0.46;

/// A flat vesicle of radius 1 that is deflated until its poles would meet.
fn deflated(self_contact: SelfContact) -> Result<Simulation, PhysicsError> {
    let mesh = oblate(1.0, 0.55, 0.25)?;
    let geometry = Geometry::new(&mesh);
    let target = DEFLATED * geometry.total_area.powf(1.5) / (6.0 * PI.sqrt());
    let mut parameters = Parameters::bare(1.0, 1.0, 3e4);
    parameters.volume = VolumeCondition::Fixed(vec![(0.0, geometry.volume), (1.0, target)]);
    parameters.self_contact = self_contact;
    parameters.step.tolerance = 0.1;
    parameters.mesh = Some(MeshCare {
        adapt: false,
        edge: 0.25,
        shortest: 0.05,
        edges_per_radius: 3.0,
        edges_per_interface: 3.0,
        most_vertices: 2000,
    });
    let state = State::at_rest(&parameters, mesh, &[], &[], &[])?;
    Simulation::new(parameters, state)
}

const MOST_STEPS: usize = 400;

/// Discocytes touch themselves at a reduced volume of 0.51 (Seifert, Berndl & Lipowsky, Phys. Rev. A 44 (1991) 1182, from
/// memory). Measured: 0.518 here, 0.502 on a finer mesh driven in the same way: the poles lag behind the volume.
#[test]
fn without_a_law_the_run_stops_before_the_surface_passes_through_itself() -> Fallible {
    let mut simulation = deflated(SelfContact::Stop)?;
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
    let geometry = &simulation.measured.geometry;
    let reduced = 6.0 * PI.sqrt() * geometry.volume / geometry.total_area.powf(1.5);
    println!("stopped at reduced volume {reduced:.3} near {place:?}");
    assert!(place.xy().norm() < 0.4 && place.z.abs() < 0.1, "not at the poles: {place:?}");
    assert!((0.47..0.53).contains(&reduced), "at a reduced volume of {reduced}");
    assert!(intersections(&simulation.state.mesh).is_empty(), "the state that is kept is sound");
    Ok(())
}

#[test]
fn repulsion_keeps_the_parts_apart() -> Fallible {
    let law = Repulsion { pressure: 2e4, decay_length: 0.02 };
    let mut simulation = deflated(SelfContact::Repel(law))?;
    let mut steps = 0;
    while simulation.state.time < 1.0 {
        simulation.advance(1.0 - simulation.state.time)?;
        steps += 1;
        assert!(steps < MOST_STEPS, "at time {}", simulation.state.time);
    }
    assert!(intersections(&simulation.state.mesh).is_empty());
    let geometry = &simulation.measured.geometry;
    let contacts = &simulation.measured.contacts;
    let gap = contacts.iter().map(|c| c.distance).fold(f64::INFINITY, f64::min);
    let force: f64 = contacts
        .iter()
        .map(|c| 0.5 * geometry.vertex_area[c.vertex as usize] * repulsion::pressure(&law, c.distance))
        .sum();
    println!(
        "{steps} steps, gap {gap:.3}, contact force {force:.2}, repulsion {:.3}, balance {:.4}",
        simulation.energies.repulsion,
        simulation.energy_balance_error()
    );
    // Without repulsion the gap would be negative; forces are some bending rigidities per radius.
    assert!(gap > law.decay_length && gap < 0.5, "gap {gap}");
    assert!(simulation.energies.repulsion > 0.0 && force > 0.1 && force < 1e3, "contact force {force}");
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

/// Through the program: the default stop, in words, with the mend.
#[test]
fn the_program_says_what_happened() -> Fallible {
    let scenario = r#"
title = "Deflated until the poles meet"
[surface]
shape = "oblate"
radius = "1 um"
reduced_volume = 0.55
edge_length = "0.25 um"
[membrane]
bending_rigidity = "20 kBT"
[volume]
condition = "fixed"
reduced_volume = 0.46
ramp = "12 ms"
[time]
end = "12 ms"
tolerance = 0.1
[mesh]
adapt = false
[output]
row_every = "1 ms"
"#;
    let place = Place::new(scenario)?;
    assert_code(&place.run("stops", &[]).output()?, 0);
    let told = summary(&place.path("stops"))?;
    assert_eq!(told["stopped_by"], "self_contact", "{}", told["stopped"]);
    let words = told["stopped"].as_str().unwrap_or_default();
    assert!(words.contains("touches itself near") && words.contains("[self_contact]"), "{words}");
    Ok(())
}
