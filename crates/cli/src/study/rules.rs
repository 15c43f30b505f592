//! Classes of outcomes: conditions on the last row of a run, such as `neck_radius < "0.2 um" and domain_count >= 2`.
//!
//! A condition compares columns of the series with numbers, joined by `and`, `or`, `not` and brackets. A column is
//! named in full and compared with a number in its unit (`neck_radius_m < 2e-7`), or without its unit and compared with
//! a text that has one. `stopped_by` is compared with the word for why the run ended. A comparison with a column that
//! the run does not have (the neck of a sphere) does not hold.

use super::launch::EndOfRun;
use crate::run::columns::COLUMNS;
use crate::units::{self, Measure, measure as m};
use std::ops::Range;

/// Class of a run whose solver gave up, or that could not be run.
pub const FAILED: &str = "failed";
/// Class of a run that has not come to its end.
pub const UNFINISHED: &str = "unfinished";
/// Class of a run that no rule describes.
pub const OTHER: &str = "other";

/// Words for why a run ended.
const WORDS: [&str; 4] = ["time", "neck_radius", "domain_count", "at_rest"];
/// Brackets within brackets.
const DEEPEST: usize = 50;

/// The rules of a study: the first whose condition holds is taken.
#[derive(Clone, Debug, Default)]
pub struct Rules {
    /// Name and condition of each; `None`: always.
    pub list: Vec<(String, Option<Condition>)>,
}

impl Rules {
    /// All classes in order, with those that a study need not define at the end.
    pub fn classes(&self) -> Vec<&str> {
        let mut names: Vec<&str> = Vec::new();
        for (name, _) in &self.list {
            if !names.contains(&name.as_str()) {
                names.push(name);
            }
        }
        for name in [OTHER, FAILED, UNFINISHED] {
            if !names.contains(&name) {
                names.push(name);
            }
        }
        names
    }

    /// The class of a run that has ended.
    pub fn classify(&self, end: &EndOfRun) -> &str {
        if end.trouble().is_some() {
            return FAILED;
        }
        let holds = |condition: &Option<Condition>| condition.as_ref().is_none_or(|condition| condition.holds(end));
        self.list.iter().find(|(_, condition)| holds(condition)).map_or(OTHER, |(name, _)| name)
    }
}

/// What must hold.
#[derive(Clone, Debug, PartialEq)]
pub enum Condition {
    /// All of them.
    And(Vec<Condition>),
    /// At least one.
    Or(Vec<Condition>),
    /// The opposite.
    Not(Box<Condition>),
    /// A column compared with a number in SI.
    Column(&'static str, Relation, f64),
    /// Why the run ended, and whether it must be so or must not.
    StoppedBy(String, bool),
}

/// How two numbers are compared.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Relation {
    /// <
    Below,
    /// <=
    AtMost,
    /// >
    Above,
    /// >=
    AtLeast,
    /// ==
    Equal,
    /// !=
    Unequal,
}

impl Condition {
    /// Whether it holds at the end of a run.
    pub fn holds(&self, end: &EndOfRun) -> bool {
        match self {
            Self::And(parts) => parts.iter().all(|part| part.holds(end)),
            Self::Or(parts) => parts.iter().any(|part| part.holds(end)),
            Self::Not(part) => !part.holds(end),
            Self::Column(column, relation, value) => end.end(column).is_some_and(|found| match relation {
                Relation::Below => found < *value,
                Relation::AtMost => found <= *value,
                Relation::Above => found > *value,
                Relation::AtLeast => found >= *value,
                Relation::Equal => found == *value,
                Relation::Unequal => found != *value,
            }),
            Self::StoppedBy(word, wanted) => (end.stopped_by() == word) == *wanted,
        }
    }
}

/// Why a text is no condition.
#[derive(Clone, Debug, PartialEq)]
pub struct Fault {
    /// Bytes of the text concerned.
    pub span: Range<usize>,
    /// What is wrong.
    pub message: String,
    /// What mends it.
    pub mend: String,
}

