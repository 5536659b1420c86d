//! What a result, a decision and a figure's series are: given by `execute`, read by `record`, `report` and `audit`.
//!
//! The serialized form of [`Results`] is `results.json`. Numbers are [`Finite`]: a value that is not a number cannot be
//! written; what could not be computed is absent, and `because` says why.

pub mod decision;
pub mod numbers;

use crate::canon::number::Finite;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// What `format` says in `results.json`.
pub const RESULTS_FORMAT: &str = "aforesaid results 1";

/// Everything that a run found.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Results {
    /// [`RESULTS_FORMAT`].
    pub format: String,
    /// Which plan.
    pub plan: PlanStamp,
    /// Which data.
    pub data: DataStamp,
    /// Cell by cell and occasion by occasion, each outcome described for the subjects analysed.
    pub descriptions: Vec<Description>,
    /// Steps in plan order.
    pub steps: Vec<StepResult>,
    /// Families in plan order.
    pub families: Vec<FamilyResult>,
    /// The conclusion.
    pub conclusion: ConclusionResult,
}

/// Which plan was executed.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct PlanStamp {
    /// Hash of the source's bytes.
    pub sha256: String,
    /// Hash of the resolved plan.
    pub meaning: String,
    /// When it was sealed, UTC.
    pub sealed_at: String,
}

/// Which data were analysed, and whom they lost.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct DataStamp {
    /// Hash of the data file's bytes.
    pub sha256: String,
    /// Hash of the canonical table.
    pub content: String,
    /// Hash of the allocation file's bytes, where there is one.
    pub allocation_sha256: Option<String>,
    /// Subjects in the data.
    pub subjects: usize,
    /// Subjects analysed: complete for every outcome that a step uses.
    pub used: usize,
    /// Subjects left out of at least one outcome's analysis, with the reason.
    pub left_out: Vec<LeftOut>,
    /// Per between cell.
    pub arms: Vec<ArmFlow>,
}

/// A subject left out.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct LeftOut {
    /// Identifier.
    pub subject: String,
    /// Why, such as `no score at month 6`.
    pub why: String,
}

/// Flow of one between cell.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct ArmFlow {
    /// Level of each between factor; empty where there is none.
    pub levels: Vec<String>,
    /// Planned subjects, where the plan says.
    pub planned: Option<u64>,
    /// Subjects allocated and in the data.
    pub allocated: usize,
    /// Per outcome (in plan order): subjects analysed.
    pub analysed: Vec<usize>,
}

/// The cells of one outcome.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Description {
    /// Outcome.
    pub outcome: String,
    /// Confidence level of the intervals.
    pub level: Finite,
    /// Cells slowest, occasions fastest.
    pub cells: Vec<CellDescription>,
}

/// One between cell at one occasion.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellDescription {
    /// Level of each between factor.
    pub between: Vec<String>,
    /// Level of each within factor.
    pub within: Vec<String>,
    /// Subjects.
    pub n: usize,
    /// Mean, in the outcome's unit; absent where there is no subject.
    pub mean: Option<Finite>,
    /// Standard deviation, divisor n - 1.
    pub sd: Option<Finite>,
    /// Interval of the mean by Student's t within the cell.
    pub interval: Option<[Finite; 2]>,
}

/// Whether something was done.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum State {
    /// Done.
    #[serde(rename = "done")]
    Done,
    /// Its `when` did not hold or was unknown.
    #[serde(rename = "not run")]
    NotRun,
    /// It cannot be computed for these data.
    #[serde(rename = "refused")]
    Refused,
}

/// What a step found.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct StepResult {
    /// Identifier.
    pub id: String,
    /// `screen`, `test` or `estimate`.
    pub species: String,
    /// Kind as the plan writes it, such as `partial interactions`.
    pub kind: String,
    /// Outcome.
    pub outcome: String,
    /// `confirmatory`, `supportive` or `exploratory`.
    pub role: String,
    /// Done, not run, or refused (every result refused).
    pub state: State,
    /// Why it was not run or refused.
    pub because: Option<String>,
    /// What was used where the plan leaves a choice by cases, and every other setting, in words: `error` -> `own`.
    pub settings: BTreeMap<String, String>,
    /// Verdict of the whole step, where it has one: a screen's, a single test's, or `any significant` and its kin joined.
    pub verdict: Option<String>,
    /// Hash of the last decision taken on it.
    pub decision: Option<String>,
    /// Cell moments that its results rest on; empty where they equal those of an earlier step named in `moments_of`.
    pub moments: Vec<CellMoments>,
    /// Identifier of the earlier step whose moments these results rest on.
    pub moments_of: Option<String>,
    /// Results in plan order.
    pub results: Vec<Entry>,
}

/// n, means and covariance matrix of one between cell over the occasions that the step uses.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellMoments {
    /// Level of each between factor.
    pub levels: Vec<String>,
    /// Subjects.
    pub n: usize,
    /// The occasions, in design order; the rows of M are in the same order.
    pub occasions: Vec<String>,
    /// The covariates of the model, whose moments stand after those of the occasions.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub covariates: Vec<String>,
    /// Means, one per occasion, then one per covariate.
    pub means: Vec<Finite>,
    /// Covariances, divisor n - 1, in the order of the means; empty where n < 2.
    pub covariance: Vec<Vec<Finite>>,
}

