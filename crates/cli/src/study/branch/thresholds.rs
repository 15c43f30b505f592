//! Thresholds with error bars: the search at every level, extrapolated.

use super::bench::{Bench, Stop, Trial};
use super::search::{Bracket, Search};
use super::wish::Threshold;
use crate::error_bars::levels::{LEVELS, Refinement};
use crate::error_bars::richardson::{Estimate, Level, combined, estimate};
use crate::failure::Failure;
use crate::run::summary::replace;
use crate::scenario;
use crate::study::rules::FAILED;
use crate::study::Setting;
use serde_json::{Value, json};
use std::path::Path;

/// Table of all levels of all thresholds.
pub const TABLE_FILE: &str = "thresholds.csv";
/// The same as JSON.
pub const JSON_FILE: &str = "thresholds.json";
/// Counts up when names in these files change.
const FORMAT: u32 = 1;
/// Widths of a bracket of another level around which a search begins.
const MARGINS: [f64; 2] = [6.0, 24.0];

/// The way a threshold is passed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Way {
    Up,
    Down,
}

impl Way {
    fn word(self) -> &'static str {
        match self {
            Self::Up => "up",
            Self::Down => "down",
        }
    }
}

/// What was found at one level, by ways; `Err`: why nothing was found.
struct AtLevel {
    refined: String,
    level: usize,
    found: Vec<(Way, Result<Bracket<Trial>, String>)>,
}

/// A threshold in one direction.
struct Found {
    way: Way,
    finest: Result<Bracket<Trial>, String>,
    value: f64,
    uncertainty: f64,
    parts: Vec<(String, [Level; LEVELS], Estimate)>,
    warnings: Vec<String>,
}

/// Find all thresholds of the study and write them down.
pub fn all(bench: &Bench<'_>, folder: &Path) -> Result<(), Stop> {
    let mut rows = Vec::new();
    let mut values = Vec::new();
    for threshold in &bench.study.branches.thresholds {
        let name = bench.name(&threshold.axis);
        let levels = search_levels(bench, threshold, &name)?;
        let ways = [(threshold.up, Way::Up), (threshold.down, Way::Down)];
        for way in ways.into_iter().filter_map(|(wanted, way)| wanted.then_some(way)) {
            let found = assemble(threshold, way, &levels);
            tell(bench, threshold, &name, &found);
            rows.extend(table_rows(threshold, &name, &found, &levels));
            values.push(to_json(bench, threshold, &name, &found));
        }
    }
    if values.is_empty() {
        return Ok(());
    }
    replace(&folder.join(TABLE_FILE), &csv_of(&HEAD, &rows))?;
    let text = format!("{:#}\n", json!({ "format": FORMAT, "thresholds": values }));
    replace(&folder.join(JSON_FILE), text.as_bytes())?;
    bench.tell(format_args!("Files: {0}/{TABLE_FILE}, {0}/{JSON_FILE}", folder.display()));
    Ok(())
}

/// Coarse levels first: they are cheap, and fresh searches begin near what they found.
fn search_levels(bench: &Bench<'_>, threshold: &Threshold, name: &str) -> Result<Vec<AtLevel>, Stop> {
    let study = bench.study;
    let shared: Vec<String> = study.shared.iter().map(Setting::option).collect();
    let first = threshold.axis.keys.iter().zip(threshold.axis.at(0.0, study.thermal_energy));
    let with_first: Vec<String> = shared
        .iter()
        .cloned()
        .chain(first.map(|((path, _), node)| Setting { path: path.clone(), node }.option()))
        .collect();
    let resolved = scenario::load(&study.scenario, &with_first).map_err(Failure::from)?.resolved;
    let resolved: toml::Table = toml::from_str(&resolved)
        .map_err(|error| Failure::Numerical(format!("the scenario cannot be read back: {error}")))?;
    let overrides = |refinement: &Refinement, level: usize| {
        refinement.overrides(&resolved, level).map_err(|problem| Failure::Input(format!("refine: {problem}")))
    };
    let mut levels: Vec<AtLevel> = Vec::new();
    for refinement in &threshold.refinements {
        for level in (1..LEVELS).rev() {
            let more = overrides(refinement, level)?;
            bench.tell(format_args!("{name}, {} level {} of {LEVELS}:", refinement.name, level + 1));
            let found = both_ways(bench, threshold, &more, levels.last())?;
            levels.push(AtLevel { refined: refinement.name.clone(), level, found });
        }
    }
    bench.tell(format_args!("{name}{}:", if levels.is_empty() { "" } else { ", finest level" }));
    let found = both_ways(bench, threshold, &[], levels.last())?;
    levels.push(AtLevel { refined: String::new(), level: 0, found });
    Ok(levels)
}

