//! Bytes and nothing else: canonical JSON, SHA-256, and the chains that bind one entry to the next.
//!
//! Everything that Aforesaid hashes goes through here, and an independent verifier needs only what these pages say.
pub mod chain;
pub mod hash;
pub mod json;
pub mod number;
