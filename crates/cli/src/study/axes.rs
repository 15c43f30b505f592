//! What a study varies: entries of the scenario and their values, listed or as ranges.

use super::{Setting, scenario_key};
use crate::scenario::keys::{Key, Kind, ROOT};
use crate::scenario::problem::{Place, Problem};
use crate::scenario::read::{Reader, number};
use crate::scenario::source::{Data, Node};
use crate::scenario::values::Values;
use crate::units;
use std::path::Path;

/// One axis: entries of the scenario that move together.
#[derive(Clone, Debug)]
pub struct Axis {
    /// What it is called, if it has a name of its own.
    pub name: Option<String>,
    /// The entries.
    pub keys: Vec<(String, &'static Key)>,
    /// Its values, for each entry; empty where the axis belongs to the design.
    pub points: Vec<Vec<Node>>,
    /// Ends of the range, for each entry.
    pub ends: Option<(Vec<Node>, Vec<Node>)>,
    /// Whether values have equal ratios.
    pub logarithmic: bool,
    /// Where the axis stands.
    pub place: Option<Place>,
}

/// Digits of values within a range.
const DIGITS: usize = 12;
/// Digits of values of a design, whose sequence has 24 bits.
const DESIGN_DIGITS: usize = 6;

impl Axis {
    /// Whether its values are those of the design.
    pub fn is_designed(&self) -> bool {
        self.points.is_empty()
    }

    /// Whether someone means this axis by a word: its name or one of its keys.
    pub fn is_called(&self, word: &str) -> bool {
        self.name.as_deref() == Some(word) || self.keys.iter().any(|(path, _)| path == word)
    }

    /// The values at a share of the way from the first to the last, for each entry.
    pub fn within(&self, share: f64, thermal_energy: f64) -> Vec<Node> {
        let Some((from, to)) = &self.ends else { return Vec::new() };
        let ends = from.iter().zip(to).zip(&self.keys);
        ends.map(|((from, to), (_, key))| between(key, from, to, share, self.logarithmic, DESIGN_DIGITS, thermal_energy))
            .collect()
    }
}

impl Axis {
    /// The values at a share of the way, with all digits; the ends as written. Of a list of values, the nearest.
    pub fn at(&self, share: f64, thermal_energy: f64) -> Vec<Node> {
        let Some((from, to)) = &self.ends else {
            let last = self.points.len().saturating_sub(1);
            return self.points.get((share * last as f64).round() as usize).cloned().unwrap_or_default();
        };
        if share == 0.0 || share == 1.0 {
            return if share == 0.0 { from.clone() } else { to.clone() };
        }
        let ends = from.iter().zip(to).zip(&self.keys);
        ends.map(|((from, to), (_, key))| between(key, from, to, share, self.logarithmic, DIGITS, thermal_energy))
            .collect()
    }

