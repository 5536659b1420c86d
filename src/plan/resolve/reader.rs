//! Reading the tree: what is expected where, and what is said when something else stands there.

use crate::plan::syntax::tree::{Entry, Node, Value};
use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};
use crate::text::suggest::{nearest, same_but_for_case_or_space};
use std::cell::RefCell;

/// Collects findings while the tree is read.
pub(super) struct Reader<'s> {
    pub source: &'s Source,
    findings: RefCell<Vec<Diagnostic>>,
    /// Keys that a misspelt one was most likely meant to be, with the start of their map: they are not also missing.
    misspelt: RefCell<Vec<(usize, String)>>,
}

/// The entries of a map whose keys have been checked.
#[derive(Clone, Copy)]
pub(super) struct Fields<'n> {
    entries: &'n [Entry],
    pub span: Span,
}

impl<'n> Fields<'n> {
    pub fn get(&self, key: &str) -> Option<&'n Node> {
        self.entry(key).map(|entry| &entry.node)
    }

    pub fn entry(&self, key: &str) -> Option<&'n Entry> {
        self.entries.iter().find(|entry| entry.key == key)
    }
}

impl<'s> Reader<'s> {
    pub fn new(source: &'s Source) -> Self {
        Reader { source, findings: RefCell::new(Vec::new()), misspelt: RefCell::new(Vec::new()) }
    }

    pub fn into_findings(self) -> Vec<Diagnostic> {
        self.findings.into_inner()
    }

    pub fn say(&self, finding: Diagnostic) {
        self.findings.borrow_mut().push(finding);
    }

    /// An error at one place.
    pub fn error(&self, rule: &str, span: Span, message: impl Into<String>, label: impl Into<String>, hint: impl Into<String>) {
        self.say(Diagnostic::error(rule, message).at(self.source.label(span, label)).hint(hint));
    }

    /// An error at two places.
    pub fn conflict(&self, rule: &str, places: [(Span, &str); 2], message: impl Into<String>, hint: impl Into<String>) {
        let labels = places.map(|(span, text)| self.source.label(span, text));
        let [first, second] = labels;
        self.say(Diagnostic::error(rule, message).at(first).at(second).hint(hint));
    }

    pub fn wrong_type(&self, node: &Node, what: &str, expected: &str) {
        self.error(
            "wrong-type",
            node.span,
            format!("{what} must be {expected}, not {}", node.kind_in_words()),
            format!("{} here", node.kind_in_words()),
            format!("write {expected}"),
        );
    }