type ByWay = Vec<(Way, Result<Bracket<Trial>, String>)>;

fn both_ways(
    bench: &Bench<'_>,
    threshold: &Threshold,
    more: &[String],
    near: Option<&AtLevel>,
) -> Result<ByWay, Stop> {
    let mut found: ByWay = Vec::new();
    let mut ask = |share: f64, origin: Option<&Trial>| bench.trial(&threshold.axis, share, more, origin);
    let search = |from: f64, to: f64| Search {
        from,
        to,
        steps: threshold.steps,
        tolerance: threshold.tolerance,
        follow: threshold.follow,
    };
    let in_words = |last: Trial| format!("the outcome stays {} up to {}", last.outcome, last.given);
    for (wanted, way) in [(threshold.up, Way::Up), (threshold.down, Way::Down)] {
        if !wanted {
            continue;
        }
        let plain = if way == Way::Up { search(0.0, 1.0) } else { search(1.0, 0.0) };
        let outcome = if threshold.follow {
            match (way, found.first()) {
                // Back from where the way up had ended.
                (Way::Down, Some((_, Ok(up)))) => {
                    let start = up.changed.clone();
                    search(start.share, 0.0).run(Some(start), &mut ask)?
                }
                (Way::Down, Some((_, Err(_)))) => {
                    found.push((way, Err("the way up did not leave the branch".to_owned())));
                    continue;
                }
                _ => plain.run(None, &mut ask)?,
            }
        } else {
            let hint = near.and_then(|near| near.found.iter().find(|(other, _)| *other == way));
            match hint {
                Some((_, Ok(bracket))) => near_a_hint(&plain, bracket, &mut ask)?,
                _ => plain.run(None, &mut ask)?,
            }
        };
        found.push((way, outcome.map_err(in_words)));
    }
    Ok(found)
}

/// Search around a bracket that another level had, and everywhere when that fails.
fn near_a_hint(
    plain: &Search,
    hint: &Bracket<Trial>,
    ask: &mut dyn FnMut(f64, Option<&Trial>) -> Result<Trial, Stop>,
) -> Result<Result<Bracket<Trial>, Trial>, Stop> {
    let width = hint.changed.share - hint.held.share;
    for margin in MARGINS {
        let from = (hint.held.share - margin * width).clamp(0.0, 1.0);
        let to = (hint.changed.share + margin * width).clamp(0.0, 1.0);
        let (held, changed) = (ask(from, None)?, ask(to, None)?);
        if held.outcome == hint.held.outcome && changed.outcome == hint.changed.outcome {
            return Search { from, to, steps: 1, ..*plain }.run(Some(held), ask);
        }
    }
    plain.run(None, ask)
}

fn at(levels: &[AtLevel], refined: &str, level: usize, way: Way) -> Option<Result<Bracket<Trial>, String>> {
    let here = levels.iter().find(|here| here.level == level && (level == 0 || here.refined == refined))?;
    here.found.iter().find(|(other, _)| *other == way).map(|(_, found)| found.clone())
}

