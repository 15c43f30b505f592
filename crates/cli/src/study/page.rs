//! The page of a study: its diagram, how many runs ended how, all runs, what failed.

use super::expand::Run;
use super::record::State;
use super::{Study, results};
use crate::commands::report::page::{STYLE, escape, number};
use crate::run::columns::COLUMNS;

/// Columns shown of each run, where at least one has them.
const SHOWN: [&str; 7] = [
    "time_s",
    "free_energy_J",
    "reduced_volume",
    "domain_count",
    "interface_length_m",
    "neck_radius_m",
    "load_force_N",
];
/// What fits a wide table on paper.
const MORE_STYLE: &str = "td,th{padding:.15em .45em;font-size:13px}.failed td{background:#f3e3e3}thead{display:table-header-group}\
tr{break-inside:avoid}.picture svg text{font-family:system-ui,sans-serif}";

/// The page as HTML that needs nothing else.
pub fn page(study: &Study, runs: &[Run], states: &[State], picture: Option<&str>) -> String {
    let title = escape(&study.title);
    let counts: String = study
        .rules
        .classes()
        .into_iter()
        .map(|class| (class, states.iter().filter(|state| results::outcome(study, state) == class).count()))
        .filter(|(_, count)| *count > 0)
        .map(|(class, count)| format!("<tr><th>{}</th><td>{count}</td></tr>\n", escape(class)))
        .collect();
    let failures: String = runs
        .iter()
        .zip(states)
        .filter_map(|(run, state)| Some((run, state.failure()?)))
        .map(|(run, reason)| format!("<tr><td>{}</td><td>{}</td></tr>\n", run.id, escape(reason)))
        .collect();
    let failures = match failures.is_empty() {
        true => String::new(),
        false => format!("<h2>Failed runs</h2>\n<table><tr><th>run</th><th>reason</th></tr>\n{failures}</table>\n"),
    };
    let picture = picture.map(|svg| format!("<div class=\"picture\">{svg}</div>\n")).unwrap_or_default();
    format!(
        "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"/>\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\"/><title>{title}</title>\
         <style>{STYLE}{MORE_STYLE}</style></head>\n<body><h1>{title}</h1>\n{picture}<h2>Outcomes</h2>\n\
         <table>{counts}<tr><th>runs</th><td>{}</td></tr></table>\n{failures}<h2>Runs</h2>\n{}\
         <p class=\"small\">Numbers are those at the end of each run; table.csv and table.parquet have all columns in \
         full precision. Made by pellicle {}.</p></body></html>\n",
        runs.len(),
        table(study, runs, states),
        env!("CARGO_PKG_VERSION")
    )
}

fn table(study: &Study, runs: &[Run], states: &[State]) -> String {
    let end = |state: &State, column: &str| match state {
        State::Ended(end) => end.end(column),
        _ => None,
    };
    let columns: Vec<&str> = COLUMNS
        .into_iter()
        .filter(|column| SHOWN.contains(column) && states.iter().any(|state| end(state, column).is_some()))
        .collect();
    let keys = study.axes.iter().flat_map(|axis| &axis.keys).map(|(path, _)| path.as_str());
    let heads = ["run", "outcome"].into_iter().chain(keys).chain(["seed", "stopped by"]).chain(columns.iter().copied());
    let head: String = heads.map(|name| format!("<th>{}</th>", escape(&name.replace('_', " ")))).collect();
    let mut rows = String::new();
    for (run, state) in runs.iter().zip(states) {
        let mut cells = vec![run.id.clone(), escape(results::outcome(study, state))];
        cells.extend(run.cells.iter().map(|cell| escape(&cell.given)));
        cells.push(run.seed.to_string());
        cells.push(match state {
            State::Ended(end) => escape(&end.stopped_by().replace('_', " ")),
            _ => "–".to_owned(),
        });
        cells.extend(columns.iter().map(|column| end(state, column).map_or_else(|| "–".to_owned(), number)));
        let class = if state.failure().is_some() { " class=\"failed\"" } else { "" };
        let cells: String = cells.iter().map(|cell| format!("<td>{cell}</td>")).collect();
        rows += &format!("<tr{class}>{cells}</tr>\n");
    }
    format!("<table><thead><tr>{head}</tr></thead>\n<tbody>\n{rows}</tbody></table>\n")
}
