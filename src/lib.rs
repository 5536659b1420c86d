//! Aforesaid: the follow-up of an arm-by-occasion interaction, fixed before unblinding.
pub mod audit;
pub mod canon;
pub mod cli;
pub mod conduct;
pub mod data;
pub mod execute;
pub mod plan;
pub mod record;
pub mod report;
pub mod results;
pub mod stats;
pub mod text;
pub mod world;
