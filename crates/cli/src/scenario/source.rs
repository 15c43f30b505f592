//! From text to one tree of keys and values: TOML, included files, overrides. Every key and value keeps its place.

use super::problem::{Place, Problem, Source};
use std::borrow::Cow;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Largest scenario file.
const MOST_BYTES: u64 = 10 << 20;
/// Files that may include each other in a row.
const MOST_INCLUDES: usize = 16;

/// Faults of the TOML itself that are told: each may cause the next.
const MOST_FAULTS: usize = 5;

/// A value and where it stands.
#[derive(Clone, Debug)]
pub struct Node {
    /// Where the value stands.
    pub place: Place,
    /// What it is.
    pub data: Data,
}

/// What a value is.
#[derive(Clone, Debug)]
pub enum Data {
    /// A string.
    Text(String),
    /// A whole number.
    Integer(i64),
    /// A number.
    Float(f64),
    /// True or false.
    Boolean(bool),
    /// A date or time, which no key wants.
    Date,
    /// A number that 64 bits cannot hold.
    TooLarge(String),
    /// A list.
    List(Vec<Node>),
    /// A table: key, place of the key, value.
    Table(BTreeMap<String, (Place, Node)>),
}

impl Data {
    /// In words.
    pub fn kind(&self) -> &'static str {
        match self {
            Data::Text(_) => "a text",
            Data::Integer(_) | Data::Float(_) | Data::TooLarge(_) => "a number",
            Data::Boolean(_) => "true or false",
            Data::Date => "a date",
            Data::List(_) => "a list",
            Data::Table(_) => "a table",
        }
    }
}

/// Collects texts and faults on the way.
#[derive(Debug, Default)]
pub struct Gather {
    /// All texts read.
    pub sources: Vec<Source>,
    /// Folder that paths in each text are relative to.
    pub folders: Vec<PathBuf>,
    /// Faults.
    pub problems: Vec<Problem>,
}

impl Gather {
    /// Read a file and what it includes.
    pub fn file(&mut self, path: &Path, from: Option<&Place>, depth: usize) -> Option<Node> {
        let name = path.display().to_string();
        let refuse = |gather: &mut Self, message: String, mend: &str| {
            gather
                .problems
                .push(Problem::unreadable(from.cloned(), message, mend));
            None
        };
        let bytes = match read_limited(path) {
            Ok(bytes) => bytes,
            Err(error) => {
                return refuse(
                    self,
                    format!("cannot read {name}: {error}"),
                    "check the path and the permissions of the file",
                );
            }
        };
        if bytes.len() as u64 > MOST_BYTES {
            self.problems.push(Problem::new(
                from.cloned(),
                format!("{name} is larger than 10 MB, too large for a scenario"),
                "",
                "give the scenario, not a mesh or an output; a mesh is named by surface.file",
            ));
            return None;
        }
        let text = match String::from_utf8(bytes) {
            Ok(text) => text,
            Err(error) => {
                let at = error.utf8_error().valid_up_to();
                self.problems.push(Problem::new(
                    from.cloned(),
                    format!("{name} is not a text in UTF-8 (byte {at})"),
                    "",
                    "a scenario is a TOML file; save it as UTF-8",
                ));
                return None;
            }
        };
        let folder = path.parent().map(Path::to_path_buf).unwrap_or_default();
        self.text(text, name, folder, depth)
    }

    /// Read a text and what it includes.
    pub fn text(
        &mut self,
        text: String,
        name: String,
        folder: PathBuf,
        depth: usize,
    ) -> Option<Node> {
        let source = self.sources.len();
        let (tree, faults) = parse(&text, source);
        self.sources.push(Source { name, text });
        self.folders.push(folder.clone());
        let broken = !faults.is_empty();
        self.problems.extend(faults);
        let mut tree = tree.filter(|_| !broken)?;
        let Data::Table(keys) = &mut tree.data else {
            return Some(tree);
        };
        let Some((_, include)) = keys.remove("include") else {
            return Some(tree);
        };
        let Data::Text(base) = &include.data else {
            self.problems.push(Problem::new(
                Some(include.place),
                "include must be the path of another scenario",
                format!("this is {}", include.data.kind()),
                "write for example include = \"base.toml\"",
            ));
            return Some(tree);
        };
        if depth >= MOST_INCLUDES {
            self.problems.push(Problem::new(
                Some(include.place),
                format!("more than {MOST_INCLUDES} scenarios include each other in a row"),
                "",
                "remove the circle of includes",
            ));
            return None;
        }
        let base = self.file(&folder.join(base), Some(&include.place), depth + 1)?;
        Some(merge(base, tree))
    }

    /// As [`Gather::set`], for a copy of the tree that stands for itself: nothing is remembered but faults.
    pub fn laid_over(&self, tree: &Node, overrides: &[String]) -> (Node, Gather) {
        let mut gather = Gather { sources: self.sources.clone(), folders: self.folders.clone(), problems: Vec::new() };
        let tree = overrides.iter().fold(tree.clone(), |tree, option| gather.set(tree, option));
        (tree, gather)
    }

