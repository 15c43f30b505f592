//! An older factor drives the iteration of later steps: the motion is the same, and a simulation taken up from its memory
//! goes on with the same factor, bit for bit.

use pellicle_physics::parameters::{Parameters, Phases, VolumeCondition};
use pellicle_physics::{PhysicsError, Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes;

type Fallible = Result<(), Box<dyn std::error::Error>>;

/// Large enough for a factor to be worth keeping.
fn simulation() -> Result<Simulation, Box<dyn std::error::Error>> {
    let mut mesh = shapes::sphere(1.0, 0.075)?;
    shapes::perturb(&mut mesh, 0.02, 1)?;
    let mut p = Parameters::bare(1.0, 1.0, 3e4);
    p.mesh = None;
    p.step.first = 1e-4;
    p.step.longest = 1e-4;
    p.volume = VolumeCondition::Fixed(vec![(0.0, Geometry::new(&mesh).volume)]);
    p.phases = Some(Phases { line_tension: 1.0, interface_width: 0.3, diffusion_constant: 0.1, width_per_radius: 0.0 });
    let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.4 * (3.0 * x.z).tanh()).collect();
    let state = State::at_rest(&p, mesh, &composition, &[], &[])?;
    Ok(Simulation::new(p, state)?)
}

fn advance(simulation: &mut Simulation, steps: usize) -> Result<(), PhysicsError> {
    for _ in 0..steps {
        simulation.advance(f64::INFINITY)?;
    }
    Ok(())
}

#[test]
fn a_kept_factor_is_made_again_bit_for_bit() -> Fallible {
    let mut simulation = simulation()?;
    advance(&mut simulation, 8)?;
    let mut taken_up = 0;
    for _ in 0..3 {
        advance(&mut simulation, 1)?;
        let memory = simulation.memory();
        taken_up += usize::from(memory.origin.is_some());
        let mut again = Simulation::restore(simulation.parameters.clone(), simulation.state.clone(), memory)?;
        advance(&mut again, 2)?;
        advance(&mut simulation, 2)?;
        assert!(again.state == simulation.state, "the state differs after taking up");
        assert!(again.memory() == simulation.memory(), "the memory differs after taking up");
    }
    let t = simulation.timings;
    let (systems, factors, iterations) = (t.systems, t.factors, t.iterations);
    println!("{systems} systems, {factors} factors, {iterations} iterations, {taken_up} of 3 taken up with a factor");
    assert!(taken_up > 0, "no factor was in use when the simulation was taken up");
    assert!(t.factors < t.systems, "every system had its own factor");
    Ok(())
}
