//! The standardized difference of two independent groups: second mean minus first.

use super::Refusal;
use crate::stats::dist::{noncentral_t, normal};

/// Size, mean and standard deviation (divisor n - 1) of a group.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GroupSummary {
    /// Subjects.
    pub n: usize,
    /// Mean.
    pub mean: f64,
    /// Standard deviation.
    pub sd: f64,
}

/// What a difference of means is divided by.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum GroupStandardizer {
    /// Pooled over the two groups.
    PooledSd,
    /// That of the first group (Glass 1976).
    ReferenceSd,
    /// Root of the mean of the two variances (Bonett 2008).
    RootMeanSquareSd,
}

impl GroupStandardizer {
    /// The name that plans and reports use.
    pub fn name(self) -> &'static str {
        match self {
            Self::PooledSd => "pooled sd",
            Self::ReferenceSd => "reference sd",
            Self::RootMeanSquareSd => "root mean square sd",
        }
    }

    /// Df of the standard deviation, by which Hedges' J is taken: n1 + n2 - 2, or n1 - 1 for the first group's own.
    pub fn df(self, first: &GroupSummary, second: &GroupSummary) -> f64 {
        match self {
            Self::ReferenceSd => first.n as f64 - 1.0,
            Self::PooledSd | Self::RootMeanSquareSd => (first.n + second.n) as f64 - 2.0,
        }
    }
}

/// How the interval is formed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum GroupInterval {
    /// The noncentral t inverted: exact for the pooled standard deviation (Cumming & Finch 2001).
    NoncentralT,
    /// d -+ z times Bonett's standard error, for the other two (Bonett 2008).
    Bonett,
}

/// A standardized difference and its interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StandardizedDifference {
    /// Standard deviation by which it was divided.
    pub standardizer: f64,
    /// Difference over the standardizer, not corrected for bias.
    pub d: f64,
}

/// d of two groups.
///
/// # Errors
/// A group of fewer than two subjects; a standardizer of 0.
pub fn standardized_difference(
    first: &GroupSummary,
    second: &GroupSummary,
    difference: f64,
    standardizer: GroupStandardizer,
) -> Result<StandardizedDifference, Refusal> {
    if first.n < 2 || second.n < 2 {
        return Err(Refusal::new("a standardized difference needs two subjects at least in each arm"));
    }
    let (v1, v2) = (first.sd * first.sd, second.sd * second.sd);
    let value = match standardizer {
        GroupStandardizer::PooledSd => {
            let (df1, df2) = (first.n as f64 - 1.0, second.n as f64 - 1.0);
            ((df1 * v1 + df2 * v2) / (df1 + df2)).sqrt()
        }
        GroupStandardizer::ReferenceSd => first.sd,
        GroupStandardizer::RootMeanSquareSd => (0.5 * (v1 + v2)).sqrt(),
    };
    let d = difference / value;
    if value > 0.0 && d.is_finite() {
        Ok(StandardizedDifference { standardizer: value, d })
    } else {
        Err(Refusal::new(format!("the difference cannot be standardized by `{}`: that standard deviation is {value}", standardizer.name())))
    }
}

/// Lower and upper limit, and the standard error where the interval rests on one.
///
/// # Errors
/// A method that is not published for the standardizer; what [`standardized_difference`] refuses.
pub fn standardized_difference_interval(
    first: &GroupSummary,
    second: &GroupSummary,
    difference: f64,
    standardizer: GroupStandardizer,
    method: GroupInterval,
    level: f64,
) -> Result<(f64, f64, Option<f64>), Refusal> {
    let d = standardized_difference(first, second, difference, standardizer)?.d;
    let (df1, df2) = (first.n as f64 - 1.0, second.n as f64 - 1.0);
    let (v1, v2) = (first.sd * first.sd, second.sd * second.sd);
    let variance = match (standardizer, method) {
        (GroupStandardizer::PooledSd, GroupInterval::NoncentralT) => {
            let scale = (1.0 / first.n as f64 + 1.0 / second.n as f64).sqrt();
            let (lower, upper) = noncentral_t::noncentrality_limits(d / scale, df1 + df2, level)?;
            return Ok((lower * scale, upper * scale, None));
        }
        (GroupStandardizer::RootMeanSquareSd, GroupInterval::Bonett) => {
            let s2 = 0.5 * (v1 + v2);
            d * d * (v1 * v1 / df1 + v2 * v2 / df2) / (8.0 * s2 * s2) + (v1 / df1 + v2 / df2) / s2
        }
        (GroupStandardizer::ReferenceSd, GroupInterval::Bonett) => d * d / (2.0 * df1) + 1.0 / df1 + v2 / (df2 * v1),
        (standardizer, method) => {
            let method = if method == GroupInterval::Bonett { "Bonett's interval" } else { "the noncentral t" };
            return Err(Refusal::new(format!("{method} is not published for `{}`; `bca` may be asked for", standardizer.name())));
        }
    };
    let standard_error = variance.sqrt();
    let half = normal::quantile_upper(0.5 * (1.0 - level))? * standard_error;
    Ok((d - half, d + half, Some(standard_error)))
}
