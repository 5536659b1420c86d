//! From the parser's events to the tree, refusing what a plan may not hold.

use super::tree::{Entry, Node, Value};
use super::trouble::{self, Refusal};
use super::{DEEPEST_NESTING, scalar, shortened};
use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};
use saphyr_parser::{Event, Parser, ScalarStyle};
use std::collections::HashMap;

/// Reading stops after so many findings: a person mends them and looks again.
const MOST_FINDINGS: usize = 100;

/// Turns the parser's places, which count characters, into bytes.
pub(super) struct Bytes<'s> {
    text: &'s str,
    /// Byte of each character; empty for ASCII, where they are the same.
    of_character: Vec<u32>,
}

impl<'s> Bytes<'s> {
    pub(super) fn new(text: &'s str) -> Self {
        let of_character = if text.is_ascii() { Vec::new() } else { text.char_indices().map(|(byte, _)| byte as u32).collect() };
        Bytes { text, of_character }
    }

    pub(super) fn at(&self, character: usize) -> usize {
        if self.of_character.is_empty() {
            character.min(self.text.len())
        } else {
            self.of_character.get(character).map_or(self.text.len(), |byte| *byte as usize)
        }
    }

    fn span(&self, span: &saphyr_parser::Span) -> Span {
        let start = self.at(span.start.index());
        let end = self.at(span.end.index()).max(start);
        // An empty value ends where it starts; a block's end lies on the next line.
        let kept = self.text[start..end].trim_end_matches([' ', '\t', '\r', '\n']).len();
        Span::new(start, start + kept)
    }
}

/// A list or map that is still open.
struct Open {
    start: usize,
    content: Content,
}

enum Content {
    List(Vec<Node>),
    Map { entries: Vec<Entry>, seen: HashMap<String, Span>, key: Option<(String, Span)> },
}

struct Builder<'s> {
    source: &'s Source,
    bytes: &'s Bytes<'s>,
    open: Vec<Open>,
    root: Option<Node>,
    findings: Vec<Diagnostic>,
    documents: usize,
}

/// The tree of a text and what was refused.
pub(super) fn build(source: &Source, bytes: &Bytes<'_>) -> (Option<Node>, Vec<Diagnostic>) {
    let mut builder = Builder { source, bytes, open: Vec::new(), root: None, findings: Vec::new(), documents: 0 };
    for event in Parser::new_from_str(source.text()) {
        let goes_on = match event {
            Ok((event, span)) => builder.take(event, &span),
            Err(error) => {
                builder.findings.push(trouble::finding(source, bytes.at(error.marker().index()), error.info()));
                false
            }
        };
        if !goes_on || builder.findings.len() >= MOST_FINDINGS {
            break;
        }
    }
    let root = if builder.findings.is_empty() { builder.root } else { None };
    (root, builder.findings)
}

