//! What is wrong with a file: collected, placed, and bounded.

use super::rows::{Row, spans};
use crate::text::diagnostic::{Diagnostic, Label};
use crate::text::render::tidy;
use crate::text::source::{Source, Span};
use std::collections::BTreeMap;

/// Findings of one kind that are told one by one; the rest are counted.
pub(super) const TOLD: usize = 20;

/// What stands in a message for a cell that must not be looked at.
const MASK: &str = "***";

/// Findings about one file.
pub(super) struct Problems {
    file: String,
    separator: u8,
    /// Fields that must not be shown, in ascending order; none before the header is read.
    masked: Vec<usize>,
    /// Whether there are cells that must not be shown.
    blind: bool,
    /// Cells in a row.
    width: usize,
    kinds: BTreeMap<&'static str, (Vec<Diagnostic>, usize)>,
}

impl Problems {
    pub fn new(file: &str, separator: u8) -> Self {
        Problems { file: file.to_owned(), separator, masked: Vec::new(), blind: false, width: 0, kinds: BTreeMap::new() }
    }

    /// Takes note of the header: which fields must not be shown, and how many there are.
    pub fn set_header(&mut self, mut masked: Vec<usize>, width: usize) {
        masked.sort_unstable();
        self.blind = !masked.is_empty();
        self.masked = masked;
        self.width = width;
    }

    pub fn is_empty(&self) -> bool {
        self.kinds.is_empty()
    }

    /// Adds a finding; `tell` is called only where it will be told.
    pub fn add(&mut self, rule: &'static str, tell: impl FnOnce(&Self) -> Diagnostic) {
        let told = self.kinds.get(rule).is_none_or(|(findings, _)| findings.len() < TOLD);
        let finding = told.then(|| tell(self));
        let (findings, count) = self.kinds.entry(rule).or_default();
        findings.extend(finding);
        *count += 1;
    }

    /// Every finding in the order of the file, then how many of each kind were not told.
    pub fn finish(self) -> Vec<Diagnostic> {
        let rest: Vec<(&'static str, usize)> = self.kinds.iter().map(|(rule, (told, count))| (*rule, count - told.len())).collect();
        let mut findings: Vec<Diagnostic> = self.kinds.into_values().flat_map(|(findings, _)| findings).collect();
        tidy(&mut findings);
        findings.extend(rest.into_iter().filter(|(_, count)| *count > 0).map(|(rule, count)| and_more(rule, count, &self.file)));
        findings
    }

    /// The place of a cell.
    pub fn cell(&self, row: &Row<'_>, field: usize, text: impl Into<String>) -> Label {
        let (shown, places) = self.shown(row);
        match (&shown, places.get(field)) {
            (Some(shown), Some(place)) => self.place(row.line, shown, *place, text),
            _ => self.line(row.line, text),
        }
    }

    /// The place of a whole row, from the cell `from` on.
    pub fn cells_from(&self, row: &Row<'_>, from: usize, text: impl Into<String>) -> Label {
        let (shown, places) = self.shown(row);
        match (&shown, places.get(from), places.last()) {
            (Some(shown), Some(first), Some(last)) => self.place(row.line, shown, Span::new(first.start, last.end), text),
            _ => self.line(row.line, text),
        }
    }

    /// A place after some bytes of a line, of which nothing more is known.
    pub fn after(&self, line: usize, before: &[u8], text: impl Into<String>) -> Label {
        if self.blind {
            return self.line(line, text);
        }
        let before = String::from_utf8_lossy(before).into_owned();
        let end = before.len();
        self.place(line, &before, Span::new(end, end), text)
    }

    /// A line of which the text is not at hand.
    pub fn line(&self, line: usize, text: impl Into<String>) -> Label {
        line_of(&self.file, line, text)
    }

    fn place(&self, line: usize, shown: &str, span: Span, text: impl Into<String>) -> Label {
        let label = Source::new(self.file.clone(), shown).label(span, text);
        Label { line: label.line + line - 1, end_line: label.end_line + line - 1, ..label }
    }

    /// The text of a row as it may be shown, and its cells there. A row whose cells cannot be told apart is not shown at
    /// all where some of them must not be.
    fn shown(&self, row: &Row<'_>) -> (Option<String>, Vec<Span>) {
        let cells = spans(row.raw, self.separator).0;
        if self.blind && cells.len() != self.width {
            return (None, Vec::new());
        }
        let mut shown = String::new();
        let mut places = Vec::new();
        for (field, cell) in cells.into_iter().enumerate() {
            if field > 0 {
                shown.push(self.separator as char);
            }
            let start = shown.len();
            if self.masked.binary_search(&field).is_ok() {
                shown.push_str(MASK);
            } else {
                shown.push_str(&String::from_utf8_lossy(&row.raw[cell]));
            }
            places.push(Span::new(start, shown.len()));
        }
        (Some(shown), places)
    }
}

/// A line of a file of which the text is not at hand.
pub(super) fn line_of(file: &str, line: usize, text: impl Into<String>) -> Label {
    Label::in_line(file, line, 1..1, "", text)
}

/// That there are `count` more findings under `rule`.
pub(super) fn and_more(rule: &str, count: usize, file: &str) -> Diagnostic {
    let findings = if count == 1 { "finding" } else { "findings" };
    Diagnostic::error(rule, format!("{file}: and {} more {findings} of this kind", grouped(count)))
}

/// A count with its digits in groups of three.
///
/// ```text
/// 4999980 -> 4,999,980
/// ```
pub(super) fn grouped(count: usize) -> String {
    let digits = count.to_string();
    let mut text = String::new();
    for (at, digit) in digits.chars().enumerate() {
        if at > 0 && (digits.len() - at).is_multiple_of(3) {
            text.push(',');
        }
        text.push(digit);
    }
    text
}

/// A text between backquotes, cut where it is long.
pub(super) fn quoted(text: &str) -> String {
    const LONGEST: usize = 60;
    if text.chars().count() <= LONGEST {
        return format!("`{text}`");
    }
    format!("`{}...`", text.chars().take(LONGEST).collect::<String>())
}

/// Names between backquotes, in a list.
pub(super) fn listed<'t>(names: impl IntoIterator<Item = &'t str>) -> String {
    names.into_iter().map(quoted).collect::<Vec<_>>().join(", ")
}
