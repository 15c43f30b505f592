//! The scenario language: a TOML file in which every physical value carries its unit becomes a run ready to start.
//!
//! Texts (the file, files it includes, `--set` options) are merged into one tree that remembers where everything
//! stands; the tree is checked key by key against one list of keys, then key against key; the mesh is made or read;
//! defaults are filled in; parameters, fields and state follow in units that suit the solver. Faults are collected
//! as long as it makes sense to go on, and each is shown at its place with its mend.

mod checks;
mod fields;
pub mod keys;
mod physics;
pub mod problem;
pub mod read;
mod schema;
mod shape_changes;
pub mod source;
mod start_state;
mod surface;
#[cfg(test)]
mod tests;
pub mod values;

pub use problem::ScenarioError;
pub use schema::{schema, schema_of};
pub use shape_changes::THINNEST_NECK;

use crate::setup::{Cadence, Setup, StopRules};
use crate::units::measure as m;
use keys::{Key, Kind, ROOT};
use pellicle_physics::{Parameters, State};
use problem::{Place, Problem};
use read::Reader;
use source::{Data, Gather, Node};
use std::path::Path;
use values::{Entry, Value, Values};

/// Read a scenario file with what it includes, and make it ready to run.
///
/// `overrides`: `key.path=value` each, laid over the file in turn.
///
/// # Errors
/// [`ScenarioError`] with all faults found, [`ScenarioError::exit_code`] for the program.
pub fn load(path: &Path, overrides: &[String]) -> Result<Setup, ScenarioError> {
    let mut gather = Gather::default();
    let tree = gather.file(path, None, 0);
    let title = path
        .file_stem()
        .map(|stem| stem.to_string_lossy().into_owned())
        .unwrap_or_default();
    finish(gather, tree, overrides, &title)
}

/// As [`load`], from a text; `name` is for messages, `base_dir` what paths in it are relative to.
///
/// # Errors
/// As [`load`].
#[cfg(test)]
pub fn load_text(
    text: &str,
    name: &str,
    base_dir: &Path,
    overrides: &[String],
) -> Result<Setup, ScenarioError> {
    let mut gather = Gather::default();
    let tree = gather.text(text.to_string(), name.to_string(), base_dir.to_path_buf(), 0);
    finish(gather, tree, overrides, name)
}

fn finish(
    mut gather: Gather,
    tree: Option<Node>,
    overrides: &[String],
    title: &str,
) -> Result<Setup, ScenarioError> {
    let mut tree = match tree {
        Some(tree) if gather.problems.is_empty() => tree,
        _ => return Err(error(gather, Vec::new())),
    };
    for option in overrides {
        tree = gather.set(tree, option);
    }
    refuse_late_include(&mut tree, &mut gather.problems);
    let mut reader = Reader::new(&gather.sources);
    let (mut values, thermal_energy) = reader.scenario(&tree);
    let mut problems = reader.problems;
    problems.extend(checks::cross(&values));
    if !problems.is_empty() || !gather.problems.is_empty() {
        return Err(error(gather, problems));
    }
    for path in ["surface.file", "start_from"] {
        surface::resolve_path(&mut values, path, &gather.folders);
    }
    match ready(values, thermal_energy, title) {
        Ok(setup) => Ok(setup),
        Err(problem) => Err(error(gather, vec![problem])),
    }
}

/// What decides the course of a run with overrides, as [`Values::content`] writes it, without making its mesh; and
/// kBT [J].
///
/// # Errors
/// [`ScenarioError`] for values that cannot be read; whether they fit each other shows when the run starts.
pub fn content(
    base: &Gather,
    tree: &Node,
    overrides: &[String],
    hash: &dyn Fn(&str) -> String,
) -> Result<(String, f64), ScenarioError> {
    let (tree, gather) = base.laid_over(tree, overrides);
    let mut reader = Reader::new(&gather.sources);
    let (mut values, thermal_energy) = reader.scenario(&tree);
    let problems = reader.problems;
    if !problems.is_empty() || !gather.problems.is_empty() {
        return Err(error(gather, problems));
    }
    for path in ["surface.file", "start_from"] {
        surface::resolve_path(&mut values, path, &gather.folders);
    }
    fill_from_list(&mut values, ROOT, "");
    physics::fill_plain(&mut values);
    Ok((values.content(hash), thermal_energy))
}

/// The faults found while texts were gathered, and others, in the order of the text.
pub fn error(mut gather: Gather, problems: Vec<Problem>) -> ScenarioError {
    gather.problems.extend(problems);
    // In the order of the text.
    gather.problems.sort_by_key(|problem| {
        problem
            .place
            .as_ref()
            .map_or((usize::MAX, 0), |place| (place.source, place.span.start))
    });
    ScenarioError {
        sources: gather.sources,
        problems: gather.problems,
    }
}

