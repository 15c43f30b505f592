//! Reading `[[continuation]]` and `[[threshold]]`.

use crate::error_bars::levels::Refinement;
use crate::scenario::keys::{Kind, Range};
use crate::scenario::problem::Problem;
use crate::scenario::read::{Reader, number};
use crate::scenario::source::Data;
use crate::scenario::values::Values;
use crate::study::axes::{self, Axis};
use crate::study::rules::{self, Rules};
use crate::study::scenario_key;
use std::path::Path;

/// Steps along a branch where nothing is said.
const STEPS: usize = 8;
/// Tolerance where nothing is said.
const TOLERANCE: f64 = 0.01;
/// Column that is drawn where nothing is said.
const COLUMN: &str = "free_energy_J";

/// All that follows from run to run in a study.
#[derive(Clone, Debug, Default)]
pub struct Wishes {
    /// Continuations.
    pub continuations: Vec<Continuation>,
    /// Thresholds.
    pub thresholds: Vec<Threshold>,
}

/// A walk along a parameter.
#[derive(Clone, Debug)]
pub struct Continuation {
    /// The parameter with its values.
    pub axis: Axis,
    /// Whether it goes back as well.
    pub back: bool,
    /// Column that is drawn against it.
    pub column: &'static str,
}

/// A threshold.
#[derive(Clone, Debug)]
pub struct Threshold {
    /// The parameter with its ends.
    pub axis: Axis,
    /// Steps until the outcome changes.
    pub steps: usize,
    /// Width of the bracket relative to its value.
    pub tolerance: f64,
    /// Whether trials start from the branch, or from the scenario.
    pub follow: bool,
    /// Whether the way from the first value to the last is taken.
    pub up: bool,
    /// Whether the way back is taken.
    pub down: bool,
    /// What is refined for an error bar.
    pub refinements: Vec<Refinement>,
}

impl Wishes {
    /// Whether there is nothing to do.
    pub fn is_empty(&self) -> bool {
        self.continuations.is_empty() && self.thresholds.is_empty()
    }
}

/// Read both lists.
pub fn read(reader: &mut Reader<'_>, values: &Values, rules: &Rules, folder: &Path) -> Wishes {
    let continuations: Vec<Continuation> =
        values.list("continuation").iter().filter_map(|item| continuation(reader, item, folder)).collect();
    let items = values.list("threshold");
    let thresholds: Vec<Threshold> = items.iter().filter_map(|item| threshold(reader, item, folder)).collect();
    if !items.is_empty() && rules.list.is_empty() && !values.given("outcome") {
        problem(
            reader,
            &items[0],
            None,
            "threshold: there are no outcomes that could change",
            "add [[outcome]] with name and when, for at least one class",
        );
    }
    Wishes { continuations, thresholds }
}

fn problem(reader: &mut Reader<'_>, item: &Values, key: Option<&str>, message: &str, mend: &str) {
    let place = key.and_then(|key| item.place(key)).or_else(|| item.place.clone());
    reader.problems.push(Problem::new(place, message, "", mend));
}

fn continuation(reader: &mut Reader<'_>, item: &Values, folder: &Path) -> Option<Continuation> {
    let axis = axes::axis(reader, item, folder)?;
    if axis.points.len() < 2 {
        problem(
            reader,
            item,
            None,
            "continuation: it needs at least two values",
            "give count beside from and to, or values = [...]",
        );
        return None;
    }
    let word = if item.given("column") { item.text("column") } else { COLUMN };
    let Some(column) = rules::column(word) else {
        let mend = rules::suggestion(word);
        problem(reader, item, Some("column"), &format!("continuation: the series has no column {word}"), &mend);
        return None;
    };
    Some(Continuation { axis, back: !item.given("back") || item.flag("back"), column })
}

fn threshold(reader: &mut Reader<'_>, item: &Values, folder: &Path) -> Option<Threshold> {
    let axis = axes::axis(reader, item, folder)?;
    if axis.ends.is_none() {
        problem(reader, item, Some("values"), "threshold: it lies between two values", "give from and to instead of values");
        return None;
    }
    if let Some((path, _)) = axis.keys.iter().find(|(_, key)| matches!(key.kind, Kind::Whole(..))) {
        let message = format!("threshold: {path} takes whole numbers, which cannot be bisected");
        problem(reader, item, Some("key"), &message, "choose another entry, or an [[axis]] with all values");
        return None;
    }
    let follow = item.text("start") == "branch";
    let direction = item.text("direction");
    let refinements = refinements(reader, item)?;
    Some(Threshold {
        steps: item.whole("count").map_or(if follow { STEPS } else { 1 }, |count| (count - 1).max(1) as usize),
        tolerance: item.number("tolerance").unwrap_or(TOLERANCE),
        follow,
        up: direction != "down",
        down: matches!(direction, "down" | "both"),
        refinements,
        axis,
    })
}

/// `refine = ["mesh", { key = "surface.length", towards = "infinity", order = 2 }]`.
fn refinements(reader: &mut Reader<'_>, item: &Values) -> Option<Vec<Refinement>> {
    let Some(node) = item.node("refine") else { return Some(Vec::new()) };
    let example = "write for example refine = [\"mesh\", { key = \"surface.length\", towards = \"infinity\", order = 2 }]";
    let mut found = Vec::new();
    let wrong = |reader: &mut Reader<'_>, place, message: String, mend: &str| {
        reader.problems.push(Problem::new(Some(place), message, "", mend));
    };
    let Data::List(list) = &node.data else {
        wrong(reader, node.place.clone(), "threshold: refine must be a list".into(), example);
        return None;
    };
    for part in list {
        match &part.data {
            Data::Text(word) => match word.parse::<Refinement>() {
                Ok(refinement) => found.push(refinement),
                Err(fault) => wrong(reader, part.place.clone(), format!("threshold: \"{word}\": {fault}"), example),
            },
            Data::Table(table) => {
                let text = |name: &str| match table.get(name) {
                    Some((_, node)) => match &node.data {
                        Data::Text(text) => Some(text.as_str()),
                        _ => None,
                    },
                    None => None,
                };
                let given = |name: &str, default: f64| table.get(name).map_or(Some(default), |(_, node)| number(node));
                let key = text("key").filter(|path| {
                    scenario_key(path).is_some_and(|key| matches!(key.kind, Kind::Quantity(..) | Kind::Number(_)))
                });
                let towards = match text("towards") {
                    Some("infinity") => Some(true),
                    Some("zero") => Some(false),
                    _ => None,
                };
                let order = given("order", 2.0).filter(|order| Range::AboveUpTo(0.0, 10.0).holds(*order));
                let ratio = given("ratio", 2f64.sqrt()).filter(|ratio| Range::Within(1.1, 10.0).holds(*ratio));
                let known = table.keys().all(|name| ["key", "towards", "order", "ratio"].contains(&name.as_str()));
                match (key, towards, order, ratio, known) {
                    (Some(key), Some(up), Some(order), Some(ratio), true) => {
                        found.push(Refinement::of_entry(key, up, order, ratio));
                    }
                    _ => wrong(
                        reader,
                        part.place.clone(),
                        "threshold: this is no refinement: key must name a number of the scenario, towards is \"zero\" or \
                         \"infinity\", order and ratio (above 1.1) are numbers"
                            .into(),
                        example,
                    ),
                }
            }
            _ => wrong(reader, part.place.clone(), "threshold: this is no refinement".into(), example),
        }
    }
    (found.len() == list.len()).then_some(found)
}
