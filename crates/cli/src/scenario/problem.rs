//! What is wrong with a scenario, shown at its place in the text together with the mend.

use crate::failure::Failure;
use annotate_snippets::{AnnotationKind, Level, Renderer, Snippet};
use std::fmt;
use std::ops::Range;

/// Problems shown before the rest is only counted.
const MOST_SHOWN: usize = 30;
/// Longer lines are not shown, only pointed at.
const LONGEST_LINE: usize = 400;

/// A text that keys and values come from: a file or a `--set` option.
#[derive(Clone, Debug)]
pub struct Source {
    /// Name for messages: the path, or `--set`.
    pub name: String,
    /// The whole text.
    pub text: String,
}

/// Place in a text.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Place {
    /// Index of the source.
    pub source: usize,
    /// Bytes.
    pub span: Range<usize>,
}

/// One fault.
#[derive(Clone, Debug)]
pub struct Problem {
    /// Where; `None`: in no particular text.
    pub place: Option<Place>,
    /// What is wrong, with the path of the key.
    pub message: String,
    /// Short words at the place itself.
    pub label: String,
    /// What mends it.
    pub mend: String,
    /// Whether a file could not be read at all.
    pub unreadable: bool,
}

impl Problem {
    /// A fault at a place.
    pub fn new(
        place: Option<Place>,
        message: impl Into<String>,
        label: impl Into<String>,
        mend: impl Into<String>,
    ) -> Self {
        Self {
            place,
            message: message.into(),
            label: label.into(),
            mend: mend.into(),
            unreadable: false,
        }
    }

    /// A file that cannot be read.
    pub fn unreadable(
        place: Option<Place>,
        message: impl Into<String>,
        mend: impl Into<String>,
    ) -> Self {
        Self {
            unreadable: true,
            ..Self::new(place, message, "", mend)
        }
    }
}

/// All faults found in a scenario.
#[derive(Clone, Debug, Default)]
pub struct ScenarioError {
    /// The texts.
    pub sources: Vec<Source>,
    /// The faults, at least one.
    pub problems: Vec<Problem>,
}

impl std::error::Error for ScenarioError {}

impl From<ScenarioError> for Failure {
    fn from(error: ScenarioError) -> Self {
        match error.exit_code() {
            3 => Failure::Files(error.to_string()),
            _ => Failure::Input(error.to_string()),
        }
    }
}

impl fmt::Display for ScenarioError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        // The program says "error: " itself.
        let text = self.render(false);
        f.write_str(text.strip_prefix("error: ").unwrap_or(&text))
    }
}

impl ScenarioError {
    /// Exit code of the program: 3 if a file could not be read, else 2.
    pub fn exit_code(&self) -> u8 {
        if self.problems.iter().any(|p| p.unreadable) {
            3
        } else {
            2
        }
    }

    /// The message for people, with colours where `styled`.
    pub fn render(&self, styled: bool) -> String {
        let renderer = if styled {
            Renderer::styled()
        } else {
            Renderer::plain()
        };
        let mut shown: Vec<String> = self
            .problems
            .iter()
            .take(MOST_SHOWN)
            .map(|problem| self.render_one(problem, &renderer))
            .collect();
        let hidden = self.problems.len().saturating_sub(MOST_SHOWN);
        if hidden > 0 {
            shown.push(format!("and {hidden} more problems"));
        }
        shown.join("\n\n")
    }

    fn render_one(&self, problem: &Problem, renderer: &Renderer) -> String {
        let message = printable(&problem.message);
        let mend = printable(&problem.mend);
        let label = printable(&problem.label);
        let source = problem
            .place
            .as_ref()
            .and_then(|place| Some((place, self.sources.get(place.source)?)));
        let title = Level::ERROR.primary_title(message.as_str());
        let Some((place, source)) = source else {
            let group = title.element(Level::HELP.message(mend.as_str()));
            return renderer.render(&[group]);
        };
        let extract = Extract::new(&source.text, &place.span);
        let Some(line) = &extract.line else {
            let group = title
                .element(
                    annotate_snippets::Origin::path(source.name.as_str())
                        .line(extract.number)
                        .char_column(extract.column),
                )
                .element(Level::HELP.message(mend.as_str()));
            return renderer.render(&[group]);
        };
        let group = title
            .element(
                Snippet::source(line.as_str())
                    .path(source.name.as_str())
                    .line_start(extract.number)
                    .fold(false)
                    .annotation(
                        AnnotationKind::Primary
                            .span(extract.span.clone())
                            .label(label.as_str()),
                    ),
            )
            .element(Level::HELP.message(mend.as_str()));
        renderer.render(&[group])
    }
}

/// Text without control characters, so that nothing from a file can drive the terminal.
fn printable(text: &str) -> String {
    text.chars()
        .map(|c| {
            if c.is_control() && c != '\n' {
                '\u{fffd}'
            } else {
                c
            }
        })
        .collect()
}

/// The line with a place, cut out of a text that may be huge.
struct Extract {
    /// Number of the line, from 1.
    number: usize,
    /// Column of the place in characters, from 1.
    column: usize,
    /// The line, if short enough to be shown.
    line: Option<String>,
    /// The place within the line, at least one byte where the line has one.
    span: Range<usize>,
}

impl Extract {
    fn new(text: &str, span: &Range<usize>) -> Self {
        let boundary = |mut at: usize| {
            at = at.min(text.len());
            while !text.is_char_boundary(at) {
                at -= 1;
            }
            at
        };
        let start = boundary(span.start);
        let end = boundary(span.end).max(start);
        let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
        let line_end = text[start..].find('\n').map_or(text.len(), |at| start + at);
        let line = text[line_start..line_end].trim_end_matches('\r');
        let line_end = line_start + line.len();
        let number = text[..line_start].matches('\n').count() + 1;
        let column = text[line_start..start].chars().count() + 1;
        // Characters that a terminal would obey or hide keep their number of bytes.
        let clean: String = line
            .chars()
            .map(|c| match c {
                '\t' => " ".into(),
                c if c.is_control() => "?".repeat(c.len_utf8()),
                c => c.to_string(),
            })
            .collect();
        let from = start.min(line_end) - line_start;
        let to = (end.min(line_end).max(start.min(line_end)) - line_start).max(from);
        Self {
            number,
            column,
            line: (line.len() <= LONGEST_LINE).then_some(clean),
            span: from..to,
        }
    }
}
