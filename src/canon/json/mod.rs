//! JSON in the one form of RFC 8785: no white space, keys sorted by their UTF-16 code units, numbers as ECMAScript
//! writes them, UTF-8.
//!
//! A reader here accepts nothing but that form, so that an inserted space, `1e-1` for `0.1`, a reordered or a doubled key is
//! found, and the hash of the bytes received is the hash of what they say.
//!
//! Whole numbers beyond 2^53 are written only if a double holds them exactly as ECMAScript would write it; others are an
//! error, never rounded.
mod read;
mod write;

use std::fmt;

pub use read::{Line, Lines, from_canonical, from_file_bytes, read_lines, without_key};
pub use write::{file_bytes, to_canonical};

/// Arrays and objects may stand in each other this deep, not deeper.
pub const MAX_DEPTH: usize = 127;

/// Why something cannot be written in, or is not, canonical JSON. Offsets count bytes from 0.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum CanonError {
    /// A number to be written is NaN or infinite.
    NotFinite,
    /// A whole number to be written has no exact form among doubles.
    WholeNumberTooLarge(String),
    /// The key of an object to be written is neither text nor a whole number.
    KeyNotText,
    /// What was to be written said so itself.
    Unwritable(String),
    /// A key stands twice in one object; `offset` is known when reading.
    KeyTwice {
        /// The key.
        key: String,
        /// The last byte of its second appearance.
        offset: Option<usize>,
    },
    /// Arrays and objects nested deeper than [`MAX_DEPTH`].
    TooDeep {
        /// The bracket that is one too many, when reading.
        offset: Option<usize>,
    },
    /// Not JSON at all.
    NotJson {
        /// Where reading stopped.
        offset: usize,
        /// What was wrong there.
        message: String,
    },
    /// JSON, but not the canonical form of what it says.
    NotCanonical {
        /// The first byte that differs.
        offset: usize,
    },
    /// The line feed that ends a file or a line is missing, or there is more after it.
    LineFeed {
        /// Where it was expected.
        offset: usize,
    },
    /// Canonical JSON, but not of the shape expected.
    WrongShape {
        /// Where reading stopped.
        offset: usize,
        /// What was expected.
        message: String,
    },
}

impl CanonError {
    /// The byte at which reading found the error, if it came from reading.
    pub fn offset(&self) -> Option<usize> {
        match self {
            Self::KeyTwice { offset, .. } | Self::TooDeep { offset } => *offset,
            Self::NotJson { offset, .. } | Self::NotCanonical { offset } | Self::LineFeed { offset } | Self::WrongShape { offset, .. } => {
                Some(*offset)
            }
            _ => None,
        }
    }

    /// The same error in a text of which what was read begins at byte `start`.
    fn moved(mut self, start: usize) -> Self {
        match &mut self {
            Self::KeyTwice { offset: Some(offset), .. }
            | Self::TooDeep { offset: Some(offset) }
            | Self::NotJson { offset, .. }
            | Self::NotCanonical { offset }
            | Self::LineFeed { offset }
            | Self::WrongShape { offset, .. } => *offset += start,
            _ => {}
        }
        self
    }
}

impl fmt::Display for CanonError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NotFinite => write!(f, "a number that is NaN or infinite has no form in JSON"),
            Self::WholeNumberTooLarge(number) => {
                write!(f, "the whole number {number} is too large to be written exactly")
            }
            Self::KeyNotText => write!(f, "the key of an object must be text"),
            Self::Unwritable(message) => f.write_str(message),
            Self::KeyTwice { key, .. } => write!(f, "the key {key:?} stands twice in one object"),
            Self::TooDeep { .. } => write!(f, "nested deeper than {MAX_DEPTH} levels"),
            Self::NotJson { message, .. } => write!(f, "not JSON: {message}"),
            Self::NotCanonical { .. } => {
                write!(f, "not the canonical form (RFC 8785) of what it says")
            }
            Self::LineFeed { .. } => write!(f, "exactly one line feed must end it"),
            Self::WrongShape { message, .. } => f.write_str(message),
        }?;
        match self.offset() {
            Some(offset) => write!(f, " (byte {offset})"),
            None => Ok(()),
        }
    }
}

impl std::error::Error for CanonError {}

impl serde::ser::Error for CanonError {
    fn custom<T: fmt::Display>(message: T) -> Self {
        Self::Unwritable(message.to_string())
    }
}
