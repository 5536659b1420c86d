//! What the parser stumbles over, in words for people who do not know YAML's grammar.

use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};

/// What is said of one kind of syntax error.
struct Words {
    /// Part of the parser's own message.
    part: &'static str,
    rule: &'static str,
    message: &'static str,
    hint: &'static str,
}

const fn words(part: &'static str, message: &'static str, hint: &'static str) -> Words {
    Words { part, rule: "yaml-syntax", message, hint }
}

/// A construct of YAML that a plan may not hold: rule, message, hint.
pub(super) type Refusal = (&'static str, &'static str, &'static str);

pub(super) const ANCHOR: Refusal = (
    "yaml-anchor",
    "a plan has no anchors (`&name`)",
    "remove it and write each value where it belongs, or put quotes round text that starts with `&`",
);
pub(super) const ALIAS: Refusal = (
    "yaml-alias",
    "a plan has no aliases (`*name`)",
    "write the value out, so that a reader need not look for it, or put quotes round text that starts with `*`",
);
pub(super) const TAG: Refusal = ("yaml-tag", "a plan has no tags (`!name`)", "remove it, or put quotes round text that starts with `!`");
pub(super) const TOO_DEEP: Refusal = (
    "yaml-too-deep",
    "lists and maps are nested too deep",
    "no part of a plan nests deeper than a few levels; a bracket may not be closed",
);
pub(super) const DIRECTIVE: Refusal =
    ("yaml-directive", "a plan has no directives (`%NAME`)", "remove the line; every plan is read by the rules of YAML 1.2");

const fn refused(part: &'static str, (rule, message, hint): Refusal) -> Words {
    Words { part, rule, message, hint }
}

const LOOK_AROUND: &str = "look at the indentation, and at quotes, brackets and colons on this line and the one before";
const ESCAPES: &str = "in double quotes a backslash starts an escape: write `\\\\` for one, or use single quotes";

/// The first row whose part stands in the message counts.
const TABLE: &[Words] = &[
    refused("recursion limit", TOO_DEEP),
    refused("unknown anchor", ALIAS),
    refused("anchor", ANCHOR),
    refused("directive", DIRECTIVE),
    refused("handle wasn't declared", TAG),
    refused("a tag", TAG),
    refused("global tag", TAG),
    words(
        "mapping values are not allowed",
        "a key with its colon cannot stand here",
        "indent it like the keys it belongs with; the value before it may lack quotes or a line end",
    ),
    words("did not find expected key", "a key is expected here", "indent this line like the other keys of its map, each as `name: value`"),
    words("expected '-' indicator", "a list item is expected here", "start it with `- `, indented like the other items of the list"),
    words(
        "simple key expect",
        "a colon is missing after this key",
        "write `name: value`, or indent the line to continue the text above it",
    ),
    words("expected ',' or ']'", "a comma or `]` is missing", "close the list with `]`, and put a comma between its items"),
    words("expected ',' or '}'", "a comma or `}` is missing", "close the map with `}`, and put a comma between its entries"),
    words(
        "scalar, found unexpected end",
        "the quote that opens here is never closed",
        "close it; inside single quotes write `''` for a quote",
    ),
    words(
        "in quoted scalar",
        "the quote that opens here is not closed on its line",
        "close it; text that runs on must be indented further",
    ),
    words("document indicator", "the quote that opens here is never closed", "close it before the line of dashes or dots"),
    words("unknown escape", "a backslash stands before a character that it cannot", ESCAPES),
    words("hexadecimal", "a backslash escape lacks its digits", ESCAPES),
    words("character escape code", "a backslash escape names no character", ESCAPES),
    words("double-quoted scalar", "something stands behind the closing quote", "put the whole text into one pair of quotes"),
    words("misplaced bracket", "this bracket closes nothing", "remove it, or put quotes round the text that holds it"),
    words("flow construct", "a bracket before this is still open", "close it, or indent this line further"),
    words("block sequence entries", "a list item cannot start here", "start the list on the line after its key"),
    words("multiline text", "a comment stands in the middle of a text", "put the comment before the text, or quotes round it"),
    words("expected node content", "a value is expected here", "a comma or colon too many, or a value left out"),
    words("document start", "something stands behind the end of the plan", "indent it to where it belongs, or remove the `...` before it"),
    words("document end marker", "something stands behind the end of the plan", "remove what follows the `...`"),
    words(
        "block scalar",
        "the text after `|` or `>` is not laid out rightly",
        "start it on the next line, each line indented by as many spaces",
    ),
    words("must be followed by", "a space is missing here", "put a space behind `-` and `:`"),
    words("cannot start with '-'", "text cannot start like this", "put quotes round it"),
];

/// The finding for a syntax error: `at` is the byte, `info` the parser's own words.
pub(super) fn finding(source: &Source, at: usize, info: &str) -> Diagnostic {
    let text = source.text();
    let at = text.floor_char_boundary(at.min(text.len()));
    // An error at the end is shown behind the last thing written.
    let at = at.min(text.trim_end().len());
    let start = text[..at].rfind('\n').map_or(0, |line| line + 1);
    let marks_a_word = text[at..].starts_with(['&', '*', '!']);
    let ends = |c: char| if marks_a_word { c.is_whitespace() || ",[]{}".contains(c) } else { true };
    let first = text[at..].chars().next().filter(|c| !matches!(c, '\r' | '\n')).map_or(0, char::len_utf8);
    let end = at + first + text[at + first..].find(ends).unwrap_or(text.len() - at - first);
    let spot = Span::new(at, end);

    if (info.contains("tab") || info.contains("cannot start any token"))
        && let Some(finding) = tab_in_margin(source, at)
    {
        return finding;
    }
    if let Some((colon, before)) = unspaced_key(text, start)
        && info.contains("mapping values are not allowed")
    {
        return Diagnostic::error("yaml-syntax", format!("a space is missing after the colon of `{}`", super::shortened(before)))
            .at(source.label(Span::new(colon, colon + 1), "no space after this"))
            .hint("write `name: value`");
    }
    let said = |rule: &str, message: String, hint: &str| Diagnostic::error(rule, message).at(source.label(spot, "here")).hint(hint);
    if info.contains("mapping values are not allowed") && text[start..at].contains(": ") {
        return said(
            "yaml-syntax",
            "a second `: ` stands on one line".to_owned(),
            "put quotes round the text that holds it, or start a new line",
        );
    }
    if info.contains("did not find expected key") && text[start..at].trim_end().ends_with([']', '}', '"', '\'']) {
        return said(
            "yaml-syntax",
            "something stands behind the end of a value".to_owned(),
            "remove it, or put quotes round the whole text",
        );
    }
    if let Some(character) = info.strip_prefix("unexpected character: `").and_then(|rest| rest.chars().next()) {
        return said("yaml-syntax", format!("text cannot start with `{character}`"), "put quotes round it");
    }
    match TABLE.iter().find(|row| info.contains(row.part)) {
        Some(row) => said(row.rule, row.message.to_owned(), row.hint),
        None => said("yaml-syntax", format!("this is not YAML: {}", if info.is_empty() { "unexpected text" } else { info }), LOOK_AROUND),
    }
}

/// The colon without a space after it, and the key before it, on the line before the one that starts at `start`.
fn unspaced_key(text: &str, start: usize) -> Option<(usize, &str)> {
    let above = text[..start].trim_end();
    let from = above.rfind('\n').map_or(0, |line| line + 1);
    let line = &above[from..];
    let colon = line.find(':')?;
    let next = line[colon + 1..].chars().next()?;
    let key = line[..colon].trim().trim_start_matches("- ");
    let name_like = !key.is_empty() && key.chars().all(|c| c.is_alphanumeric() || matches!(c, ' ' | '_' | '-'));
    (name_like && !next.is_whitespace() && next != '/').then_some((from + colon, key))
}

/// The finding for a tab in the indentation of the line that holds the byte `at`.
pub(super) fn tab_in_margin(source: &Source, at: usize) -> Option<Diagnostic> {
    let text = source.text();
    let start = text[..at].rfind('\n').map_or(0, |line| line + 1);
    let beyond = text[start..].trim_start_matches([' ', '\t']);
    let tab = start + text[start..text.len() - beyond.len()].find('\t')?;
    Some(
        Diagnostic::error("yaml-tab", "a tab stands where the line is indented")
            .at(source.label(Span::new(tab, tab + 1), "a tab"))
            .hint("indent with spaces: YAML gives a tab no width"),
    )
}
