//! `pellicle report`.

mod bars;
pub mod colours;
mod data;
pub mod page;
mod plot;
mod prefix;
mod snapshot;

use crate::args;
use crate::failure::Failure;
use crate::run::progress::say;
use data::{Run, read};
use page::{STYLE, escape};
use plot::{Axes, Line, Sample, plot};
use prefix::{Unit, prefixed};
use std::fs;

/// A plot: title, unit, and its columns with their names.
type Plan = (&'static str, Unit, &'static [(&'static str, &'static str)]);

const ENERGY: Unit = Some(("J", 1));
const TIME: Unit = Some(("s", 1));

const PLOTS: [Plan; 14] = [
    ("Free energy", ENERGY, &[("free_energy_J", "free energy")]),
    (
        "Energies",
        ENERGY,
        &[
            ("bending_energy_J", "bending"),
            ("phase_energy_J", "phases"),
            ("protein_energy_J", "protein"),
            ("stretching_energy_J", "stretching"),
            ("gaussian_energy_J", "Gaussian"),
            ("repulsion_energy_J", "repulsion"),
        ],
    ),
    (
        "Ledger",
        ENERGY,
        &[
            ("dissipated_J", "dissipated"),
            ("external_work_J", "work of loads and reservoirs"),
            ("mesh_energy_J", "by changes of the mesh"),
            ("severing_energy_J", "by severed necks"),
        ],
    ),
    ("Energy balance error", None, &[("energy_balance_error", "balance error")]),
    ("Area", Some(("m²", 2)), &[("area_m2", "area")]),
    ("Volume", Some(("m³", 3)), &[("volume_m3", "volume")]),
    ("Reduced volume", None, &[("reduced_volume", "reduced volume")]),
    (
        "Tension",
        Some(("N/m", 1)),
        &[("tension_mean_N_per_m", "mean"), ("tension_min_N_per_m", "least"), ("tension_max_N_per_m", "largest")],
    ),
    ("Pieces", None, &[("piece_count", "pieces")]),
    ("Domains", None, &[("domain_count", "domains")]),
    ("Length of boundaries", Some(("m", 1)), &[("interface_length_m", "length")]),
    ("Mean coverage", None, &[("coverage_mean", "coverage")]),
    ("Neck radius", Some(("m", 1)), &[("neck_radius_m", "thinnest neck")]),
    ("Load force", Some(("N", 1)), &[("load_force_N", "force")]),
];

/// Make a report of runs; returns the exit code.
///
/// # Errors
/// [`Failure::Input`] for a directory without a run, [`Failure::Files`] for files that cannot be read or written.
pub fn run(arguments: &args::Report) -> Result<u8, Failure> {
    let runs = arguments.folders.iter().map(|folder| read(folder)).collect::<Result<Vec<_>, _>>()?;
    let text = document(&runs)?;
    let out = &arguments.out;
    fs::write(out, text).map_err(|error| Failure::system("write", out, &error))?;
    say(format_args!("Report: {}", out.display()));
    Ok(0)
}

fn document(runs: &[Run]) -> Result<String, Failure> {
    let title = match runs {
        [run] => match run.summary.get("title").and_then(|title| title.as_str()) {
            Some(title) => title.to_owned(),
            None => run.name.clone(),
        },
        _ => runs.iter().map(|run| run.name.as_str()).collect::<Vec<_>>().join(", "),
    };
    let end = runs.iter().filter_map(Run::end).fold(0.0, f64::max);
    let plots: String = PLOTS.iter().filter_map(|plan| figure(plan, runs, end)).collect();
    let (mut shapes, mut parameters) = (String::new(), String::new());
    for run in runs {
        let heading = if runs.len() > 1 { format!("<h3>{}</h3>\n", escape(&run.name)) } else { String::new() };
        shapes += &format!("{heading}{}{}{}", snapshot::snapshots(run)?, page::warnings(run), bars::bars(run));
        parameters += &format!(
            "<details><summary>{}: scenario.toml</summary><pre>{}</pre></details>\n",
            escape(&run.name),
            escape(&run.scenario)
        );
    }
    Ok(format!(
        "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"/>\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\"/><title>{title}</title>\
         <style>{STYLE}</style></head>\n<body><h1>{title}</h1>\n{}<h2>Shapes</h2>\n{shapes}<h2>Over time</h2>\n\
         <div class=\"plots\">{plots}</div>\n<h2>Parameters</h2>\n{parameters}\
         <p class=\"small\">Made by pellicle {}.</p></body></html>\n",
        page::overview(runs),
        env!("CARGO_PKG_VERSION"),
        title = escape(&title)
    ))
}

/// Colours tell runs apart and dashes their columns; a single run has a colour per column. All plots share the time
/// axis, so that they can be compared.
fn figure((title, unit, columns): &Plan, runs: &[Run], end: f64) -> Option<String> {
    let (time_factor, time_unit) = prefixed(TIME, end);
    let mut lines = Vec::new();
    for (r, run) in runs.iter().enumerate() {
        for (c, (column, _)) in columns.iter().enumerate() {
            let points = run.line(column);
            if !points.is_empty() {
                let (colour, dashes) = if runs.len() == 1 { (c, 0) } else { (r, c) };
                // A run that agrees with a later one still shows on both sides of it.
                let width = 1.6 + 1.6 * (runs.len() - 1 - r).min(3) as f64;
                lines.push((r, c, Line { colour, dashes, width, points }));
            }
        }
    }
    let largest = lines.iter().flat_map(|(.., line)| &line.points).fold(0.0f64, |most, (_, v)| most.max(v.abs()));
    let (factor, unit) = prefixed(*unit, largest);
    for (t, v) in lines.iter_mut().flat_map(|(.., line)| &mut line.points) {
        (*t, *v) = (time_factor * *t, factor * *v);
    }
    let has = |run: Option<usize>, column: Option<usize>| {
        lines.iter().any(|(r, c, _)| run.is_none_or(|run| run == *r) && column.is_none_or(|column| column == *c))
    };
    let of_runs = (0..runs.len()).filter(|r| runs.len() > 1 && has(Some(*r), None));
    let of_runs = of_runs.map(|r| Sample { name: runs[r].name.clone(), colour: r, dashes: 0 });
    let of_columns = (0..columns.len()).filter(|c| columns.len() > 1 && has(None, Some(*c)));
    let of_columns = of_columns.map(|c| Sample {
        name: columns[c].1.to_owned(),
        colour: if runs.len() > 1 { plot::BLACK } else { c },
        dashes: if runs.len() > 1 { c } else { 0 },
    });
    let legend: Vec<Sample> = of_runs.chain(of_columns).collect();
    let lines: Vec<Line> = lines.into_iter().map(|(.., line)| line).collect();
    plot(&Axes { title, unit: &unit, time_unit: &time_unit, end: time_factor * end }, &lines, &legend)
}