impl Builder<'_> {
    /// Takes an event in; `false` where reading on makes no sense.
    fn take(&mut self, event: Event<'_>, span: &saphyr_parser::Span) -> bool {
        let place = self.bytes.span(span);
        match event {
            Event::Alias(_) => {
                self.refuse(trouble::ALIAS, place);
                self.add(Node { span: place, value: Value::Null });
            }
            Event::Scalar(text, style, anchor, tag) => {
                let place = match style {
                    // Nothing was written: the parser names the token after it.
                    ScalarStyle::Plain if text.is_empty() => Span::new(place.start, place.start),
                    _ => self.quoted(style, place),
                };
                self.loose(anchor, tag.is_some(), place);
                let value = if style == ScalarStyle::Plain { scalar::plain(&text) } else { Some(Value::Text(text.into_owned())) };
                let value = value.unwrap_or_else(|| {
                    self.refuse(
                        ("number-not-finite", "this is not a finite number", "write a finite number, or quote the text if it is a name"),
                        place,
                    );
                    Value::Null
                });
                if let Value::Text(text) = &value
                    && let Some(unseen) = text.chars().find(|c| super::is_refused(*c))
                {
                    self.findings.push(super::control_character(self.source, place, unseen));
                }
                self.add(Node { span: place, value });
            }
            Event::SequenceStart(anchor, tag) => {
                self.loose(anchor, tag.is_some(), place);
                return self.start(place, Content::List(Vec::new()));
            }
            Event::MappingStart(anchor, tag) => {
                self.loose(anchor, tag.is_some(), place);
                return self.start(place, Content::Map { entries: Vec::new(), seen: HashMap::new(), key: None });
            }
            Event::SequenceEnd | Event::MappingEnd => self.end(place),
            Event::DocumentStart(_) => {
                self.documents += 1;
                if self.documents == 2 {
                    self.refuse(
                        (
                            "yaml-documents",
                            "a second document starts here",
                            "a plan is one document; remove the `---` or put the rest into another file",
                        ),
                        place,
                    );
                    return false;
                }
            }
            Event::Nothing | Event::StreamStart | Event::StreamEnd | Event::DocumentEnd => {}
        }
        true
    }

    /// The place up to the closing quote; the parser's goes on over space and comments.
    fn quoted(&self, style: ScalarStyle, place: Span) -> Span {
        let quote = match style {
            ScalarStyle::SingleQuoted => b'\'',
            ScalarStyle::DoubleQuoted => b'"',
            _ => return place,
        };
        let bytes = self.bytes.text.as_bytes();
        let mut at = place.start + 1;
        while at < place.end {
            match bytes[at] {
                b'\\' if quote == b'"' => at += 2,
                b'\'' if quote == b'\'' && bytes.get(at + 1) == Some(&b'\'') => at += 2,
                byte if byte == quote => return Span::new(place.start, at + 1),
                _ => at += 1,
            }
        }
        place
    }

    fn refuse(&mut self, (rule, message, hint): Refusal, place: Span) {
        let finding = Diagnostic::error(rule, message).at(self.source.label(place, "here")).hint(hint);
        self.findings.push(finding);
    }

    fn loose(&mut self, anchor: usize, tagged: bool, place: Span) {
        if anchor != 0 {
            self.refuse(trouble::ANCHOR, self.property(place.start, '&'));
        }
        if tagged {
            self.refuse(trouble::TAG, self.property(place.start, '!'));
        }
    }

    /// Where the anchor or tag of the value at `start` stands: there or just before it.
    fn property(&self, start: usize, mark: char) -> Span {
        let text = self.bytes.text;
        let ends = |c: char| c.is_ascii_whitespace() || matches!(c, ',' | '[' | ']' | '{' | '}');
        let mut at = start;
        for word in text[start..].split_ascii_whitespace().take(2) {
            at += text[at..].find(|c: char| !c.is_ascii_whitespace()).unwrap_or(0);
            if word.starts_with(mark) {
                return Span::new(at, at + word.find(ends).unwrap_or(word.len()));
            }
            at += word.len();
        }
        let mut before = &text[..start];
        for _ in 0..2 {
            before = before.trim_ascii_end();
            let from = before.rfind(ends).map_or(0, |end| end + 1);
            if before[from..].starts_with(mark) {
                return Span::new(from, before.len());
            }
            before = &before[..from];
        }
        Span::new(start, start)
    }

    fn start(&mut self, place: Span, content: Content) -> bool {
        if self.open.len() == DEEPEST_NESTING {
            self.refuse(trouble::TOO_DEEP, place);
            return false;
        }
        self.open.push(Open { start: place.start, content });
        true
    }

    fn end(&mut self, place: Span) {
        let Some(Open { start, content }) = self.open.pop() else { return };
        let value = match content {
            Content::List(items) => Value::List(items),
            Content::Map { entries, .. } => Value::Map(entries),
        };
        let mut end = place.end.max(start);
        // The end of a block is noticed only at the next token; the block ends with its last part.
        let last = match &value {
            Value::List(items) => items.last().map(|node| node.span.end),
            Value::Map(entries) => entries.last().map(|entry| entry.node.span.end.max(entry.key_span.end)),
            _ => None,
        };
        let bracketed = matches!(self.bytes.text.as_bytes().get(start), Some(b'[' | b'{'));
        if let Some(last) = last
            && !bracketed
        {
            end = last;
        }
        self.add(Node { span: Span::new(start, end), value });
    }

    fn add(&mut self, node: Node) {
        match self.open.last_mut() {
            None => self.root = (node.value != Value::Null).then_some(node),
            Some(Open { content: Content::List(items), .. }) => items.push(node),
            Some(Open { content: Content::Map { entries, seen, key }, .. }) => match key.take() {
                None => {
                    let text = match &node.value {
                        Value::Null => Some(self.bytes.text[node.span.start..node.span.end].to_owned()),
                        _ => node.text().map(str::to_owned),
                    };
                    let place = node.span;
                    let Some(text) = text else {
                        self.refuse(("yaml-key", "a list or map cannot be a key", "write a name before the colon"), place);
                        if let Some(Open { content: Content::Map { key, .. }, .. }) = self.open.last_mut() {
                            *key = Some((String::new(), place));
                        }
                        return;
                    };
                    let finding = if text == "<<" {
                        Some(
                            Diagnostic::error("yaml-merge-key", "a plan has no merge keys (`<<`)")
                                .at(self.source.label(place, "here"))
                                .hint("write the entries out"),
                        )
                    } else if text.is_empty() {
                        Some(
                            Diagnostic::error("yaml-key", "a key is missing before the colon")
                                .at(self.source.label(place, "here"))
                                .hint("write a name before the colon"),
                        )
                    } else if text.contains(['\n', '\t']) {
                        Some(
                            Diagnostic::error("yaml-key", "a key goes over more than one line, or holds a tab")
                                .at(self.source.label(place, "here"))
                                .hint("write the name on one line; the quote before it may not be closed"),
                        )
                    } else {
                        seen.get(&text).map(|first| {
                            Diagnostic::error("yaml-duplicate-key", format!("the key `{}` stands twice in one map", shortened(&text)))
                                .at(self.source.label(place, "the second"))
                                .at(self.source.label(*first, "the first"))
                                .hint("remove one of them; nothing is silently overridden")
                        })
                    };
                    seen.entry(text.clone()).or_insert(place);
                    *key = Some((text, place));
                    self.findings.extend(finding);
                }
                Some((text, key_span)) => entries.push(Entry { key: text, key_span, node }),
            },
        }
    }
}
