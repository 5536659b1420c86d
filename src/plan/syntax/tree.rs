//! The syntax tree: what was written, each part with its place.

use crate::text::source::Span;

/// A value of the plan with its place.
#[derive(Debug, Clone, PartialEq)]
pub struct Node {
    /// Where it stands.
    pub span: Span,
    /// What it is.
    pub value: Value,
}

/// What a node is. Scalars keep the text as written, so that a level written `8` is called `8`.
#[derive(Debug, Clone, PartialEq)]
pub enum Value {
    /// Nothing: an empty value, `null` or `~`.
    Null,
    /// Text, quoted or plain.
    Text(String),
    /// A plain scalar that YAML 1.2's core schema reads as a finite number.
    Number {
        /// As written.
        text: String,
        /// Its value.
        value: f64,
    },
    /// `true` or `false`.
    Bool {
        /// As written.
        text: String,
        /// Its value.
        value: bool,
    },
    /// A list.
    List(Vec<Node>),
    /// A map, in the order written; no key twice.
    Map(Vec<Entry>),
}

/// One entry of a map.
#[derive(Debug, Clone, PartialEq)]
pub struct Entry {
    /// The key's text.
    pub key: String,
    /// Where the key stands.
    pub key_span: Span,
    /// Its value.
    pub node: Node,
}

impl Node {
    /// The text of a scalar as written; `None` for nothing, lists and maps.
    pub fn text(&self) -> Option<&str> {
        match &self.value {
            Value::Text(text) | Value::Number { text, .. } | Value::Bool { text, .. } => Some(text),
            Value::Null | Value::List(_) | Value::Map(_) => None,
        }
    }

    /// The value of a number.
    pub fn number(&self) -> Option<f64> {
        match self.value {
            Value::Number { value, .. } => Some(value),
            _ => None,
        }
    }

    /// The items of a list.
    pub fn list(&self) -> Option<&[Node]> {
        match &self.value {
            Value::List(items) => Some(items),
            _ => None,
        }
    }

    /// The entries of a map.
    pub fn map(&self) -> Option<&[Entry]> {
        match &self.value {
            Value::Map(entries) => Some(entries),
            _ => None,
        }
    }

    /// The value under `key` of a map.
    pub fn get(&self, key: &str) -> Option<&Node> {
        self.map()?.iter().find(|entry| entry.key == key).map(|entry| &entry.node)
    }

    /// What it is, in words for messages.
    pub fn kind_in_words(&self) -> &'static str {
        match self.value {
            Value::Null => "nothing",
            Value::Text(_) => "text",
            Value::Number { .. } => "a number",
            Value::Bool { .. } => "true or false",
            Value::List(_) => "a list",
            Value::Map(_) => "a map",
        }
    }
}
