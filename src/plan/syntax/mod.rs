//! YAML with a span for every value. Parsing never fails: it collects what it refuses.
//!
//! One pass over the parser's events gives the tree and refuses what YAML leaves loose (anchors, aliases, tags, duplicate
//! keys, several documents, depth). `serde_yaml` then gives the meaning of the same text; a plan on which the two disagree
//! is refused.

mod agree;
mod build;
mod scalar;
pub mod tree;
mod trouble;

use crate::text::diagnostic::Diagnostic;
use crate::text::render::is_unseen;
use crate::text::source::{Source, Span};
use tree::Node;

/// Plans larger than this many bytes are refused: the densest text of this size is read in under a second.
pub const LARGEST_PLAN: usize = 1 << 20;

/// Maps and lists may be nested this deep.
pub const DEEPEST_NESTING: usize = 64;

/// Names in messages are cut after this many characters.
const LONGEST_QUOTED: usize = 80;

/// What came of parsing.
#[derive(Debug, Clone, PartialEq)]
pub struct Parsed {
    /// The tree, where nothing was refused.
    pub root: Option<Node>,
    /// What was refused, in the order of the text.
    pub findings: Vec<Diagnostic>,
}

impl Parsed {
    fn refused(findings: Vec<Diagnostic>) -> Self {
        Parsed { root: None, findings }
    }
}

/// Reads bytes as the text of a plan; a byte order mark is dropped.
///
/// # Errors
/// More than [`LARGEST_PLAN`] bytes, or bytes that are not UTF-8, with the place of the first bad one.
pub fn decode(name: &str, bytes: &[u8]) -> Result<Source, Box<Diagnostic>> {
    if bytes.len() > LARGEST_PLAN {
        return Err(Box::new(too_large(name, bytes.len())));
    }
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    match std::str::from_utf8(bytes) {
        Ok(text) => Ok(Source::new(name, text)),
        Err(error) => Err(Box::new(not_utf_8(name, bytes, &error))),
    }
}

fn too_large(name: &str, size: usize) -> Diagnostic {
    Diagnostic::error("plan-too-large", format!("this file has {size} bytes; a plan may have {LARGEST_PLAN}"))
        .at(Source::new(name, "").label(Span::default(), ""))
        .hint("a plan is text that people read; give the data with `--data`, not as the plan")
}

fn not_utf_8(name: &str, bytes: &[u8], error: &std::str::Utf8Error) -> Diagnostic {
    let at = error.valid_up_to();
    // Only the lines up to the bad byte can be shown.
    let source = Source::new(name, String::from_utf8_lossy(&bytes[..at]));
    let message = match error.error_len() {
        None => "the plan is not whole: it ends in the middle of a character".to_owned(),
        Some(_) => format!("the plan is not UTF-8 text: byte {:#04x} is out of place", bytes[at]),
    };
    let hint = match bytes {
        [0xFF, 0xFE, ..] | [0xFE, 0xFF, ..] => "the file seems to be UTF-16; save it as UTF-8",
        [b'P', b'K', 3, 4, ..] => "this seems to be an archive or an office document; a plan is plain text",
        _ => "save the file as UTF-8",
    };
    Diagnostic::error("not-utf-8", message).at(source.label(Span::new(at, at), "after this")).hint(hint)
}

/// Parses a plan.
///
/// ```
/// use aforesaid::plan::syntax::parse;
/// use aforesaid::text::source::Source;
/// let parsed = parse(&Source::new("plan.yaml", "alpha: 0.05\nalpha: 0.1\n"));
/// assert_eq!(parsed.findings[0].rule, "yaml-duplicate-key");
/// ```
pub fn parse(source: &Source) -> Parsed {
    if let Some(finding) = unreadable(source) {
        return Parsed::refused(vec![finding]);
    }
    let bytes = build::Bytes::new(source.text());
    let (root, findings) = build::build(source, &bytes);
    if !findings.is_empty() {
        return Parsed::refused(findings);
    }
    match root {
        Some(root) => match agree::check(source, &root) {
            None => Parsed { root: Some(root), findings },
            Some(finding) => Parsed::refused(vec![finding]),
        },
        None => Parsed::refused(vec![
            Diagnostic::error("plan-empty", "the plan is empty")
                .at(source.label(Span::default(), "nothing but space and comments from here on"))
                .hint("a plan starts with `plan: 1`; README.md shows a whole one"),
        ]),
    }
}

fn unreadable(source: &Source) -> Option<Diagnostic> {
    let text = source.text();
    if text.len() > LARGEST_PLAN {
        return Some(too_large(source.name(), text.len()));
    }
    let bytes = text.as_bytes();
    let refused = |(at, c): &(usize, char)| is_refused(*c) && !(*c == '\r' && bytes.get(at + 1) == Some(&b'\n'));
    if let Some((at, character)) = text.char_indices().find(refused) {
        return Some(control_character(source, Span::new(at, at + character.len_utf8()), character));
    }
    directive(source)
}

fn is_refused(character: char) -> bool {
    character.is_control() && !matches!(character, '\n' | '\t') || is_unseen(character)
}

fn control_character(source: &Source, place: Span, character: char) -> Diagnostic {
    Diagnostic::error("control-character", format!("the plan holds a character that cannot be seen (U+{:04X})", character as u32))
        .at(source.label(place, "here"))
        .hint(match character {
            '\r' => "end lines with LF or CRLF; a carriage return alone hides what stands before it",
            _ => "remove it: what a reader sees must be all that the plan says",
        })
}

/// A line such as `%YAML 1.1` before the plan, which could change what words mean.
fn directive(source: &Source) -> Option<Diagnostic> {
    let text = source.text();
    let mut at = 0;
    for line in text.split_inclusive('\n') {
        let words = line.trim_ascii();
        if line.starts_with('%') {
            let (rule, message, hint) = trouble::DIRECTIVE;
            return Some(Diagnostic::error(rule, message).at(source.label(Span::new(at, at + words.len()), "here")).hint(hint));
        }
        if !words.is_empty() && !words.starts_with('#') {
            return None;
        }
        at += line.len();
    }
    None
}

/// A name as messages quote it: the start of a very long one.
fn shortened(name: &str) -> String {
    match name.char_indices().nth(LONGEST_QUOTED) {
        Some((end, _)) => format!("{}...", &name[..end]),
        None => name.to_owned(),
    }
}
