//! Estimates.

use super::{Choice, ErrorTerm, FactorPart, Hypothesis, Weights};
use serde::{Deserialize, Serialize};

/// An estimate step.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Estimate {
    /// Mean of each cell at each occasion with the interval of Student's t within the cell.
    CellMeans {
        /// Confidence level.
        level: f64,
        /// One item per cell and occasion, cells slowest.
        items: Vec<CellMean>,
    },
    /// Standardized change between two occasions within each cell.
    StandardizedChange {
        /// What divides the change.
        standardizer: Choice<Standardizer>,
        /// Hedges' small-sample correction.
        small_sample_correction: Choice<SmallSample>,
        /// Interval, where one is asked for.
        interval: ChangeInterval,
        /// One item per cell and pair of occasions, pairs slowest.
        items: Vec<Change>,
    },
    /// Differences of means in the outcome's unit, with intervals.
    Differences {
        /// Whose variation the interval rests on.
        error: Choice<ErrorTerm>,
        /// How between cells are weighted when averaged.
        weights: Weights,
        /// Confidence level.
        level: f64,
        /// The contrasts.
        hypotheses: Vec<Hypothesis>,
    },
    /// Sizes that compare two cells, two occasions, or both.
    Comparison(Comparison),
    /// Share of variance that tested effects explain.
    VarianceExplained {
        /// References of the tests.
        of: Vec<String>,
        /// Which forms.
        kinds: Vec<VarianceExplainedKind>,
        /// Factors that are measured, not manipulated; decides the generalized form.
        measured_factors: Vec<String>,
        /// Confidence level of the interval of the partial form.
        level: f64,
        /// Reference of each result, one per entry of `of`.
        references: Vec<String>,
    },
}

/// One cell mean.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellMean {
    /// Reference, such as `means / coached at week 6`.
    pub reference: String,
    /// In words.
    pub label: String,
    /// Number of the between cell.
    pub cell: usize,
    /// Number of the occasion.
    pub occasion: usize,
}

/// One standardized change: within one between cell, `second` minus `first`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Change {
    /// Reference, such as `sizes / cast off vs week 6 at coached`.
    pub reference: String,
    /// In words.
    pub label: String,
    /// Number of the between cell.
    pub cell: usize,
    /// Part of each within factor at the first (earlier) score: `Hold` or `Average`.
    pub first: Vec<FactorPart>,
    /// Part of each within factor at the second (later) score.
    pub second: Vec<FactorPart>,
}

/// What divides a change.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Standardizer {
    /// Mean of the two standard deviations.
    #[serde(rename = "average sd")]
    AverageSd,
    /// Root of the mean of the two variances.
    #[serde(rename = "root mean square sd")]
    RootMeanSquareSd,
    /// Standard deviation at the first occasion.
    #[serde(rename = "baseline sd")]
    BaselineSd,
    /// Standard deviation of the differences.
    #[serde(rename = "change sd")]
    ChangeSd,
    /// Standard deviation of the differences over the root of 2 (1 - r).
    #[serde(rename = "change sd, correlation removed")]
    ChangeSdCorrelationRemoved,
}

/// Hedges' small-sample correction.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum SmallSample {
    /// d alone.
    No,
    /// g by the exact J.
    Yes,
    /// g by 1 - 3 / (4 m - 1).
    Approximate,
    /// d, and g by the exact J.
    Both,
}

/// Interval of a standardized change.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ChangeInterval {
    /// Confidence level.
    pub level: f64,
    /// Method.
    pub method: Choice<ChangeIntervalMethod>,
    /// Resamples, where the method may be a bootstrap.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub resamples: Option<u64>,
}

/// Method of the interval of a standardized change.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum ChangeIntervalMethod {
    /// Bonett's large-sample variance.
    Bonett,
    /// Noncentral t inverted.
    NoncentralT,
    /// Bias-corrected and accelerated bootstrap over subjects.
    Bca,
    /// No interval.
    None,
}

/// A size that compares two cells, two occasions, or both: second minus first.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Comparison {
    /// Which size.
    pub measure: Measure,
    /// What divides a difference, where the measure has a choice.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub standardizer: Option<Choice<DifferenceStandardizer>>,
    /// Hedges' small-sample correction, where the measure has one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub small_sample_correction: Option<Choice<SmallSample>>,
    /// Confidence level.
    pub level: f64,
    /// Method of the interval.
    pub method: Choice<IntervalMethod>,
    /// Resamples, where the method may be a bootstrap.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub resamples: Option<u64>,
    /// Change that counts as a response, in the outcome's unit and its better direction.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub reaching: Option<f64>,
    /// Reliability of the outcome.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub reliability: Option<f64>,
    /// What is compared: a part of a factor is held, averaged over, or a pair of levels.
    pub items: Vec<Hypothesis>,
}

/// Which size a comparison reports.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Measure {
    /// Difference between two cells at an occasion over a standard deviation.
    #[serde(rename = "standardized difference")]
    StandardizedDifference,
    /// Difference between two cells in change over the pooled standard deviation at the first occasion (Morris 2008).
    #[serde(rename = "difference in standardized change")]
    DifferenceInStandardizedChange,
    /// Chance that a subject of the second cell lies above one of the first, ties counted half.
    #[serde(rename = "probability of superiority")]
    ProbabilityOfSuperiority,
    /// Difference of 20 % trimmed means over the Winsorized standard deviation (Algina, Keselman & Penfield 2005).
    #[serde(rename = "robust standardized difference")]
    RobustStandardizedDifference,
    /// Share of subjects whose change reaches an amount.
    #[serde(rename = "responders")]
    Responders,
    /// Shares of subjects who changed reliably (Jacobson & Truax 1991).
    #[serde(rename = "reliable change")]
    ReliableChange,
}

/// What divides a difference between two cells at an occasion.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum DifferenceStandardizer {
    /// Standard deviation pooled over the two cells.
    #[serde(rename = "pooled sd")]
    PooledSd,
    /// Standard deviation of the first cell.
    #[serde(rename = "reference sd")]
    ReferenceSd,
    /// Root of the mean of the two variances.
    #[serde(rename = "root mean square sd")]
    RootMeanSquareSd,
}

/// Method of the interval of a comparison.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum IntervalMethod {
    /// Noncentral t inverted.
    NoncentralT,
    /// Bonett's large-sample variance.
    Bonett,
    /// Morris's variance.
    Morris,
    /// Scores of proportions (Wilson; Newcombe for differences).
    Newcombe,
    /// On the logit, from placements of each subject among the other cell's.
    Logit,
    /// Bias-corrected and accelerated bootstrap over subjects.
    Bca,
    /// No interval.
    None,
}

/// Form of variance explained.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum VarianceExplainedKind {
    /// SS / (SS + SS error).
    #[serde(rename = "partial eta squared")]
    PartialEtaSquared,
    /// Olejnik and Algina's form.
    #[serde(rename = "generalized eta squared")]
    GeneralizedEtaSquared,
    /// Omega squared of the effect's own error stratum.
    #[serde(rename = "omega squared")]
    OmegaSquared,
}
