//! `pellicle check`.

use crate::args;
use crate::failure::Failure;
use crate::run::progress::{complain, say};
use crate::run::words::with_unit;
use crate::scenario;
use pellicle_physics::Simulation;

/// Say what a scenario means; returns the exit code.
///
/// # Errors
/// [`Failure::Input`] for a scenario that cannot be run.
pub fn run(arguments: &args::Check) -> Result<u8, Failure> {
    let setup = scenario::load(&arguments.scenario, &arguments.set)?;
    let simulation = Simulation::new(setup.parameters.clone(), setup.state.clone())
        .map_err(|error| Failure::Input(format!("the scenario cannot be run: {error}")))?;
    if arguments.resolved {
        say(&setup.resolved);
    }
    let scales = &setup.scales;
    let mesh = &simulation.state.mesh;
    let topology = &simulation.connectivity.topology;
    let kind = match (mesh.period, topology.is_closed()) {
        (Some(_), _) => "periodic tube",
        (None, true) => "closed surface",
        (None, false) => "framed patch",
    };
    let length = |value: f64| with_unit(value * scales.length, "m");
    say(&setup.title);
    say(format_args!(
        "  surface      {kind}, {} vertices, edges of {} on average",
        mesh.n_vertices(),
        length(mesh.mean_edge_length())
    ));
    let size = pellicle_physics::diagnostics::size(&simulation);
    say(format_args!("  size         {}", length(size)));
    say(format_args!(
        "  free energy  {:.2} kBT at the start",
        simulation.energies.total() * scales.energy / scales.thermal_energy
    ));
    say(format_args!("  until        {}", with_unit(setup.stop.time * scales.time, "s")));
    let rows = match setup.cadence.row_every {
        Some(every) => format!("every {}", with_unit(every * scales.time, "s")),
        None => "every step".to_owned(),
    };
    say(format_args!("  rows         {rows}"));
    for warning in &setup.warnings {
        complain(format_args!("warning: {warning}"));
    }
    say("The scenario can be run.");
    Ok(0)
}
