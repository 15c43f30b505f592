//! The phase diagram: outcomes of the runs over the axes of a study.
//!
//! What is shown is settled here (axes, units, panels, classes); [`draw`] makes a vector picture of it and [`raster`]
//! turns that into pixels.

mod draw;
mod raster;
pub mod scale;

pub use draw::draw;
pub use raster::to_png;

use super::expand::Run;
use super::record::State;
use super::rules::{OTHER, UNFINISHED, unit_of};
use super::{Study, Upwards, results, shown};
use crate::scenario::keys::Kind;
use crate::units;
use scale::Scale;

/// Column upwards where a study has a single axis and says nothing.
const PLAIN_COLUMN: &str = "free_energy_J";

/// A phase diagram, ready to be drawn.
pub struct Diagram {
    /// Its title.
    pub title: String,
    /// The axis to the right.
    pub x: Scale,
    /// The axis upwards.
    pub y: Scale,
    /// Classes that occur, in their order, with the number of runs shown.
    pub classes: Vec<(String, usize)>,
    /// One panel, or one for each value of the facet.
    pub panels: Vec<Panel>,
    /// What a reader must know beside it.
    pub notes: Vec<String>,
    /// Whether both axes are axes of the study with listed values, so that each point has a cell around it.
    pub has_cells: bool,
}

/// One panel of a phase diagram.
pub struct Panel {
    /// What its runs have in common.
    pub title: String,
    /// Its points: place in the units of the axes, number of the class.
    pub points: Vec<(f64, f64, usize)>,
}

/// What stands on an axis of the diagram, run by run.
struct Along {
    scale: Scale,
    places: Vec<Option<f64>>,
}

/// The diagram of a study; `None` for a study without axes.
pub fn diagram(study: &Study, runs: &[Run], states: &[State]) -> Option<Diagram> {
    let wish = &study.diagram;
    let upwards = match wish.y {
        Some(Upwards::Axis(axis)) => Some(axis),
        _ => None,
    };
    let free = |taken: &[Option<usize>]| (0..study.axes.len()).find(|axis| !taken.contains(&Some(*axis)));
    let held: Vec<Option<usize>> = wish.at.iter().map(|(axis, _)| Some(*axis)).collect();
    let taken = [&held[..], &[wish.facet, upwards]].concat();
    let x = wish.x.or_else(|| free(&taken))?;
    let y = wish.y.unwrap_or_else(|| match free(&[&held[..], &[wish.facet, Some(x)]].concat()) {
        Some(axis) => Upwards::Axis(axis),
        None => Upwards::Column(column_of(PLAIN_COLUMN)),
    });
    let right = along_axis(study, runs, x);
    let up = match y {
        Upwards::Axis(axis) => along_axis(study, runs, axis),
        Upwards::Column(column) => along_column(states, column),
    };
    let used = match y {
        Upwards::Axis(axis) => [&held[..], &[Some(x), Some(axis)]].concat(),
        Upwards::Column(_) => [&held[..], &[Some(x)]].concat(),
    };
    // A third axis with few values gets a panel for each.
    let facet = wish.facet.or_else(|| free(&used).filter(|axis| (2..=9).contains(&study.axes[*axis].points.len())));
    let mut diagram = Diagram {
        title: study.title.clone(),
        x: right.scale,
        y: up.scale,
        classes: Vec::new(),
        panels: Vec::new(),
        notes: notes(study, &used, facet),
        has_cells: matches!(y, Upwards::Axis(axis) if !study.axes[axis].is_designed()) && !study.axes[x].is_designed(),
    };
    let names = study.rules.classes();
    let class_of = |state: &State| {
        let class = results::outcome(study, state);
        names.iter().position(|name| *name == class).unwrap_or(names.len() - 1)
    };
    let mut counts = vec![0; names.len()];
    let values = facet.map_or(1, |axis| study.axes[axis].points.len());
    for value in 0..values {
        let title = match facet {
            Some(axis) => format!("{} = {}", name_of(study, axis), shown_point(study, axis, value)),
            None => String::new(),
        };
        let mut panel = Panel { title, points: Vec::new() };
        for (k, run) in runs.iter().enumerate() {
            let held = wish.at.iter().all(|(axis, point)| run.points[*axis] == Some(*point));
            let here = facet.is_none_or(|axis| run.points[axis] == Some(value));
            if let (true, true, Some(x), Some(y)) = (held, here, right.places[k], up.places[k]) {
                let class = class_of(&states[k]);
                counts[class] += 1;
                panel.points.push((x, y, class));
            }
        }
        diagram.panels.push(panel);
    }
    diagram.classes = names.iter().map(|name| (*name).to_owned()).zip(counts).collect();
    Some(diagram)
}

