//! Distribution functions, every tail computed as a tail.
//!
//! All functions take plain `f64`s and answer a finite number or a
//! [`DistributionError`]; none answers NaN. Degrees of freedom may be
//! fractional, as after an epsilon correction. A tail below about 1e-308
//! underflows to 0: [`Tail::reported`] turns it into a bound before it reaches
//! a report. Elementary functions come from `libm`, so that the bits do not
//! depend on the processor.
//!
//! The general library at hand, `statrs` 0.19, serves the tests as a second
//! opinion only. On the reference values of `tests/reference_distributions.rs`
//! its relative errors are: normal tail 9e-11; t tail 9e-9, and 0 once t squared
//! overflows; F tail 5e-9 at p = 1e-30 and 8e-4 at F(1e6, 1e6) = 1.0001;
//! chi-squared tail 3e-10 at 1e6 df; t quantile 6e-5 at 1e6 df and wrong
//! altogether at p = 1e-12, 1 df. Its logarithms follow the processor.

pub mod beta;
pub mod chi_squared;
pub mod fisher;
pub mod gamma;
pub mod multivariate_t;
pub mod noncentral_f;
pub mod noncentral_t;
pub mod normal;
pub mod student;
pub mod studentized_range;

mod root;
mod scale;

use std::fmt;

/// The smallest p-value that is printed as a number; below it only the bound is.
pub const SMALLEST_REPORTED_P: f64 = 1e-300;

/// Why a distribution function has no value to give.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum DistributionError {
    /// An argument lies outside the function's domain.
    OutOfDomain {
        /// The distribution, in words.
        distribution: &'static str,
        /// The argument, in words.
        argument: &'static str,
        /// What was given.
        value: f64,
        /// What would have been accepted.
        expected: &'static str,
    },
    /// The arguments are legal, but the value is out of this method's reach.
    OutOfReach {
        /// The distribution, in words.
        distribution: &'static str,
        /// What stands in the way.
        reason: &'static str,
    },
}

impl fmt::Display for DistributionError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::OutOfDomain { distribution, argument, value, expected } => {
                write!(f, "{distribution} distribution: {argument} is {value}, but it must be {expected}")
            }
            Self::OutOfReach { distribution, reason } => {
                write!(f, "{distribution} distribution: {reason}")
            }
        }
    }
}

impl std::error::Error for DistributionError {}

/// A p-value as it may be reported.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tail {
    /// The probability, or [`SMALLEST_REPORTED_P`] where it is smaller.
    pub p: f64,
    /// True where `p` is only an upper bound of the probability.
    pub bound: bool,
}

impl Tail {
    /// The reportable form of a probability: below 1e-300 it becomes the bound 1e-300.
    ///
    /// ```
    /// use aforesaid::stats::dist::Tail;
    /// assert_eq!(Tail::reported(0.03), Tail { p: 0.03, bound: false });
    /// assert_eq!(Tail::reported(0.0), Tail { p: 1e-300, bound: true });
    /// ```
    pub fn reported(p: f64) -> Self {
        if p < SMALLEST_REPORTED_P { Self { p: SMALLEST_REPORTED_P, bound: true } } else { Self { p, bound: false } }
    }
}

/// Names the distribution once and checks its arguments.
#[derive(Clone, Copy)]
pub(crate) struct Domain(pub(crate) &'static str);

impl Domain {
    pub(crate) fn finite(self, argument: &'static str, value: f64) -> Result<(), DistributionError> {
        self.holds(value.is_finite(), argument, value, "a finite number")
    }

    pub(crate) fn positive(self, argument: &'static str, value: f64) -> Result<(), DistributionError> {
        self.holds(value.is_finite() && value > 0.0, argument, value, "finite and above 0")
    }

    pub(crate) fn not_negative(self, argument: &'static str, value: f64) -> Result<(), DistributionError> {
        self.holds(value.is_finite() && value >= 0.0, argument, value, "finite and not below 0")
    }

    pub(crate) fn probability(self, argument: &'static str, value: f64) -> Result<(), DistributionError> {
        self.holds(value > 0.0 && value < 1.0, argument, value, "between 0 and 1, both excluded")
    }

    pub(crate) fn out_of_reach(self, reason: &'static str) -> DistributionError {
        DistributionError::OutOfReach { distribution: self.0, reason }
    }

    pub(crate) fn holds(self, holds: bool, argument: &'static str, value: f64, expected: &'static str) -> Result<(), DistributionError> {
        if holds { Ok(()) } else { Err(DistributionError::OutOfDomain { distribution: self.0, argument, value, expected }) }
    }
}
