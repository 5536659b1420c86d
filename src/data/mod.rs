//! Tables, CSV, the contract between plan and data, content hash.

pub mod trial;
