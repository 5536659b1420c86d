//! Conclusions: what is said of each way the tests can turn out.

use super::conditions::condition;
use super::reader::Reader;
use super::references::{Kind, References};
use crate::plan::resolved::{Action, Conclusion, Condition, Quoted, SayPart, Step};
use crate::plan::syntax::tree::Node;
use crate::text::source::Span;

/// Reads the conclusions.
pub(super) fn conclusions(reader: &Reader<'_>, node: &Node, references: &References<'_>) -> Option<Vec<Conclusion>> {
    let items = reader.list(node, "`conclusions`")?;
    let mut found = Vec::new();
    let mut otherwise: Option<Span> = None;
    for item in items {
        if let Some(first) = otherwise {
            reader.conflict(
                "conclusion-unreachable",
                [(reader.first_line(item.span), "never reached"), (first, "this catches everything")],
                "a conclusion after `otherwise` can never be drawn",
                "put `otherwise` last",
            );
        }
        let Some(fields) = reader.map(item, "a conclusion", &["when", "say", "otherwise"], &[]) else {
            found.push(None);
            continue;
        };
        found.push(match (fields.entry("otherwise"), fields.get("when"), fields.get("say")) {
            (Some(entry), None, None) => {
                otherwise = Some(entry.key_span);
                said(reader, &entry.node, references).map(|say| Conclusion { when: None, say })
            }
            (None, Some(when), Some(say)) => {
                let when: Option<Condition> = condition(reader, when, references);
                let say = said(reader, say, references);
                when.zip(say).map(|(when, say)| Conclusion { when: Some(when), say })
            }
            _ => {
                reader.error(
                    "wrong-case",
                    reader.first_line(item.span),
                    "a conclusion is `{when: ..., say: ...}`, and the last one `{otherwise: ...}`",
                    "neither",
                    "write one of the two forms",
                );
                None
            }
        });
    }
    found.into_iter().collect()
}

const QUOTES: &[(&str, Quoted)] = &[
    ("p", Quoted::P),
    ("adjusted p", Quoted::AdjustedP),
    ("estimate", Quoted::Estimate),
    ("interval", Quoted::Interval),
    ("standard error", Quoted::StandardError),
    ("statistic", Quoted::Statistic),
    ("df", Quoted::Df),
    ("n", Quoted::N),
];

/// Words with quotes of results in braces.
fn said(reader: &Reader<'_>, node: &Node, references: &References<'_>) -> Option<Vec<SayPart>> {
    let text = reader.text(node, "what a conclusion says")?.trim();
    let mut parts = Vec::new();
    let mut rest = text;
    let mut sound = true;
    while let Some(open) = rest.find('{') {
        if open > 0 {
            parts.push(SayPart::Text(rest[..open].to_owned()));
        }
        let Some(length) = rest[open..].find('}') else {
            reader.error(
                "quote-not-closed",
                node.span,
                "a brace opens a quote and is not closed",
                "in this text",
                "write `{REFERENCE: estimate}`, or leave the brace out",
            );
            return None;
        };
        let quote = &rest[open + 1..open + length];
        match quoted(reader, node, quote, references) {
            Some(part) => parts.push(part),
            None => sound = false,
        }
        rest = &rest[open + length + 1..];
    }
    if !rest.is_empty() {
        parts.push(SayPart::Text(rest.to_owned()));
    }
    sound.then_some(parts)
}

fn quoted(reader: &Reader<'_>, node: &Node, quote: &str, references: &References<'_>) -> Option<SayPart> {
    // The place of the quote where it stands on one line of the source, else that of the whole text.
    let written = &reader.source.text()[node.span.start..node.span.end];
    let span = written.find(quote).map_or(node.span, |at| Span::new(node.span.start + at, node.span.start + at + quote.len()));
    let Some((reference, what)) = quote.rsplit_once(": ") else {
        reader.error(
            "unknown-quote",
            span,
            format!("`{{{quote}}}` does not say which number is quoted"),
            "here",
            "write `{REFERENCE: WHAT}`; WHAT is p, adjusted p, estimate, interval, standard error, statistic, df or n",
        );
        return None;
    };
    let what = what.trim();
    let Some((_, number)) = QUOTES.iter().find(|(word, _)| *word == what) else {
        let words: Vec<&str> = QUOTES.iter().map(|(word, _)| *word).collect();
        let hint = crate::text::suggest::nearest(what, words.iter().copied())
            .map_or_else(|| format!("it may be: {}", words.join(", ")), |near| format!("did you mean `{near}`?"));
        reader.error("unknown-quote", span, format!("`{what}` is not a number that can be quoted"), "here", hint);
        return None;
    };
    match references.get(reference.trim()) {
        Some(known) if matches!(known.kind, Kind::Several { .. }) || known.kind == Kind::Screen && *number != Quoted::P => {
            reader.error(
                "unknown-quote",
                span,
                format!("{} has no `{what}` of its own", known.in_words()),
                "here",
                "quote one of its results",
            );
            None
        }
        Some(known) => Some(SayPart::Quote { reference: known.reference.clone(), what: *number }),
        None => {
            references.unknown(reader, reference.trim(), span);
            None
        }
    }
}

/// Every step and hypothesis with its label, for `check --tests`.
pub(super) fn list(steps: &[Step]) -> Vec<(String, String)> {
    steps
        .iter()
        .flat_map(|step| match &step.action {
            Action::Test(test) => {
                let mut of_step: Vec<(String, String)> =
                    test.hypotheses.iter().map(|one| (one.reference.clone(), one.label.clone())).collect();
                if of_step.len() > 1 {
                    of_step.insert(0, (step.id.clone(), format!("{} tests", of_step.len())));
                }
                of_step
            }
            Action::Screen(_) => vec![(step.id.clone(), "screen".to_owned())],
            Action::Estimate(estimate) => {
                super::estimates::references_of(estimate).into_iter().map(|name| (name.to_owned(), "estimate".to_owned())).collect()
            }
        })
        .collect()
}