/// Units at the ends of names of columns.
const UNITS: [(&str, Measure); 9] = [
    ("_N_per_m", m::TENSION),
    ("_m_per_s", Measure { name: "speed", dimension: units::Dimension { mass: 0, length: 1, time: -1, temperature: 0, amount: 0 }, unit: "m/s", example: "1 um/s" }),
    ("_m2", m::AREA),
    ("_m3", m::VOLUME),
    ("_Pa", m::PRESSURE),
    ("_J", m::ENERGY),
    ("_N", m::FORCE),
    ("_s", m::TIME),
    ("_m", m::LENGTH),
];

/// Name without unit and unit of a column; no unit for plain numbers.
pub fn unit_of(column: &str) -> (&str, Option<Measure>) {
    let found = UNITS.iter().find_map(|(ending, measure)| Some((column.strip_suffix(ending)?, Some(*measure))));
    found.unwrap_or((column, None))
}

/// The column a word means: its full name or its name without unit.
pub fn column(word: &str) -> Option<&'static str> {
    let full = COLUMNS.into_iter().find(|name| *name == word);
    full.or_else(|| COLUMNS.into_iter().find(|name| unit_of(name).0 == word))
}

/// The column nearest to a word, for messages.
pub fn suggestion(word: &str) -> String {
    let names = || COLUMNS.into_iter().map(|name| unit_of(name).0).chain(["stopped_by"]);
    let near = names()
        .map(|name| (strsim::damerau_levenshtein(word, name), name))
        .min()
        .filter(|(distance, name)| *distance <= 1 + name.len() / 3);
    match near {
        Some((_, near)) => format!("did you mean {near}?"),
        None => format!("known here: {}", names().collect::<Vec<_>>().join(", ")),
    }
}

/// Read a condition; `thermal_energy` [J] is kBT, where all runs have the same.
///
/// # Errors
/// [`Fault`] with its place in the text.
pub fn parse(text: &str, thermal_energy: Option<f64>) -> Result<Condition, Fault> {
    let tokens = tokens(text)?;
    let mut parser = Parser { tokens, at: 0, end: text.len(), thermal_energy, depth: 0 };
    let condition = parser.any()?;
    match parser.next() {
        None => Ok(condition),
        Some((token, span)) => Err(fault(span, format!("{} has no place here", token.shown()), JOIN)),
    }
}

const JOIN: &str = "join comparisons with and, or";
const EXAMPLE: &str = "write for example neck_radius < \"0.2 um\" and domain_count >= 2";

fn fault(span: Range<usize>, message: impl Into<String>, mend: impl Into<String>) -> Fault {
    Fault { span, message: message.into(), mend: mend.into() }
}

#[derive(Clone, Debug, PartialEq)]
enum Token {
    Word(String),
    Number(f64),
    Text(String),
    Relation(Relation),
    Open,
    Close,
}

impl Token {
    fn shown(&self) -> String {
        match self {
            Self::Word(word) => format!("\"{word}\""),
            Self::Number(number) => format!("the number {number}"),
            Self::Text(text) => format!("the text \"{text}\""),
            Self::Relation(_) => "a comparison".into(),
            Self::Open => "a bracket".into(),
            Self::Close => "a closing bracket".into(),
        }
    }
}

fn tokens(text: &str) -> Result<Vec<(Token, Range<usize>)>, Fault> {
    const SIGNS: [(&str, Relation); 8] = [
        ("<=", Relation::AtMost),
        (">=", Relation::AtLeast),
        ("==", Relation::Equal),
        ("!=", Relation::Unequal),
        ("<", Relation::Below),
        (">", Relation::Above),
        ("=", Relation::Equal),
        ("≠", Relation::Unequal),
    ];
    let mut found = Vec::new();
    let mut at = 0;
    while let Some(first) = text[at..].chars().next() {
        let rest = &text[at..];
        let (token, length) = if first.is_whitespace() {
            at += first.len_utf8();
            continue;
        } else if let Some((sign, relation)) = SIGNS.iter().find(|(sign, _)| rest.starts_with(sign)) {
            (Token::Relation(*relation), sign.len())
        } else if first == '(' {
            (Token::Open, 1)
        } else if first == ')' {
            (Token::Close, 1)
        } else if matches!(first, '"' | '\'') {
            match rest[1..].find(first) {
                Some(length) => (Token::Text(rest[1..=length].to_owned()), length + 2),
                None => return Err(fault(at..text.len(), "the quote is not closed", EXAMPLE)),
            }
        } else if first.is_ascii_digit() || matches!(first, '-' | '+' | '.') {
            let length = units::number_length(rest);
            match rest[..length].parse() {
                Ok(number) => (Token::Number(number), length),
                Err(_) => return Err(fault(at..at + first.len_utf8(), "this is no number", EXAMPLE)),
            }
        } else if first.is_alphabetic() || first == '_' {
            let length = rest.find(|c: char| !c.is_alphanumeric() && c != '_').unwrap_or(rest.len());
            (Token::Word(rest[..length].to_owned()), length)
        } else {
            return Err(fault(at..at + first.len_utf8(), format!("\"{first}\" has no place in a condition"), EXAMPLE));
        };
        found.push((token, at..at + length));
        at += length;
    }
    Ok(found)
}

