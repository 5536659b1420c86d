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

/// Characters of a long line kept on each side of a place.
const LINE_REACH: usize = 256;

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
    /// Column of the excerpt's first character: 1 unless the start of a very long line was left out.
    #[serde(skip)]
    pub excerpt_column: usize,
    /// What is to be seen there.
    #[serde(rename = "label")]
    pub text: String,
}

impl Label {
    /// A place within one line, given the line's text: for readers that keep no [`Source`](super::source::Source).
    ///
    /// ```
    /// use aforesaid::text::diagnostic::Label;
    /// let label = Label::in_line("visits.csv", 3, 4..6, "07,x2", "not a number");
    /// assert_eq!((label.line, label.column, label.end_column), (3, 4, 6));
    /// ```
    pub fn in_line(
        file: impl Into<String>,
        line: usize,
        columns: std::ops::Range<usize>,
        line_text: &str,
        text: impl Into<String>,
    ) -> Self {
        let before = columns.start.saturating_sub(LINE_REACH).max(1);
        let excerpt = line_text.chars().skip(before - 1).take(2 * LINE_REACH).collect();
        Label {
            file: file.into(),
            line,
            column: columns.start,
            end_line: line,
            end_column: columns.end,
            excerpt,
            excerpt_column: before,
            text: text.into(),
        }
    }
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
