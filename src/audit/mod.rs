//! The audit: claims, each with how it was checked and what came of it. It trusts nothing but the bytes of the folder,
//! follows no link and no name found in a file, takes no lock and writes nothing.

mod again;
mod compare;
mod folder;

use crate::canon::hash::Digest;
use crate::record::error::StudyError;
use crate::record::state::StudyState;
use crate::world::World;
use serde::Serialize;
use std::path::Path;

/// What came of checking a claim.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
pub enum Outcome {
    /// It holds.
    #[serde(rename = "held")]
    Held,
    /// It does not.
    #[serde(rename = "failed")]
    Failed,
    /// The folder does not hold what it takes to check it.
    #[serde(rename = "not checkable")]
    NotCheckable,
}

impl Outcome {
    /// In words.
    pub fn in_words(self) -> &'static str {
        match self {
            Outcome::Held => "held",
            Outcome::Failed => "FAILED",
            Outcome::NotCheckable => "not checkable",
        }
    }
}

/// A claim about a study, checked.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Claim {
    /// What is claimed.
    pub claim: String,
    /// How it was checked, and what that proves.
    pub how: String,
    /// What came of it.
    pub outcome: Outcome,
    /// Where: a file or folder of the study.
    #[serde(rename = "where")]
    pub place: String,
    /// Why it failed or cannot be checked; empty where it held.
    pub why: String,
}

impl Claim {
    fn new(claim: &str, how: &str, place: &str, outcome: Outcome, why: String) -> Self {
        Claim { claim: claim.to_owned(), how: how.to_owned(), outcome, place: place.to_owned(), why }
    }

    /// Held where there is no reason against it.
    fn unless(claim: &str, how: &str, place: &str, against: Option<String>) -> Self {
        let outcome = if against.is_some() { Outcome::Failed } else { Outcome::Held };
        Claim::new(claim, how, place, outcome, against.unwrap_or_default())
    }
}

/// The audit of a study.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Audit {
    /// Failed where a claim failed, else held.
    pub outcome: Outcome,
    /// The claims, in the order checked.
    pub claims: Vec<Claim>,
    /// What a killed command left, and what no audit of a folder alone can show.
    pub notes: Vec<String>,
    /// The ledger's head as found.
    pub head: Digest,
}

/// Audits a study folder. `expected_head` is the ledger's head as someone outside holds it.
///
/// # Errors
/// The path is no study folder, or it cannot be read.
pub fn audit(world: &dyn World, root: &Path, expected_head: Option<&Digest>) -> Result<Audit, StudyError> {
    let state = StudyState::read(world, root)?;
    let mut claims = folder::claims(world, root, &state)?;
    claims.extend(again::claims(world, root, &state)?);
    claims.push(match expected_head {
        None => Claim::new(
            "no final event was cut off",
            "needs the ledger's head as someone outside holds it",
            "ledger.jsonl",
            Outcome::NotCheckable,
            "give that hash with --expect-head".to_owned(),
        ),
        Some(expected) => Claim::unless(
            "no final event was cut off",
            "the ledger's head is compared with the one given",
            "ledger.jsonl",
            (!reaches(&state, expected))
                .then(|| format!("no event of the ledger has the hash {expected}; its head is {}", state.ledger.head)),
        ),
    });
    let mut notes: Vec<String> =
        state.unfinished.iter().map(|left| format!("unfinished, not broken: {left}; the next command that writes clears it")).collect();
    notes.push(
        "Executing again repeats the same program: it shows that the record follows from plan and data, not that the program is right. A hash proves that nothing changed since \
         someone outside came to hold it, not when it was made; and nobody can exclude runs on a copy."
            .to_owned(),
    );
    let failed = claims.iter().any(|claim| claim.outcome == Outcome::Failed);
    Ok(Audit { outcome: if failed { Outcome::Failed } else { Outcome::Held }, claims, notes, head: state.ledger.head })
}

/// Whether the ledger still holds the event whose hash someone outside knows.
fn reaches(state: &StudyState, expected: &Digest) -> bool {
    state.ledger.events.iter().any(|event| event.hash == *expected) || state.ledger.head == *expected
}
