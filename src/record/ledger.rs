//! The ledger: what happened to a study, one event a line, each bound to the one before.
use serde::{Deserialize, Serialize};

use super::error::{Defect, DefectKind};
use super::format::{LEDGER, UtcTime, shape};
use crate::canon::chain::{Chain, LinkError};
use crate::canon::hash::Digest;
use crate::canon::json::{self, CanonError, Line};

/// A line of `ledger.jsonl`. The fields of [`Happening`] stand beside these, under its `kind`.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Event {
    /// From 1, without gaps.
    pub sequence: u64,
    /// When.
    pub time: UtcTime,
    /// The user who asked.
    pub who: String,
    /// The release of the program.
    pub release: String,
    /// What happened.
    #[serde(flatten)]
    pub what: Happening,
    /// Its place in the ledger's chain.
    pub hash: Digest,
}

/// What a run opens that tells arms.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Opens {
    /// The separate file that says who had which arm.
    Allocation,
    /// The data, which hold the arms themselves.
    Data,
}

/// What happened, with what must be known of it.
///
/// `unblinded` holds no hash of what is about to be opened: it is on the disk before the first byte of that is read, and a list of
/// blocks is short enough to be guessed from its hash. The hashes of data, allocation and content stand in `run`. For the
/// same reason `data checked` has a null `data` when the data hold the arms.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(tag = "kind")]
pub enum Happening {
    /// The first plan was sealed.
    #[serde(rename = "sealed")]
    Sealed {
        /// The plan's number: 1.
        plan: u32,
        /// The hash of `seal.json`, the whole file; the root of this chain.
        seal: Digest,
        /// The plan hash.
        sha256: Digest,
        /// The meaning hash.
        meaning: Digest,
    },
    /// Data were checked against the plan without any outcome by arm.
    #[serde(rename = "data checked")]
    DataChecked {
        /// The data hash; null if the data hold the arms.
        data: Option<Digest>,
    },
    /// The whole run was rehearsed on arms dealt at random.
    #[serde(rename = "rehearsed")]
    Rehearsed {
        /// Its folder's number in `rehearsals/`.
        rehearsal: u32,
        /// The hash of its manifest.
        manifest: Digest,
    },
    /// The arms are about to be opened.
    #[serde(rename = "unblinded")]
    Unblinded {
        /// The plan in force.
        plan: u32,
        /// What will be opened.
        opens: Opens,
    },
    /// A run was committed.
    #[serde(rename = "run")]
    Run {
        /// Its folder's number in `records/`.
        record: u32,
        /// The plan that it executed.
        plan: u32,
        /// The hash of the event `unblinded` that it belongs to.
        unblinded: Digest,
        /// The data hash.
        data: Digest,
        /// The content hash.
        content: Digest,
        /// The hash of the separate allocation; null if there is none.
        allocation: Option<Digest>,
        /// Whether data and allocation are kept in `data/`.
        copied: bool,
        /// The last hash of the chain of decisions.
        decisions: Digest,
        /// The hash of the record's `manifest.json`.
        manifest: Digest,
    },
    /// A run is about to be done again on corrected data.
    #[serde(rename = "corrected")]
    Corrected {
        /// The record that is corrected.
        record: u32,
        /// Why.
        why: String,
    },
    /// A changed plan was sealed on top of the one before.
    #[serde(rename = "amended")]
    Amended {
        /// The new plan's number.
        plan: u32,
        /// The hash of its `seal.json`.
        seal: Digest,
        /// Its plan hash.
        sha256: Digest,
        /// Its meaning hash.
        meaning: Digest,
        /// Why.
        why: String,
    },
    /// An outside party put a time to a ledger head.
    #[serde(rename = "anchored")]
    Anchored {
        /// The file's name in `anchors/`.
        file: String,
        /// The hash of that file.
        sha256: Digest,
        /// The ledger head that was put a time to.
        head: Digest,
    },
    /// Someone signed a ledger head.
    #[serde(rename = "signed")]
    Signed {
        /// The file's name in `signatures/`.
        file: String,
        /// The hash of that file.
        sha256: Digest,
        /// The ledger head that was signed.
        head: Digest,
    },
    /// A command ended before its commit, and what it left was cleared.
    #[serde(rename = "interrupted")]
    Interrupted {
        /// What was cleared, from the study folder, sorted.
        cleared: Vec<String>,
        /// The hash of the event `unblinded` that no run followed; null if there was none.
        unblinded: Option<Digest>,
        /// Why, where the command itself could say.
        why: Option<String>,
    },
}