fn assemble(threshold: &Threshold, way: Way, levels: &[AtLevel]) -> Found {
    let nothing = || Err("it was not looked for".to_owned());
    let finest = at(levels, "", 0, way).unwrap_or_else(nothing);
    let mut found =
        Found { way, finest, value: f64::NAN, uncertainty: f64::NAN, parts: Vec::new(), warnings: Vec::new() };
    let Ok(bracket) = found.finest.clone() else { return found };
    for refinement in &threshold.refinements {
        let mut row = [Level { size: 0.0, value: 0.0, bracket: 0.0 }; LEVELS];
        let mut complete = true;
        for (level, entry) in row.iter_mut().enumerate() {
            match at(levels, &refinement.name, level, way).unwrap_or_else(nothing) {
                Ok(here) => {
                    *entry = Level {
                        size: refinement.size(&here.held.end, level),
                        value: here.value(),
                        bracket: here.half_width(),
                    };
                    let outcomes = |bracket: &Bracket<Trial>| (bracket.held.outcome.clone(), bracket.changed.outcome.clone());
                    if outcomes(&here) != outcomes(&bracket) {
                        found.warnings.push(format!(
                            "{} level {}: {} becomes {} there",
                            refinement.name,
                            level + 1,
                            here.held.outcome,
                            here.changed.outcome
                        ));
                    }
                }
                Err(why) => {
                    complete = false;
                    found.warnings.push(format!("{} level {}: {why}", refinement.name, level + 1));
                }
            }
        }
        if complete {
            let estimate = estimate(row, refinement.order);
            if let Some(warning) = estimate.verdict.warning() {
                found.warnings.push(format!("{}: {warning}", refinement.name));
            }
            found.parts.push((refinement.name.clone(), row, estimate));
        }
    }
    if bracket.held.outcome == FAILED || bracket.changed.outcome == FAILED {
        found.warnings.push("the solver gave up on one side: this may be no threshold of the membrane".to_owned());
    }
    let estimates: Vec<Estimate> = found.parts.iter().map(|part| part.2).collect();
    (found.value, found.uncertainty) = combined(bracket.value(), &estimates);
    found.uncertainty = found.uncertainty.max(bracket.half_width());
    found
}

fn tell(bench: &Bench<'_>, threshold: &Threshold, name: &str, found: &Found) {
    match &found.finest {
        Err(why) => bench.tell(format_args!("{name}, {}: no threshold: {why}.", found.way.word())),
        Ok(bracket) => {
            let (unit, size) = bench.unit(&threshold.axis);
            let share = 100.0 * (found.uncertainty / found.value).abs();
            bench.tell(format_args!(
                "{name}, {}: {} becomes {} at {:.5} ± {:.2} {unit} ({share:.2} %)",
                found.way.word(),
                bracket.held.outcome,
                bracket.changed.outcome,
                Plain(found.value / size),
                Plain(found.uncertainty / size)
            ));
            bench.tell(format_args!("  finest level: between {} and {}", bracket.held.given, bracket.changed.given));
            for (refined, levels, estimate) in &found.parts {
                let values: Vec<String> = levels.iter().map(|level| format!("{:.5}", Plain(level.value / size))).collect();
                let order = estimate.observed_order.map_or_else(String::new, |order| format!(", order {order:.2}"));
                bench.tell(format_args!("  {refined}: {}{order}, {:?}", values.join(", "), estimate.verdict));
            }
        }
    }
    for warning in &found.warnings {
        bench.tell(format_args!("  warning: {warning}"));
    }
}

/// A number with so many significant digits, without an exponent where that is readable.
struct Plain(f64);

impl std::fmt::Display for Plain {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let digits = f.precision().unwrap_or(4).max(1);
        let size = self.0.abs();
        if size != 0.0 && !(1e-3..1e6).contains(&size) {
            return write!(f, "{:.*e}", digits - 1, self.0);
        }
        let whole = if size > 0.0 { size.log10().floor() as i64 } else { 0 };
        write!(f, "{:.*}", (digits as i64 - 1 - whole).clamp(0, 12) as usize, self.0)
    }
}

const HEAD: [&str; 19] = [
    "parameter",
    "direction",
    "before",
    "after",
    "refined",
    "level",
    "size",
    "value",
    "uncertainty",
    "last_before",
    "first_after",
    "run_before",
    "run_after",
    "observed_order",
    "order_used",
    "safety_factor",
    "index_ratio",
    "verdict",
    "warning",
];

