//! From a study to its table of runs, with names that follow from their content.

use super::{Setting, Study, shown};
use crate::failure::Failure;
use crate::run::checkpoint::hexadecimal;
use crate::scenario::keys::Kind;
use crate::scenario::read::Reader;
use crate::scenario::source::Node;
use crate::scenario::values::Value;
use sha2::{Digest, Sha256};
use std::cell::RefCell;
use std::collections::HashMap;

/// Hexadecimal letters of a name: 48 bits, enough for any study.
const NAME_LETTERS: usize = 12;

/// One run of a study.
#[derive(Clone, Debug)]
pub struct Run {
    /// Its name: a hash of what decides its course, of nothing else.
    pub id: String,
    /// Entries laid over the scenario, as for `run --set`.
    pub overrides: Vec<String>,
    /// Its seed.
    pub seed: i64,
    /// Values of all varied entries, axis by axis.
    pub cells: Vec<Cell>,
    /// For each axis, the number of its point; `None` for axes of the design.
    pub points: Vec<Option<usize>>,
}

/// Value of a varied entry.
#[derive(Clone, Debug, PartialEq)]
pub struct Cell {
    /// As given.
    pub given: String,
    /// In SI, if it is a number.
    pub si: Option<f64>,
}

/// One way to go in one direction of the table: for some axes, the number of the point and its values.
type Choice = Vec<(usize, Option<usize>, Vec<Node>)>;

/// The runs of a study: the first axis varies slowest, seeds fastest.
///
/// # Errors
/// [`Failure::Input`] for two runs that are the same, and for overrides that do not fit together.
pub fn expand(study: &Study) -> Result<Vec<Run>, Failure> {
    let mut directions: Vec<Vec<Choice>> = Vec::new();
    let mut design_done = false;
    for (index, axis) in study.axes.iter().enumerate() {
        if !axis.is_designed() {
            let choice = |(k, point): (usize, &Vec<Node>)| vec![(index, Some(k), point.clone())];
            directions.push(axis.points.iter().enumerate().map(choice).collect());
        } else if !design_done {
            design_done = true;
            directions.push(design(study));
        }
    }
    let mut combined: Vec<Choice> = vec![Vec::new()];
    for direction in &directions {
        let longer = |start: &Choice| -> Vec<Choice> {
            direction.iter().map(|choice| start.iter().chain(choice).cloned().collect()).collect()
        };
        combined = combined.iter().flat_map(longer).collect();
    }
    let seeds: Vec<Option<i64>> = match study.seeds.as_slice() {
        [] => vec![None],
        seeds => seeds.iter().map(|seed| Some(*seed)).collect(),
    };
    let hashes = RefCell::new(HashMap::new());
    let mut runs = Vec::new();
    for choice in &combined {
        for seed in &seeds {
            runs.push(one(study, choice, *seed, &hashes)?);
        }
    }
    refuse_twins(&runs)?;
    Ok(runs)
}

/// Points of the quasi-random design: Sobol', USSR Comput. Math. Math. Phys. 7 (1967) 86; scrambled after Owen,
/// Ann. Stat. 25 (1997) 1541.
fn design(study: &Study) -> Vec<Choice> {
    let (points, seed) = study.design.unwrap_or_default();
    let designed: Vec<usize> = (0..study.axes.len()).filter(|k| study.axes[*k].is_designed()).collect();
    (0..points)
        .map(|point| {
            let at = |(dimension, axis): (usize, &usize)| {
                let share = f64::from(sobol_burley::sample(point, dimension as u32, seed));
                (*axis, None, study.axes[*axis].within(share, study.thermal_energy))
            };
            designed.iter().enumerate().map(at).collect()
        })
        .collect()
}

fn one(
    study: &Study,
    choice: &Choice,
    seed: Option<i64>,
    hashes: &RefCell<HashMap<String, String>>,
) -> Result<Run, Failure> {
    let mut varied: Vec<Vec<Node>> = vec![Vec::new(); study.axes.len()];
    let mut points = vec![None; study.axes.len()];
    for (axis, point, nodes) in choice {
        varied[*axis].clone_from(nodes);
        points[*axis] = *point;
    }
    let mut overrides: Vec<String> = study.shared.iter().map(Setting::option).collect();
    for (axis, nodes) in study.axes.iter().zip(&varied) {
        for ((path, _), node) in axis.keys.iter().zip(nodes) {
            overrides.push(Setting { path: path.clone(), node: node.clone() }.option());
        }
    }
    overrides.extend(seed.map(|seed| format!("seed={seed}")));
    let hash = |path: &str| hashes.borrow_mut().entry(path.to_owned()).or_insert_with(|| file_hash(path)).clone();
    let (content, thermal_energy) = crate::scenario::content(&study.texts, &study.base, &overrides, &hash)?;
    let cells = study.axes.iter().zip(&varied).flat_map(|(axis, nodes)| {
        axis.keys.iter().zip(nodes).map(move |((path, key), node)| {
            let mut reader = Reader::new(&[]);
            reader.thermal_energy = Some(thermal_energy);
            let si = match (key.kind, reader.value(key, path, node)) {
                (Kind::Quantity(..) | Kind::Number(_), Some(Value::Number(x))) => Some(x),
                (Kind::Whole(..), Some(Value::Whole(i))) => Some(i as f64),
                _ => None,
            };
            Cell { given: shown(node), si }
        })
    });
    let seed = content.lines().find_map(|line| line.strip_prefix("seed = ")?.parse().ok()).unwrap_or(1);
    Ok(Run { id: name_of(&content), cells: cells.collect(), overrides, seed, points })
}

/// The name of a run with a content. It begins with a letter, so that no program takes it for a number.
pub fn name_of(content: &str) -> String {
    let mut name = hexadecimal(&Sha256::digest(content.as_bytes()));
    name.truncate(NAME_LETTERS);
    name.insert(0, 'r');
    name
}

/// What stands for a file: its content, or its path while it cannot be read.
pub fn file_hash(path: &str) -> String {
    std::fs::read(path).map_or_else(|_| path.to_owned(), |bytes| hexadecimal(&Sha256::digest(bytes)))
}

fn refuse_twins(runs: &[Run]) -> Result<(), Failure> {
    let mut seen: HashMap<&str, usize> = HashMap::new();
    for (index, run) in runs.iter().enumerate() {
        if let Some(first) = seen.insert(&run.id, index) {
            let values = |run: &Run| {
                let given: Vec<&str> = run.cells.iter().map(|cell| cell.given.as_str()).collect();
                given.join(", ")
            };
            return Err(Failure::Input(format!(
                "two runs of the study are the same: number {} ({}) and number {} ({})\n\
                 help: remove repeated values and seeds from the study",
                first + 1,
                values(&runs[first]),
                index + 1,
                values(run)
            )));
        }
    }
    Ok(())
}
