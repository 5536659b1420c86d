//! Decisions: which rule was applied to which numbers, and what followed.

use serde::{Deserialize, Serialize};
use serde_json::{Map, Value};

/// One decision, before it is chained.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Decision {
    /// The step, family or `conclusion` that it is about.
    pub step: String,
    /// What kind of decision: `gate`, `choice`, `verdict`, `family` or `conclusion`.
    pub kind: String,
    /// The rule as resolved.
    pub rule: Value,
    /// Every number and verdict that the rule read.
    pub evidence: Map<String, Value>,
    /// What followed.
    pub verdict: String,
}

/// Receives decisions as they are taken, and gives each its place in the chain.
pub trait Witness {
    /// Takes down a decision; returns its hash in lower-case hex, where one is kept.
    fn take_down(&mut self, decision: Decision) -> Option<String>;

    /// A step begins; for whoever shows how far a long run has come.
    fn begins(&mut self, _step: &str) {}
}
