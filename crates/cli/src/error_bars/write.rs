//! Error bars as a table for people, as CSV and as JSON.

use super::richardson::{Estimate, Level};
use super::{Family, Quantity};
use crate::failure::Failure;
use crate::run::summary::replace;
use serde_json::{Value, json};
use std::path::Path;

/// Name of the table for programs that read tables.
pub const TABLE_FILE: &str = "error_bars.csv";
/// Name of the same for programs that read JSON.
pub const JSON_FILE: &str = "error_bars.json";
/// Counts up when names in these files change.
const FORMAT: u32 = 1;

/// Columns of the CSV table: a row for each number and refinement, and one (`all`) for the sum.
const COLUMNS: [&str; 16] = [
    "quantity",
    "refined",
    "value",
    "uncertainty",
    "finest",
    "middle",
    "coarse",
    "finest_size",
    "middle_size",
    "coarse_size",
    "observed_order",
    "order_used",
    "safety_factor",
    "index_ratio",
    "verdict",
    "warning",
];

/// Write both files.
///
/// # Errors
/// [`Failure::Files`].
pub fn files(folder: &Path, quantities: &[Quantity], families: &[Family], warnings: &[String]) -> Result<(), Failure> {
    replace(&folder.join(TABLE_FILE), &csv(quantities))?;
    let text = format!("{:#}\n", to_json(quantities, families, warnings));
    replace(&folder.join(JSON_FILE), text.as_bytes())
}

fn number(value: f64) -> String {
    format!("{value:e}")
}

fn csv(quantities: &[Quantity]) -> Vec<u8> {
    let mut writer = csv::WriterBuilder::new().terminator(csv::Terminator::CRLF).from_writer(Vec::new());
    // Writing to memory does not fail, and all records have the same length.
    let _ = writer.write_record(COLUMNS);
    for quantity in quantities {
        let mut sum = vec![quantity.name.to_owned(), "all".to_owned(), number(quantity.value), number(quantity.uncertainty)];
        sum.push(number(quantity.finest));
        sum.resize(COLUMNS.len(), String::new());
        let _ = writer.write_record(sum);
        for (name, levels, estimate) in &quantity.parts {
            let _ = writer.write_record(part(quantity.name, name, levels, estimate));
        }
    }
    writer.into_inner().unwrap_or_default()
}

fn part(quantity: &str, name: &str, levels: &[Level], estimate: &Estimate) -> Vec<String> {
    let optional = |value: Option<f64>| value.map_or_else(String::new, number);
    let mut cells = vec![quantity.to_owned(), name.to_owned(), number(estimate.value), number(estimate.uncertainty)];
    cells.extend(levels.iter().map(|level| number(level.value)));
    cells.extend(levels.iter().map(|level| number(level.size)));
    cells.push(optional(estimate.observed_order));
    cells.push(number(estimate.order));
    cells.push(number(estimate.safety_factor));
    cells.push(optional(estimate.index_ratio));
    cells.push(word(estimate));
    cells.push(estimate.verdict.warning().unwrap_or_default().to_owned());
    cells
}

fn word(estimate: &Estimate) -> String {
    serde_json::to_value(estimate.verdict).ok().and_then(|word| word.as_str().map(str::to_owned)).unwrap_or_default()
}

fn to_json(quantities: &[Quantity], families: &[Family], warnings: &[String]) -> Value {
    let numbers: Vec<Value> = quantities
        .iter()
        .map(|quantity| {
            let parts: Vec<Value> = quantity
                .parts
                .iter()
                .map(|(name, levels, estimate)| {
                    json!({
                        "refined": name,
                        "levels": levels,
                        "estimate": estimate,
                        "warning": estimate.verdict.warning(),
                    })
                })
                .collect();
            json!({
                "quantity": quantity.name,
                "value": quantity.value,
                "uncertainty": quantity.uncertainty,
                "finest": quantity.finest,
                "refinements": parts,
            })
        })
        .collect();
    let runs: Vec<Value> = families
        .iter()
        .map(|family| {
            let states: Vec<Value> = family
                .ends
                .iter()
                .map(|end| end.summary.pointer("/provenance/state_sha256").cloned().unwrap_or_default())
                .collect();
            json!({
                "refined": family.refinement.name,
                "ratio": family.refinement.ratio,
                "expected_order": family.refinement.order,
                "state_sha256": states,
            })
        })
        .collect();
    json!({ "format": FORMAT, "numbers": numbers, "levels": runs, "warnings": warnings })
}

/// The table for people.
pub fn table(quantities: &[Quantity]) -> String {
    let mut text = format!("{:<24} {:>22} {:>12} {:>8}  {}\n", "", "value", "±", "", "observed orders");
    for quantity in quantities {
        let share = match quantity.value {
            0.0 => String::new(),
            value => format!("{:.2} %", 100.0 * (quantity.uncertainty / value).abs()),
        };
        let orders: Vec<String> = quantity
            .parts
            .iter()
            .map(|(name, _, estimate)| match estimate.observed_order {
                Some(order) => format!("{name} {order:.2}{}", mark(estimate)),
                None => format!("{name} {}{}", word(estimate).replace('_', " "), mark(estimate)),
            })
            .collect();
        let line = format!(
            "{:<24} {:>22} {:>12} {share:>8}  {}",
            quantity.name,
            format!("{:.6e}", quantity.value),
            format!("{:.1e}", quantity.uncertainty),
            orders.join(", ")
        );
        text += line.trim_end();
        text.push('\n');
    }
    if quantities.iter().any(|quantity| quantity.warnings().next().is_some()) {
        text += "! not in the asymptotic range: order assumed, three-fold safety (details in error_bars.csv)\n";
    }
    text
}

fn mark(estimate: &Estimate) -> &'static str {
    if estimate.verdict.warning().is_some() { " !" } else { "" }
}
