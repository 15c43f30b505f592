//! `pellicle report`.

mod colours;
mod data;
mod page;
mod plot;
mod snapshot;

use crate::args;
use crate::failure::Failure;
use crate::run::progress::say;
use data::{Run, read};
use page::{STYLE, escape};
use plot::{Line, plot};
use std::fs;

/// A plot: title, unit, and its columns with their factors and names.
type Plan = (&'static str, &'static str, &'static [(&'static str, f64, &'static str)]);

const PLOTS: [Plan; 14] = [
    ("Free energy", "aJ", &[("free_energy_J", 1e18, "free energy")]),
    (
        "Energies",
        "aJ",
        &[
            ("bending_energy_J", 1e18, "bending"),
            ("phase_energy_J", 1e18, "phases"),
            ("protein_energy_J", 1e18, "protein"),
            ("stretching_energy_J", 1e18, "stretching"),
            ("gaussian_energy_J", 1e18, "Gaussian"),
            ("repulsion_energy_J", 1e18, "repulsion"),
        ],
    ),
    (
        "Ledger",
        "aJ",
        &[
            ("dissipated_J", 1e18, "dissipated"),
            ("external_work_J", 1e18, "work of loads and reservoirs"),
            ("mesh_energy_J", 1e18, "by changes of the mesh"),
            ("severing_energy_J", 1e18, "by severed necks"),
        ],
    ),
    ("Energy balance error", "", &[("energy_balance_error", 1.0, "balance error")]),
    ("Area", "µm²", &[("area_m2", 1e12, "area")]),
    ("Volume", "µm³", &[("volume_m3", 1e18, "volume")]),
    ("Reduced volume", "", &[("reduced_volume", 1.0, "reduced volume")]),
    (
        "Tension",
        "mN/m",
        &[
            ("tension_mean_N_per_m", 1e3, "mean"),
            ("tension_min_N_per_m", 1e3, "least"),
            ("tension_max_N_per_m", 1e3, "largest"),
        ],
    ),
    ("Pieces", "", &[("piece_count", 1.0, "pieces")]),
    ("Domains", "", &[("domain_count", 1.0, "domains")]),
    ("Length of boundaries", "µm", &[("interface_length_m", 1e6, "length")]),
    ("Mean coverage", "", &[("coverage_mean", 1.0, "coverage")]),
    ("Neck radius", "nm", &[("neck_radius_m", 1e9, "thinnest neck")]),
    ("Load force", "pN", &[("load_force_N", 1e12, "force")]),
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
    let plots: String = PLOTS.iter().filter_map(|plan| figure(plan, runs)).collect();
    let mut sections = String::new();
    for run in runs {
        sections += &format!(
            "<section><h2>{}: {}</h2>\n{}<h3>Shapes</h3>\n{}<details><summary>Parameters (scenario.toml)</summary>\
             <pre>{}</pre></details></section>\n",
            escape(&run.name),
            escape(&run.told("/title")),
            page::warnings(run),
            snapshot::snapshots(run)?,
            escape(&run.scenario)
        );
    }
    Ok(format!(
        "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"/>\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\"/><title>{title}</title>\
         <style>{STYLE}</style></head>\n<body><h1>{title}</h1>\n{}<h2>Over time</h2>\n<div class=\"plots\">{plots}</div>\n\
         {sections}<p class=\"small\">Made by pellicle {}.</p></body></html>\n",
        page::overview(runs),
        env!("CARGO_PKG_VERSION"),
        title = escape(&title)
    ))
}

/// Colours tell runs apart and dashes their columns; a single run has a colour per column.
fn figure((title, unit, columns): &Plan, runs: &[Run]) -> Option<String> {
    let mut lines = Vec::new();
    for (r, run) in runs.iter().enumerate() {
        for (c, (column, factor, name)) in columns.iter().enumerate() {
            let (name, colour, dashes) = match (runs.len(), columns.len()) {
                (1, _) => ((*name).to_owned(), c, 0),
                (_, 1) => (run.name.clone(), r, 0),
                _ => (format!("{}: {name}", run.name), r, c),
            };
            lines.push(Line { name, colour, dashes, points: run.line(column, *factor) });
        }
    }
    plot(title, unit, &lines)
}
