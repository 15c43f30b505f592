//! Values that were read and found right, by dotted path, and how they are written back.

use super::keys::{self, Key, Kind, ROOT};
use super::problem::Place;
use super::source::Node;
use crate::units::Measure;
use std::collections::{BTreeMap, BTreeSet};
use toml::Value as Toml;

/// A value in SI.
#[derive(Clone, Debug)]
pub enum Value {
    /// A number, whole or not.
    Number(f64),
    /// A whole number.
    Whole(i64),
    /// True or false.
    Flag(bool),
    /// A text.
    Text(String),
    /// Three numbers.
    Vector([f64; 3]),
    /// A list of tables.
    List(Vec<Values>),
    /// As it stands in the text.
    Node(Node),
}

/// A value, where it stands and how it is written.
#[derive(Clone, Debug)]
pub struct Entry {
    /// The value in SI.
    pub value: Value,
    /// Where it stands; `None` for defaults.
    pub place: Option<Place>,
    /// As written, with its unit.
    pub written: Option<Toml>,
    /// Why it has this value, for computed defaults.
    pub remark: Option<String>,
}

/// Values by dotted path.
#[derive(Clone, Debug)]
pub struct Values {
    /// The list of keys that paths refer to.
    pub root: &'static [Key],
    /// Dotted path of this table in the list of keys, empty for the whole scenario.
    pub path: String,
    /// Where the table stands.
    pub place: Option<Place>,
    entries: BTreeMap<String, Entry>,
    /// Tables that are present, with the place of their name.
    pub sections: BTreeMap<String, Place>,
    /// Keys that are present but wrong: they are not missing.
    pub failed: BTreeSet<String>,
}

impl Default for Values {
    fn default() -> Self {
        Self::of(ROOT)
    }
}

impl Values {
    /// An empty table with the keys of a list.
    pub fn of(root: &'static [Key]) -> Self {
        Self {
            root,
            path: String::new(),
            place: None,
            entries: BTreeMap::new(),
            sections: BTreeMap::new(),
            failed: BTreeSet::new(),
        }
    }

    /// An empty table in a list within this one.
    pub fn item(&self, path: &str, place: Place) -> Self {
        Self {
            path: self.full(path),
            place: Some(place),
            ..Self::of(self.root)
        }
    }

    /// All that decides the course of a run, one line per value, in an order of its own and in SI: equal for equal
    /// scenarios, however they are written. Numbers count with twelve digits; files with what `hash` makes of them.
    pub fn content(&self, hash: &dyn Fn(&str) -> String) -> String {
        let mut text = String::new();
        self.write_content("", hash, &mut text);
        text
    }

    fn write_content(&self, header: &str, hash: &dyn Fn(&str) -> String, text: &mut String) {
        for (path, entry) in &self.entries {
            let name = format!("{header}{path}");
            if matches!(name.as_str(), "title" | "output.checkpoint_every") {
                continue;
            }
            let value = match &entry.value {
                Value::Number(x) => format!("{x:.11e}"),
                Value::Whole(i) => i.to_string(),
                Value::Flag(yes) => yes.to_string(),
                Value::Text(word) => match keys::find(&self.full(path)).map(|key| key.kind) {
                    Some(Kind::Path) => hash(word),
                    _ => format!("{word:?}"),
                },
                Value::Vector([x, y, z]) => format!("{x:.11e} {y:.11e} {z:.11e}"),
                Value::List(items) => {
                    for (index, item) in items.iter().enumerate() {
                        item.write_content(&format!("{name}.{index}."), hash, text);
                    }
                    format!("{} items", items.len())
                }
                Value::Node(_) => continue,
            };
            text.push_str(&format!("{name} = {value}\n"));
        }
    }

    /// Path in the list of keys.
    pub fn full(&self, path: &str) -> String {
        if self.path.is_empty() {
            path.into()
        } else {
            format!("{}.{path}", self.path)
        }
    }

    /// Put a value in.
    pub fn insert(&mut self, path: &str, entry: Entry) {
        self.entries.insert(path.into(), entry);
    }

    /// The entry of a key, if given or filled in.
    pub fn entry(&self, path: &str) -> Option<&Entry> {
        debug_assert!(keys::find_in(self.root, &self.full(path)).is_some(), "no key {path}");
        self.entries.get(path)
    }

    /// All values with a unit, those in lists included: path, place, measure, value in SI.
    pub fn quantities(&self) -> Vec<(String, Option<Place>, Measure, f64)> {
        let mut found = Vec::new();
        for (path, entry) in &self.entries {
            let full = self.full(path);
            let kind = keys::find(&full).map(|key| key.kind);
            let place = || entry.place.clone();
            match (&entry.value, kind) {
                (Value::Number(x), Some(Kind::Quantity(measure, _))) => {
                    found.push((full, place(), measure, *x));
                }
                (Value::Vector(vector), Some(Kind::Vector(measure))) => {
                    found.extend(vector.map(|x| (full.clone(), place(), measure, x)));
                }
                (Value::List(list), _) => {
                    found.extend(list.iter().flat_map(Values::quantities));
                }
                _ => {}
            }
        }
        found
    }

