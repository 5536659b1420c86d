//! Diagnostics for people (terminal) and for programs (JSON).

use crate::text::diagnostic::{Diagnostic, Label, Severity};
use annotate_snippets::{Annotation, AnnotationKind, Element, Group, Level, Origin, Renderer, Snippet};

/// Lines longer than this many characters are cut to a window around what is pointed at.
const LONGEST_LINE: usize = 160;

/// Sorts by place and drops what is said twice.
pub fn tidy(findings: &mut Vec<Diagnostic>) {
    let key = |finding: &Diagnostic| {
        let place = finding.labels.first();
        (
            place.map(|label| (label.file.clone(), label.line, label.column)),
            std::cmp::Reverse(finding.severity),
            finding.rule.clone(),
            finding.message.clone(),
        )
    };
    findings.sort_by_cached_key(key);
    findings.dedup_by(|one, other| one == other);
}

/// Every finding as text, one blank line between two.
///
/// ```
/// use aforesaid::text::{diagnostic::Diagnostic, render, source::{Source, Span}};
/// let source = Source::new("plan.yaml", "alfa: 0.05\n");
/// let finding = Diagnostic::error("unknown-key", "`alfa` is not a key of a plan")
///     .at(source.label(Span::new(0, 4), "unknown"))
///     .hint("did you mean `alpha`?");
/// let text = render::to_text(&[finding], false);
/// assert!(text.contains("plan.yaml:1:1"), "{text}");
/// assert!(text.contains("did you mean `alpha`?"), "{text}");
/// ```
pub fn to_text(findings: &[Diagnostic], colour: bool) -> String {
    let renderer = if colour { Renderer::styled() } else { Renderer::plain() };
    findings.iter().map(|finding| format!("{}\n", renderer.render(&[group(finding)]).trim_end())).collect::<Vec<_>>().join("\n")
}

fn group(finding: &Diagnostic) -> Group<'_> {
    let level = match finding.severity {
        Severity::Error => Level::ERROR,
        Severity::Warning => Level::WARNING,
        Severity::Note => Level::NOTE,
    };
    let mut elements: Vec<Element<'_>> = Vec::new();
    for (number, label) in finding.labels.iter().enumerate() {
        let kind = if number == 0 { AnnotationKind::Primary } else { AnnotationKind::Context };
        elements.push(match snippet(label, kind) {
            Some(snippet) => snippet.into(),
            None => Origin::path(label.file.as_str()).line(label.line).char_column(label.column).into(),
        });
    }
    if let Some(hint) = &finding.hint {
        elements.push(Level::HELP.message(visible(hint)).into());
    }
    level.primary_title(visible(&finding.message)).id(finding.rule.as_str()).elements(elements)
}

/// A label with its lines; `None` where there is no text to show.
fn snippet(label: &Label, kind: AnnotationKind) -> Option<Snippet<'_, Annotation<'_>>> {
    if label.excerpt.is_empty() {
        return None;
    }
    let first = label.excerpt.lines().next().unwrap_or("");
    let start = byte_of_column(first, label.column);
    let (text, start, end) = if first.chars().count() > LONGEST_LINE {
        window(first, start, label)
    } else if label.end_line == label.line {
        (label.excerpt.clone(), start, byte_of_column(first, label.end_column))
    } else {
        let rest: usize = label.excerpt.lines().skip(1).take(label.end_line - label.line - 1).map(|line| line.len() + 1).sum();
        let last = label.excerpt.lines().nth(label.end_line - label.line);
        let end = match last {
            Some(last) if first.len() + 1 + rest < label.excerpt.len() => first.len() + 1 + rest + byte_of_column(last, label.end_column),
            _ => label.excerpt.trim_end().len(),
        };
        (label.excerpt.clone(), start, end)
    };
    let text = visible(&text);
    let end = end.max(start).min(text.len());
    let start = start.min(end);
    let annotation = kind.span(start..end);
    let annotation = if label.text.is_empty() { annotation } else { annotation.label(visible(&label.text)) };
    Some(Snippet::source(text).line_start(label.line).path(label.file.as_str()).annotation(annotation))
}

fn byte_of_column(line: &str, column: usize) -> usize {
    line.char_indices().nth(column.saturating_sub(1)).map_or(line.len(), |(byte, _)| byte)
}

/// The part of a very long line around the place, and the place in it.
fn window(line: &str, start: usize, label: &Label) -> (String, usize, usize) {
    let before: usize = line[..start].chars().rev().take(LONGEST_LINE / 2).map(char::len_utf8).sum();
    let after: usize = line[start..].chars().take(LONGEST_LINE / 2).map(char::len_utf8).sum();
    let end = if label.end_line == label.line { byte_of_column(line, label.end_column) } else { line.len() };
    let from = start - before;
    let cut = line[from..start + after].to_owned();
    (cut, before, (end - from).min(before + after))
}

/// Control characters as one visible character of the same number of bytes, so that places stay right.
fn visible(text: &str) -> String {
    text.chars()
        .map(|c| if c.is_control() && !matches!(c, '\n' | '\t') { if c.len_utf8() == 1 { '?' } else { '\u{00BF}' } } else { c })
        .collect()
}
