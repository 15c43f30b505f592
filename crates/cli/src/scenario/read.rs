//! From the tree of a scenario to values, checked key by key against the list of keys.

use super::keys::{Key, Kind, ROOT};
use super::problem::{Place, Problem, Source};
use super::source::{Data, Node};
use super::values::{Entry, Value, Values};
use crate::units::{self, Measure, UnitError};
use std::collections::BTreeMap;
use toml::Value as Toml;

type Table = BTreeMap<String, (Place, Node)>;

/// Reads tables.
pub struct Reader<'a> {
    /// Texts, to tell where in a value a fault is.
    pub sources: &'a [Source],
    /// Faults found.
    pub problems: Vec<Problem>,
    /// kBT [J], once it is known.
    pub thermal_energy: Option<f64>,
    root: &'static [Key],
}

impl<'a> Reader<'a> {
    /// A reader of scenarios in the given texts.
    pub fn new(sources: &'a [Source]) -> Self {
        Self::of(ROOT, sources)
    }

    /// A reader of what a list of keys describes.
    pub fn of(root: &'static [Key], sources: &'a [Source]) -> Self {
        Self {
            sources,
            problems: Vec::new(),
            thermal_energy: None,
            root,
        }
    }

    /// Read a whole text with the reader's keys.
    pub fn whole(&mut self, tree: &Node) -> Values {
        let mut values = Values::of(self.root);
        if let Data::Table(table) = &tree.data {
            self.table(table, self.root, "", "", &mut values);
        }
        values
    }

    /// Read the whole scenario; returns the values and kBT [J].
    pub fn scenario(&mut self, tree: &Node) -> (Values, f64) {
        let mut values = Values::default();
        let empty = Table::new();
        let table = match &tree.data {
            Data::Table(table) => table,
            _ => &empty,
        };
        // The temperature first: other values count in kBT.
        let mut temperature = 298.0;
        if let Some(key) = ROOT.iter().find(|key| key.name == "temperature") {
            let kept = std::mem::take(&mut self.problems);
            if let Some((_, node)) = table.get(key.name)
                && let Some(Value::Number(kelvin)) = self.value(key, key.name, node)
            {
                temperature = kelvin;
            }
            self.problems = kept;
        }
        let thermal_energy = units::BOLTZMANN * temperature;
        self.thermal_energy = Some(thermal_energy);
        self.table(table, ROOT, "", "", &mut values);
        (values, thermal_energy)
    }

    /// Read the value of one key out of a tree that holds nothing else.
    pub fn one(&mut self, key: &Key, tree: &Node) -> Option<Entry> {
        let Data::Table(table) = &tree.data else {
            return None;
        };
        let (place, node) = table.get(key.name)?;
        let value = self.value(key, key.name, node)?;
        Some(Entry {
            value,
            place: Some(place.clone()),
            written: Some(to_toml(node)),
            remark: None,
        })
    }

    /// `prefix`: path within `values`, with a dot at its end; `shown`: path for messages.
    fn table(
        &mut self,
        table: &Table,
        keys: &'static [Key],
        prefix: &str,
        shown: &str,
        values: &mut Values,
    ) {
        for (name, (place, node)) in table {
            let Some(key) = keys.iter().find(|key| key.name == name) else {
                self.unknown(name, place, keys, shown);
                continue;
            };
            let path = format!("{prefix}{name}");
            let shown = format!("{shown}{name}");
            match key.kind {
                Kind::Section(inner) => match &node.data {
                    Data::Table(table) => {
                        values.sections.insert(path.clone(), place.clone());
                        self.table(
                            table,
                            inner,
                            &format!("{path}."),
                            &format!("{shown}."),
                            values,
                        );
                    }
                    other => {
                        values.failed.insert(path);
                        self.problems.push(Problem::new(
                            Some(node.place.clone()),
                            format!("{shown} must be a table ({})", key.about),
                            format!("this is {}", other.kind()),
                            format!("write [{shown}] on a line of its own and its keys below"),
                        ));
                    }
                },
                Kind::Sections(inner) => {
                    let list = self.list(node, key, inner, &path, &shown, values);
                    values.insert(
                        &path,
                        Entry {
                            value: Value::List(list),
                            place: Some(place.clone()),
                            written: None,
                            remark: None,
                        },
                    );
                }
                _ => match self.value(key, &shown, node) {
                    Some(value) => values.insert(
                        &path,
                        Entry {
                            value,
                            place: Some(node.place.clone()),
                            written: Some(to_toml(node)),
                            remark: None,
                        },
                    ),
                    None => {
                        values.failed.insert(path);
                    }
                },
            }
        }
    }