impl Happening {
    /// Its `kind` in the ledger.
    pub fn kind(&self) -> &'static str {
        match self {
            Self::Sealed { .. } => "sealed",
            Self::DataChecked { .. } => "data checked",
            Self::Rehearsed { .. } => "rehearsed",
            Self::Unblinded { .. } => "unblinded",
            Self::Run { .. } => "run",
            Self::Corrected { .. } => "corrected",
            Self::Amended { .. } => "amended",
            Self::Anchored { .. } => "anchored",
            Self::Signed { .. } => "signed",
            Self::Interrupted { .. } => "interrupted",
        }
    }
}

/// The ledger as far as it is sound.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Ledger {
    /// Its events up to the first defect.
    pub events: Vec<Event>,
    /// The hash of the last of them, or the chain's root.
    pub head: Digest,
    /// The bytes of all lines that a line feed ends.
    pub(super) length: u64,
    /// Whether bytes follow the last line feed: a line that was not written to its end.
    pub unterminated: bool,
    /// The chain after the last sound event.
    pub(super) chain: Chain,
}

impl Ledger {
    /// Reads `ledger.jsonl`, following its chain from the root that its first event names. That this root is the hash of the first
    /// `seal.json` is for the caller to compare.
    ///
    /// Stops at the first line that is not sound.
    pub fn read(bytes: &[u8]) -> (Self, Option<Defect>) {
        let found = json::read_lines(bytes);
        let mut ledger = Self {
            events: Vec::new(),
            head: Digest::ZERO,
            length: (bytes.len() - found.unterminated.map_or(0, |line| line.bytes.len())) as u64,
            unterminated: found.unterminated.is_some(),
            chain: Chain::ledger(&Digest::ZERO),
        };
        if found.lines.is_empty() {
            let kind = DefectKind::Contradiction("it holds no event".to_owned());
            return (ledger, Some(Defect { place: LEDGER.to_owned(), line: None, kind }));
        }
        for line in &found.lines {
            if let Err(kind) = ledger.take(line) {
                let defect = Defect { place: LEDGER.to_owned(), line: Some(line.number), kind };
                return (ledger, Some(defect));
            }
        }
        (ledger, None)
    }

    fn take(&mut self, line: &Line<'_>) -> Result<(), DefectKind> {
        let event: Event = line.read().map_err(DefectKind::Form)?;
        // A key that no field takes would be dropped in silence where fields are flattened.
        let again = json::to_canonical(&event).map_err(DefectKind::Form)?;
        if again != line.bytes {
            let message = format!("it holds keys that an event `{}` has not", event.what.kind());
            return Err(DefectKind::Form(shape(message)));
        }
        let expected = self.events.len() as u64 + 1;
        if event.sequence != expected {
            return Err(DefectKind::OutOfSequence { expected, found: event.sequence });
        }
        match (&event.what, expected) {
            (Happening::Sealed { seal, .. }, 1) => self.chain = Chain::ledger(seal),
            (_, 1) => {
                return Err(DefectKind::Contradiction("a ledger begins with `sealed`".to_owned()));
            }
            _ => {}
        }
        self.head = self.chain.follow(line.bytes).map_err(|error| match error {
            LinkError::Form(error) => DefectKind::Form(error),
            LinkError::Hash { computed, found } => DefectKind::ChainBroken { computed, found },
        })?;
        self.events.push(event);
        Ok(())
    }

    /// The event that would follow, and its line.
    pub(super) fn next(&self, time: UtcTime, who: String, what: Happening) -> Result<(Event, Vec<u8>), CanonError> {
        let mut event = Event {
            sequence: self.events.len() as u64 + 1,
            time,
            who,
            release: super::format::RELEASE.to_owned(),
            what,
            hash: Digest::ZERO,
        };
        let link = self.chain.clone().append(&event)?;
        event.hash = link.hash;
        Ok((event, link.line))
    }

    /// Takes in an event whose line is on the disk.
    pub(super) fn push(&mut self, event: Event, line: &[u8]) -> Result<(), LinkError> {
        self.head = self.chain.follow(line.strip_suffix(b"\n").unwrap_or(line))?;
        self.length += line.len() as u64;
        self.events.push(event);
        Ok(())
    }

    /// The last `unblinded` that neither a run nor an `interrupted` followed.
    pub fn open_unblinding(&self) -> Option<&Event> {
        let last = self
            .events
            .iter()
            .rev()
            .find(|event| matches!(event.what, Happening::Unblinded { .. } | Happening::Run { .. } | Happening::Interrupted { .. }))?;
        matches!(last.what, Happening::Unblinded { .. }).then_some(last)
    }
}
