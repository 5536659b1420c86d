//! YAML with a span for every value. Parsing never fails: it collects what it refuses.
//!
//! One pass over the parser's events gives the tree and refuses what YAML leaves loose (anchors, aliases, tags, duplicate
//! keys, several documents, depth). `serde_yaml` then gives the meaning of the same text; a plan on which the two disagree
//! is refused.

mod agree;
mod build;
mod scalar;
pub mod tree;

use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};
use tree::Node;

/// Plans larger than this many bytes are refused.
pub const LARGEST_PLAN: usize = 4 << 20;

/// Maps and lists may be nested this deep.
pub const DEEPEST_NESTING: usize = 64;

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
    let start = || Source::new(name, "").label(Span::default(), "");
    if bytes.len() > LARGEST_PLAN {
        return Err(Box::new(
            Diagnostic::error("plan-too-large", format!("this file has {} bytes; a plan may have {LARGEST_PLAN}", bytes.len()))
                .at(start())
                .hint("a plan is text that people read; give the data with `--data`, not as the plan"),
        ));
    }
    let bytes = bytes.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(bytes);
    match std::str::from_utf8(bytes) {
        Ok(text) => Ok(Source::new(name, text)),
        Err(error) => {
            let readable = String::from_utf8_lossy(&bytes[..error.valid_up_to()]).into_owned();
            let source = Source::new(name, readable);
            let end = source.text().len();
            Err(Box::new(
                Diagnostic::error(
                    "not-utf-8",
                    format!("the plan is not UTF-8 text: byte {:#04x} is out of place", bytes[error.valid_up_to()]),
                )
                .at(source.label(Span::new(end, end), "after this"))
                .hint("save the file as UTF-8"),
            ))
        }
    }
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
    let (root, findings) = build::build(source);
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
        return Some(
            Diagnostic::error("plan-too-large", format!("the plan has {} bytes; it may have {LARGEST_PLAN}", text.len()))
                .at(source.label(Span::default(), "")),
        );
    }
    let (at, character) = text.char_indices().find(|(_, c)| c.is_control() && !matches!(c, '\n' | '\r' | '\t'))?;
    Some(
        Diagnostic::error("control-character", format!("the plan holds a control character (U+{:04X})", character as u32))
            .at(source.label(Span::new(at, at + character.len_utf8()), "here"))
            .hint("remove it; it cannot be seen in an editor and has no meaning in a plan"),
    )
}
