//! The last lines of a run: what was found, where the files are, what to do next.

use crate::failure::{Failure, INTERRUPTED};
use crate::run::columns::Row;
use crate::run::cursor::Ended;
use crate::run::drive::Finish;
use crate::run::words::{duration, with_unit};
use serde_json::json;
use std::path::Path;

/// Tell how a run ended; returns the exit code.
///
/// # Errors
/// [`Failure::Numerical`] when the solver gave up.
pub fn close(folder: &Path, finish: &Finish) -> Result<u8, Failure> {
    let plan = &finish.checkpoint.plan;
    let place = folder.display();
    let code = match &finish.ended {
        None => INTERRUPTED,
        Some(Ended::Trouble(_)) => 1,
        Some(_) => 0,
    };
    let (word, words) = match &finish.ended {
        None => ("interrupted", "the run was interrupted".to_owned()),
        Some(ended) => (ended.word(), ended.words(plan)),
    };
    finish.progress.event(
        "ended",
        json!({
            "stopped_by": word,
            "stopped": words,
            "exit_code": code,
            "folder": folder.to_string_lossy(),
            "end": finish.row.to_json(),
        }),
    );
    let (ledger, cursor) = (&finish.checkpoint.state.ledger, &finish.checkpoint.cursor);
    finish.progress.tell(format_args!(
        "Ended: {words} ({} steps, {} refused, {}).",
        ledger.accepted,
        ledger.refused,
        duration(finish.checkpoint.accounts.total)
    ));
    finish.progress.tell(format_args!("Found: {}.", findings(finish)));
    finish.progress.tell(format_args!(
        "Files: {place}/series.csv ({}), {place}/fields.pvd ({}), {place}/summary.json",
        counted(cursor.rows, "row"),
        counted(cursor.frames, "frame")
    ));
    let time = finish.row.get("time_s").unwrap_or(0.0);
    match &finish.ended {
        None => {
            finish.progress.tell(format_args!("Next:  pellicle resume {place}"));
            Ok(code)
        }
        Some(Ended::Trouble(why)) => Err(Failure::Numerical(format!(
            "{why}. Everything up to there is in {place}; run.log lists the refused steps"
        ))),
        Some(Ended::Time) => {
            let later = with_unit(2.0 * time, "s");
            finish.progress.tell(format_args!("Next:  pellicle resume {place} --until \"{later}\""));
            Ok(code)
        }
        Some(_) => Ok(code),
    }
}

fn counted(count: u64, what: &str) -> String {
    format!("{count} {what}{}", if count == 1 { "" } else { "s" })
}

/// What is worth saying about the end state.
fn findings(finish: &Finish) -> String {
    let plan = &finish.checkpoint.plan;
    let scales = &plan.scales;
    let row: &Row = &finish.row;
    let thermal = |energy: f64| energy / scales.thermal_energy;
    let start = finish.checkpoint.state.ledger.start_energy * scales.energy;
    let mut parts = vec![format!(
        "free energy {:.2} kBT (at the start {:.2})",
        thermal(row.get("free_energy_J").unwrap_or(f64::NAN)),
        thermal(start)
    )];
    for (column, name, digits) in
        [("reduced_volume", "reduced volume", 4), ("domain_count", "domains", 0), ("coverage_mean", "mean coverage", 4)]
    {
        if let Some(value) = row.get(column) {
            parts.push(format!("{name} {value:.digits$}"));
        }
    }
    for (column, name, unit) in [
        ("neck_radius_m", "thinnest neck", "m"),
        ("load_force_N", "load", "N"),
        ("load_extension_m", "extension", "m"),
    ] {
        if let Some(value) = row.get(column) {
            parts.push(format!("{name} {}", with_unit(value, unit)));
        }
    }
    if let Some(error) = row.get("energy_balance_error") {
        parts.push(format!("energy balance within {:.2} %", 100.0 * error.abs()));
    }
    parts.join(", ")
}
