//! The error bars of a run, as a table.

use super::data::Run;
use super::page::{escape, number};
use serde_json::Value;

/// The section, or nothing where a run has no error bars.
pub fn bars(run: &Run) -> String {
    let Some(numbers) = run.error_bars.get("numbers").and_then(Value::as_array) else { return String::new() };
    let rows: String = numbers.iter().filter_map(row).collect();
    format!(
        "<h3>Error bars</h3>\n<table><tr><th>number</th><th>value</th><th>±</th><th>observed orders</th><th>remarks</th></tr>\n\
         {rows}</table>\n<p class=\"small\">Extrapolated over three levels of each refinement; grid-convergence index \
         (Roache 1994), safety factor 1.25, or 3 where the order is assumed. Details in error_bars.csv.</p>\n"
    )
}

fn row(entry: &Value) -> Option<String> {
    let name = entry.get("quantity")?.as_str()?;
    let (value, uncertainty) = (entry.get("value")?.as_f64()?, entry.get("uncertainty")?.as_f64()?);
    let (mut orders, mut remarks) = (Vec::new(), Vec::new());
    for part in entry.get("refinements")?.as_array()? {
        let refined = part.get("refined")?.as_str()?;
        let estimate = part.get("estimate")?;
        if let Some(order) = estimate.get("observed_order").and_then(Value::as_f64) {
            orders.push(format!("{refined} {order:.2}"));
        }
        if let Some(warning) = part.get("warning").and_then(Value::as_str) {
            remarks.push(format!("{refined}: {warning}"));
        }
    }
    Some(format!(
        "<tr><td>{}</td><td>{}</td><td>{}</td><td>{}</td><td>{}</td></tr>\n",
        escape(name),
        number(value),
        number(uncertainty),
        escape(&orders.join(", ")),
        escape(&remarks.join("; "))
    ))
}
