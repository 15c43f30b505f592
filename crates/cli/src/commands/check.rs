//! `pellicle check`.

pub mod cost;
mod numbers;
mod ranges;
mod resolution;

use crate::args;
use crate::failure::Failure;
use crate::run::progress::{complain, say};
use crate::run::words::{duration, with_unit};
use crate::scenario;
use crate::setup::Setup;
use crate::units::{measure, parse_as};
use cost::{BASIS, Cost, cost};
use numbers::{Case, Number, numbers};
use pellicle_physics::Simulation;
use ranges::{Findings, compare};
use resolution::{Need, needs};
use serde_json::{Value, json};

/// What is found about a scenario.
struct Report {
    kind: &'static str,
    numbers: Vec<Number>,
    needs: Vec<Need>,
    costs: Vec<Cost>,
    findings: Findings,
}

/// Say what a scenario means; returns the exit code.
///
/// # Errors
/// [`Failure::Input`] for a scenario that cannot be run.
pub fn run(arguments: &args::Check) -> Result<u8, Failure> {
    let setup = scenario::load(&arguments.scenario, &arguments.set)?;
    let simulation = Simulation::new(setup.parameters.clone(), setup.state.clone())
        .map_err(|error| Failure::Input(format!("the scenario cannot be run: {error}")))?;
    let case = Case::new(&setup, &simulation, bulk_viscosity(&setup));
    let report = examine(&case);
    if arguments.json {
        say(in_json(&case, &report, arguments.resolved));
    } else {
        if arguments.resolved {
            say(&setup.resolved);
        }
        in_words(&case, &report);
    }
    Ok(0)
}

fn examine(case: &Case<'_>) -> Report {
    let setup = case.setup;
    let mesh = &case.simulation.state.mesh;
    let kind = match (mesh.period, case.simulation.connectivity.topology.is_closed()) {
        (Some(_), _) => "periodic tube",
        (None, true) => "closed surface",
        (None, false) => "framed patch",
    };
    let mut costs = vec![cost(mesh.n_vertices())];
    if let Some(care) = setup.parameters.mesh.filter(|care| care.adapt) {
        costs.push(cost(care.most_vertices));
    }
    let mut findings = compare(case);
    let needs = needs(case);
    for need in needs.iter().filter(|need| !need.met()) {
        findings.warnings.push(format!(
            "the mesh is too coarse for the {} ({}): {:.1} edges, {:.1} needed; use a shorter edge_length there",
            need.name,
            case.length(need.length),
            need.at_start.max(need.adapted),
            need.needed
        ));
    }
    findings.warnings.splice(0..0, setup.warnings.iter().cloned());
    Report { kind, numbers: numbers(case), needs, costs, findings }
}

/// Viscosity of the liquid [Pa s], where the scenario names it.
fn bulk_viscosity(setup: &Setup) -> Option<f64> {
    let scenario: toml::Table = setup.resolved.parse().ok()?;
    let text = scenario.get("surroundings")?.get("bulk_viscosity")?.as_str()?.to_owned();
    parse_as(&text, &measure::BULK_VISCOSITY, None).ok()
}

fn in_words(case: &Case<'_>, report: &Report) {
    let (setup, simulation) = (case.setup, case.simulation);
    let (scales, mesh) = (&setup.scales, &simulation.state.mesh);
    say(&setup.title);
    say(format_args!(
        "  surface      {}, {} vertices, edges of {} on average",
        report.kind,
        mesh.n_vertices(),
        case.length(mesh.mean_edge_length())
    ));
    say(format_args!("  size         {}", case.length(case.size)));
    say(format_args!(
        "  free energy  {:.2} kBT at the start",
        simulation.energies.total() * scales.energy / scales.thermal_energy
    ));
    say(format_args!("  until        {}", case.time(setup.stop.time)));
    let rows = match setup.cadence.row_every {
        Some(every) => format!("every {}", case.time(every)),
        None => "every step".to_owned(),
    };
    say(format_args!("  rows         {rows}"));
    say("What matters (L: size, kappa: bending rigidity, zeta: shear viscosity, eta: bulk viscosity)");
    for number in &report.numbers {
        say(format_args!("  {}, {}: {}", number.name, number.formula, short(number.value)));
        say(format_args!("      {}", number.verdict));
    }
    if !report.needs.is_empty() {
        say("Resolution");
    }
    for need in &report.needs {
        say(format_args!(
            "  {}, {}: {:.1} edges at the start, {:.1} once adapted, {:.1} needed: {}",
            need.name,
            case.length(need.length),
            need.at_start,
            need.adapted,
            need.needed,
            need.verdict()
        ));
    }
    say(format_args!("Cost ({BASIS})"));
    for (cost, when) in report.costs.iter().zip(["at the start", "at most, when mesh.most_vertices is reached"]) {
        say(format_args!(
            "  {} vertices: {:.0} MB, {} per step, {} per 1000 steps {when}",
            cost.vertices,
            cost.bytes / 1e6,
            with_unit(cost.seconds_per_step, "s"),
            duration(1e3 * cost.seconds_per_step)
        ));
        say(format_args!("    linear systems: {}", cost.way.words()));
    }
    for note in &report.findings.notes {
        say(format_args!("Note: {note}"));
    }
    for warning in &report.findings.warnings {
        complain(format_args!("warning: {warning}"));
    }
    say("The scenario can be run.");
}

/// Three digits of any number.
fn short(value: f64) -> String {
    match value.abs() {
        size if size == 0.0 || (1e-2..1e4).contains(&size) => format!("{value:.3}"),
        _ => format!("{value:.2e}"),
    }
}

fn in_json(case: &Case<'_>, report: &Report, resolved: bool) -> Value {
    let (setup, scales, mesh) = (case.setup, &case.setup.scales, &case.simulation.state.mesh);
    let numbers: Vec<Value> = report
        .numbers
        .iter()
        .map(|number| {
            json!({
                "name": number.key, "title": number.name, "formula": number.formula,
                "value": number.value, "verdict": number.verdict,
            })
        })
        .collect();
    let needs: Vec<Value> = report
        .needs
        .iter()
        .map(|need| {
            json!({
                "name": need.key, "length_m": need.length * scales.length, "edges_needed": need.needed,
                "edges_at_start": need.at_start, "edges_adapted": need.adapted, "resolved": need.met(),
                "verdict": need.verdict(),
            })
        })
        .collect();
    let costs: Vec<Value> = report
        .costs
        .iter()
        .map(|cost| {
            json!({
                "vertices": cost.vertices, "memory_bytes": cost.bytes, "seconds_per_step": cost.seconds_per_step,
                "linear_systems": cost.way.words(),
            })
        })
        .collect();
    let mut value = json!({
        "format": 1,
        "title": setup.title,
        "surface": report.kind,
        "vertices": mesh.n_vertices(),
        "edge_length_m": mesh.mean_edge_length() * scales.length,
        "size_m": case.size * scales.length,
        "free_energy_J": case.simulation.energies.total() * scales.energy,
        "until_s": setup.stop.time * scales.time,
        "row_every_s": setup.cadence.row_every.map(|every| every * scales.time),
        "numbers": numbers,
        "resolution": needs,
        "cost": costs,
        "cost_basis": BASIS,
        "notes": report.findings.notes,
        "warnings": report.findings.warnings,
    });
    if resolved {
        value["scenario"] = json!(setup.resolved);
    }
    value
}
