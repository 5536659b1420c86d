//! Holds the tree against the meaning that `serde_yaml` gives the same text.

use super::shortened;
use super::tree::{Node, Value};
use super::trouble;
use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};
use std::collections::BTreeMap;

/// The place at which the two readings differ, if any.
pub(super) fn check(source: &Source, root: &Node) -> Option<Diagnostic> {
    match serde_yaml::from_str::<serde_yaml::Value>(source.text()) {
        Ok(meaning) => differs(root, &meaning).map(|span| {
            Diagnostic::error("yaml-ambiguous", "readers of YAML do not agree on what this means")
                .at(source.label(span, "read in two ways"))
                .hint("put quotes round it if it is text, or write the number plainly (no leading zeros)")
        }),
        Err(error) => {
            let text = source.text();
            let at = text.floor_char_boundary(error.location().map_or(0, |place| place.index().min(text.len())));
            let known = trouble::tab_in_margin(source, at).or_else(|| keys_of_one_value(source, root));
            let here = |message: String, hint: &str| {
                Diagnostic::error("yaml-ambiguous", message).at(source.label(Span::new(at, at), "here")).hint(hint)
            };
            Some(known.unwrap_or_else(|| {
                let error = error.to_string();
                if error.contains("invalid type: integer") {
                    return here(
                        "a whole number has too many digits to be kept exactly".to_owned(),
                        "put quotes round it if it is a name, or write it as `1.5e20`",
                    );
                }
                here(
                    format!("readers of YAML do not agree that this is YAML: {error}"),
                    "look at the indentation and the quotes near this place",
                )
            }))
        }
    }
}

/// The first two keys of one map that are spelt in two ways and are the same number.
fn keys_of_one_value(source: &Source, node: &Node) -> Option<Diagnostic> {
    let entries = match &node.value {
        Value::List(items) => return items.iter().find_map(|item| keys_of_one_value(source, item)),
        Value::Map(entries) => entries,
        _ => return None,
    };
    let mut seen = BTreeMap::new();
    for entry in entries {
        if let Some(Value::Number { value, .. }) = super::scalar::plain(&entry.key)
            && let Some(first) = seen.insert((value + 0.0).to_bits(), entry)
        {
            let message = format!("the keys `{}` and `{}` of one map are the same number", shortened(&first.key), shortened(&entry.key));
            return Some(
                Diagnostic::error("yaml-duplicate-key", message)
                    .at(source.label(entry.key_span, "the second"))
                    .at(source.label(first.key_span, "the first"))
                    .hint("remove one of them, or put quotes round both if they are names"),
            );
        }
    }
    entries.iter().find_map(|entry| keys_of_one_value(source, &entry.node))
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