struct Parser {
    tokens: Vec<(Token, Range<usize>)>,
    at: usize,
    end: usize,
    thermal_energy: Option<f64>,
    depth: usize,
}

impl Parser {
    fn next(&mut self) -> Option<(Token, Range<usize>)> {
        let token = self.tokens.get(self.at).cloned();
        self.at += 1;
        token
    }

    fn takes(&mut self, word: &str) -> bool {
        let found = matches!(self.tokens.get(self.at), Some((Token::Word(found), _)) if found == word);
        self.at += usize::from(found);
        found
    }

    fn any(&mut self) -> Result<Condition, Fault> {
        let mut parts = vec![self.all()?];
        while self.takes("or") {
            parts.push(self.all()?);
        }
        Ok(if parts.len() == 1 { parts.remove(0) } else { Condition::Or(parts) })
    }

    fn all(&mut self) -> Result<Condition, Fault> {
        let mut parts = vec![self.one()?];
        while self.takes("and") {
            parts.push(self.one()?);
        }
        Ok(if parts.len() == 1 { parts.remove(0) } else { Condition::And(parts) })
    }

    fn one(&mut self) -> Result<Condition, Fault> {
        self.depth += 1;
        if self.depth > DEEPEST {
            return Err(fault(0..self.end, "too many brackets", "write a simpler condition"));
        }
        let read = self.single();
        self.depth -= 1;
        read
    }

    fn single(&mut self) -> Result<Condition, Fault> {
        if self.takes("not") {
            return Ok(Condition::Not(Box::new(self.one()?)));
        }
        match self.next() {
            Some((Token::Open, span)) => {
                let inner = self.any()?;
                match self.next() {
                    Some((Token::Close, _)) => Ok(inner),
                    Some((token, at)) => Err(fault(at, format!("{} has no place here", token.shown()), JOIN)),
                    None => Err(fault(span, "the bracket is not closed", "close it with )")),
                }
            }
            Some((Token::Word(word), span)) => self.comparison(&word, span),
            Some((token, span)) => {
                Err(fault(span, format!("a column is expected, not {}", token.shown()), EXAMPLE))
            }
            None => Err(fault(self.end..self.end, "the condition ends too early", EXAMPLE)),
        }
    }

    fn comparison(&mut self, word: &str, span: Range<usize>) -> Result<Condition, Fault> {
        let stopped = word == "stopped_by";
        let column = match column(word) {
            Some(column) => column,
            None if stopped => "",
            None => return Err(fault(span, format!("the series has no column {word}"), suggestion(word))),
        };
        let relation = match self.next() {
            Some((Token::Relation(relation), _)) => relation,
            _ => return Err(fault(span, format!("{word} is not compared with anything"), EXAMPLE)),
        };
        let Some((value, at)) = self.next() else {
            return Err(fault(span, format!("{word} is not compared with anything"), EXAMPLE));
        };
        if stopped {
            return why(relation, &value, at);
        }
        let (bare, unit) = unit_of(column);
        let number = match (value, unit) {
            (Token::Number(number), None) => number,
            (Token::Number(number), Some(_)) if word == column => number,
            (Token::Number(number), Some(measure)) => {
                return Err(fault(
                    at,
                    format!("the unit is missing: {bare} is {} {}", units::article(measure.name), measure.name),
                    format!("write {bare} with a value such as \"{}\", or {column} with {number} in {}", measure.example, measure.unit),
                ));
            }
            (Token::Text(text), Some(measure)) => match units::parse_as(&text, &measure, self.thermal_energy) {
                Ok(number) => number,
                Err(error) => {
                    return Err(fault(
                        at,
                        error.message,
                        format!("write {} {} such as \"{}\"", units::article(measure.name), measure.name, measure.example),
                    ));
                }
            },
            (Token::Text(_), None) => {
                return Err(fault(at, format!("{bare} is a plain number"), "write the number without quotes"));
            }
            (token, _) => {
                return Err(fault(at, format!("{word} cannot be compared with {}", token.shown()), EXAMPLE));
            }
        };
        Ok(Condition::Column(column, relation, number))
    }
}

