//! Effect sizes and their intervals.

mod change_difference;
mod eta_squared;
mod hedges;
mod omega_squared;
mod robust;
mod shares;
mod standardized_change;
mod standardized_difference;
mod superiority;

use std::fmt;

use super::dist::DistributionError;

pub use change_difference::{ChangeDifference, TwoChanges, change_difference, change_difference_interval};
pub use eta_squared::{EffectSum, generalized_eta_squared, partial_eta_squared, partial_eta_squared_interval};
pub use hedges::{hedges_j_approximate, hedges_j_exact};
pub use omega_squared::{OMEGA_SQUARED_FORMULA, omega_squared, omega_squared_interval};
pub use robust::{Trimmed, robust_change, robust_difference, trimmed};
pub use shares::{ReliableChange, Share, difference_of_shares, reaches, reliable_change};
pub use standardized_change::{
    ChangeInterval, IntervalMethod, PairedSummary, Standardizer, change_interval, standardized_change, standardizer_value,
};
pub use standardized_difference::{
    GroupInterval, GroupStandardizer, GroupSummary, StandardizedDifference, standardized_difference, standardized_difference_interval,
};
pub use superiority::{Superiority, superiority, superiority_of_change};

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
