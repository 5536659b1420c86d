//! The reader: accepts the canonical form and nothing else.
use std::fmt;

use serde::de::{DeserializeOwned, Deserializer, Error as _, MapAccess, SeqAccess, Visitor};
use serde::ser::Serializer;
use serde::{Deserialize, Serialize};
use serde_json::error::Category;

use super::write::object;
use super::{CanonError, MAX_DEPTH, to_canonical};

/// Reads canonical JSON: `bytes` must be exactly what [`to_canonical`] writes for what they say.
///
/// # Errors
/// Not JSON, a key twice, nested deeper than [`MAX_DEPTH`], not canonical, or not of the shape of `T`; with the offset of the first byte at fault.
///
/// ```
/// use aforesaid::canon::json::{CanonError, from_canonical};
/// assert_eq!(from_canonical::<Vec<f64>>(b"[0.1,2]"), Ok(vec![0.1, 2.0]));
/// let retyped = from_canonical::<Vec<f64>>(b"[1e-1,2]");
/// assert_eq!(retyped, Err(CanonError::NotCanonical { offset: 1 }));
/// ```
pub fn from_canonical<T: DeserializeOwned>(bytes: &[u8]) -> Result<T, CanonError> {
    check(bytes)?;
    serde_json::from_slice(bytes).map_err(|error| CanonError::WrongShape { offset: offset_of(&error, bytes), message: message_of(&error) })
}

/// Reads a whole file: canonical JSON and one line feed, nothing after it.
///
/// # Errors
/// As [`from_canonical`], and a line feed that is missing or doubled.
pub fn from_file_bytes<T: DeserializeOwned>(bytes: &[u8]) -> Result<T, CanonError> {
    match bytes.strip_suffix(b"\n") {
        Some(body) if body.ends_with(b"\n") => Err(CanonError::LineFeed { offset: body.len() }),
        Some(body) => from_canonical(body),
        None => Err(CanonError::LineFeed { offset: bytes.len() }),
    }
}

/// Canonical JSON of an object without its member `key`: what a chain hashes of an entry that carries its own hash.
///
/// An object without that member comes back unchanged.
///
/// # Errors
/// As [`from_canonical`]; `bytes` must be an object.
pub fn without_key(bytes: &[u8], key: &str) -> Result<Vec<u8>, CanonError> {
    match check(bytes)? {
        Tree::Object(members) => {
            let kept = members.iter().filter(|(name, _)| name != key);
            object(kept.map(|(name, value)| Ok((name.clone(), to_canonical(value)?))).collect::<Result<_, CanonError>>()?)
        }
        _ => Err(CanonError::WrongShape { offset: 0, message: "an object is expected".into() }),
    }
}

/// The lines of a file of canonical JSON lines.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Lines<'a> {
    /// Every line that a line feed ends, in order.
    pub lines: Vec<Line<'a>>,
    /// What follows the last line feed: a line that was not written to its end.
    pub unterminated: Option<Line<'a>>,
}

/// One line and its place in the file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Line<'a> {
    /// Its number, from 1.
    pub number: usize,
    /// The offset of its first byte in the file.
    pub start: usize,
    /// Its bytes, without the line feed.
    pub bytes: &'a [u8],
}

impl Line<'_> {
    /// Reads the line as canonical JSON; offsets in errors count from the start of the file.
    ///
    /// # Errors
    /// As [`from_canonical`].
    pub fn read<T: DeserializeOwned>(&self) -> Result<T, CanonError> {
        from_canonical(self.bytes).map_err(|error| error.moved(self.start))
    }
}

/// Splits a file into lines at line feeds, reading none of them.
pub fn read_lines(bytes: &[u8]) -> Lines<'_> {
    let mut found = Lines { lines: Vec::new(), unterminated: None };
    let mut start = 0;
    for (index, piece) in bytes.split_inclusive(|byte| *byte == b'\n').enumerate() {
        let line = |bytes| Line { number: index + 1, start, bytes };
        match piece.strip_suffix(b"\n") {
            Some(body) => found.lines.push(line(body)),
            None => found.unterminated = Some(line(piece)),
        }
        start += piece.len();
    }
    found
}

