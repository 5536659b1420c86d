//! `decisions.jsonl`: what a run decided, by which rule, on what numbers; one decision a line, each bound to the one before.
use serde::{Deserialize, Serialize};
use serde_json::Value;

use super::error::{Defect, DefectKind};
use crate::canon::chain::{Chain, LinkError};
use crate::canon::hash::Digest;
use crate::canon::json::{self, CanonError};

/// A line of `decisions.jsonl`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct DecisionEntry {
    /// From 1, without gaps.
    pub sequence: u64,
    /// The step, or what else was decided.
    pub step: String,
    /// The rule as resolved.
    pub rule: Value,
    /// Every number that the rule read.
    pub evidence: Value,
    /// What came of it.
    pub verdict: String,
    /// Its place in the chain of decisions.
    pub hash: Digest,
}

/// The decisions of a run as they are taken.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct DecisionLog {
    chain: Chain,
    taken: u64,
    bytes: Vec<u8>,
}

impl DecisionLog {
    /// No decision yet; `root` comes from [`Chain::decisions`].
    pub fn new(root: Chain) -> Self {
        Self { chain: root, taken: 0, bytes: Vec::new() }
    }

    /// Adds a decision and gives its hash.
    ///
    /// Give rule and evidence as typed values: a `serde_json::Value` has already turned NaN into null.
    ///
    /// # Errors
    /// Rule or evidence has no canonical form (a number in it is NaN or infinite).
    pub fn push<R: Serialize, E: Serialize>(&mut self, step: &str, rule: &R, evidence: &E, verdict: &str) -> Result<Digest, CanonError> {
        #[derive(Serialize)]
        struct Unhashed<'a, R, E> {
            sequence: u64,
            step: &'a str,
            rule: &'a R,
            evidence: &'a E,
            verdict: &'a str,
        }
        let sequence = self.taken + 1;
        let link = self.chain.append(&Unhashed { sequence, step, rule, evidence, verdict })?;
        self.taken = sequence;
        self.bytes.extend(link.line);
        Ok(link.hash)
    }

    /// The hash of the last decision, or the chain's root.
    pub fn head(&self) -> Digest {
        self.chain.head()
    }

    /// The file so far.
    pub fn bytes(&self) -> &[u8] {
        &self.bytes
    }
}

/// Reads `decisions.jsonl`, following its chain from `root`; also gives the chain's head.
///
/// # Errors
/// The first line that is not sound; `place` says where the file stands.
pub fn read_decisions(bytes: &[u8], root: Chain, place: &str) -> Result<(Vec<DecisionEntry>, Digest), Box<Defect>> {
    let defect = |line, kind| Box::new(Defect { place: place.to_owned(), line: Some(line), kind });
    let mut chain = root;
    let mut entries: Vec<DecisionEntry> = Vec::new();
    let found = json::read_lines(bytes);
    for line in &found.lines {
        let entry: DecisionEntry = line.read().map_err(|error| defect(line.number, DefectKind::Form(error)))?;
        let expected = entries.len() as u64 + 1;
        if entry.sequence != expected {
            let kind = DefectKind::OutOfSequence { expected, found: entry.sequence };
            return Err(defect(line.number, kind));
        }
        chain.follow(line.bytes).map_err(|error| {
            let kind = match error {
                LinkError::Form(error) => DefectKind::Form(error),
                LinkError::Hash { computed, found } => DefectKind::ChainBroken { computed, found },
            };
            defect(line.number, kind)
        })?;
        entries.push(entry);
    }
    match found.unterminated {
        Some(line) => {
            let offset = line.start + line.bytes.len();
            Err(defect(line.number, DefectKind::Form(CanonError::LineFeed { offset })))
        }
        None => Ok((entries, chain.head())),
    }
}