    fn list(
        &mut self,
        node: &Node,
        key: &Key,
        inner: &'static [Key],
        path: &str,
        shown: &str,
        values: &Values,
    ) -> Vec<Values> {
        let mut list = Vec::new();
        let wrong = |place: &Place, kind: &str| {
            Problem::new(
                Some(place.clone()),
                format!("{shown} must be a list of tables ({})", key.about),
                format!("this is {kind}"),
                format!("write [[{shown}]] on a line of its own and its keys below, once for each"),
            )
        };
        let Data::List(items) = &node.data else {
            self.problems.push(wrong(&node.place, node.data.kind()));
            return list;
        };
        for (index, item) in items.iter().enumerate() {
            let Data::Table(table) = &item.data else {
                self.problems.push(wrong(&item.place, item.data.kind()));
                continue;
            };
            let place = table
                .values()
                .map(|(place, _)| place)
                .min_by_key(|place| place.span.start)
                .unwrap_or(&item.place);
            let mut one = values.item(path, place.clone());
            self.table(table, inner, "", &format!("{shown}[{index}]."), &mut one);
            list.push(one);
        }
        list
    }

    /// Complain about a key that `keys` does not have.
    pub fn unknown(&mut self, name: &str, place: &Place, keys: &[Key], shown: &str) {
        let name_shown: String = name.chars().take(60).collect();
        let near = keys
            .iter()
            .map(|key| (strsim::damerau_levenshtein(&name_shown, key.name), key.name))
            .min()
            .filter(|(distance, near)| *distance <= 1 + near.len() / 3);
        let elsewhere = self.root.iter().find(|section| match section.kind {
            Kind::Section(inner) => inner.iter().any(|key| key.name == name),
            _ => false,
        });
        let mend = match (near, elsewhere) {
            (Some((_, near)), _) => format!("did you mean \"{near}\"?"),
            (None, Some(section)) => format!("\"{name_shown}\" belongs to [{}]", section.name),
            _ => {
                let names: Vec<_> = keys.iter().map(|key| key.name).collect();
                format!("known here: {}", names.join(", "))
            }
        };
        self.problems.push(Problem::new(
            Some(place.clone()),
            format!("unknown key {shown}{name_shown}"),
            "not known",
            mend,
        ));
    }