    /// The first of its values, in SI.
    pub fn value(&self, nodes: &[Node], thermal_energy: f64) -> f64 {
        let first = self.keys.first().zip(nodes.first());
        first.and_then(|((_, key), node)| Amount::of(key, node, thermal_energy)).map_or(f64::NAN, |amount| amount.si)
    }
}

/// Read `[set]`: a table in the shape of a scenario.
pub fn settings(reader: &mut Reader<'_>, node: &Node, folder: &Path) -> Vec<Setting> {
    let mut found = Vec::new();
    let Data::Table(_) = node.data else {
        reader.problems.push(Problem::new(
            Some(node.place.clone()),
            "set must be a table of entries of the scenario",
            format!("this is {}", node.data.kind()),
            "write [set] on a line of its own, and for example time.end = \"5 s\" below",
        ));
        return found;
    };
    collect(reader, node, &node.place, "", folder, &mut found);
    found
}

fn collect(
    reader: &mut Reader<'_>,
    node: &Node,
    name: &Place,
    path: &str,
    folder: &Path,
    found: &mut Vec<Setting>,
) {
    if let Data::Table(table) = &node.data {
        for (key, (place, inner)) in table {
            let path = if path.is_empty() { key.clone() } else { format!("{path}.{key}") };
            collect(reader, inner, place, &path, folder, found);
        }
    } else if let Some(key) = entry(reader, path, name)
        && let Some(node) = checked(reader, key, path, node, folder)
    {
        found.push(Setting { path: path.to_owned(), node });
    }
}

/// The key of an entry that may be set, or a problem.
fn entry(reader: &mut Reader<'_>, path: &str, place: &Place) -> Option<&'static Key> {
    let refuse = |reader: &mut Reader<'_>, label: &str, mend: String| {
        reader.problems.push(Problem::new(
            Some(place.clone()),
            format!("the scenario has no entry {path} that could be set"),
            label,
            mend,
        ));
        None
    };
    match scenario_key(path) {
        Some(key) if key.name == "include" => {
            refuse(reader, "too late", "write include into the scenario".to_owned())
        }
        Some(Key { kind: Kind::Section(keys), .. }) => {
            let names: Vec<_> = keys.iter().map(|key| format!("{path}.{}", key.name)).collect();
            refuse(reader, "this is a whole section", format!("name one of its entries: {}", names.join(", ")))
        }
        Some(key) => Some(key),
        None => {
            let mut names = Vec::new();
            list_names(ROOT, "", &mut names);
            let near = names
                .iter()
                .map(|name| (strsim::damerau_levenshtein(path, name), name))
                .min()
                .filter(|(distance, name)| *distance <= 1 + name.len() / 3);
            let last = path.rsplit('.').next().unwrap_or(path);
            let same: Vec<_> = names.iter().filter(|name| name.rsplit('.').next() == Some(last)).collect();
            let mend = match (same.first(), near) {
                (Some(same), _) => format!("did you mean \"{same}\"?"),
                (None, Some((_, near))) => format!("did you mean \"{near}\"?"),
                _ => "write the path with dots, as in membrane.bending_rigidity; `pellicle schema` lists all".into(),
            };
            refuse(reader, "not known", mend)
        }
    }
}

fn list_names(keys: &[Key], header: &str, names: &mut Vec<String>) {
    for key in keys {
        match key.kind {
            Kind::Section(inner) | Kind::Sections(inner) => {
                list_names(inner, &format!("{header}{}.", key.name), names);
            }
            _ => names.push(format!("{header}{}", key.name)),
        }
    }
}

/// A value that the scenario would take, with paths made absolute; or a problem.
fn checked(reader: &mut Reader<'_>, key: &'static Key, path: &str, node: &Node, folder: &Path) -> Option<Node> {
    if !matches!(key.kind, Kind::Sections(_)) {
        reader.value(key, path, node)?;
    }
    match (&key.kind, &node.data) {
        (Kind::Path, Data::Text(text)) => {
            let full = std::path::absolute(folder.join(text)).unwrap_or_else(|_| folder.join(text));
            Some(Node { place: node.place.clone(), data: Data::Text(full.to_string_lossy().into_owned()) })
        }
        _ => Some(node.clone()),
    }
}

/// Read one `[[axis]]`; `None` after a problem.
pub fn axis(reader: &mut Reader<'_>, values: &Values, folder: &Path) -> Option<Axis> {
    let place = values.place.clone();
    let keys = axis_keys(reader, values)?;
    let logarithmic = values.text("spacing") == "logarithmic";
    let name = values.given("name").then(|| values.text("name").to_owned());
    let mut axis = Axis { name, keys, points: Vec::new(), ends: None, logarithmic, place: place.clone() };
    if let Some(list) = values.node("values") {
        if let Some(key) = ["from", "to", "count"].into_iter().find(|key| values.given(key)) {
            reader.problems.push(Problem::new(
                values.place(key),
                format!("axis: {key} has no place beside values"),
                "",
                "give either values, or from, to and count",
            ));
            return None;
        }
        axis.points = listed(reader, &axis, list, folder)?;
        return Some(axis);
    }
    let (Some(from), Some(to)) = (values.node("from"), values.node("to")) else {
        reader.problems.push(Problem::new(
            place,
            "axis: its values are missing",
            "this axis",
            "give values = [...], or from, to and count",
        ));
        return None;
    };
    let from = items(reader, &axis, from, folder)?;
    let to = items(reader, &axis, to, folder)?;
    for (end, (_, key)) in from.iter().chain(&to).zip(axis.keys.iter().cycle()) {
        if !matches!(key.kind, Kind::Quantity(..) | Kind::Number(_) | Kind::Whole(..)) {
            reader.problems.push(Problem::new(
                Some(end.place.clone()),
                format!("axis: {} takes no numbers and has no ranges", key.name),
                "",
                "give values = [...] instead of from and to",
            ));
            return None;
        }
    }
    let thermal_energy = reader.thermal_energy.unwrap_or_default();
    if logarithmic {
        for (node, (_, key)) in from.iter().chain(&to).zip(axis.keys.iter().cycle()) {
            if !Amount::of(key, node, thermal_energy).is_some_and(|amount| amount.si > 0.0) {
                reader.problems.push(Problem::new(
                    Some(node.place.clone()),
                    "axis: a logarithmic range has ends above zero",
                    "not above zero",
                    "write spacing = \"linear\", or other ends",
                ));
                return None;
            }
        }
    }
    if let Some(count) = values.whole("count") {
        for k in 0..count {
            let share = k as f64 / (count - 1) as f64;
            let at = axis.keys.iter().zip(from.iter().zip(&to)).map(|((_, key), (from, to))| match k {
                // As written.
                0 => from.clone(),
                k if k == count - 1 => to.clone(),
                _ => between(key, from, to, share, logarithmic, DIGITS, thermal_energy),
            });
            axis.points.push(at.collect());
        }
    }
    axis.ends = Some((from, to));
    Some(axis)
}

/// The entries an axis varies.
fn axis_keys(reader: &mut Reader<'_>, values: &Values) -> Option<Vec<(String, &'static Key)>> {
    let mut named: Vec<(String, Place)> = Vec::new();
    match (values.place("key"), values.node("together")) {
        (Some(place), None) => named.push((values.text("key").to_owned(), place)),
        (None, Some(list)) => {
            if let Data::List(list) = &list.data {
                for item in list {
                    if let Data::Text(text) = &item.data {
                        named.push((text.clone(), item.place.clone()));
                    }
                }
                if named.len() != list.len() {
                    named.clear();
                }
            }
            if named.is_empty() {
                reader.problems.push(Problem::new(
                    Some(list.place.clone()),
                    "axis: together must be a list of texts that name entries of the scenario",
                    format!("this is {}", list.data.kind()),
                    "write for example together = [\"surface.radius\", \"surface.edge_length\"]",
                ));
            }
        }
        (Some(place), Some(_)) => reader.problems.push(Problem::new(
            Some(place),
            "axis: key and together exclude each other",
            "",
            "give key for one entry, together for several",
        )),
        (None, None) if !values.given("key") => reader.problems.push(Problem::new(
            values.place.clone(),
            "axis: key is missing",
            "this axis",
            "write for example key = \"composition.line_tension\"",
        )),
        (None, None) => {}
    }
    let mut keys = Vec::new();
    for (path, place) in &named {
        match entry(reader, path, place) {
            Some(Key { kind: Kind::Sections(_), .. }) => reader.problems.push(Problem::new(
                Some(place.clone()),
                format!("axis: {path} is a list of tables"),
                "",
                format!("name an entry of one of its items, from 0 on: {path}.0.…"),
            )),
            Some(key) => keys.push((path.clone(), key)),
            None => {}
        }
    }
    (!keys.is_empty() && keys.len() == named.len()).then_some(keys)
}

fn listed(reader: &mut Reader<'_>, axis: &Axis, list: &Node, folder: &Path) -> Option<Vec<Vec<Node>>> {
    match &list.data {
        Data::List(all) if !all.is_empty() => {
            let points: Vec<_> = all.iter().filter_map(|item| items(reader, axis, item, folder)).collect();
            (points.len() == all.len()).then_some(points)
        }
        other => {
            let kind = if matches!(other, Data::List(_)) { "an empty list" } else { other.kind() };
            reader.problems.push(Problem::new(
                Some(list.place.clone()),
                "axis: values must be a list",
                format!("this is {kind}"),
                "write for example values = [\"0.1 pN\", \"0.2 pN\"]",
            ));
            None
        }
    }
}

/// One value for each entry of an axis.
fn items(reader: &mut Reader<'_>, axis: &Axis, node: &Node, folder: &Path) -> Option<Vec<Node>> {
    if let [(path, key)] = axis.keys.as_slice() {
        return Some(vec![checked(reader, key, path, node, folder)?]);
    }
    match &node.data {
        Data::List(items) if items.len() == axis.keys.len() => {
            let pairs = items.iter().zip(&axis.keys);
            let read: Vec<_> = pairs.filter_map(|(item, (path, key))| checked(reader, key, path, item, folder)).collect();
            (read.len() == items.len()).then_some(read)
        }
        _ => {
            let names: Vec<&str> = axis.keys.iter().map(|(path, _)| path.as_str()).collect();
            reader.problems.push(Problem::new(
                Some(node.place.clone()),
                format!("axis: one value for each of {} is needed", names.join(", ")),
                "",
                format!("write a list of {} values here", names.len()),
            ));
            None
        }
    }
}

/// A number with its unit.
struct Amount {
    number: f64,
    unit: String,
    si: f64,
}

impl Amount {
    fn of(key: &Key, node: &Node, thermal_energy: f64) -> Option<Self> {
        match (&key.kind, &node.data) {
            (Kind::Quantity(measure, _), Data::Text(text)) => {
                let text = text.trim();
                let (number, unit) = text.split_at(units::number_length(text));
                let si = units::parse_as(text, measure, Some(thermal_energy)).ok()?;
                Some(Self { number: number.parse().ok()?, unit: unit.trim().to_owned(), si })
            }
            _ => {
                let number = number(node)?;
                Some(Self { number, unit: String::new(), si: number })
            }
        }
    }
}

/// The value at a share of the way between two, in the unit of the first.
fn between(
    key: &Key,
    from: &Node,
    to: &Node,
    share: f64,
    logarithmic: bool,
    digits: usize,
    thermal_energy: f64,
) -> Node {
    let amount = |node| Amount::of(key, node, thermal_energy);
    let (Some(first), Some(last)) = (amount(from), amount(to)) else { return from.clone() };
    let last = if first.unit == last.unit {
        last.number
    } else {
        let one = match key.kind {
            Kind::Quantity(measure, _) => units::parse_as(&format!("1 {}", first.unit), &measure, Some(thermal_energy)),
            _ => Ok(1.0),
        };
        last.si / one.unwrap_or(1.0)
    };
    let number = if logarithmic {
        first.number * (last / first.number).powf(share)
    } else {
        first.number + share * (last - first.number)
    };
    let data = match key.kind {
        Kind::Whole(..) => Data::Integer(number.round() as i64),
        Kind::Quantity(..) => Data::Text(format!("{} {}", plain(number, digits), first.unit)),
        _ => Data::Float(rounded(number, digits)),
    };
    Node { place: from.place.clone(), data }
}

fn rounded(number: f64, digits: usize) -> f64 {
    format!("{number:.*e}", digits - 1).parse().unwrap_or(number)
}

/// A number without digits that only rounding put there.
fn plain(number: f64, digits: usize) -> String {
    let number = rounded(number, digits);
    if number == 0.0 || (1e-4..1e7).contains(&number.abs()) { number.to_string() } else { format!("{number:e}") }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn key(path: &str) -> &'static Key {
        scenario_key(path).expect("a key")
    }