fn why(relation: Relation, value: &Token, span: Range<usize>) -> Result<Condition, Fault> {
    let mend = format!("choose one of {}", WORDS.map(|word| format!("\"{word}\"")).join(", "));
    match (relation, value) {
        (Relation::Equal | Relation::Unequal, Token::Text(text)) if WORDS.contains(&text.as_str()) => {
            Ok(Condition::StoppedBy(text.clone(), relation == Relation::Equal))
        }
        (Relation::Equal | Relation::Unequal, _) => {
            Err(fault(span, "a run is not stopped by this (those in trouble are failed anyway)", mend))
        }
        _ => Err(fault(span, "stopped_by is a word", format!("compare it with == or !=; {mend}"))),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    fn end() -> EndOfRun {
        let summary = json!({
            "stopped_by": "neck_radius",
            "end": { "neck_radius_m": 1.5e-7, "domain_count": 2, "free_energy_J": 1e-18, "load_force_N": null },
        });
        EndOfRun { summary }
    }

    fn holds(text: &str) -> bool {
        parse(text, Some(4e-21)).unwrap_or_else(|fault| panic!("{text}: {fault:?}")).holds(&end())
    }

    #[test]
    fn conditions_compare_columns() {
        assert!(holds("neck_radius_m < 2e-7"));
        assert!(holds("neck_radius < \"0.2 um\" and domain_count >= 2"));
        assert!(holds("neck_radius > '0.2 um' or domain_count == 2"));
        assert!(holds("not (neck_radius > '0.2 um' or domain_count != 2)"));
        assert!(holds("free_energy > \"200 kBT\" and stopped_by = 'neck_radius'"));
        assert!(!holds("stopped_by != \"neck_radius\""));
        // What is absent compares with nothing.
        assert!(!holds("load_force < '1 pN'") && !holds("load_force >= '1 pN'") && holds("not load_force < '1 pN'"));
        // `and` binds closer.
        assert!(holds("domain_count == 2 or domain_count == 3 and domain_count == 4"));
    }

    #[test]
    fn the_first_rule_that_holds_is_taken() {
        let rule = |name: &str, text: &str| (name.to_owned(), Some(parse(text, None).expect("a condition")));
        let mut rules = Rules { list: vec![rule("many", "domain_count > 5"), rule("few", "domain_count > 1")] };
        assert_eq!(rules.classify(&end()), "few");
        rules.list.remove(1);
        assert_eq!(rules.classify(&end()), OTHER);
        let mut trouble = end();
        trouble.summary["stopped_by"] = json!("trouble");
        assert_eq!(rules.classify(&trouble), FAILED);
    }

    #[test]
    fn faults_are_found_at_their_place() {
        for (text, span, part) in [
            ("neck_radus < 1", 0..10, "no column"),
            ("neck_radius < 1", 14..15, "unit is missing"),
            ("neck_radius < '1 pN'", 14..20, "length"),
            ("domain_count < '1'", 15..18, "plain number"),
            ("domain_count <", 0..12, "not compared"),
            ("(domain_count < 1", 0..1, "not closed"),
            ("domain_count < 1 domain_count", 17..29, "no place"),
            ("domain_count < 1 and", 20..20, "too early"),
            ("stopped_by == 'boredom'", 14..23, "not stopped by"),
            ("domain_count < 1 & x", 17..18, "no place"),
            ("free_energy < '3 kBT'", 14..21, "temperature"),
        ] {
            let fault = parse(text, None).expect_err(text);
            assert_eq!(fault.span, span, "{text}: {fault:?}");
            assert!(fault.message.contains(part), "{text}: {fault:?}");
        }
    }
}
