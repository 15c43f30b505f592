//! From a study file to a [`Study`], with faults shown at their place.

use super::axes::{self, Axis};
use super::branch;
use super::keys::{MOST_RUNS, STUDY};
use super::rules::{self, Rules};
use super::{DiagramWish, Limits, Study, Upwards, shown};
use crate::scenario::problem::{Place, Problem, ScenarioError};
use crate::scenario::read::Reader;
use crate::scenario::source::{Data, Gather, Node};
use crate::scenario::values::Values;
use crate::units::number_length;
use std::path::{Path, PathBuf};

/// Read a study and the scenario it names.
///
/// # Errors
/// [`ScenarioError`] with all faults found.
pub fn load(path: &Path) -> Result<Study, ScenarioError> {
    let mut texts = Gather::default();
    let tree = texts.file(path, None, 0);
    let Some(tree) = tree.filter(|_| texts.problems.is_empty()) else {
        return Err(crate::scenario::error(texts, Vec::new()));
    };
    let mut reader = Reader::of(STUDY, &texts.sources);
    let values = reader.whole(&tree);
    let mut problems = std::mem::take(&mut reader.problems);
    let folder = path.parent().map(Path::to_path_buf).unwrap_or_default();
    let Some(place) = values.place("scenario") else {
        if !values.given("scenario") {
            problems.push(Problem::new(
                Some(Place::default()),
                "scenario is missing: a study varies a scenario",
                "",
                "write for example scenario = \"vesicle.toml\" at the top",
            ));
        }
        return Err(crate::scenario::error(texts, problems));
    };
    let scenario = folder.join(values.text("scenario"));
    let base = texts.file(&scenario, Some(&place), 0);
    let Some(base) = base.filter(|_| texts.problems.is_empty()) else {
        return Err(crate::scenario::error(texts, problems));
    };
    let mut reader = Reader::new(&texts.sources);
    let (_, thermal_energy) = reader.scenario(&base);
    problems.append(&mut reader.problems);
    if !problems.is_empty() {
        return Err(crate::scenario::error(texts, problems));
    }
    let file_stem = path.file_stem().map(|stem| stem.to_string_lossy().into_owned());
    let title = match values.text("title") {
        "" => file_stem.unwrap_or_default(),
        title => title.to_owned(),
    };
    let mut study = parts(&mut reader, &values, &folder, thermal_energy);
    problems = reader.problems;
    if !problems.is_empty() {
        return Err(crate::scenario::error(texts, problems));
    }
    study.title = title;
    study.scenario = scenario;
    study.base = base;
    study.texts = texts;
    Ok(study)
}

/// Everything but the texts.
fn parts(reader: &mut Reader<'_>, values: &Values, folder: &Path, thermal_energy: f64) -> Study {
    let shared = match values.node("set") {
        Some(node) => axes::settings(reader, node, folder),
        None => Vec::new(),
    };
    let read: Vec<Option<Axis>> = values.list("axis").iter().map(|item| axes::axis(reader, item, folder)).collect();
    let complete = read.iter().all(Option::is_some);
    let axes: Vec<Axis> = read.into_iter().flatten().collect();
    let seeds = seeds(reader, values);
    let design = values.whole("design.points").map(|points| {
        (points as u32, values.whole("design.seed").unwrap_or(0) as u32)
    });
    if complete {
        look_at_axes(reader, values, &axes, &shared, design.is_some());
    }
    // kBT in conditions is that of the base scenario, unless runs differ in it.
    let warm = |path: &str| path == "temperature";
    let varies = axes.iter().flat_map(|axis| &axis.keys).any(|(path, _)| warm(path))
        || shared.iter().any(|setting| warm(&setting.path));
    let rules = outcomes(reader, values, (!varies).then_some(thermal_energy));
    let branches = branch::wish::read(reader, values, &rules, folder);
    let diagram = if complete { diagram(reader, values, &axes) } else { DiagramWish::default() };
    let limits = Limits {
        parallel: values.whole("limits.parallel").map(|n| n as usize),
        threads: values.whole("limits.threads").unwrap_or(1) as u16,
        memory: memory(reader, values),
    };
    Study {
        title: String::new(),
        folder: folder.to_owned(),
        scenario: PathBuf::new(),
        texts: Gather::default(),
        base: Node { place: Place::default(), data: Data::Boolean(false) },
        thermal_energy,
        shared,
        axes,
        design,
        seeds,
        rules,
        branches,
        diagram,
        limits,
    }
}

fn problem(reader: &mut Reader<'_>, place: Option<Place>, message: String, label: &str, mend: &str) {
    reader.problems.push(Problem::new(place, message, label, mend));
}

