//! Statistics: knows nothing of plans, files or reports.

pub mod adjust;
pub mod dist;
pub mod hypothesis;
pub mod linear;
pub mod model;
pub mod resample;
pub mod sizes;
