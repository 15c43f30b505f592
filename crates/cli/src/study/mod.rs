//! Studies: many runs of one scenario with some of its entries varied.
//!
//! Data flow: a study file ([`read`], with the keys of [`keys`], axes of [`axes`], conditions of [`rules`]) becomes a
//! table of runs with names that follow from their content ([`expand`]). Each is brought to its end by a child process
//! of this program ([`launch`]).

pub mod axes;
pub mod branch;
pub mod diagram;
pub mod expand;
pub mod keys;
pub mod launch;
pub mod page;
pub mod parquet_file;
pub mod pool;
pub mod read;
pub mod record;
pub mod results;
pub mod rules;
pub mod table;

use crate::scenario::keys::Key;
use crate::scenario::source::{Data, Gather, Node};
use std::path::PathBuf;
use toml::Value as Toml;

/// A study that was read and found right.
#[derive(Debug)]
pub struct Study {
    /// One line that says what it is about.
    pub title: String,
    /// Directory of the study file.
    pub folder: PathBuf,
    /// The base scenario.
    pub scenario: PathBuf,
    /// Texts read.
    pub texts: Gather,
    /// Tree of the base scenario.
    pub base: Node,
    /// kBT of the base scenario [J].
    pub thermal_energy: f64,
    /// Entries that are different in all runs.
    pub shared: Vec<Setting>,
    /// What is varied.
    pub axes: Vec<axes::Axis>,
    /// Points of the quasi-random design and its seed.
    pub design: Option<(u32, u32)>,
    /// Seeds of the repeats; empty: that of the scenario.
    pub seeds: Vec<i64>,
    /// Classes of outcomes.
    pub rules: rules::Rules,
    /// What follows from run to run.
    pub branches: branch::Wishes,
    /// What the diagram shows.
    pub diagram: DiagramWish,
    /// What the runs may take of the machine.
    pub limits: Limits,
}

/// An entry of the scenario with another value.
#[derive(Clone, Debug)]
pub struct Setting {
    /// Dotted path.
    pub path: String,
    /// The value.
    pub node: Node,
}

impl Setting {
    /// As for `run --set`.
    pub fn option(&self) -> String {
        format!("{}={}", self.path, literal(&self.node))
    }
}

/// What a phase diagram is asked to show: places in the study's lists.
#[derive(Clone, Debug, Default)]
pub struct DiagramWish {
    /// Axis to the right.
    pub x: Option<usize>,
    /// Axis upwards.
    pub y: Option<Upwards>,
    /// Axis with a diagram for each value.
    pub facet: Option<usize>,
    /// Axes that are held, and the number of the point at which.
    pub at: Vec<(usize, usize)>,
}

/// What a diagram shows upwards.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Upwards {
    /// An axis.
    Axis(usize),
    /// A column of the series.
    Column(&'static str),
}

/// What the runs may take of the machine.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limits {
    /// Runs at a time; `None`: as many as there are cores.
    pub parallel: Option<usize>,
    /// Threads of each run.
    pub threads: u16,
    /// Memory of all runs at a time [byte].
    pub memory: Option<f64>,
}

/// A value as TOML on one line.
pub fn literal(node: &Node) -> Toml {
    match &node.data {
        Data::Text(text) | Data::TooLarge(text) => Toml::String(text.clone()),
        Data::Integer(i) => Toml::Integer(*i),
        Data::Float(x) => Toml::Float(*x),
        Data::Boolean(yes) => Toml::Boolean(*yes),
        Data::Date => Toml::String(String::new()),
        Data::List(items) => Toml::Array(items.iter().map(literal).collect()),
        Data::Table(table) => {
            Toml::Table(table.iter().map(|(key, (_, node))| (key.clone(), literal(node))).collect())
        }
    }
}

/// A value as people write it: texts without quotes.
pub fn shown(node: &Node) -> String {
    match &node.data {
        Data::Text(text) => text.clone(),
        _ => literal(node).to_string(),
    }
}

/// The key of a scenario at a dotted path in which items of lists are numbered (`composition.domains.0.radius`).
pub fn scenario_key(path: &str) -> Option<&'static Key> {
    let names: Vec<&str> = path.split('.').filter(|part| part.parse::<usize>().is_err()).collect();
    crate::scenario::keys::find(&names.join("."))
}