fn seeds(reader: &mut Reader<'_>, values: &Values) -> Vec<i64> {
    let Some(node) = values.node("repeats.seeds") else {
        return (1..=values.whole("repeats.count").unwrap_or(0)).collect();
    };
    if let Some(place) = values.place("repeats.count") {
        problem(reader, Some(place), "repeats: count has no place beside seeds".into(), "", "give one of the two");
    }
    let read: Option<Vec<i64>> = match &node.data {
        Data::List(items) => items
            .iter()
            .map(|item| match item.data {
                Data::Integer(seed) if seed >= 0 => Some(seed),
                _ => None,
            })
            .collect(),
        _ => None,
    };
    match read {
        Some(seeds) if !seeds.is_empty() => seeds,
        _ => {
            let message = "repeats.seeds must be a list of whole numbers from 0 on".into();
            problem(reader, Some(node.place.clone()), message, "", "write for example seeds = [1, 2, 3]");
            Vec::new()
        }
    }
}

/// What must hold between axes, design and repeats.
fn look_at_axes(
    reader: &mut Reader<'_>,
    values: &Values,
    axes: &[Axis],
    shared: &[super::Setting],
    designed: bool,
) {
    let repeated = values.place("repeats.count").or_else(|| values.place("repeats.seeds"));
    let follows = values.given("continuation") || values.given("threshold");
    if axes.is_empty() && repeated.is_none() && !follows {
        let mend = "add [[axis]] with key and values, [repeats] with count, [[continuation]] or [[threshold]]";
        problem(reader, Some(Place::default()), "the study varies nothing".into(), "", mend);
    }
    let mut told: Vec<&str> = Vec::new();
    for axis in axes {
        for (path, _) in &axis.keys {
            if told.contains(&path.as_str()) {
                let message = format!("axis: {path} is varied twice");
                problem(reader, axis.place.clone(), message, "", "remove one of the two axes");
            }
            if let Some(setting) = shared.iter().find(|setting| setting.path == *path) {
                let place = Some(setting.node.place.clone());
                problem(reader, place, format!("set: {path} is varied by an axis"), "", "remove it here, or the axis");
            }
            if path == "seed" && repeated.is_some() {
                let message = "axis: seed is varied by [repeats] already".into();
                problem(reader, axis.place.clone(), message, "", "remove the axis, or [repeats]");
            }
            told.push(path);
        }
        if axis.is_designed() && !designed {
            let message = "axis: a range without count belongs to a design, and there is none".into();
            let mend = "give count, or add [design] with points";
            problem(reader, axis.place.clone(), message, "this axis", mend);
        }
    }
    if designed && !axes.iter().any(Axis::is_designed) {
        let place = values.sections.get("design").cloned();
        let mend = "leave count out in the axes that the design fills";
        problem(reader, place, "design: no axis belongs to it".into(), "", mend);
    }
    if values.has_section("design") && !values.given("design.points") {
        let place = values.sections.get("design").cloned();
        problem(reader, place, "design: points is missing".into(), "", "write for example points = 64");
    }
    let points = |axis: &Axis| if axis.is_designed() { 1.0 } else { axis.points.len() as f64 };
    let repeats = values.whole("repeats.count").unwrap_or(1).max(1) as f64;
    let designed = values.whole("design.points").unwrap_or(1) as f64;
    let runs = axes.iter().map(points).product::<f64>() * repeats * designed;
    if runs > MOST_RUNS as f64 {
        let message = format!("the study has {runs:.0} runs, more than {MOST_RUNS}");
        let mend = "take fewer values, or a [design] instead of a grid";
        problem(reader, Some(Place::default()), message, "", mend);
    }
}

fn outcomes(reader: &mut Reader<'_>, values: &Values, thermal_energy: Option<f64>) -> Rules {
    let mut rules = Rules::default();
    let items = values.list("outcome");
    for (index, item) in items.iter().enumerate() {
        let name = item.text("name").to_owned();
        if name.is_empty() {
            if !item.given("name") {
                let mend = "write for example name = \"budded\"";
                problem(reader, item.place.clone(), "outcome: name is missing".into(), "this outcome", mend);
            }
            continue;
        }
        if matches!(name.as_str(), rules::FAILED | rules::UNFINISHED) {
            let message = format!("outcome: the program itself says \"{name}\" of runs without a result");
            problem(reader, item.place("name"), message, "taken", "choose another name");
        }
        if !item.given("when") && index + 1 < items.len() {
            let message = format!("outcome: \"{name}\" has no condition and hides those after it");
            problem(reader, item.place.clone(), message, "this outcome", "give it a condition with when, or put it last");
        }
        let condition = item.entry("when").and_then(|entry| Some((item.text("when"), entry.place.clone()?)));
        let condition = match condition {
            None => None,
            Some((text, place)) => match rules::parse(text, thermal_energy) {
                Ok(condition) => Some(condition),
                Err(fault) => {
                    let place = reader.within(&place, text, &fault.span);
                    let message = format!("outcome \"{name}\": {}", fault.message);
                    problem(reader, Some(place), message, "", &fault.mend);
                    continue;
                }
            },
        };
        rules.list.push((name, condition));
    }
    rules
}

