//! How often each reason shortened or refused a step.

use pellicle_physics::step::control::Reason;
use serde::{Deserialize, Serialize};
use serde_json::{Map, Value};

/// Counts by reason, in the order of first appearance.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Reasons(Vec<(Reason, u64)>);

impl Reasons {
    /// Count one.
    pub fn add(&mut self, reason: Reason) {
        match self.0.iter_mut().find(|entry| entry.0 == reason) {
            Some(entry) => entry.1 = entry.1.saturating_add(1),
            None => self.0.push((reason, 1)),
        }
    }

    /// As a JSON object: words → count.
    pub fn to_json(&self) -> Value {
        let counts: Map<String, Value> =
            self.0.iter().map(|(reason, count)| (reason.words().to_owned(), (*count).into())).collect();
        Value::Object(counts)
    }
}
