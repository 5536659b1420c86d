//! What can be wrong with a study folder, and what can go wrong while writing to it.
use std::fmt;
use std::io;
use std::path::Path;

use crate::canon::hash::Digest;
use crate::canon::json::CanonError;

/// Something in a study folder that is not as it was written.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Defect {
    /// The file or folder, from the study folder, with `/`.
    pub place: String,
    /// The line, from 1, in a file of lines.
    pub line: Option<usize>,
    /// What is wrong.
    pub kind: DefectKind,
}

/// What is wrong at the place of a [`Defect`].
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum DefectKind {
    /// Not canonical JSON, or not of the shape that the format has.
    Form(CanonError),
    /// It should be there and is not.
    Missing,
    /// It is there, but neither the ledger nor a manifest lists it.
    Unlisted,
    /// It is a symbolic link; a study folder holds none, and none is followed.
    IsLink,
    /// It is not a regular file.
    NotAFile,
    /// It is not a folder.
    NotAFolder,
    /// Larger than such a file can be.
    TooLarge,
    /// A name in this folder is not UTF-8.
    NameNotText,
    /// Its bytes are not those whose hash was written down.
    HashDiffers {
        /// The hash written down, and where.
        expected: Digest,
        /// The hash of the bytes found.
        found: Digest,
        /// Where the expected hash stands.
        written_in: &'static str,
    },
    /// Its length is not the one written down in its manifest.
    SizeDiffers {
        /// Bytes, as the manifest says.
        expected: u64,
        /// Bytes found.
        found: u64,
    },
    /// A line of a chain whose number does not follow the line before.
    OutOfSequence {
        /// The number that is due.
        expected: u64,
        /// The number that stands there.
        found: u64,
    },
    /// A line of a chain whose hash does not follow from the line before and its own bytes.
    ChainBroken {
        /// What they give.
        computed: Digest,
        /// What the line says.
        found: Digest,
    },
    /// A sound entry that contradicts what else the folder holds.
    Contradiction(String),
}

impl fmt::Display for Defect {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        // A name found in the folder may hold anything, also what a terminal would obey.
        write!(f, "{}", self.place.escape_debug())?;
        if let Some(line) = self.line {
            write!(f, ", line {line}")?;
        }
        write!(f, ": ")?;
        match &self.kind {
            DefectKind::Form(error) => error.fmt(f),
            DefectKind::Missing => f.write_str("it is missing"),
            DefectKind::Unlisted => f.write_str("it is there, but nothing in the ledger or a manifest lists it"),
            DefectKind::IsLink => f.write_str("it is a symbolic link; a study folder holds none, and none is followed"),
            DefectKind::NotAFile => f.write_str("it is not a regular file"),
            DefectKind::NotAFolder => f.write_str("it is not a folder"),
            DefectKind::TooLarge => f.write_str("it is larger than such a file can be"),
            DefectKind::NameNotText => f.write_str("it holds a name that is not UTF-8"),
            DefectKind::HashDiffers { expected, found, written_in } => {
                write!(f, "its hash is {}, but {written_in} has {}: it is not the file that was written", found.short(), expected.short())
            }
            DefectKind::SizeDiffers { expected, found } => {
                write!(f, "it has {found} bytes, but was written with {expected}")
            }
            DefectKind::OutOfSequence { expected, found } => {
                write!(f, "number {expected} is due here, but number {found} stands: lines were moved, dropped or doubled")
            }
            DefectKind::ChainBroken { computed, found } => write!(
                f,
                "its hash is {}, but the line before it and its own bytes give {}: one of the two was changed",
                found.short(),
                computed.short()
            ),
            DefectKind::Contradiction(what) => f.write_str(what),
        }
    }
}

impl std::error::Error for Defect {}

/// Why an operation on a study folder was not done.
#[derive(Debug)]
pub enum StudyError {
    /// The folder is not as it was written.
    Broken(Box<Defect>),
    /// What was asked for cannot be done with this folder; nothing was written.
    Refused {
        /// The folder or file.
        place: String,
        /// What is in the way.
        why: String,
        /// What to do about it.
        remedy: String,
    },
    /// The machine failed: disk full, no permission, and the like.
    Machine {
        /// What was being done, as in "write".
        doing: &'static str,
        /// The file or folder.
        place: String,
        /// What the operating system said.
        source: io::Error,
    },
    /// Another command holds the folder.
    Held {
        /// The folder.
        place: String,
    },
}

impl StudyError {
    /// The exit status that this error asks for: 1 if the folder is at fault, 3 if the machine.
    pub fn exit_status(&self) -> u8 {
        match self {
            Self::Broken(_) | Self::Refused { .. } => 1,
            Self::Machine { .. } | Self::Held { .. } => 3,
        }
    }

    /// Wraps what the operating system said.
    pub(super) fn machine(doing: &'static str, path: &Path) -> impl FnOnce(io::Error) -> Self {
        let place = path.display().to_string();
        move |source| Self::Machine { doing, place, source }
    }

    pub(super) fn refused(path: &Path, why: impl Into<String>, remedy: impl Into<String>) -> Self {
        Self::Refused { place: path.display().to_string(), why: why.into(), remedy: remedy.into() }
    }
}

impl From<Defect> for StudyError {
    fn from(defect: Defect) -> Self {
        Self::Broken(Box::new(defect))
    }
}

impl fmt::Display for StudyError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Broken(defect) => write!(
                f,
                "the study folder is not as it was written. {defect}. Nothing was done; `audit` lists all that is wrong, and a copy kept elsewhere can be put back"
            ),
            Self::Refused { place, why, remedy } => write!(f, "{place}: {why}. {remedy}"),
            Self::Machine { doing, place, source } => {
                write!(f, "could not {doing} {place}: {source}. {}", machine_remedy(source.kind()))
            }
            Self::Held { place } => {
                write!(f, "{place} is held by another command that is writing to it. Wait until it has ended and try again")
            }
        }
    }
}

fn machine_remedy(kind: io::ErrorKind) -> &'static str {
    match kind {
        io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => "Make room on that disk and try again",
        io::ErrorKind::PermissionDenied | io::ErrorKind::ReadOnlyFilesystem => {
            "Give yourself permission there, or use another folder, and try again"
        }
        io::ErrorKind::NotFound => "Check the path and try again",
        _ => "Try again when that is mended",
    }
}

impl std::error::Error for StudyError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::Machine { source, .. } => Some(source),
            Self::Broken(defect) => Some(defect),
            _ => None,
        }
    }
}