/// The axis that a word means.
fn find_axis(reader: &mut Reader<'_>, axes: &[Axis], word: &str, place: Option<Place>, key: &str) -> Option<usize> {
    let found = axes.iter().position(|axis| axis.is_called(word));
    if found.is_none() {
        let names: Vec<&str> = axes.iter().flat_map(|axis| &axis.keys).map(|(path, _)| path.as_str()).collect();
        let mend = format!("the axes are: {}", names.join(", "));
        problem(reader, place, format!("diagram.{key}: no axis is called \"{word}\""), "not known", &mend);
    }
    found
}

fn diagram(reader: &mut Reader<'_>, values: &Values, axes: &[Axis]) -> DiagramWish {
    let mut wish = DiagramWish::default();
    let given = |key: &str| {
        let path = format!("diagram.{key}");
        values.given(&path).then(|| (values.text(&path).to_owned(), values.place(&path)))
    };
    if let Some((word, place)) = given("x") {
        wish.x = find_axis(reader, axes, &word, place, "x");
    }
    if let Some((word, place)) = given("y") {
        wish.y = match (axes.iter().position(|axis| axis.is_called(&word)), rules::column(&word)) {
            (Some(axis), _) => Some(Upwards::Axis(axis)),
            (None, Some(column)) => Some(Upwards::Column(column)),
            (None, None) => {
                let mend = format!("name an axis or a column: {}", rules::suggestion(&word));
                problem(reader, place, format!("diagram.y: no axis or column is called \"{word}\""), "not known", &mend);
                None
            }
        };
    }
    if let Some((word, place)) = given("facet") {
        wish.facet = find_axis(reader, axes, &word, place.clone(), "facet");
        if wish.facet.is_some_and(|facet| axes[facet].is_designed()) {
            let mend = "choose an axis with values or count";
            problem(reader, place, "diagram.facet: an axis of the design has no values".into(), "", mend);
        }
    }
    let Some(node) = values.node("diagram.at") else { return wish };
    let Data::Table(table) = &node.data else {
        let mend = "write for example at = { \"membrane.bending_rigidity\" = \"20 kBT\" }";
        problem(reader, Some(node.place.clone()), "diagram.at must be a table".into(), "", mend);
        return wish;
    };
    for (word, (place, value)) in table {
        let Some(axis) = find_axis(reader, axes, word, Some(place.clone()), "at") else { continue };
        let wanted = shown(value);
        match axes[axis].points.iter().position(|point| point.iter().any(|node| shown(node) == wanted)) {
            Some(point) => wish.at.push((axis, point)),
            None => {
                let known: Vec<String> = axes[axis].points.iter().filter_map(|point| point.first()).map(shown).collect();
                let mend = match known.is_empty() {
                    true => "an axis of the design cannot be held".to_owned(),
                    false => format!("its values are: {}", known.join(", ")),
                };
                let message = format!("diagram.at: {word} never has the value {wanted}");
                problem(reader, Some(value.place.clone()), message, "not among its values", &mend);
            }
        }
    }
    wish
}

/// `limits.memory` [byte].
fn memory(reader: &mut Reader<'_>, values: &Values) -> Option<f64> {
    let text = values.entry("limits.memory").map(|_| values.text("limits.memory"))?;
    match bytes(text) {
        Some(bytes) => Some(bytes),
        None => {
            let message = format!("limits.memory: \"{text}\" is no amount of memory");
            problem(reader, values.place("limits.memory"), message, "", "write for example memory = \"8 GB\"");
            None
        }
    }
}

/// Bytes, as in "8 GB" or "500 MiB".
pub fn bytes(text: &str) -> Option<f64> {
    const UNITS: [(&str, f64); 7] = [
        ("B", 1.0),
        ("kB", 1e3),
        ("MB", 1e6),
        ("GB", 1e9),
        ("TB", 1e12),
        ("MiB", 1_048_576.0),
        ("GiB", 1_073_741_824.0),
    ];
    let text = text.trim();
    let (number, unit) = text.split_at(number_length(text));
    let number: f64 = number.parse().ok()?;
    let factor = UNITS.iter().find(|(name, _)| *name == unit.trim())?.1;
    Some(number * factor).filter(|bytes| *bytes > 0.0 && bytes.is_finite())
}