    /// A value, or a problem.
    pub fn value(&mut self, key: &Key, shown: &str, node: &Node) -> Option<Value> {
        let read = match (key.kind, &node.data) {
            (Kind::Quantity(measure, range), Data::Text(text)) => {
                return self
                    .quantity(key, shown, node, text, &measure, |x| {
                        (!range.holds(x)).then(|| range.words())
                    })
                    .map(Value::Number);
            }
            (Kind::Quantity(measure, _), Data::Integer(_) | Data::Float(_)) => {
                let written = to_toml(node);
                self.fault(
                    key,
                    shown,
                    node,
                    &format!(
                        "the unit is missing: {} {} is a text with number and unit",
                        units::article(measure.name),
                        measure.name
                    ),
                    &format!("{written} without unit"),
                );
                return None;
            }
            (Kind::Vector(measure), Data::List(items)) if items.len() == 3 => {
                return self.vector(key, shown, items, &measure);
            }
            (Kind::Direction, Data::List(items)) if items.len() == 3 => {
                let mut direction = [0.0; 3];
                for (component, item) in direction.iter_mut().zip(items) {
                    match number(item) {
                        Some(x) if x.is_finite() => *component = x,
                        _ => {
                            self.fault(key, shown, item, "a direction is three finite numbers", "");
                            return None;
                        }
                    }
                }
                let length = direction.iter().map(|x| x * x).sum::<f64>().sqrt();
                if length > 0.0 && length.is_finite() {
                    Ok(Value::Vector(direction))
                } else {
                    Err(
                        "a direction must have a length that is neither zero nor infinite"
                            .to_string(),
                    )
                }
            }
            (Kind::Number(range), Data::Integer(_) | Data::Float(_)) => match number(node) {
                Some(x) if range.holds(x) => Ok(Value::Number(x)),
                _ => Err(format!("must be {}", range.words())),
            },
            (Kind::Whole(low, high), Data::Integer(i)) if (low..=high).contains(i) => {
                Ok(Value::Whole(*i))
            }
            (Kind::Whole(low, high), Data::Integer(_) | Data::Float(_) | Data::TooLarge(_)) => {
                Err(format!("must be a whole number between {low} and {high}"))
            }
            (Kind::Flag, Data::Boolean(yes)) => Ok(Value::Flag(*yes)),
            (Kind::Loose, _) => Ok(Value::Node(node.clone())),
            (Kind::Choice(words), Data::Text(text)) => {
                if words.contains(&text.as_str()) {
                    Ok(Value::Text(text.clone()))
                } else {
                    return self.no_choice(shown, node, text, words);
                }
            }
            (Kind::Text | Kind::Path, Data::Text(text)) => {
                if text.chars().any(|c| c.is_control()) || text.is_empty() || text.len() > 4096 {
                    Err("must be one line of text that is not empty".to_string())
                } else {
                    Ok(Value::Text(text.clone()))
                }
            }
            (Kind::LengthUnit, Data::Text(text)) => match units::parse_unit(text, 0, None) {
                Ok(unit) if unit.dimension == units::measure::LENGTH.dimension => {
                    Ok(Value::Number(unit.times(1.0)))
                }
                Ok(_) => Err("must be a unit of length".to_string()),
                Err(error) => Err(error.message),
            },
            _ => Err(format!("must be {}", wanted(&key.kind))),
        };
        match read {
            Ok(value) => Some(value),
            Err(message) => {
                let label = match &node.data {
                    Data::Text(_) | Data::List(_) | Data::Table(_) => {
                        format!("this is {}", node.data.kind())
                    }
                    _ => format!("this is {}", to_toml(node)),
                };
                self.fault(key, shown, node, &message, &label);
                None
            }
        }
    }

    fn quantity(
        &mut self,
        key: &Key,
        shown: &str,
        node: &Node,
        text: &str,
        measure: &Measure,
        outside: impl Fn(f64) -> Option<String>,
    ) -> Option<f64> {
        match units::parse_as(text, measure, self.thermal_energy) {
            Ok(value) => match outside(value) {
                None => Some(value),
                Some(words) => {
                    self.fault(
                        key,
                        shown,
                        node,
                        &format!("must be {words}"),
                        "out of bounds",
                    );
                    None
                }
            },
            Err(UnitError { span, message }) => {
                let inner = self.within(&node.place, text, &span);
                let node = Node {
                    place: inner,
                    data: node.data.clone(),
                };
                let label = format!(
                    "expected {} {} [{}]",
                    units::article(measure.name),
                    measure.name,
                    measure.unit
                );
                self.fault(
                    key,
                    shown,
                    &node,
                    &format!(
                        "\"{}\": {message}",
                        text.chars().take(60).collect::<String>()
                    ),
                    &label,
                );
                None
            }
        }
    }