    /// Lay an override `key.path=value` over a tree.
    pub fn set(&mut self, tree: Node, option: &str) -> Node {
        let source = self.sources.len();
        let mut text = option.trim().to_string();
        let mut parsed = parse(&text, source);
        if let (false, Some((key, value))) = (parsed.1.is_empty(), option.split_once('=')) {
            // A bare word or quantity is a text.
            text = format!(
                "{}={}",
                key.trim(),
                toml::Value::String(value.trim().to_string())
            );
            parsed = parse(&text, source);
        }
        let known = option.contains('=');
        self.sources.push(Source {
            name: "--set".into(),
            text,
        });
        self.folders.push(PathBuf::new());
        match parsed {
            (Some(over), faults) if faults.is_empty() && known => merge(tree, over),
            (_, faults) => {
                let message = faults
                    .first()
                    .map_or("no \"=\" in it".to_string(), |fault| fault.message.clone());
                self.problems.push(Problem::new(
                    Some(Place { source, span: 0..0 }),
                    format!("the override \"{option}\" cannot be read: {message}"),
                    "",
                    "write --set key.path=value, for example --set membrane.bending_rigidity=\"25 kBT\"",
                ));
                tree
            }
        }
    }
}

fn read_limited(path: &Path) -> std::io::Result<Vec<u8>> {
    use std::io::Read;
    let mut bytes = Vec::new();
    let file = std::fs::File::open(path)?;
    if file.metadata()?.is_dir() {
        return Err(std::io::Error::other("it is a folder"));
    }
    file.take(MOST_BYTES + 1).read_to_end(&mut bytes)?;
    Ok(bytes)
}

fn parse(text: &str, source: usize) -> (Option<Node>, Vec<Problem>) {
    let (table, errors) = DeTable::parse_recoverable(text);
    if errors.is_empty() {
        let place = Place { source, span: 0..0 };
        let data = convert_table(table.into_inner(), source);
        return (Some(Node { place, data }), Vec::new());
    }
    let mut told = Vec::new();
    let problems = errors
        .iter()
        .map(|error| (error.span().unwrap_or(0..0), error))
        .filter(|(span, _)| {
            let first = !told.contains(&span.start);
            told.push(span.start);
            first && told.len() <= MOST_FAULTS
        })
        .map(|(span, error)| {
            Problem::new(
                Some(Place { source, span }),
                format!("this is not TOML: {}", error.message().replace('\n', ", ")),
                "",
                "a line is a [section], or key = value with texts in quotes: radius = \"10 um\"",
            )
        })
        .collect();
    (None, problems)
}

fn convert_table(table: DeTable<'_>, source: usize) -> Data {
    Data::Table(
        table
            .into_iter()
            .map(|(key, value)| {
                let place = Place {
                    source,
                    span: key.span(),
                };
                let node = convert(value, source);
                (Cow::into_owned(key.into_inner()), (place, node))
            })
            .collect(),
    )
}

fn convert(value: Spanned<DeValue<'_>>, source: usize) -> Node {
    let place = Place {
        source,
        span: value.span(),
    };
    let data = match value.into_inner() {
        DeValue::String(text) => Data::Text(text.into_owned()),
        DeValue::Integer(integer) => i64::from_str_radix(integer.as_str(), integer.radix())
            .map_or_else(|_| Data::TooLarge(integer.to_string()), Data::Integer),
        DeValue::Float(float) => float
            .as_str()
            .parse()
            .map_or_else(|_| Data::TooLarge(float.to_string()), Data::Float),
        DeValue::Boolean(yes) => Data::Boolean(yes),
        DeValue::Datetime(_) => Data::Date,
        DeValue::Array(list) => {
            Data::List(list.into_iter().map(|item| convert(item, source)).collect())
        }
        DeValue::Table(table) => convert_table(table, source),
    };
    Node { place, data }
}

/// `over` wins, key by key; a table with whole numbers as keys changes items of a list.
fn merge(base: Node, over: Node) -> Node {
    match (base.data, over.data) {
        (Data::Table(mut base_keys), Data::Table(over_keys)) => {
            for (key, (place, node)) in over_keys {
                let merged = match base_keys.remove(&key) {
                    Some((_, old)) => merge(old, node),
                    None => node,
                };
                base_keys.insert(key, (place, merged));
            }
            Node {
                place: base.place,
                data: Data::Table(base_keys),
            }
        }
        (Data::List(mut items), Data::Table(changes))
            if !changes.is_empty()
                && changes
                    .keys()
                    .all(|key| key.parse::<usize>().is_ok_and(|at| at < items.len())) =>
        {
            for (key, (_, node)) in changes {
                if let Some(item) = key.parse().ok().and_then(|at: usize| items.get_mut(at)) {
                    *item = merge(item.clone(), node);
                }
            }
            Node {
                place: base.place,
                data: Data::List(items),
            }
        }
        (_, data) => Node {
            place: over.place,
            data,
        },
    }
}
