//! What is made coarser from level to level, and how coarse a level turned out to be.

use crate::study::launch::EndOfRun;
use crate::units::number_length;
use std::str::FromStr;
use toml::{Table, Value};

/// Levels of each refinement, the scenario itself among them as the finest.
pub const LEVELS: usize = 3;
/// Numbers that a scenario does not take beyond these bounds.
const BOUNDS: [(&str, f64); 2] = [("time.tolerance", 0.5), ("time.vertex_travel", 0.5)];

/// How the size of a level is told.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum SizeOf {
    /// Edge of the end mesh, (area / vertices)^½: adapted meshes differ from what was asked for.
    Edge,
    /// Mean accepted step.
    Step,
    /// What was asked for.
    Wish,
}

/// Something that is refined.
#[derive(Clone, Debug, PartialEq)]
pub struct Refinement {
    /// Name, as in `mesh`.
    pub name: String,
    /// Order with which errors should fall.
    pub order: f64,
    /// Ratio of two levels.
    pub ratio: f64,
    /// Entries of the scenario, and whether they grow from the finest level to the coarsest.
    entries: Vec<(String, bool)>,
    size: SizeOf,
}

const MESH: [(&str, bool); 5] = [
    ("surface.edge_length", true),
    ("surface.centre_edge_length", true),
    ("mesh.shortest_edge", true),
    ("mesh.edges_per_radius", false),
    ("mesh.edges_per_interface", false),
];
const TIME: [(&str, bool); 4] =
    [("time.tolerance", true), ("time.first_step", true), ("time.longest_step", true), ("time.vertex_travel", true)];
/// The mesh follows the interface, at as many edges across it.
const INTERFACE: [(&str, bool); 5] = [
    ("composition.interface_width", true),
    ("surface.edge_length", true),
    ("surface.centre_edge_length", true),
    ("mesh.shortest_edge", true),
    ("mesh.edges_per_radius", false),
];

impl FromStr for Refinement {
    type Err = String;

    fn from_str(word: &str) -> Result<Self, String> {
        let root = 2f64.sqrt();
        let (order, ratio, entries, size): (f64, f64, &[(&str, bool)], _) = match word {
            "mesh" => (2.0, root, &MESH, SizeOf::Edge),
            "time" => (1.0, 2.0, &TIME, SizeOf::Step),
            "interface" => (2.0, root, &INTERFACE, SizeOf::Wish),
            _ => return Err("what can be refined is mesh, time and interface".to_owned()),
        };
        let entries = entries.iter().map(|(path, grows)| ((*path).to_owned(), *grows)).collect();
        Ok(Self { name: word.to_owned(), order, ratio, entries, size })
    }
}

impl Refinement {
    /// A length or number of the scenario that a limit is wanted of: towards infinity with `up`, else towards zero.
    pub fn of_entry(path: &str, up: bool, order: f64, ratio: f64) -> Self {
        Self { name: path.to_owned(), order, ratio, entries: vec![(path.to_owned(), !up)], size: SizeOf::Wish }
    }

    /// Overrides that make a level of a scenario, 0 being the scenario itself; `resolved`: with all defaults.
    ///
    /// # Errors
    /// When the scenario has nothing of the kind.
    pub fn overrides(&self, resolved: &Table, level: usize) -> Result<Vec<String>, String> {
        let factor = self.factor(level);
        let mut overrides = Vec::new();
        for (path, grows) in &self.entries {
            let Some(value) = path.split('.').try_fold(None, |table: Option<&Value>, part| {
                Some(Some(match table {
                    None => resolved.get(part)?,
                    Some(value) => value.get(part)?,
                }))
            }) else {
                // The first entry is what it is about; the others follow where the scenario has them.
                if overrides.is_empty() {
                    break;
                }
                continue;
            };
            let Some(value) = value else { continue };
            let factor = if *grows { factor } else { 1.0 / factor };
            let bound = BOUNDS.iter().find(|(name, _)| name == path).map_or(f64::INFINITY, |(_, bound)| *bound);
            match scaled(value, factor, bound) {
                Some(value) => overrides.push(format!("{path}={value}")),
                None => return Err(format!("{path} is no number that could be refined")),
            }
        }
        if overrides.is_empty() {
            return Err(format!("the scenario has no {} that could be refined", self.name));
        }
        Ok(if level == 0 { Vec::new() } else { overrides })
    }

    fn factor(&self, level: usize) -> f64 {
        self.ratio.powi(i32::try_from(level).unwrap_or(0))
    }

    /// How coarse a level turned out.
    pub fn size(&self, end: &EndOfRun, level: usize) -> f64 {
        let measured = match self.size {
            SizeOf::Wish => None,
            SizeOf::Edge => end.end("area_m2").zip(end.end("vertex_count")).map(|(area, count)| (area / count).sqrt()),
            SizeOf::Step => {
                let steps = end.summary.pointer("/steps/accepted").and_then(serde_json::Value::as_f64);
                end.end("time_s").zip(steps).map(|(time, steps)| time / steps)
            }
        };
        measured.filter(|size| *size > 0.0 && size.is_finite()).unwrap_or_else(|| self.factor(level))
    }
}

/// A value times a factor, its unit kept, as TOML.
fn scaled(value: &Value, factor: f64, bound: f64) -> Option<Value> {
    // Twelve digits, so that powers of the ratio that are whole numbers look like it.
    let times = |x: f64| format!("{:.11e}", x * factor).parse::<f64>().ok();
    match value {
        Value::Float(x) => Some(Value::Float(times(*x)?.min(bound))),
        Value::Integer(i) => Some(Value::Float(times(*i as f64)?)),
        Value::String(text) => {
            let text = text.trim();
            let (number, unit) = text.split_at(number_length(text));
            let number = number.parse().ok()?;
            Some(Value::String(format!("{} {}", times(number)?, unit.trim())))
        }
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn levels_scale_what_the_scenario_has() -> Result<(), Box<dyn std::error::Error>> {
        let resolved: Table = toml::from_str(
            "[surface]\nedge_length = \"0.5 um\"\n[mesh]\nedges_per_radius = 4.0\n[time]\ntolerance = 0.2\nfirst_step = \"1e-5 s\"",
        )?;
        let mesh: Refinement = "mesh".parse()?;
        assert!(mesh.overrides(&resolved, 0)?.is_empty(), "the finest level is the scenario itself");
        assert_eq!(mesh.overrides(&resolved, 2)?, ["surface.edge_length=\"1 um\"", "mesh.edges_per_radius=2.0"]);
        let time: Refinement = "time".parse()?;
        assert_eq!(time.overrides(&resolved, 2)?, ["time.tolerance=0.5", "time.first_step=\"0.00004 s\""]);
        assert!("interface".parse::<Refinement>()?.overrides(&toml::Table::new(), 1).is_err());
        let length = Refinement::of_entry("surface.edge_length", true, 2.0, 2.0);
        assert_eq!(length.overrides(&resolved, 1)?, ["surface.edge_length=\"0.25 um\""]);
        assert!("colour".parse::<Refinement>().is_err());
        Ok(())
    }
}
