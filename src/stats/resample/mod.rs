//! Inference by dealing again and by drawing again: randomisation tests, their joint form for families, and the BCa
//! bootstrap.
//!
//! Everything random comes from [`Stream`]s numbered by blocks of work, so that results depend on the key alone: not on the
//! machine, not on the number of threads.

mod bca;
mod bootstrap;
mod deals;
mod engine;
mod freedman_lane;
mod joint;
mod random;
mod randomisation;
mod refusal;
mod statistic;
mod sums;

pub use bca::{BcaInterval, Replicates};
pub use bootstrap::{ArmMoments, ArmRows, OfMoments, OfRows, Resamples, Spread, bca_of_moments, bca_of_rows};
pub use deals::{Listing, Scheme, Shuffle};
pub use freedman_lane::{AdjustedData, freedman_lane};
pub use joint::{JointTest, Scale, WestfallYoung, westfall_young};
pub use random::Stream;
pub use randomisation::{Deals, DealtData, Question, RandomisationTest, Side, Statistic, randomisation};
pub use refusal::Refusal;
