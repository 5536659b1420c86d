//! Effect sizes and their intervals.

mod eta_squared;
mod hedges;
mod standardized_change;

use std::fmt;

use super::dist::DistributionError;

pub use eta_squared::{EffectSum, generalized_eta_squared, partial_eta_squared, partial_eta_squared_interval};
pub use hedges::{hedges_j_approximate, hedges_j_exact};
pub use standardized_change::{
    ChangeInterval, IntervalMethod, PairedSummary, Standardizer, change_interval, standardized_change, standardizer_value,
};

/// Why an effect size or its interval is not given, in words for the reader of a report.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Refusal {
    /// What is missing or does not fit, and what to do about it.
    pub reason: String,
}

impl Refusal {
    fn new(reason: impl Into<String>) -> Self {
        Self { reason: reason.into() }
    }
}

impl fmt::Display for Refusal {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.reason)
    }
}

impl std::error::Error for Refusal {}

impl From<DistributionError> for Refusal {
    fn from(error: DistributionError) -> Self {
        Self::new(error.to_string())
    }
}