    /// A map with these keys and no others. `later` are keys of the language that this release does not carry out.
    pub fn map<'n>(&self, node: &'n Node, what: &str, keys: &[&str], later: &[&str]) -> Option<Fields<'n>> {
        let Value::Map(entries) = &node.value else {
            self.wrong_type(node, what, "a map");
            return None;
        };
        for entry in entries {
            if later.contains(&entry.key.as_str()) {
                self.not_yet(entry.key_span, &format!("`{}` of {what}", entry.key));
            } else if !keys.contains(&entry.key.as_str()) {
                self.unknown_key(node, entry, what, keys);
            }
        }
        Some(Fields { entries, span: node.span })
    }

    pub fn unknown_key(&self, map: &Node, entry: &Entry, what: &str, keys: &[&str]) {
        let hint = match nearest(&entry.key, keys.iter().copied()) {
            Some(near) => {
                self.misspelt.borrow_mut().push((map.span.start, near.to_owned()));
                format!("did you mean `{near}`?")
            }
            None => format!("{what} may have: {}", keys.join(", ")),
        };
        self.error("unknown-key", entry.key_span, format!("`{}` is not a key of {what}", entry.key), "unknown", hint);
    }

    /// Says that the language has it and this release does not.
    pub fn not_yet(&self, span: Span, what: &str) {
        self.error(
            "not-in-this-release",
            span,
            format!("{what} is part of the plan language, but this release does not carry it out"),
            "not in this release",
            "leave it out, or choose another; `README.md` lists what this release does",
        );
    }

    /// Any map, with its entries in the order written.
    pub fn entries<'n>(&self, node: &'n Node, what: &str, expected: &str) -> Option<&'n [Entry]> {
        node.map().or_else(|| {
            self.wrong_type(node, what, expected);
            None
        })
    }

    /// A compulsory entry.
    pub fn required<'n>(&self, fields: &Fields<'n>, key: &str, what: &str, why: &str) -> Option<&'n Node> {
        let found = fields.get(key);
        let misspelt = || self.misspelt.borrow().iter().any(|(start, meant)| *start == fields.span.start && meant == key);
        if found.is_none() && !misspelt() {
            let first = self.first_line(fields.span);
            self.error("missing-key", first, format!("{what} lacks `{key}`"), format!("`{key}` is missing here"), why);
        }
        found
    }

    /// The first line of a span, so that a missing key does not underline a whole map.
    pub fn first_line(&self, span: Span) -> Span {
        let text = &self.source.text()[span.start..span.end];
        Span::new(span.start, span.start + text.lines().next().unwrap_or("").trim_end().len())
    }

    pub fn text<'n>(&self, node: &'n Node, what: &str) -> Option<&'n str> {
        match node.text() {
            Some(text) if !text.trim().is_empty() => Some(text),
            Some(_) => {
                self.error("empty-text", node.span, format!("{what} is empty"), "empty", "write the text, or remove the key");
                None
            }
            None => {
                self.wrong_type(node, what, "text");
                None
            }
        }
    }

    pub fn optional_text(&self, fields: &Fields<'_>, key: &str) -> Option<String> {
        fields.get(key).and_then(|node| self.text(node, &format!("`{key}`"))).map(str::to_owned)
    }

    pub fn number(&self, node: &Node, what: &str) -> Option<f64> {
        node.number().or_else(|| {
            self.wrong_type(node, what, "a number");
            None
        })
    }

    pub fn list<'n>(&self, node: &'n Node, what: &str) -> Option<&'n [Node]> {
        node.list().or_else(|| {
            self.wrong_type(node, what, "a list");
            None
        })
    }

    /// A list of texts; a single text counts as a list of one.
    pub fn texts<'n>(&self, node: &'n Node, what: &str) -> Vec<(&'n str, Span)> {
        match &node.value {
            Value::List(items) => items.iter().filter_map(|item| Some((self.text(item, what)?, item.span))).collect(),
            _ => self.text(node, what).map(|text| (text, node.span)).into_iter().collect(),
        }
    }

    /// One of these words. `later` are words of the language that this release does not carry out.
    pub fn word<T: Copy>(&self, node: &Node, what: &str, words: &[(&str, T)], later: &[&str]) -> Option<T> {
        let text = self.text(node, what)?;
        if let Some((_, value)) = words.iter().find(|(word, _)| *word == text) {
            return Some(*value);
        }
        if later.contains(&text) {
            self.not_yet(node.span, &format!("`{text}` for {what}"));
            return None;
        }
        let all: Vec<&str> = words.iter().map(|(word, _)| *word).collect();
        let hint = match nearest(text, all.iter().chain(later).copied()) {
            Some(near) => format!("did you mean `{near}`?"),
            None => format!("it may be: {}", all.join(", ")),
        };
        self.error("unknown-word", node.span, format!("`{text}` is not a word for {what}"), "unknown", hint);
        None
    }

    /// A name among those defined; says which is near where it is not.
    pub fn name(&self, text: &str, span: Span, what: &str, defined: &[&str]) -> Option<usize> {
        let found = defined.iter().position(|name| *name == text);
        if found.is_none() {
            let hint = match nearest(text, defined.iter().copied()) {
                Some(near) if same_but_for_case_or_space(text, near) => {
                    format!("did you mean `{near}`? names must agree to the letter, case and spaces too")
                }
                Some(near) => format!("did you mean `{near}`?"),
                None if defined.is_empty() => "the plan defines none".to_owned(),
                None => format!("the plan defines: {}", defined.join(", ")),
            };
            self.error("unknown-name", span, format!("there is no {what} called `{text}`"), "unknown", hint);
        }
        found
    }
}

/// A tree as plain JSON, for sections that are kept as written.
pub(super) fn as_json(node: &Node) -> serde_json::Value {
    use serde_json::Value as Json;
    match &node.value {
        Value::Null => Json::Null,
        Value::Text(text) => Json::String(text.trim_end_matches('\n').to_owned()),
        Value::Number { value, .. } => serde_json::Number::from_f64(*value).map_or(Json::Null, Json::Number),
        Value::Bool { value, .. } => Json::Bool(*value),
        Value::List(items) => Json::Array(items.iter().map(as_json).collect()),
        Value::Map(entries) => Json::Object(entries.iter().map(|entry| (entry.key.clone(), as_json(&entry.node))).collect()),
    }
}