    fn vector(
        &mut self,
        key: &Key,
        shown: &str,
        items: &[Node],
        measure: &Measure,
    ) -> Option<Value> {
        let mut vector = [0.0; 3];
        let mut right = true;
        for (component, item) in vector.iter_mut().zip(items) {
            let read = match &item.data {
                Data::Text(text) => self.quantity(key, shown, item, text, measure, |_| None),
                other => {
                    let label = format!("this is {}", other.kind());
                    let message = format!(
                        "must be three texts with number and unit of {} {}",
                        units::article(measure.name),
                        measure.name
                    );
                    self.fault(key, shown, item, &message, &label);
                    None
                }
            };
            match read {
                Some(x) => *component = x,
                None => right = false,
            }
        }
        right.then_some(Value::Vector(vector))
    }

    fn no_choice(&mut self, shown: &str, node: &Node, text: &str, words: &[&str]) -> Option<Value> {
        let text: String = text.chars().take(60).collect();
        let near = words
            .iter()
            .map(|word| (strsim::damerau_levenshtein(&text, word), *word))
            .min()
            .filter(|(distance, word)| *distance <= 1 + word.len() / 3);
        let all: Vec<String> = words.iter().map(|word| format!("\"{word}\"")).collect();
        let mut mend = format!("choose one of {}", all.join(", "));
        if let Some((_, near)) = near {
            mend = format!("did you mean \"{near}\"? Otherwise {mend}");
        }
        self.problems.push(Problem::new(
            Some(node.place.clone()),
            format!("{shown} = \"{text}\" is not possible"),
            "not known",
            mend,
        ));
        None
    }

    fn fault(&mut self, key: &Key, shown: &str, node: &Node, message: &str, label: &str) {
        let name = key.name;
        self.problems.push(Problem::new(
            Some(node.place.clone()),
            format!("{shown}: {message}"),
            label,
            format!("{}; write for example {name} = {}", key.about, key.example),
        ));
    }

    /// Place of some bytes of a text, where it is written without escapes; else of the whole value.
    pub fn within(&self, place: &Place, text: &str, span: &std::ops::Range<usize>) -> Place {
        let written = self
            .sources
            .get(place.source)
            .and_then(|source| source.text.get(place.span.clone()));
        match written.and_then(|written| written.find(text).map(|at| (written, at))) {
            Some((written, at)) if written.len() == text.len() + 2 && at == 1 => Place {
                source: place.source,
                span: place.span.start + 1 + span.start..place.span.start + 1 + span.end,
            },
            _ => place.clone(),
        }
    }
}

/// A plain number.
pub fn number(node: &Node) -> Option<f64> {
    match node.data {
        Data::Integer(i) => Some(i as f64),
        Data::Float(x) => Some(x),
        _ => None,
    }
}

/// What a key takes, in words.
fn wanted(kind: &Kind) -> String {
    match kind {
        Kind::Quantity(measure, _) => format!(
            "a text with number and unit of {} {}",
            units::article(measure.name),
            measure.name
        ),
        Kind::Vector(measure) => format!(
            "three texts with number and unit of {} {}",
            units::article(measure.name),
            measure.name
        ),
        Kind::Direction => "three numbers".into(),
        Kind::Number(_) => "a number without unit".into(),
        Kind::Whole(..) => "a whole number".into(),
        Kind::Flag => "true or false".into(),
        Kind::Choice(words) => format!("one of the texts {}", words.join(", ")),
        Kind::Text => "a text".into(),
        Kind::Path => "the path of a file".into(),
        Kind::LengthUnit => "a unit of length".into(),
        Kind::Section(_) => "a table".into(),
        Kind::Sections(_) => "a list of tables".into(),
        Kind::Loose => "a value".into(),
    }
}

/// The value as it is written back.
pub fn to_toml(node: &Node) -> Toml {
    match &node.data {
        Data::Text(text) | Data::TooLarge(text) => Toml::String(text.clone()),
        Data::Integer(i) => Toml::Integer(*i),
        Data::Float(x) => Toml::Float(*x),
        Data::Boolean(yes) => Toml::Boolean(*yes),
        Data::Date => Toml::String(String::new()),
        Data::List(items) => Toml::Array(items.iter().map(to_toml).collect()),
        Data::Table(_) => Toml::Table(toml::Table::new()),
    }
}