    fn text(text: &str) -> Node {
        Node { place: Place::default(), data: Data::Text(text.into()) }
    }

    fn at(path: &str, from: &str, to: &str, share: f64, logarithmic: bool) -> String {
        let node = between(key(path), &text(from), &text(to), share, logarithmic, DIGITS, 4e-21);
        super::super::shown(&node)
    }

    #[test]
    fn ranges_keep_the_unit_of_their_first_end() {
        assert_eq!(at("composition.line_tension", "0.1 pN", "0.4 pN", 2.0 / 3.0, false), "0.3 pN");
        assert_eq!(at("composition.line_tension", "0.1 pN", "400 fN", 1.0 / 3.0, false), "0.2 pN");
        assert_eq!(at("composition.line_tension", "1 fN", "100 fN", 0.5, true), "10 fN");
        assert_eq!(at("membrane.bending_rigidity", "10 kBT", "20 kBT", 0.5, false), "15 kBT");
        assert_eq!(at("membrane.shear_viscosity", "1e-9 N s/m", "1e-7 N s/m", 0.5, true), "1e-8 N s/m");
    }

    #[test]
    fn names_lead_to_keys() {
        assert!(scenario_key("composition.domains.0.area_fraction").is_some());
        assert!(scenario_key("composition.domans.0.area_fraction").is_none());
    }
}
