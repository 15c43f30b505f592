//! JSON Schema of the scenario language, made from the list of keys that the parser itself uses.

use super::keys::{Key, Kind, ROOT, Range};
use serde_json::{Map, Value, json};

/// Number with a unit after it.
const QUANTITY: &str = r"^\s*[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?\s*[^\s0-9].*$";

/// JSON Schema (draft 2020-12) of a scenario, for editors.
pub fn schema() -> String {
    schema_of(ROOT, "Scenario of pellicle")
}

/// JSON Schema of what another list of keys describes.
pub fn schema_of(root: &[Key], title: &str) -> String {
    let mut root = table(root);
    if let Value::Object(map) = &mut root {
        map.insert(
            "$schema".into(),
            json!("https://json-schema.org/draft/2020-12/schema"),
        );
        map.insert("title".into(), json!(title));
    }
    format!("{root:#}")
}

fn table(keys: &[Key]) -> Value {
    let properties: Map<String, Value> = keys
        .iter()
        .map(|key| (key.name.to_string(), property(key)))
        .collect();
    json!({ "type": "object", "properties": properties, "additionalProperties": false })
}

fn quantity(unit: &str) -> Value {
    json!({ "type": "string", "pattern": QUANTITY, "description": format!("number with unit [{unit}]") })
}

fn property(key: &Key) -> Value {
    let mut about = key.about.to_string();
    let mut schema = match key.kind {
        Kind::Quantity(measure, range) => {
            about = format!(
                "{about} ({} [{}], {})",
                measure.name,
                measure.unit,
                range.words()
            );
            quantity(measure.unit)
        }
        Kind::Vector(measure) => {
            json!({ "type": "array", "items": quantity(measure.unit), "minItems": 3, "maxItems": 3 })
        }
        Kind::Direction => {
            json!({ "type": "array", "items": { "type": "number" }, "minItems": 3, "maxItems": 3 })
        }
        Kind::Number(range) => number(range),
        Kind::Whole(low, high) => json!({ "type": "integer", "minimum": low, "maximum": high }),
        Kind::Flag => json!({ "type": "boolean" }),
        Kind::Choice(words) => json!({ "enum": words }),
        Kind::Text | Kind::Path | Kind::LengthUnit => json!({ "type": "string", "minLength": 1 }),
        Kind::Section(keys) => table(keys),
        Kind::Sections(keys) => json!({ "type": "array", "items": table(keys) }),
        Kind::Loose => json!({}),
    };
    if let Value::Object(map) = &mut schema {
        map.insert("description".into(), json!(about));
        let parsed = |text: &str| -> Option<Value> {
            let table: toml::Table = format!("x = {text}").parse().ok()?;
            serde_json::to_value(table.get("x")?).ok()
        };
        if let Some(default) = key.default.and_then(parsed) {
            map.insert("default".into(), default);
        }
        if let Some(example) = Some(key.example).filter(|e| !e.is_empty()).and_then(parsed) {
            map.insert("examples".into(), json!([example]));
        }
    }
    schema
}

fn number(range: Range) -> Value {
    match range {
        Range::Any => json!({ "type": "number" }),
        Range::Positive => json!({ "type": "number", "exclusiveMinimum": 0 }),
        Range::NotNegative => json!({ "type": "number", "minimum": 0 }),
        Range::Within(low, high) => json!({ "type": "number", "minimum": low, "maximum": high }),
        Range::AboveUpTo(low, high) => {
            json!({ "type": "number", "exclusiveMinimum": low, "maximum": high })
        }
    }
}
