//! What is said about a plan, data or a record: severity, message, places, a hint.

use serde::{Deserialize, Serialize};

/// How grave a finding is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Severity {
    /// Said for information; stops nothing.
    Note,
    /// Must be mended or acknowledged with a reason before sealing.
    Warning,
    /// Stops what was asked for.
    Error,
}

/// One place that a diagnostic points at. Lines and columns count from one, columns in characters.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Label {
    /// File name as the person typed it.
    pub file: String,
    /// First line.
    pub line: usize,
    /// First column.
    pub column: usize,
    /// Last line.
    pub end_line: usize,
    /// One past the last column.
    pub end_column: usize,
    /// The text of the lines from `line` on, for rendering; not part of the machine-readable form.
    #[serde(skip)]
    pub excerpt: String,
    /// What is to be seen there.
    #[serde(rename = "label")]
    pub text: String,
}

/// A finding: what, where, why it matters, what to do.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Diagnostic {
    /// Name of the rule in kebab case, such as `unknown-key`.
    pub rule: String,
    /// How grave it is.
    pub severity: Severity,
    /// What is wrong, in one sentence without a full stop.
    pub message: String,
    /// What to do, or why it matters.
    pub hint: Option<String>,
    /// The places, the main one first.
    #[serde(rename = "spans")]
    pub labels: Vec<Label>,
}

impl Diagnostic {
    /// An error under `rule`.
    pub fn error(rule: &str, message: impl Into<String>) -> Self {
        Diagnostic { rule: rule.into(), severity: Severity::Error, message: message.into(), hint: None, labels: Vec::new() }
    }

    /// A warning under `rule`.
    pub fn warning(rule: &str, message: impl Into<String>) -> Self {
        Diagnostic { severity: Severity::Warning, ..Diagnostic::error(rule, message) }
    }

    /// A note under `rule`.
    pub fn note(rule: &str, message: impl Into<String>) -> Self {
        Diagnostic { severity: Severity::Note, ..Diagnostic::error(rule, message) }
    }

    /// The same with a hint.
    pub fn hint(mut self, hint: impl Into<String>) -> Self {
        self.hint = Some(hint.into());
        self
    }

    /// The same with one more place.
    pub fn at(mut self, label: Label) -> Self {
        self.labels.push(label);
        self
    }
}