/// One result.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Entry {
    /// Reference, as in the plan.
    #[serde(rename = "ref")]
    pub reference: String,
    /// In words.
    pub label: String,
    /// Done, not run or refused.
    pub state: State,
    /// Why not.
    pub because: Option<String>,
    /// Test statistic.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub statistic: Option<Statistic>,
    /// p-value at the corrected degrees of freedom; a p below 1e-300 is 1e-300 with `p_bound`.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub p: Option<Finite>,
    /// Whether `p` is an upper bound.
    #[serde(skip_serializing_if = "std::ops::Not::not", default)]
    pub p_bound: bool,
    /// p adjusted in its family; absent where it is in none.
    pub p_adjusted: Option<Finite>,
    /// Level of the test or of the interval.
    pub level: Option<Finite>,
    /// Verdict.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub verdict: Option<String>,
    /// Subjects that it rests on.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub n: Option<usize>,
    /// Estimate, in the outcome's unit for comparisons and means.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub estimate: Option<Finite>,
    /// Its standard error.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub standard_error: Option<Finite>,
    /// Its interval.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub interval: Option<[Finite; 2]>,
    /// Further numbers and words by name, as `record.md` lists them: `sum_of_squares`, `df_error`, `epsilon`, ...
    pub details: BTreeMap<String, Detail>,
    /// Effect sizes.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub sizes: Vec<Size>,
    /// The hypothesis in matrices, for tests.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub hypothesis: Option<Matrices>,
}

impl Entry {
    /// Its estimate: that of an estimate step, or the comparison that a test is about, which stands in its details.
    pub fn estimate_of(&self) -> Option<Finite> {
        self.estimate.or_else(|| self.detail("estimate"))
    }

    /// The standard error of [`Entry::estimate_of`].
    pub fn standard_error_of(&self) -> Option<Finite> {
        self.standard_error.or_else(|| self.detail("standard_error"))
    }

    /// The interval of [`Entry::estimate_of`].
    pub fn interval_of(&self) -> Option<[Finite; 2]> {
        self.interval.or_else(|| match self.details.get("interval") {
            Some(Detail::Numbers(limits)) => limits.as_slice().try_into().ok(),
            _ => None,
        })
    }

    /// A number of its details.
    pub fn detail(&self, name: &str) -> Option<Finite> {
        match self.details.get(name) {
            Some(Detail::Number(number)) => Some(*number),
            _ => None,
        }
    }
}

/// The hypothesis L B M = 0.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Matrices {
    /// Combines between cells: r rows of one weight per cell.
    #[serde(rename = "L")]
    pub l: Vec<Vec<Finite>>,
    /// Combines occasions: b rows of q weights, as written (columns need not be orthonormal).
    #[serde(rename = "M")]
    pub m: Vec<Vec<Finite>>,
    /// Cells whose covariances supply the error.
    pub error_cells: Vec<usize>,
    /// For a pooled error, the strata that it pools over; empty where the error is that of M itself.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub error_strata: Vec<ErrorStratum>,
}

/// A stratum of a pooled error: the mean square is the sum of the strata's mean squares in their shares.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ErrorStratum {
    /// Its share.
    pub share: Finite,
    /// Its contrasts between occasions: b rows, orthonormal columns.
    #[serde(rename = "M")]
    pub m: Vec<Vec<Finite>>,
}

/// A test statistic.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Statistic {
    /// `F`, `W` or `M`.
    pub name: String,
    /// Its value.
    pub value: Finite,
    /// Degrees of freedom, uncorrected: two for F, one for a chi-square, none for W.
    pub df: Vec<Finite>,
}

/// A further number or word of a result.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum Detail {
    /// A number.
    Number(Finite),
    /// Words; also a reason why something in it could not be computed.
    Text(String),
    /// Numbers in order.
    Numbers(Vec<Finite>),
    /// Numbers by name.
    Named(BTreeMap<String, Finite>),
}

/// An effect size.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Size {
    /// Name as in the plan.
    pub name: String,
    /// Its value; absent where it could not be computed.
    pub value: Option<Finite>,
    /// Its interval.
    pub interval: Option<[Finite; 2]>,
    /// Confidence level of the interval.
    pub level: Option<Finite>,
    /// Why value or interval is absent, or that the estimate lies outside its interval.
    pub because: Option<String>,
}

/// What became of a family.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FamilyResult {
    /// Identifier.
    pub id: String,
    /// Control, as the plan writes it.
    pub control: String,
    /// Level.
    pub alpha: Finite,
    /// References of its members.
    pub members: Vec<String>,
    /// For a graph: each update, in order.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub updates: Vec<GraphUpdate>,
    /// What is to be said of how it was judged, such as an error bound.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub notes: Vec<String>,
    /// Hash of the decision that judged it.
    pub decision: Option<String>,
}

/// One update of a graph: a member is taken out, and its share of alpha handed on.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct GraphUpdate {
    /// Reference of the member that is taken out.
    pub member: String,
    /// Its adjusted p.
    pub p_adjusted: Finite,
    /// Whether that is at or below the family's alpha.
    pub significant: bool,
    /// Weight of each member after it, in the order of the members.
    pub weights: Vec<Finite>,
}

/// The preregistered conclusion that applies.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct ConclusionResult {
    /// Place in the plan's list, from zero; absent where refusals leave it open or none applies.
    pub index: Option<usize>,
    /// What the plan says, quotes filled in; or why nothing is concluded.
    pub text: String,
    /// Confirmatory verdicts that the conclusion's `when` does not name: reference and verdict.
    pub not_named: Vec<VerdictOf>,
    /// Hash of the decision.
    pub decision: String,
}

/// The verdict of a reference.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct VerdictOf {
    /// Reference.
    #[serde(rename = "ref")]
    pub reference: String,
    /// Verdict.
    pub verdict: String,
}