fn check(bytes: &[u8]) -> Result<Tree, CanonError> {
    check_depth(bytes)?;
    let tree: Tree = serde_json::from_slice(bytes).map_err(|error| {
        let offset = offset_of(&error, bytes);
        match error.classify() {
            // A tree takes every shape, so the one thing it complains of itself is a key that stands twice.
            Category::Data => CanonError::KeyTwice { key: message_of(&error), offset: Some(offset) },
            _ => CanonError::NotJson { offset, message: message_of(&error) },
        }
    })?;
    let canonical = match to_canonical(&tree) {
        Ok(canonical) => canonical,
        // serde_json reads such a number digit by digit, where canonical JSON would have rounded it.
        Err(CanonError::WholeNumberTooLarge(digits)) => {
            let at = bytes.windows(digits.len()).position(|window| window == digits.as_bytes());
            return Err(CanonError::NotCanonical { offset: at.unwrap_or(0) });
        }
        Err(error) => return Err(error),
    };
    if canonical != bytes {
        let same = canonical.iter().zip(bytes).take_while(|(a, b)| a == b).count();
        return Err(CanonError::NotCanonical { offset: same });
    }
    Ok(tree)
}

/// Refuses depth before any recursion can meet it.
fn check_depth(bytes: &[u8]) -> Result<(), CanonError> {
    let (mut depth, mut in_text, mut escaped) = (0_usize, false, false);
    for (offset, byte) in bytes.iter().enumerate() {
        if in_text {
            match byte {
                _ if escaped => escaped = false,
                b'\\' => escaped = true,
                b'"' => in_text = false,
                _ => {}
            }
            continue;
        }
        match byte {
            b'"' => in_text = true,
            b'[' | b'{' if depth == MAX_DEPTH => {
                return Err(CanonError::TooDeep { offset: Some(offset) });
            }
            b'[' | b'{' => depth += 1,
            b']' | b'}' => depth = depth.saturating_sub(1),
            _ => {}
        }
    }
    Ok(())
}

/// serde_json gives line and column (both from 1, the column in bytes).
fn offset_of(error: &serde_json::Error, bytes: &[u8]) -> usize {
    let before = bytes.split_inclusive(|byte| *byte == b'\n').take(error.line().saturating_sub(1));
    let line_start: usize = before.map(<[u8]>::len).sum();
    (line_start + error.column().saturating_sub(1)).min(bytes.len())
}

fn message_of(error: &serde_json::Error) -> String {
    let text = error.to_string();
    let place = format!(" at line {} column {}", error.line(), error.column());
    text.strip_suffix(&place).unwrap_or(&text).to_owned()
}

/// JSON as received: members in their order, so that a key that stands twice is seen.
enum Tree {
    Null,
    Bool(bool),
    Unsigned(u64),
    Signed(i64),
    Double(f64),
    Text(String),
    Array(Vec<Tree>),
    Object(Vec<(String, Tree)>),
}

impl Serialize for Tree {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        match self {
            Self::Null => serializer.serialize_unit(),
            Self::Bool(value) => serializer.serialize_bool(*value),
            Self::Unsigned(value) => serializer.serialize_u64(*value),
            Self::Signed(value) => serializer.serialize_i64(*value),
            Self::Double(value) => serializer.serialize_f64(*value),
            Self::Text(value) => serializer.serialize_str(value),
            Self::Array(items) => serializer.collect_seq(items),
            Self::Object(members) => serializer.collect_map(members.iter().map(|(key, value)| (key, value))),
        }
    }
}

impl<'de> Deserialize<'de> for Tree {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserializer.deserialize_any(TreeVisitor)
    }
}

struct TreeVisitor;

impl<'de> Visitor<'de> for TreeVisitor {
    type Value = Tree;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("JSON")
    }

    fn visit_unit<E>(self) -> Result<Tree, E> {
        Ok(Tree::Null)
    }

    fn visit_bool<E>(self, value: bool) -> Result<Tree, E> {
        Ok(Tree::Bool(value))
    }

    fn visit_u64<E>(self, value: u64) -> Result<Tree, E> {
        Ok(Tree::Unsigned(value))
    }

    fn visit_i64<E>(self, value: i64) -> Result<Tree, E> {
        Ok(Tree::Signed(value))
    }

    fn visit_f64<E>(self, value: f64) -> Result<Tree, E> {
        Ok(Tree::Double(value))
    }

    fn visit_str<E>(self, value: &str) -> Result<Tree, E> {
        Ok(Tree::Text(value.to_owned()))
    }

    fn visit_string<E>(self, value: String) -> Result<Tree, E> {
        Ok(Tree::Text(value))
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut items: A) -> Result<Tree, A::Error> {
        let mut array = Vec::new();
        while let Some(item) = items.next_element()? {
            array.push(item);
        }
        Ok(Tree::Array(array))
    }

    fn visit_map<A: MapAccess<'de>>(self, mut members: A) -> Result<Tree, A::Error> {
        let mut object: Vec<(String, Tree)> = Vec::new();
        let mut seen = std::collections::BTreeSet::new();
        while let Some(key) = members.next_key::<String>()? {
            if !seen.insert(key.clone()) {
                return Err(A::Error::custom(key));
            }
            object.push((key, members.next_value()?));
        }
        Ok(Tree::Object(object))
    }
}