/// Includes are resolved before overrides are laid over the files.
fn refuse_late_include(tree: &mut Node, problems: &mut Vec<Problem>) {
    if let Data::Table(keys) = &mut tree.data
        && let Some((place, _)) = keys.remove("include")
    {
        problems.push(Problem::new(
            Some(place),
            "include cannot be set by an override",
            "too late",
            "write include into the scenario, or start from the other one",
        ));
    }
}

/// From values that fit each other to a run.
fn ready(mut values: Values, thermal_energy: f64, title: &str) -> Result<Setup, Problem> {
    if !values.given("title") && !title.is_empty() {
        let title: String = title.chars().filter(|c| !c.is_control()).collect();
        values.fill_as(
            "title",
            Value::Text(title.clone()),
            toml::Value::String(title),
            "default: name of the file",
        );
    }
    fill_from_list(&mut values, ROOT, "");
    physics::fill_plain(&mut values);
    let surface = surface::build(&mut values)?;
    let scales = physics::scales(&values, surface.size, thermal_energy);
    physics::proportion(&values, &scales)?;
    physics::fill_scaled(&mut values, &scales, surface.mesh.n_vertices());
    let mut warnings = surface.warnings.clone();
    let source = start_state::find(&values, &scales, &mut warnings)?;
    let mesh = source.as_ref().map_or(&surface.mesh, |source| &source.state.mesh);
    let parameters = physics::parameters(&values, scales, &surface, mesh, &mut warnings)?;
    let (state, origin) = match source {
        Some(source) => (source.state_for(&values, &parameters, &surface.mesh)?, Some(source.origin)),
        None => (fresh_state(&values, &parameters, surface)?, None),
    };
    let in_units = |path: &str, measure| values.number(path).map(|x| x / scales.of(&measure));
    Ok(Setup {
        title: values.text("title").to_string(),
        scales,
        parameters,
        state,
        origin,
        stop: StopRules {
            time: in_units("time.end", m::TIME).unwrap_or(0.0),
            neck_radius: in_units("stop.neck_radius", m::LENGTH),
            domain_count: values.whole("stop.domain_count").map(|count| count.max(0) as usize),
            at_rest: Some(values.number("stop.at_rest").unwrap_or(1e-3)),
        },
        cadence: Cadence {
            row_every: in_units("output.row_every", m::TIME),
            frame_every: in_units("output.frame_every", m::TIME),
            frame_change: values.number("output.frame_change"),
            checkpoint_seconds: values.number("output.checkpoint_every").unwrap_or(60.0),
        },
        seed: values.whole("seed").unwrap_or(0) as u64,
        resolved: values.to_toml(),
        warnings,
    })
}

/// The shape and the fields that the scenario describes.
fn fresh_state(values: &Values, parameters: &Parameters, surface: surface::Surface) -> Result<State, Problem> {
    let fields = fields::build(values, parameters, &surface)?;
    State::at_rest(parameters, surface.mesh, &fields.composition, &fields.coverage, &fields.marker).map_err(|error| {
        Problem::new(
            Some(Place::default()),
            format!("the start state cannot be made: {error}"),
            "",
            "check [surface] and the start values of [composition] and [protein]",
        )
    })
}

/// Fill in the defaults that the list of keys states, in sections that are there or always apply.
fn fill_from_list(values: &mut Values, keys: &'static [Key], prefix: &str) {
    for key in keys {
        let path = format!("{prefix}{}", key.name);
        match key.kind {
            Kind::Section(inner) => {
                let optional = matches!(
                    path.as_str(),
                    "composition" | "composition.domain" | "protein" | "protein.spot" | "frame" | "fission"
                );
                if !optional || values.has_section(&path) {
                    fill_from_list(values, inner, &format!("{path}."));
                }
            }
            _ => {
                if let (Some(default), None) = (key.default, values.entry(&path)) {
                    let tree = Gather::default().text(
                        format!("{} = {default}", key.name),
                        String::new(),
                        Default::default(),
                        0,
                    );
                    if let Some(entry) = tree.and_then(|tree| default_entry(key, &tree)) {
                        values.insert(&path, entry);
                    }
                }
            }
        }
    }
}

/// Value of a default, read like any other.
fn default_entry(key: &'static Key, tree: &Node) -> Option<Entry> {
    let mut reader = Reader::new(&[]);
    let entry = reader.one(key, tree)?;
    Some(Entry {
        place: None,
        remark: Some("default".into()),
        ..entry
    })
}
