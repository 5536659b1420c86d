//! To be written.
pub mod adjust;
pub mod dist;
pub mod sizes;