    /// Where a key stands.
    pub fn place(&self, path: &str) -> Option<Place> {
        self.entry(path).and_then(|entry| entry.place.clone())
    }

    /// Whether a key is given, right or wrong.
    pub fn given(&self, path: &str) -> bool {
        self.entry(path).is_some() || self.failed.contains(path)
    }

    /// Whether a section is given.
    pub fn has_section(&self, path: &str) -> bool {
        debug_assert!(keys::find_in(self.root, &self.full(path)).is_some(), "no section {path}");
        self.sections.contains_key(path)
    }

    /// A number in SI.
    pub fn number(&self, path: &str) -> Option<f64> {
        match self.entry(path)?.value {
            Value::Number(x) => Some(x),
            Value::Whole(i) => Some(i as f64),
            _ => None,
        }
    }

    /// A whole number.
    pub fn whole(&self, path: &str) -> Option<i64> {
        match self.entry(path)?.value {
            Value::Whole(i) => Some(i),
            _ => None,
        }
    }

    /// True or false; false where nothing is said.
    pub fn flag(&self, path: &str) -> bool {
        matches!(self.entry(path).map(|e| &e.value), Some(Value::Flag(true)))
    }

    /// A text; empty where nothing is said.
    pub fn text(&self, path: &str) -> &str {
        match self.entry(path).map(|entry| &entry.value) {
            Some(Value::Text(text)) => text,
            _ => "",
        }
    }

    /// Three numbers in SI.
    pub fn vector(&self, path: &str) -> Option<[f64; 3]> {
        match self.entry(path)?.value {
            Value::Vector(vector) => Some(vector),
            _ => None,
        }
    }

    /// A list of tables; empty where nothing is said.
    pub fn list(&self, path: &str) -> &[Values] {
        match self.entry(path).map(|entry| &entry.value) {
            Some(Value::List(list)) => list,
            _ => &[],
        }
    }

    /// A value as it stands in the text.
    pub fn node(&self, path: &str) -> Option<&Node> {
        match &self.entry(path)?.value {
            Value::Node(node) => Some(node),
            _ => None,
        }
    }

    /// Fill in a number with its SI unit.
    pub fn fill(&mut self, path: &str, value: f64, remark: &str) {
        if self.entry(path).is_some() {
            return;
        }
        let written = match keys::find(&self.full(path)).map(|key| key.kind) {
            Some(Kind::Quantity(measure, _)) => Toml::String(format!("{value:e} {}", measure.unit)),
            _ => Toml::Float(value),
        };
        self.fill_as(path, Value::Number(value), written, remark);
    }

    /// Fill in a value.
    pub fn fill_as(&mut self, path: &str, value: Value, written: Toml, remark: &str) {
        if self.entry(path).is_none() {
            self.insert(
                path,
                Entry {
                    value,
                    place: None,
                    written: Some(written),
                    remark: Some(remark.into()),
                },
            );
        }
    }

    /// Write another text for a value that stays the same.
    pub fn rewrite(&mut self, path: &str, value: Value, written: Toml) {
        if let Some(entry) = self.entries.get_mut(path) {
            entry.value = value;
            entry.written = Some(written);
        }
    }

    /// The whole scenario as TOML.
    pub fn to_toml(&self) -> String {
        let mut text = String::new();
        self.write(ROOT, "", "", &mut text);
        text
    }

    /// `prefix`: path of the table within these values, with a dot at its end; `header`: its full path in TOML.
    fn write(&self, keys: &[Key], prefix: &str, header: &str, text: &mut String) {
        for key in keys {
            let Some(entry) = self.entries.get(&format!("{prefix}{}", key.name)) else {
                continue;
            };
            if let Some(written) = &entry.written {
                text.push_str(&format!("{} = {written}", key.name));
                if let Some(remark) = entry.remark.as_ref().filter(|r| !r.is_empty()) {
                    text.push_str(&format!(" # {remark}"));
                }
                text.push('\n');
            }
        }
        for key in keys {
            let path = format!("{prefix}{}", key.name);
            let name = format!("{header}{}", key.name);
            match key.kind {
                Kind::Section(inner) => {
                    let within = format!("{path}.");
                    if self.sections.contains_key(&path)
                        || self.entries.keys().any(|key| key.starts_with(&within))
                    {
                        text.push_str(&format!("\n[{name}]\n"));
                        self.write(inner, &within, &format!("{name}."), text);
                    }
                }
                Kind::Sections(inner) => {
                    if let Some(Value::List(list)) = self.entries.get(&path).map(|e| &e.value) {
                        for item in list {
                            text.push_str(&format!("\n[[{name}]]\n"));
                            item.write(inner, "", &format!("{name}."), text);
                        }
                    }
                }
                _ => {}
            }
        }
    }
}
