//! `summary.json`: how the run ended, and all that one needs to run it again.

use super::checkpoint::Checkpoint;
use super::columns::Row;
use super::plan::Plan;
use crate::failure::Failure;
use pellicle_physics::step::mechanics::Timings;
use serde::{Deserialize, Serialize};
use serde_json::{Value, json};
use std::fs::{self, File};
use std::io::Write;
use std::path::Path;

/// Name of the file.
pub const SUMMARY_FILE: &str = "summary.json";
/// Counts up when anything that others rely on changes: names of files, columns, arrays.
pub const OUTPUT_FORMAT: u32 = 1;

/// Wall time spent so far, over all starts of a run [s].
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Accounts {
    /// Wall time of the first start, RFC 3339.
    pub started: String,
    /// Threads in use.
    pub threads: u64,
    /// How often the run was taken up again.
    pub resumed: u64,
    /// All of it.
    pub total: f64,
    /// Energies, gradients, geometry.
    pub forces: f64,
    /// Matrix values.
    pub assembly: f64,
    /// Numeric factorisation.
    pub factorisation: f64,
    /// Back-solves.
    pub solves: f64,
    /// Composition, protein diffusion and binding.
    pub transport: f64,
    /// Mesh motion and remap.
    pub remap: f64,
    /// Flips, splits, collapses and new analyses.
    pub remeshing: f64,
    /// Rows, frames and checkpoints, as far as the run waited for them.
    pub output: f64,
    /// Linear systems of the motion.
    pub systems: u64,
    /// Factors made for them.
    pub factors: u64,
    /// Krylov iterations for them.
    pub iterations: u64,
    /// Connectivities analysed because the mesh changed.
    pub analyses: u64,
}

impl Accounts {
    /// These accounts with the time of a simulation begun after them, and of the run around it.
    pub fn with(&self, timings: &Timings, total: f64, output: f64) -> Self {
        Self {
            started: self.started.clone(),
            threads: self.threads,
            resumed: self.resumed,
            total: self.total + total,
            forces: self.forces + timings.forces,
            assembly: self.assembly + timings.assembly,
            factorisation: self.factorisation + timings.factorisation,
            solves: self.solves + timings.solves,
            transport: self.transport + timings.transport,
            remap: self.remap + timings.remap,
            remeshing: self.remeshing + timings.remeshing,
            output: self.output + output,
            systems: self.systems + timings.systems,
            factors: self.factors + timings.factors,
            iterations: self.iterations + timings.iterations,
            analyses: self.analyses + timings.analyses,
        }
    }

    fn to_json(&self) -> Value {
        let parts = [
            self.forces,
            self.assembly,
            self.factorisation,
            self.solves,
            self.transport,
            self.remap,
            self.remeshing,
            self.output,
        ];
        json!({
            "total_s": self.total,
            "forces_s": self.forces,
            "assembly_s": self.assembly,
            "factorisation_s": self.factorisation,
            "solves_s": self.solves,
            "transport_s": self.transport,
            "remap_s": self.remap,
            "remeshing_s": self.remeshing,
            "output_s": self.output,
            "other_s": (self.total - parts.iter().sum::<f64>()).max(0.0),
        })
    }
}

/// The processor's name, where the system tells it.
fn processor() -> Option<String> {
    let text = fs::read_to_string("/proc/cpuinfo").ok()?;
    let line = text.lines().find(|line| line.starts_with("model name"))?;
    Some(line.split_once(':')?.1.trim().to_owned())
}

/// Whether a run has ended, and in which words.
pub struct Outcome<'a> {
    /// One word for programs.
    pub word: &'a str,
    /// In words.
    pub words: &'a str,
    /// Warnings met while it ran, beside those of the scenario.
    pub warnings: &'a [String],
}

fn summary(plan: &Plan, now: &Checkpoint, row: &Row, outcome: &Outcome) -> Value {
    let (cursor, ledger) = (&now.cursor, &now.state.ledger);
    let warnings: Vec<&str> = plan
        .warnings
        .lines()
        .chain(outcome.warnings.iter().map(String::as_str))
        .collect();
    json!({
        "format": OUTPUT_FORMAT,
        "title": plan.title,
        "stopped_by": outcome.word,
        "stopped": outcome.words,
        "end": row.to_json(),
        "steps": {
            "accepted": ledger.accepted,
            "refused": ledger.refused,
            "bounded_by": cursor.bounded_by.to_json(),
            "refused_for": cursor.refused_for.to_json(),
        },
        "solver": {
            "systems": now.accounts.systems,
            "factors": now.accounts.factors,
            "iterations": now.accounts.iterations,
            "new_connectivities": now.accounts.analyses,
        },
        "output": { "rows": cursor.rows, "frames": cursor.frames },
        "timings": now.accounts.to_json(),
        "warnings": warnings,
        "provenance": {
            "program": "pellicle",
            "version": env!("CARGO_PKG_VERSION"),
            "scenario_sha256": plan.scenario_sha256,
            "state_sha256": now.fingerprint(),
            "started_from": plan.origin,
            "seed": plan.seed,
            "threads": now.accounts.threads,
            "resumed": now.accounts.resumed,
            "warnings_of_resuming": outcome.warnings,
            "machine": {
                "system": std::env::consts::OS,
                "architecture": std::env::consts::ARCH,
                "processor": processor(),
                "cores": std::thread::available_parallelism().map_or(1, usize::from),
            },
            "started": now.accounts.started,
            "ended": super::log::now(),
        },
    })
}

/// Write the summary, whole or not at all.
///
/// # Errors
/// [`Failure::Files`].
pub fn write(folder: &Path, plan: &Plan, now: &Checkpoint, row: &Row, outcome: &Outcome) -> Result<(), Failure> {
    let text = format!("{:#}\n", summary(plan, now, row, outcome));
    replace(&folder.join(SUMMARY_FILE), text.as_bytes())
}

/// Write a small file, whole or not at all.
///
/// # Errors
/// [`Failure::Files`]; an older file of that name is then untouched.
pub fn replace(path: &Path, bytes: &[u8]) -> Result<(), Failure> {
    let mut name = path.file_name().unwrap_or_default().to_owned();
    name.push(".unfinished");
    let unfinished = path.with_file_name(name);
    let written = File::create(&unfinished).and_then(|mut file| {
        file.write_all(bytes)?;
        file.sync_all()
    });
    written.and_then(|()| fs::rename(&unfinished, path)).map_err(|error| {
        let _ = fs::remove_file(&unfinished);
        Failure::system("write", path, &error)
    })
}
