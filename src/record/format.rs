//! The files of a study folder, format 1, as typed values: names of files, times, seals, manifests.
use std::collections::BTreeMap;
use std::fmt;

use jiff::Timestamp;
use serde::de::Error as _;
use serde::{Deserialize, Deserializer, Serialize, Serializer};

use crate::canon::hash::{Digest, sha256};
use crate::canon::json::{self, CanonError};

/// The release of this program, as it is written into seals and events.
pub const RELEASE: &str = env!("CARGO_PKG_VERSION");
/// What `seal.json` says of its own form.
pub const SEAL_FORMAT: &str = "aforesaid seal 1";
/// What `manifest.json` says of its own form.
pub const MANIFEST_FORMAT: &str = "aforesaid manifest 1";

/// The ledger's name in a study folder.
pub const LEDGER: &str = "ledger.jsonl";
/// The name of the empty file that a writing command locks.
pub const LOCK: &str = ".lock";
/// The name of a record's manifest.
pub const MANIFEST: &str = "manifest.json";
/// How the name of everything begins that is still being written.
pub const PENDING: &str = ".pending-";

/// The folder of plan `number`, from the study folder.
pub fn plan_folder(number: u32) -> String {
    format!("plans/{number:03}")
}

/// The folder of record `number`, from the study folder.
pub fn record_folder(number: u32) -> String {
    format!("records/{number:03}")
}

/// The file that keeps the data or the allocation with this hash, from the study folder.
pub fn data_file(hash: &Digest) -> String {
    format!("data/{hash}.csv")
}

/// A moment in UTC to the second, written as in RFC 3339: `2026-12-01T09:27:24Z`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct UtcTime(Timestamp);

impl UtcTime {
    /// Leaves fractions of a second out.
    pub fn new(time: Timestamp) -> Self {
        Self(Timestamp::from_second(time.as_second()).unwrap_or(time))
    }

    /// The moment.
    pub fn timestamp(&self) -> Timestamp {
        self.0
    }
}

impl fmt::Display for UtcTime {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl Serialize for UtcTime {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for UtcTime {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = String::deserialize(deserializer)?;
        let time = text.parse().map(Self::new).map_err(D::Error::custom)?;
        if time.to_string() != text {
            return Err(D::Error::custom("a time is written in UTC to the second, ending in Z"));
        }
        Ok(time)
    }
}

/// A file and what it must hold.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FileEntry {
    /// From the folder that the list stands in, with `/`.
    pub path: String,
    /// Its length in bytes.
    pub size: u64,
    /// The hash of its bytes.
    pub sha256: Digest,
}

/// `plans/NNN/seal.json`: what was sealed, when, by whom, and under which versions.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Seal {
    /// [`SEAL_FORMAT`].
    pub format: String,
    /// 1 for the first plan, then one more for each amendment.
    pub number: u32,
    /// The plan hash: of `plan.yaml`, byte for byte.
    pub sha256: Digest,
    /// The meaning hash: of `resolved.json`, the whole file with its line feed.
    pub meaning: Digest,
    /// When.
    pub sealed_at: UtcTime,
    /// The user who asked.
    pub who: String,
    /// The release of the program.
    pub release: String,
    /// The version of the plan language.
    pub language_version: u32,
    /// The version of the set of findings the plan was checked against.
    pub findings_version: u32,
    /// The version of the resolved form.
    pub resolved_version: u32,
    /// The hash of the `seal.json` that this one amends; null for the first.
    pub previous: Option<Digest>,
    /// Why the plan was amended; null for the first.
    pub reason: Option<String>,
    /// The templates in `templates/`, sorted by path; empty when the built-in ones serve.
    pub templates: Vec<FileEntry>,
}

impl Seal {
    /// Reads `seal.json`.
    ///
    /// # Errors
    /// Not canonical, or not this format.
    pub fn read(bytes: &[u8]) -> Result<Self, CanonError> {
        let seal: Self = json::from_file_bytes(bytes)?;
        check_format(&seal.format, SEAL_FORMAT)?;
        Ok(seal)
    }
}

/// `manifest.json`: every file of a record but itself.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Manifest {
    /// [`MANIFEST_FORMAT`].
    pub format: String,
    /// Sorted by path.
    pub files: Vec<FileEntry>,
}

impl Manifest {
    /// The manifest of these files.
    pub fn of(files: &BTreeMap<String, Vec<u8>>) -> Self {
        Self { format: MANIFEST_FORMAT.to_owned(), files: entries(files) }
    }

    /// Reads `manifest.json`.
    ///
    /// # Errors
    /// Not canonical, not this format, or a path that is not plain, not sorted or listed twice.
    pub fn read(bytes: &[u8]) -> Result<Self, CanonError> {
        let manifest: Self = json::from_file_bytes(bytes)?;
        check_format(&manifest.format, MANIFEST_FORMAT)?;
        check_entries(&manifest.files)?;
        Ok(manifest)
    }
}

/// The list of these files, sorted by path.
pub(super) fn entries(files: &BTreeMap<String, Vec<u8>>) -> Vec<FileEntry> {
    let entry = |(path, bytes): (&String, &Vec<u8>)| FileEntry { path: path.clone(), size: bytes.len() as u64, sha256: sha256(bytes) };
    files.iter().map(entry).collect()
}

fn check_entries(entries: &[FileEntry]) -> Result<(), CanonError> {
    let sorted = entries.windows(2).all(|pair| pair[0].path < pair[1].path);
    match entries.iter().find(|entry| !is_plain_path(&entry.path)) {
        Some(entry) => Err(shape(format!("the path {:?} is not a plain one", entry.path))),
        None if !sorted => Err(shape("files must be sorted by path, none twice".to_owned())),
        None => Ok(()),
    }
}

/// Whether a path names something inside a folder and could not lead out of it on any system.
pub(super) fn is_plain_path(path: &str) -> bool {
    path.split('/')
        .all(|part| !part.is_empty() && !part.starts_with('.') && part.chars().all(|c| !c.is_control() && !matches!(c, '\\' | ':')))
}

fn check_format(found: &str, expected: &str) -> Result<(), CanonError> {
    if found == expected {
        return Ok(());
    }
    Err(shape(format!("its format is {found:?}; this release reads {expected:?}")))
}

pub(super) fn shape(message: String) -> CanonError {
    CanonError::WrongShape { offset: 0, message }
}
