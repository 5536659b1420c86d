//! Holds the tree against the meaning that `serde_yaml` gives the same text.
//!
//! The two are compared while `serde_yaml` reads: its own `Value` gives every key that is a decimal number the same hash,
//! so that a map of such keys takes time by the square.

use super::tree::{Node, Value};
use super::{scalar, shortened, trouble};
use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};
use serde::de::{DeserializeSeed, Deserializer, Error, IgnoredAny, MapAccess, SeqAccess, Visitor};
use std::cell::Cell;
use std::collections::BTreeMap;
use std::fmt;

/// The place at which the two readings differ, if any.
pub(super) fn check(source: &Source, root: &Node) -> Option<Diagnostic> {
    let differs = Cell::new(None);
    let error = match (Same { node: root, differs: &differs }).deserialize(serde_yaml::Deserializer::from_str(source.text())) {
        Ok(()) => return keys_of_one_number(source, root),
        Err(error) => error,
    };
    let ambiguous = |message: String, span: Span, label: &str, hint: &str| {
        Diagnostic::error("yaml-ambiguous", message).at(source.label(span, label)).hint(hint)
    };
    if let Some((span, TooLong(too_long))) = differs.get() {
        return Some(if too_long {
            ambiguous(
                "a whole number has too many digits to be kept exactly".to_owned(),
                span,
                "too long",
                "put quotes round it if it is a name, or write it as `1.5e20`",
            )
        } else {
            ambiguous(
                "readers of YAML do not agree on what this means".to_owned(),
                span,
                "read in two ways",
                "put quotes round it if it is text, or write the number plainly (no leading zeros)",
            )
        });
    }
    let text = source.text();
    let at = text.floor_char_boundary(error.location().map_or(0, |place| place.index().min(text.len())));
    Some(trouble::tab_in_margin(source, at).unwrap_or_else(|| {
        ambiguous(
            format!("readers of YAML do not agree that this is YAML: {error}"),
            Span::new(at, at),
            "here",
            "look at the indentation and the quotes near this place",
        )
    }))
}

/// Whether the two differ over a whole number beyond 64 bits.
#[derive(Clone, Copy)]
struct TooLong(bool);

/// Reads a value that should be this node.
#[derive(Clone, Copy)]
struct Same<'n> {
    node: &'n Node,
    differs: &'n Cell<Option<(Span, TooLong)>>,
}

impl Same<'_> {
    fn hold<E: Error>(self, same: bool) -> Result<(), E> {
        if same { Ok(()) } else { self.differ(self.node.span, false) }
    }

    fn differ<E: Error>(self, span: Span, too_long: bool) -> Result<(), E> {
        self.differs.set(Some((span, TooLong(too_long))));
        Err(E::custom("the readings differ"))
    }
}

impl<'de> DeserializeSeed<'de> for Same<'_> {
    type Value = ();

    fn deserialize<D: Deserializer<'de>>(self, deserializer: D) -> Result<(), D::Error> {
        deserializer.deserialize_any(self)
    }
}

impl<'de> Visitor<'de> for Same<'_> {
    type Value = ();

    fn expecting(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(self.node.kind_in_words())
    }

    fn visit_unit<E: Error>(self) -> Result<(), E> {
        self.hold(self.node.value == Value::Null)
    }

    fn visit_bool<E: Error>(self, read: bool) -> Result<(), E> {
        self.hold(matches!(self.node.value, Value::Bool { value, .. } if value == read))
    }

    fn visit_u64<E: Error>(self, read: u64) -> Result<(), E> {
        self.hold(self.node.number() == Some(read as f64))
    }

    fn visit_i64<E: Error>(self, read: i64) -> Result<(), E> {
        self.hold(self.node.number() == Some(read as f64))
    }

    fn visit_u128<E: Error>(self, _: u128) -> Result<(), E> {
        self.differ(self.node.span, true)
    }

    fn visit_i128<E: Error>(self, _: i128) -> Result<(), E> {
        self.differ(self.node.span, true)
    }

    fn visit_f64<E: Error>(self, read: f64) -> Result<(), E> {
        self.hold(self.node.number() == Some(read))
    }

    fn visit_str<E: Error>(self, read: &str) -> Result<(), E> {
        self.hold(matches!(&self.node.value, Value::Text(text) if text == read))
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut read: A) -> Result<(), A::Error> {
        let Value::List(items) = &self.node.value else { return self.hold(false) };
        for node in items {
            if read.next_element_seed(Same { node, ..self })?.is_none() {
                return self.hold(false);
            }
        }
        let more = read.next_element::<IgnoredAny>()?.is_some();
        self.hold(!more)
    }

    fn visit_map<A: MapAccess<'de>>(self, mut read: A) -> Result<(), A::Error> {
        let Value::Map(entries) = &self.node.value else { return self.hold(false) };
        for entry in entries {
            // A key is a name: a number among them keeps its spelling.
            match read.next_key::<String>()? {
                Some(key) if entry.key == key => read.next_value_seed(Same { node: &entry.node, ..self })?,
                Some(_) => return self.differ(entry.key_span, false),
                None => return self.hold(false),
            }
        }
        let more = read.next_key::<IgnoredAny>()?.is_some();
        self.hold(!more)
    }
}

/// The first two keys of one map that are spelt in two ways and are the same number.
fn keys_of_one_number(source: &Source, node: &Node) -> Option<Diagnostic> {
    let entries = match &node.value {
        Value::List(items) => return items.iter().find_map(|item| keys_of_one_number(source, item)),
        Value::Map(entries) => entries,
        _ => return None,
    };
    let mut seen = BTreeMap::new();
    for entry in entries {
        if let Some(Value::Number { value, .. }) = scalar::plain(&entry.key)
            && let Some(first) = seen.insert((value + 0.0).to_bits(), entry)
        {
            let message = format!("the keys `{}` and `{}` of one map are the same number", shortened(&first.key), shortened(&entry.key));
            return Some(
                Diagnostic::error("yaml-duplicate-key", message)
                    .at(source.label(entry.key_span, "the second"))
                    .at(source.label(first.key_span, "the first"))
                    .hint("names that differ must differ as numbers too; remove one, or rename it"),
            );
        }
    }
    entries.iter().find_map(|entry| keys_of_one_number(source, &entry.node))
}
