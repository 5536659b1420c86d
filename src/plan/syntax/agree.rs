//! Holds the tree against the meaning that `serde_yaml` gives the same text.

use super::tree::{Node, Value};
use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};

/// The place at which the two readings differ, if any.
pub(super) fn check(source: &Source, root: &Node) -> Option<Diagnostic> {
    match serde_yaml::from_str::<serde_yaml::Value>(source.text()) {
        Ok(meaning) => differs(root, &meaning).map(|span| {
            Diagnostic::error("yaml-ambiguous", "readers of YAML do not agree on what this means")
                .at(source.label(span, "read in two ways"))
                .hint("put quotes round it if it is text, or write the number plainly (no leading zeros, no signs before zeros)")
        }),
        Err(error) => {
            let at = error.location().map_or(0, |place| place.index().min(source.text().len()));
            let at = (0..=at).rev().find(|at| source.text().is_char_boundary(*at)).unwrap_or(0);
            Some(
                Diagnostic::error("yaml-ambiguous", format!("readers of YAML do not agree that this is YAML: {error}"))
                    .at(source.label(Span::new(at, at), "here"))
                    .hint("look at the indentation and the quotes near this place"),
            )
        }
    }
}

fn differs(node: &Node, meaning: &serde_yaml::Value) -> Option<Span> {
    use serde_yaml::Value as Meaning;
    let same = match (&node.value, meaning) {
        (Value::Null, Meaning::Null) => true,
        (Value::Text(text), Meaning::String(other)) => text == other,
        (Value::Bool { value, .. }, Meaning::Bool(other)) => value == other,
        (Value::Number { value, .. }, Meaning::Number(other)) => other.as_f64() == Some(*value),
        (Value::List(items), Meaning::Sequence(others)) if items.len() == others.len() => {
            return items.iter().zip(others).find_map(|(item, other)| differs(item, other));
        }
        (Value::Map(entries), Meaning::Mapping(others)) if entries.len() == others.len() => {
            return entries.iter().zip(others).find_map(|(entry, (key, other))| {
                if key_text(&entry.key, key) { differs(&entry.node, other) } else { Some(entry.key_span) }
            });
        }
        _ => false,
    };
    (!same).then_some(node.span)
}

/// Whether a key reads the same; keys are names, so that a number among them keeps its spelling.
fn key_text(key: &str, meaning: &serde_yaml::Value) -> bool {
    match meaning {
        serde_yaml::Value::String(text) => text == key,
        serde_yaml::Value::Null => matches!(super::scalar::plain(key), Some(Value::Null)),
        serde_yaml::Value::Bool(value) => matches!(super::scalar::plain(key), Some(Value::Bool { value: other, .. }) if other == *value),
        serde_yaml::Value::Number(value) => {
            matches!(super::scalar::plain(key), Some(Value::Number { value: other, .. }) if value.as_f64() == Some(other))
        }
        _ => false,
    }
}