/// A row for the result, one for each refinement, one for each level; numbers in SI.
fn table_rows(threshold: &Threshold, name: &str, found: &Found, levels: &[AtLevel]) -> Vec<Vec<String>> {
    let number = |value: f64| if value.is_finite() { format!("{value:e}") } else { String::new() };
    let blank = |refined: &str, level: String| {
        let mut row = vec![String::new(); HEAD.len()];
        row[0] = name.to_owned();
        row[1] = found.way.word().to_owned();
        row[4] = refined.to_owned();
        row[5] = level;
        row
    };
    let mut rows = Vec::new();
    let with_bracket = |row: &mut Vec<String>, bracket: &Bracket<Trial>| {
        row[2].clone_from(&bracket.held.outcome);
        row[3].clone_from(&bracket.changed.outcome);
        row[9].clone_from(&bracket.held.given);
        row[10].clone_from(&bracket.changed.given);
        row[11].clone_from(&bracket.held.id);
        row[12].clone_from(&bracket.changed.id);
    };
    let mut result = blank("all", "result".into());
    result[7] = number(found.value);
    result[8] = number(found.uncertainty);
    result[18] = found.warnings.join("; ");
    match &found.finest {
        Ok(bracket) => with_bracket(&mut result, bracket),
        Err(why) => result[18].clone_from(why),
    }
    rows.push(result);
    for (refined, _, estimate) in &found.parts {
        let mut row = blank(refined, "estimate".into());
        row[7] = number(estimate.value);
        row[8] = number(estimate.uncertainty);
        row[13] = estimate.observed_order.map_or_else(String::new, number);
        row[14] = number(estimate.order);
        row[15] = number(estimate.safety_factor);
        row[16] = estimate.index_ratio.map_or_else(String::new, number);
        row[17] = format!("{:?}", estimate.verdict);
        row[18] = estimate.verdict.warning().unwrap_or_default().to_owned();
        rows.push(row);
    }
    for here in levels.iter().rev() {
        let Some((_, bracket)) = here.found.iter().find(|(way, _)| *way == found.way) else { continue };
        let refined = if here.level == 0 { "finest" } else { here.refined.as_str() };
        let mut row = blank(refined, (here.level + 1).to_string());
        match bracket {
            Ok(bracket) => {
                let refinement = threshold.refinements.iter().find(|other| other.name == here.refined);
                row[6] = refinement.map_or_else(String::new, |other| number(other.size(&bracket.held.end, here.level)));
                row[7] = number(bracket.value());
                row[8] = number(bracket.half_width());
                with_bracket(&mut row, bracket);
            }
            Err(why) => row[18].clone_from(why),
        }
        rows.push(row);
    }
    rows
}

/// Records as RFC 4180 has them.
pub fn csv_of(head: &[&str], rows: &[Vec<String>]) -> Vec<u8> {
    let mut writer = csv::WriterBuilder::new().terminator(csv::Terminator::CRLF).from_writer(Vec::new());
    // Writing to memory does not fail, and all records have the same length.
    let _ = writer.write_record(head);
    for row in rows {
        let _ = writer.write_record(row);
    }
    writer.into_inner().unwrap_or_default()
}

fn to_json(bench: &Bench<'_>, threshold: &Threshold, name: &str, found: &Found) -> Value {
    let side = |trial: &Trial| json!({ "given": trial.given, "value": trial.value, "outcome": trial.outcome, "run": trial.id });
    let keys: Vec<&str> = threshold.axis.keys.iter().map(|(path, _)| path.as_str()).collect();
    let parts: Vec<Value> = found
        .parts
        .iter()
        .map(|(refined, levels, estimate)| json!({ "refined": refined, "levels": levels, "estimate": estimate }))
        .collect();
    let (unit, size) = bench.unit(&threshold.axis);
    let finest = match &found.finest {
        Ok(bracket) => json!({ "before": side(&bracket.held), "after": side(&bracket.changed) }),
        Err(_) => Value::Null,
    };
    json!({
        "parameter": name,
        "keys": keys,
        "direction": found.way.word(),
        "start": if threshold.follow { "branch" } else { "fresh" },
        "value": found.value,
        "uncertainty": found.uncertainty,
        "unit": unit,
        "unit_size": size,
        "finest": finest,
        "refinements": parts,
        "problem": found.finest.as_ref().err(),
        "warnings": found.warnings,
    })
}
