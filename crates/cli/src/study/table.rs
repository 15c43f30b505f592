//! The table of a study: one row per run, in the order of the study.

use super::expand::Run;
use super::record::State;
use super::{Study, results};
use crate::run::columns::COLUMNS;
use crate::scenario::keys::Kind;

/// A table.
#[derive(Clone, Debug, PartialEq)]
pub struct Table {
    /// Its columns, all of the same length.
    pub columns: Vec<Column>,
}

/// A column with its name.
#[derive(Clone, Debug, PartialEq)]
pub struct Column {
    /// Name, with the unit at its end.
    pub name: String,
    /// Its cells.
    pub cells: Cells,
}

/// Cells of a column; `None` is an empty cell.
#[derive(Clone, Debug, PartialEq)]
pub enum Cells {
    /// Texts.
    Text(Vec<Option<String>>),
    /// Numbers, in SI.
    Number(Vec<Option<f64>>),
    /// Whole numbers.
    Count(Vec<Option<i64>>),
}

impl Table {
    /// As RFC 4180 has it; numbers read back as the same.
    pub fn to_csv(&self) -> Vec<u8> {
        let mut writer = csv::WriterBuilder::new().terminator(csv::Terminator::CRLF).from_writer(Vec::new());
        // Writing to memory does not fail, and all records have the same length.
        let _ = writer.write_record(self.columns.iter().map(|column| column.name.as_str()));
        let rows = self.columns.first().map_or(0, |column| column.cells.len());
        for row in 0..rows {
            let _ = writer.write_record(self.columns.iter().map(|column| column.cells.shown(row)));
        }
        writer.into_inner().unwrap_or_default()
    }
}

impl Cells {
    fn len(&self) -> usize {
        match self {
            Self::Text(cells) => cells.len(),
            Self::Number(cells) => cells.len(),
            Self::Count(cells) => cells.len(),
        }
    }

    /// A cell as text; empty for an empty one.
    pub fn shown(&self, row: usize) -> String {
        match self {
            Self::Text(cells) => cells.get(row).cloned().flatten().unwrap_or_default(),
            Self::Number(cells) => cells.get(row).copied().flatten().map(|x| format!("{x:e}")).unwrap_or_default(),
            Self::Count(cells) => cells.get(row).copied().flatten().map(|i| i.to_string()).unwrap_or_default(),
        }
    }
}

/// The table of a study.
pub fn table(study: &Study, runs: &[Run], states: &[State]) -> Table {
    let mut columns = Vec::new();
    let mut push = |name: String, cells: Cells| columns.push(Column { name, cells });
    let texts = |of: &dyn Fn(&State) -> Option<String>| {
        Cells::Text(states.iter().map(|state| of(state).filter(|text| !text.is_empty())).collect())
    };
    push("id".into(), Cells::Text(runs.iter().map(|run| Some(run.id.clone())).collect()));
    push("outcome".into(), texts(&|state| Some(results::outcome(study, state).to_owned())));
    let keys = study.axes.iter().flat_map(|axis| &axis.keys);
    for (k, (path, key)) in keys.enumerate() {
        let cell = |run: &Run| run.cells.get(k).cloned();
        let si = || runs.iter().map(|run| cell(run)?.si);
        match key.kind {
            Kind::Number(_) => push(path.clone(), Cells::Number(si().collect())),
            Kind::Whole(..) => push(path.clone(), Cells::Count(si().map(|x| Some(x? as i64)).collect())),
            kind => {
                let given = runs.iter().map(|run| Some(cell(run)?.given)).collect();
                push(path.clone(), Cells::Text(given));
                if let Kind::Quantity(measure, _) = kind {
                    push(format!("{path}_{}", suffix(measure.unit)), Cells::Number(si().collect()));
                }
            }
        }
    }
    push("seed".into(), Cells::Count(runs.iter().map(|run| Some(run.seed)).collect()));
    push("stopped_by".into(), texts(&|state| match state {
        State::Ended(end) => Some(end.stopped_by().to_owned()),
        _ => None,
    }));
    push("failure".into(), texts(&|state| state.failure().map(str::to_owned)));
    let counts = |of: &dyn Fn(&State) -> Option<i64>| Cells::Count(states.iter().map(of).collect());
    push("warning_count".into(), counts(&|state| match state {
        State::Ended(end) => Some(end.warnings().len() as i64),
        _ => None,
    }));
    push("warnings".into(), texts(&|state| match state {
        State::Ended(end) => Some(end.warnings().join("; ")),
        _ => None,
    }));
    push("steps_accepted".into(), counts(&|state| match state {
        State::Ended(end) => end.summary.pointer("/steps/accepted")?.as_i64(),
        _ => None,
    }));
    for name in COLUMNS {
        let value = |state: &State| match state {
            State::Ended(end) => end.end(name),
            _ => None,
        };
        let values = states.iter().map(value);
        let cells = match name.ends_with("_count") {
            true => Cells::Count(values.map(|x| Some(x? as i64)).collect()),
            false => Cells::Number(values.collect()),
        };
        push(name.to_owned(), cells);
    }
    Table { columns }
}

/// A unit as the end of a column's name: `N/m` becomes `N_per_m`.
pub fn suffix(unit: &str) -> String {
    let (above, below) = match unit.split_once('/') {
        Some((above, below)) => (above, Some(below)),
        None => (unit, None),
    };
    let plain = |part: &str| part.trim().replace(' ', "_").replace('^', "").replace('/', "_");
    match (plain(above), below.map(plain)) {
        (above, None) => above,
        (above, Some(below)) if above.is_empty() => format!("per_{below}"),
        (above, Some(below)) => format!("{above}_per_{below}"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_become_names() {
        for (unit, name) in [
            ("N", "N"),
            ("N/m", "N_per_m"),
            ("/m", "per_m"),
            ("m^2/s", "m2_per_s"),
            ("N s/m", "N_s_per_m"),
            ("m/s/Pa", "m_per_s_Pa"),
        ] {
            assert_eq!(suffix(unit), name);
        }
    }

    #[test]
    fn cells_with_commas_are_quoted() {
        let column = |name: &str, cells| Column { name: name.into(), cells };
        let table = Table {
            columns: vec![
                column("a", Cells::Text(vec![Some("x, y".into()), None])),
                column("b", Cells::Number(vec![Some(1.5e-7), None])),
                column("c", Cells::Count(vec![None, Some(3)])),
            ],
        };
        assert_eq!(String::from_utf8_lossy(&table.to_csv()), "a,b,c\r\n\"x, y\",1.5e-7,\r\n,,3\r\n");
    }
}
