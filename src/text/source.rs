//! A named source text and places in it.

use crate::text::diagnostic::Label;

/// A half-open range of bytes in a source text.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, PartialOrd, Ord)]
pub struct Span {
    /// First byte.
    pub start: usize,
    /// One past the last byte.
    pub end: usize,
}

impl Span {
    /// The range `start..end`.
    pub fn new(start: usize, end: usize) -> Self {
        Span { start, end }
    }
}

/// A label keeps at most this many bytes of a line before and after its place.
const REACH: usize = 512;

/// Characters are counted once up to every so many bytes, so that a place in a line of megabytes is found at once.
const STRIDE: usize = 256;

/// A text with its name (as the person typed it) and an index of its lines.
#[derive(Debug, Clone)]
pub struct Source {
    name: String,
    text: String,
    line_starts: Vec<usize>,
    /// How many characters start before each multiple of `STRIDE`; empty where every character is one byte.
    characters_before: Vec<usize>,
}

impl Source {
    /// A source called `name` that reads `text`.
    ///
    /// ```
    /// use aforesaid::text::source::{Source, Span};
    /// let source = Source::new("plan.yaml", "plan: 1\ntitle: é x\n");
    /// assert_eq!(source.line_and_column(8), (2, 1));
    /// let label = source.label(Span::new(18, 19), "here");
    /// assert_eq!((label.line, label.column), (2, 10));
    /// ```
    pub fn new(name: impl Into<String>, text: impl Into<String>) -> Self {
        let text = text.into();
        let mut line_starts = vec![0];
        line_starts.extend(text.bytes().enumerate().filter(|(_, byte)| *byte == b'\n').map(|(at, _)| at + 1));
        let characters_before = if text.is_ascii() { Vec::new() } else { characters_before(text.as_bytes()) };
        Source { name: name.into(), text, line_starts, characters_before }
    }

    /// The name given.
    pub fn name(&self) -> &str {
        &self.name
    }

    /// The whole text.
    pub fn text(&self) -> &str {
        &self.text
    }

    fn line_index(&self, byte: usize) -> usize {
        self.line_starts.partition_point(|start| *start <= byte).saturating_sub(1)
    }

    /// Line and column of a byte, both counted from one, the column in characters.
    pub fn line_and_column(&self, byte: usize) -> (usize, usize) {
        let byte = byte.min(self.text.len());
        let line = self.line_index(byte);
        let start = self.line_starts[line];
        (line + 1, self.characters_up_to(byte) - self.characters_up_to(start) + 1)
    }

    fn characters_up_to(&self, byte: usize) -> usize {
        match self.characters_before.get(byte / STRIDE) {
            None => byte,
            Some(before) => before + count_characters(&self.text.as_bytes()[byte / STRIDE * STRIDE..byte]),
        }
    }

    /// A label for a span, carrying the lines it touches (at most the first and the two after it, and of a very long
    /// line only what stands near the place).
    pub fn label(&self, span: Span, text: impl Into<String>) -> Label {
        let (line, column) = self.line_and_column(span.start);
        let (end_line, end_column) = self.line_and_column(span.end.max(span.start));
        let last = end_line.min(line + 2);
        let place = span.start.min(self.text.len());
        let near = self.text.ceil_char_boundary(place.saturating_sub(REACH));
        let from = self.line_starts[line - 1].max(near.min(place));
        let to = self.line_starts.get(last).copied().unwrap_or(self.text.len());
        let to = to.min(self.text.floor_char_boundary(place + REACH)).max(from);
        let excerpt = self.text[from..to].trim_end_matches(['\n', '\r']).to_owned();
        let (_, excerpt_column) = self.line_and_column(from);
        Label { file: self.name.clone(), line, column, end_line, end_column, excerpt, excerpt_column, text: text.into() }
    }
}

fn count_characters(bytes: &[u8]) -> usize {
    bytes.iter().filter(|byte| (**byte & 0xC0) != 0x80).count()
}

fn characters_before(bytes: &[u8]) -> Vec<usize> {
    let mut before = vec![0];
    before.extend(bytes.chunks(STRIDE).scan(0, |sum, chunk| {
        *sum += count_characters(chunk);
        Some(*sum)
    }));
    before
}
