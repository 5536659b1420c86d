//! Executes a sealed plan on the data bound to it, step by step.
//!
//! A plan is lowered once to a [`lower::Program`]: names become numbers, hypotheses become matrices. The
//! [`machine::Bound`] program then walks the steps in plan order; every decision is shown to a
//! [`crate::results::decision::Witness`] as it is taken. Nothing here touches a file.

mod conclude;
pub mod condition;
mod deals;
mod family;
mod largest_t;
pub mod lower;
pub mod machine;
mod multiplicity;
mod steps;
pub mod verdict;
mod words;
