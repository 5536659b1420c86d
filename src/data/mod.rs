//! Tables, CSV, the contract between plan and data, content hash.
//!
//! A file is read once, from front to back: [`read::read_data`] keeps values, not text, so that memory grows with the
//! subjects and not with the rows. Blocks of bytes (`blocks`) are cut into rows (`rows`), rows are held to what the plan
//! says of their columns (`schema`, `cells`), and what is wrong is collected (`problems`).

pub mod allocation;
pub mod bind;
pub mod blind;
mod blocks;
mod cells;
mod content;
mod further;
pub mod number;
mod problems;
mod quick;
pub mod read;
mod rows;
mod schema;
pub mod table;
pub mod trial;
