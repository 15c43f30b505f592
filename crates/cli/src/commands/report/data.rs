//! What a run left: its table, its summary, its scenario, its frames.

use crate::failure::Failure;
use crate::run::frames::COLLECTION_FILE;
use pellicle_vtk::{Limits, Series};
use serde_json::Value;
use std::collections::HashMap;
use std::fs;
use std::path::{Path, PathBuf};

/// A run as found on the disk.
pub struct Run {
    /// Name of its directory.
    pub name: String,
    /// Columns of the table; `None` where a cell is empty.
    pub columns: HashMap<String, Vec<Option<f64>>>,
    /// `summary.json`; `Null` while a run goes on or after a crash.
    pub summary: Value,
    /// `error_bars.json`; `Null` for a run without.
    pub error_bars: Value,
    /// `scenario.toml`.
    pub scenario: String,
    /// Frames: time [s] and file.
    pub frames: Vec<(f64, PathBuf)>,
}

/// Read a run.
///
/// # Errors
/// [`Failure::Input`] for a directory without a run, [`Failure::Files`] for files that cannot be read.
pub fn read(folder: &Path) -> Result<Run, Failure> {
    let table = folder.join("series.csv");
    if !table.is_file() {
        return Err(Failure::Input(format!(
            "{} holds no run: there is no series.csv in it",
            folder.display()
        )));
    }
    let optional = |name: &str| fs::read_to_string(folder.join(name)).unwrap_or_default();
    let collection = folder.join(COLLECTION_FILE);
    let frames = if collection.is_file() {
        let series = Series::open(collection, &Limits::default())?;
        series.entries().iter().map(|entry| (entry.time, series.frame_path(&entry.file_name))).collect()
    } else {
        Vec::new()
    };
    let whole = fs::canonicalize(folder).unwrap_or_else(|_| folder.to_owned());
    let name = whole.file_name().map_or_else(|| whole.to_string_lossy().into_owned(), |name| name.to_string_lossy().into_owned());
    Ok(Run {
        name,
        columns: columns(&table)?,
        summary: serde_json::from_str(&optional("summary.json")).unwrap_or(Value::Null),
        error_bars: serde_json::from_str(&optional("error_bars.json")).unwrap_or(Value::Null),
        scenario: optional("scenario.toml"),
        frames,
    })
}

fn columns(path: &Path) -> Result<HashMap<String, Vec<Option<f64>>>, Failure> {
    let failed = |error: csv::Error| Failure::Files(format!("cannot read {}: {error}", path.display()));
    let mut reader = csv::ReaderBuilder::new().flexible(true).from_path(path).map_err(failed)?;
    let names: Vec<String> = reader.headers().map_err(failed)?.iter().map(str::to_owned).collect();
    let mut columns: Vec<Vec<Option<f64>>> = vec![Vec::new(); names.len()];
    for record in reader.records() {
        let record = record.map_err(failed)?;
        for (k, column) in columns.iter_mut().enumerate() {
            let value = record.get(k).and_then(|cell| cell.parse().ok());
            column.push(value.filter(|x: &f64| x.is_finite()));
        }
    }
    Ok(names.into_iter().zip(columns).collect())
}

impl Run {
    /// Points (time, value) of a column; empty where the run has no such values.
    pub fn line(&self, column: &str) -> Vec<(f64, f64)> {
        let (Some(times), Some(values)) = (self.columns.get("time_s"), self.columns.get(column)) else {
            return Vec::new();
        };
        let pairs = times.iter().zip(values);
        pairs.filter_map(|(time, value)| Some(((*time)?, (*value)?))).collect()
    }

    /// Time of the last row [s].
    pub fn end(&self) -> Option<f64> {
        self.columns.get("time_s")?.iter().rev().find_map(|time| *time)
    }

    /// A text of the summary, or a dash.
    pub fn told(&self, pointer: &str) -> String {
        match self.summary.pointer(pointer) {
            Some(Value::String(text)) => text.clone(),
            Some(Value::Null) | None => "–".to_owned(),
            Some(other) => other.to_string(),
        }
    }
}
