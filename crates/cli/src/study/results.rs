//! What a study leaves beside its runs: table, diagram, page. Nothing in it depends on when, where and in which order
//! the runs were done.

use super::Study;
use super::expand::Run;
use super::record::State;
use super::rules::{FAILED, UNFINISHED};
use super::diagram::{diagram, draw, to_png};
use super::page::page;
use super::table::table;
use crate::failure::Failure;
use crate::run::summary::replace;
use std::path::Path;

/// The table for spreadsheets and scripts.
const TABLE_FILE: &str = "table.csv";
/// The same with types.
const PARQUET_FILE: &str = "table.parquet";

/// Outcomes over the axes.
const DIAGRAM_FILE: &str = "phase_diagram.svg";
/// The same in pixels.
const PICTURE_FILE: &str = "phase_diagram.png";
/// Everything on one page.
const PAGE_FILE: &str = "report.html";

/// The class of a run.
pub fn outcome<'a>(study: &'a Study, state: &State) -> &'a str {
    match state {
        State::Unfinished => UNFINISHED,
        State::Failed { .. } => FAILED,
        State::Ended(end) => study.rules.classify(end),
    }
}

/// Write table, diagram and page into the directory of a study.
///
/// # Errors
/// [`Failure::Files`].
pub fn write(study: &Study, runs: &[Run], states: &[State], folder: &Path) -> Result<(), Failure> {
    let table = table(study, runs, states);
    replace(&folder.join(TABLE_FILE), &table.to_csv())?;
    replace(&folder.join(PARQUET_FILE), &super::parquet_file::bytes(&table)?)?;
    let picture = diagram(study, runs, states).map(|diagram| draw(&diagram));
    if let Some(picture) = &picture {
        replace(&folder.join(DIAGRAM_FILE), picture.as_bytes())?;
        replace(&folder.join(PICTURE_FILE), &to_png(picture)?)?;
    }
    replace(&folder.join(PAGE_FILE), page(study, runs, states, picture.as_deref()).as_bytes())
}
