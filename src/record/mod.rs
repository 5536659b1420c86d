//! The study folder, format 1: plans, data, records and the ledger; how they are written so that a killed command leaves
//! nothing half-done, and how they are read trusting nothing but bytes.
//!
//! A writing command goes through [`study::Study`], which holds the folder's lock. [`state::StudyState`] reads without a lock and writes nothing.
//! The order of a run is in the types: [`study::Study::log_unblinded`] puts the event on the disk and gives the
//! [`run::Unblinded`] that alone can commit a record.
pub mod decisions;
pub mod error;
pub mod format;
pub mod ledger;
pub mod run;
pub mod state;
pub mod study;
mod verify;
