//! Chains: each entry carries a hash over the hash before it and its own bytes, so that no entry can be changed, moved,
//! dropped from the middle or put in without every later hash changing.
//!
//! To check one without this program: an entry is a line of canonical JSON (RFC 8785) with a member `hash`. Take the
//! member `hash` out (for example: parse, delete it, write in canonical form again; no line feed); call the bytes left `e_k`. With `||` for
//! joining bytes, `\n` for one line feed byte, hashes as their 32 raw bytes and SHA-256 throughout:
//!
//! | chain | `h_0` | `h_k`, k from 1 |
//! |---|---|---|
//! | ledger | `SHA-256("aforesaid ledger 1\n" \|\| SHA-256 of plans/001/seal.json)` | `SHA-256("aforesaid event 1\n" \|\| h_{k-1} \|\| e_k)` |
//! | decisions | `SHA-256("aforesaid decisions 1\n" \|\| meaning hash \|\| data hash \|\| allocation hash \|\| hash of the event unblinded)` | `SHA-256("aforesaid decision 1\n" \|\| h_{k-1} \|\| e_k)` |
//!
//! The member `hash` of entry k must be `h_k` in lower-case hexadecimal. The hash of seal.json is over the whole file, its line feed included.
//! The allocation hash is 32 zero bytes where no separate allocation exists. The hash of the event `unblinded` is the member `hash` of that event in the ledger.
use std::fmt;

use serde::{Deserialize, Serialize};

use super::hash::{Digest, Hasher};
use super::json::{self, CanonError};

/// The member of an entry that holds its place in the chain.
const HASH_KEY: &str = "hash";

/// A chain up to some entry: its last hash, and what further entries are hashed with.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Chain {
    entry_prefix: &'static str,
    head: Digest,
}

/// An entry with its hash, ready to be appended.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Link {
    /// The entry's hash, now the head of the chain.
    pub hash: Digest,
    /// The entry in canonical JSON with its member `hash`, and a line feed.
    pub line: Vec<u8>,
}

/// Why a line is not the next entry of a chain.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum LinkError {
    /// The line is not canonical JSON, or no object with a hash.
    Form(CanonError),
    /// The line's hash is not what the entry before and the line's own bytes give.
    Hash {
        /// What they give.
        computed: Digest,
        /// What the line says.
        found: Digest,
    },
}

impl fmt::Display for LinkError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Form(error) => error.fmt(f),
            Self::Hash { computed, found } => {
                write!(f, "its hash is {}, but the entry before it and its own bytes give {}", found.short(), computed.short())
            }
        }
    }
}

impl std::error::Error for LinkError {}

impl Chain {
    /// The ledger's chain before its first event, from the hash of the first plan's seal.json.
    pub fn ledger(first_seal: &Digest) -> Self {
        Self { entry_prefix: "aforesaid event 1\n", head: joined("aforesaid ledger 1\n", &[first_seal.bytes()]) }
    }

    /// The chain of a run's decisions before its first: bound to the plan's meaning, the data, the separate allocation if
    /// there is one, and the event `unblinded` that went before.
    pub fn decisions(meaning: &Digest, data: &Digest, allocation: Option<&Digest>, unblinded: &Digest) -> Self {
        let allocation = allocation.unwrap_or(&Digest::ZERO);
        let parts: [&[u8]; 4] = [meaning.bytes(), data.bytes(), allocation.bytes(), unblinded.bytes()];
        Self { entry_prefix: "aforesaid decision 1\n", head: joined("aforesaid decisions 1\n", &parts) }
    }

    /// The hash of the last entry, or `h_0` if there is none.
    pub fn head(&self) -> Digest {
        self.head
    }

    /// Adds an entry, given without its hash.
    ///
    /// # Errors
    /// The entry has no canonical form, or is not an object.
    pub fn append<T: Serialize>(&mut self, entry: &T) -> Result<Link, CanonError> {
        let bytes = json::without_key(&json::to_canonical(entry)?, HASH_KEY)?;
        let hash = self.next(&bytes);
        let mut members: serde_json::Map<String, serde_json::Value> = json::from_canonical(&bytes)?;
        members.insert(HASH_KEY.to_owned(), hash.to_string().into());
        let line = json::file_bytes(&members)?;
        self.head = hash;
        Ok(Link { hash, line })
    }

    /// Follows the chain over a line received (without its line feed), and gives its hash. On an error the chain stays where it was.
    ///
    /// # Errors
    /// The line is not canonical, has no hash, or another than the chain asks for.
    pub fn follow(&mut self, line: &[u8]) -> Result<Digest, LinkError> {
        #[derive(Deserialize)]
        struct Hashed {
            hash: Digest,
        }
        let bytes = json::without_key(line, HASH_KEY).map_err(LinkError::Form)?;
        let Hashed { hash: found } = json::from_canonical(line).map_err(LinkError::Form)?;
        let computed = self.next(&bytes);
        if found != computed {
            return Err(LinkError::Hash { computed, found });
        }
        self.head = computed;
        Ok(computed)
    }

    fn next(&self, entry: &[u8]) -> Digest {
        joined(self.entry_prefix, &[self.head.bytes(), entry])
    }
}

fn joined(prefix: &str, parts: &[&[u8]]) -> Digest {
    let mut hasher = Hasher::new();
    hasher.update(prefix.as_bytes());
    parts.iter().for_each(|part| hasher.update(part));
    hasher.finish()
}
