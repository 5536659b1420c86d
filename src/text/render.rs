//! Diagnostics for people (terminal) and for programs (JSON).

use crate::text::diagnostic::{Diagnostic, Label, Severity};
use annotate_snippets::{Annotation, AnnotationKind, Element, Group, Level, Origin, Renderer, Snippet};
use std::cmp::Reverse;

/// Lines longer than this many characters are cut to a window around what is pointed at.
const LONGEST_LINE: usize = 120;

/// Messages, hints and labels are cut after this many characters.
const LONGEST_SENTENCE: usize = 1000;

/// Sorts by file, line, column and rule, what says nothing of a place first, and drops what is said twice.
pub fn tidy(findings: &mut Vec<Diagnostic>) {
    findings.sort_by_cached_key(|finding| {
        let place = finding.labels.first().map(|label| (label.file.clone(), label.line, label.column));
        (place, finding.rule.clone(), Reverse(finding.severity), finding.message.clone(), finding.hint.clone())
    });
    findings.dedup();
}

/// The findings for programs: `{"findings": [{"rule", "severity", "message", "hint", "spans"}]}`.
///
/// ```
/// use aforesaid::text::{diagnostic::Diagnostic, render};
/// let json = render::to_json(&[Diagnostic::note("left-out", "one subject is left out")]);
/// assert_eq!(json["findings"][0]["severity"], "note");
/// ```
pub fn to_json(findings: &[Diagnostic]) -> serde_json::Value {
    serde_json::json!({ "findings": findings })
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
    findings.iter().map(|finding| format!("{}\n", one(finding, &renderer))).collect::<Vec<_>>().join("\n")
}

fn one(finding: &Diagnostic, renderer: &Renderer) -> String {
    let mut text = renderer.render(&[group(finding)]).trim_end().to_owned();
    // Of a line whose start is left out, the renderer counts columns from the cut.
    for label in finding.labels.iter().filter(|label| !label.excerpt.is_empty()) {
        let shown = Shown::of(label);
        if shown.cut {
            let head = format!("{}:{}:", visible(&label.file), label.line);
            let counted = shown.text[..shown.start].chars().count() + 1;
            text = text.replacen(&format!("{head}{counted}\n"), &format!("{head}{}\n", label.column), 1);
        }
    }
    text
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
        elements.push(place(label, kind));
    }
    if let Some(hint) = &finding.hint {
        elements.push(Level::HELP.message(sentence(hint)).into());
    }
    level.primary_title(sentence(&finding.message)).id(finding.rule.as_str()).elements(elements)
}

/// A label with its lines, or the place alone where there is no text to show.
fn place(label: &Label, kind: AnnotationKind) -> Element<'_> {
    let file = visible(&label.file);
    if label.excerpt.is_empty() {
        return Origin::path(file).line(label.line).char_column(label.column).into();
    }
    let shown = Shown::of(label);
    let annotation = kind.span(shown.start..shown.end);
    let annotation = if label.text.is_empty() { annotation } else { annotation.label(sentence(&label.text)) };
    let snippet: Snippet<'_, Annotation<'_>> = Snippet::source(shown.text).line_start(label.line).annotation(annotation);
    snippet.path(file).into()
}

/// The text to show for a label and the bytes of it that are marked.
struct Shown {
    text: String,
    start: usize,
    end: usize,
    /// Whether the start of the line is left out.
    cut: bool,
}

impl Shown {
    fn of(label: &Label) -> Shown {
        let skipped = label.excerpt_column.max(1) - 1;
        let lines: Vec<&str> = label.excerpt.split('\n').map(|line| line.strip_suffix('\r').unwrap_or(line)).collect();
        let (first, start) = (lines[0], byte_of_column(lines[0], label.column.saturating_sub(skipped)));
        let one_line = label.end_line <= label.line;
        let end_in_first = if one_line { byte_of_column(first, label.end_column.saturating_sub(skipped)) } else { first.len() };
        if skipped > 0 || lines.iter().any(|line| line.chars().count() > LONGEST_LINE) {
            return window(first, start, end_in_first, skipped > 0);
        }
        let text = visible(&lines.join("\n"));
        let end = match lines.get(label.end_line.saturating_sub(label.line)) {
            _ if one_line => end_in_first,
            Some(last) => {
                let before: usize = lines[..label.end_line - label.line].iter().map(|line| line.len() + 1).sum();
                before + byte_of_column(last, label.end_column)
            }
            None => text.len(),
        };
        Shown { start, end: end.max(start), text, cut: false }
    }
}

fn byte_of_column(line: &str, column: usize) -> usize {
    line.char_indices().nth(column.saturating_sub(1)).map_or(line.len(), |(byte, _)| byte)
}

/// The part of a very long line around the place.
fn window(line: &str, start: usize, end: usize, cut: bool) -> Shown {
    let before: usize = line[..start].chars().rev().take(LONGEST_LINE / 2).map(char::len_utf8).sum();
    let after: usize = line[start..].chars().take(LONGEST_LINE / 2).map(char::len_utf8).sum();
    let from = start - before;
    let cut = cut || from > 0;
    let lead = if cut { "..." } else { "" };
    let tail = if start + after < line.len() { "..." } else { "" };
    let text = format!("{lead}{}{tail}", visible(&line[from..start + after]));
    let end = (end.max(start) - from).min(before + after);
    Shown { start: lead.len() + before, end: lead.len() + end, text, cut }
}

/// Characters that a terminal would obey or hide, each as a visible one of as many bytes, so that places stay right.
fn visible(text: &str) -> String {
    let seen = |c: char| match c {
        '\n' | '\t' => c,
        _ if !c.is_control() && !is_unseen(c) => c,
        _ => match c.len_utf8() {
            1 => '?',
            2 => '\u{00BF}',
            _ => '\u{FFFD}',
        },
    };
    text.chars().map(seen).collect()
}

/// A message on one line, with what a terminal would obey spelt out.
fn sentence(text: &str) -> String {
    let mut spelt = String::with_capacity(text.len());
    for (number, c) in text.chars().enumerate() {
        if number == LONGEST_SENTENCE {
            spelt.push_str(" ...");
            break;
        }
        if c.is_control() || is_unseen(c) { spelt.extend(c.escape_default()) } else { spelt.push(c) }
    }
    spelt
}

/// Marks that turn the direction of text, break lines unseen or have no width.
pub fn is_unseen(c: char) -> bool {
    matches!(c, '\u{200B}' | '\u{2028}'..='\u{202E}' | '\u{2060}' | '\u{2066}'..='\u{2069}' | '\u{FEFF}' | '\u{FFFE}' | '\u{FFFF}')
}