fn column_of(name: &'static str) -> &'static str {
    super::rules::column(name).unwrap_or(name)
}

/// What an axis is called.
fn name_of(study: &Study, axis: usize) -> String {
    let axis = &study.axes[axis];
    match (&axis.name, axis.keys.first()) {
        (Some(name), _) => name.clone(),
        (None, Some((path, _))) => path.rsplit('.').next().unwrap_or(path).replace('_', " "),
        (None, None) => String::new(),
    }
}

fn shown_point(study: &Study, axis: usize, point: usize) -> String {
    let nodes = study.axes[axis].points.get(point);
    nodes.and_then(|nodes| nodes.first()).map(shown).unwrap_or_default()
}

/// An axis of the study, in the unit of its first value.
fn along_axis(study: &Study, runs: &[Run], index: usize) -> Along {
    let axis = &study.axes[index];
    let before: usize = study.axes[..index].iter().map(|axis| axis.keys.len()).sum();
    let cell = |run: &Run| run.cells.get(before).cloned();
    let name = name_of(study, index);
    let numbers: Vec<Option<f64>> = runs.iter().map(|run| cell(run)?.si).collect();
    if numbers.iter().any(Option::is_none) {
        // Words: one after the other.
        let words: Vec<String> = (0..axis.points.len()).map(|point| shown_point(study, index, point)).collect();
        let places = runs.iter().map(|run| run.points[index].map(|point| point as f64)).collect();
        return Along { scale: Scale::words(&name, words), places };
    }
    let first = runs.first().and_then(cell).map(|cell| cell.given).unwrap_or_default();
    let (unit, size) = match axis.keys.first().map(|(_, key)| key.kind) {
        Some(Kind::Quantity(measure, _)) => {
            let unit = first[units::number_length(&first)..].trim().to_owned();
            let one = units::parse_as(&format!("1 {unit}"), &measure, Some(study.thermal_energy));
            (unit, one.unwrap_or(1.0))
        }
        _ => (String::new(), 1.0),
    };
    let places: Vec<Option<f64>> = numbers.iter().map(|x| x.map(|x| x / size)).collect();
    Along { scale: Scale::of(&name, &unit, &places, axis.logarithmic, true), places }
}

/// A column of the series at the end of the runs, in a unit of the right size.
fn along_column(states: &[State], column: &str) -> Along {
    let value = |state: &State| match state {
        State::Ended(end) => end.end(column),
        _ => None,
    };
    let values: Vec<Option<f64>> = states.iter().map(value).collect();
    let (name, measure) = unit_of(column);
    let largest = values.iter().flatten().fold(0.0, |most: f64, x| most.max(x.abs()));
    let (unit, size) = match measure {
        Some(measure) => fitting_unit(measure.unit, largest),
        None => (String::new(), 1.0),
    };
    let places: Vec<Option<f64>> = values.iter().map(|x| x.map(|x| x / size)).collect();
    let name = format!("{} at the end", name.replace('_', " "));
    Along { scale: Scale::of(&name, &unit, &places, false, false), places }
}

/// A unit in which a value has one to three digits before its point, and its size in SI.
fn fitting_unit(unit: &str, largest: f64) -> (String, f64) {
    const PREFIXES: [(f64, &str); 8] =
        [(1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"), (1e-12, "p"), (1e-15, "f"), (1e-18, "a")];
    let power = match unit {
        "m^2" => 2,
        "m^3" => 3,
        _ => 1,
    };
    let fits = |factor: f64| largest >= factor.powi(power);
    let (factor, prefix) = PREFIXES.into_iter().find(|(factor, _)| fits(*factor)).unwrap_or((1.0, ""));
    (format!("{prefix}{unit}"), factor.powi(power))
}

/// What is not seen in the picture.
fn notes(study: &Study, used: &[Option<usize>], facet: Option<usize>) -> Vec<String> {
    let mut notes: Vec<String> = study
        .diagram
        .at
        .iter()
        .map(|(axis, point)| format!("{} = {}", name_of(study, *axis), shown_point(study, *axis, *point)))
        .collect();
    for axis in 0..study.axes.len() {
        if !used.contains(&Some(axis)) && facet != Some(axis) {
            notes.push(format!("all values of {} on top of each other", name_of(study, axis)));
        }
    }
    notes
}

impl Diagram {
    /// Number of the colour and shape of a class; `None` for the classes that have their own.
    pub fn mark(&self, class: usize) -> Mark {
        match self.classes.get(class).map(|(name, _)| name.as_str()) {
            Some(OTHER) if class + 3 >= self.classes.len() => Mark::Other,
            Some(super::rules::FAILED) => Mark::Failed,
            Some(UNFINISHED) | None => Mark::Unfinished,
            Some(_) => Mark::Class(class),
        }
    }
}

/// How a class is marked.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Mark {
    /// A class of the study, by its number.
    Class(usize),
    /// No rule holds.
    Other,
    /// The run failed.
    Failed,
    /// The run has no end yet.
    Unfinished,
}
