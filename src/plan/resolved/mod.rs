//! The resolved plan: names bound, every default spelt out, every test enumerated as a hypothesis.
//!
//! This is what is hashed, executed and printed. Its canonical JSON is `resolved.json`. Weights and numbers stand as
//! they were written; nothing here is computed from them. Factor parts are in the order of the design's factors.

mod estimates;
mod judging;
mod steps;

pub use estimates::*;
pub use judging::*;
pub use steps::*;

use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// What `format` says in every resolved plan of this version.
pub const RESOLVED_FORMAT: &str = "aforesaid resolved plan 1";

/// The rule by which a p-value becomes a verdict, spelt out in every resolved plan.
pub const DECISION_RULE: &str = "significant where p <= level";

/// A whole plan, resolved.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ResolvedPlan {
    /// [`RESOLVED_FORMAT`].
    pub format: String,
    /// Version of the plan language.
    pub language: u32,
    /// Title of the study.
    pub title: String,
    /// The author's identifier of the plan.
    pub identifier: Option<String>,
    /// Who prepared it.
    pub prepared_by: Option<String>,
    /// How blinding is kept, in the author's words.
    pub blinding: Option<String>,
    /// Free text by topic, as written.
    pub administration: serde_json::Value,
    /// What was collected and seen before sealing.
    pub data_status: Option<DataStatus>,
    /// The estimand, as written (a map of attributes to text or lists).
    pub estimand: serde_json::Value,
    /// Where the data stand in their files.
    pub data: DataPlan,
    /// Factors and levels.
    pub design: Design,
    /// The outcomes, in plan order; every one has values in the data.
    pub outcomes: Vec<Outcome>,
    /// What is done about missing values.
    pub missing_data: MissingData,
    /// Level of the plan.
    pub alpha: f64,
    /// [`DECISION_RULE`].
    pub decision_rule: String,
    /// The steps, in plan order.
    pub steps: Vec<Step>,
    /// The families, in plan order.
    pub families: Vec<Family>,
    /// The conclusions, in the order in which they are tried.
    pub conclusions: Vec<Conclusion>,
    /// Planning assumptions, as written.
    pub planning: serde_json::Value,
    /// Findings that the author answers for, by rule: the reason.
    pub acknowledged: BTreeMap<String, String>,
}

impl ResolvedPlan {
    /// Columns of the data that serve as covariates, each once, in the order in which the steps name them.
    pub fn covariate_columns(&self) -> Vec<&str> {
        let mut columns: Vec<&str> = Vec::new();
        for step in &self.steps {
            let Action::Test(test) = &step.action else { continue };
            for covariate in &test.covariates {
                if let Covariate::Column(column) = covariate
                    && !columns.contains(&column.as_str())
                {
                    columns.push(column);
                }
            }
        }
        columns
    }

    /// Columns of the data within whose values arms are dealt again, where some step or family does so.
    pub fn strata_columns(&self) -> Vec<&str> {
        let tests = |step: &Step| match &step.action {
            Action::Test(test) => test.deals.is_some(),
            _ => false,
        };
        let deals = self.steps.iter().any(tests) || self.families.iter().any(|family| family.deals.is_some());
        match &self.design.randomised {
            Some(randomised) if deals => randomised.strata.iter().map(String::as_str).collect(),
            _ => Vec::new(),
        }
    }
}

/// What had been collected and seen when the plan was written.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DataStatus {
    /// `none`, `part` or `all`.
    pub collected: String,
    /// `nothing`, `pooled` or `by arm`.
    pub seen: String,
    /// Who saw it, where it was seen by arm.
    pub by: Option<String>,
}

/// Where the data stand in their files.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DataPlan {
    /// One row per subject and occasion, or one per subject.
    pub layout: Layout,
    /// Column of the subject's identifier.
    pub subject: String,
    /// Where the arms stand.
    pub allocation: AllocationPlace,
    /// Column of each between factor, in design order.
    pub arms: Vec<ColumnOf>,
    /// Cell texts that mean "missing"; compared after trimming.
    pub missing_values: Vec<String>,
    /// Planned subjects per between cell.
    pub expected_subjects: Vec<ExpectedSubjects>,
    /// Checks on further columns.
    pub columns: Vec<ColumnCheck>,
    /// Field separator, one ASCII character.
    pub separator: char,
    /// Decimal mark, `.` or `,`.
    pub decimal: char,
}

/// The layout of the data file.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Layout {
    /// A row per subject and occasion.
    Long {
        /// Column of each within factor, in design order; empty where there is none.
        occasions: Vec<ColumnOf>,
        /// Column of each outcome, in the order of `outcomes`.
        values: Vec<ColumnOf>,
    },
    /// A row per subject.
    Wide {
        /// For each outcome (in order): the columns, one per occasion in design order (last within factor fastest).
        values: Vec<WideValues>,
    },
}

/// A name of the plan and the column that holds it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct ColumnOf {
    /// Factor or outcome.
    pub name: String,
    /// Column of the file.
    pub column: String,
}

/// The columns of one outcome in a wide file.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct WideValues {
    /// Outcome.
    pub name: String,
    /// One column per occasion in design order.
    pub columns: Vec<String>,
}

/// Where the arms stand.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum AllocationPlace {
    /// In a file of its own.
    #[serde(rename = "separate file")]
    SeparateFile,
    /// In the data file.
    #[serde(rename = "in the data")]
    InTheData,
    /// There is no between factor.
    #[serde(rename = "no arms")]
    NoArms,
}

/// Planned number of subjects of one between cell.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct ExpectedSubjects {
    /// Level of each between factor, in design order.
    pub levels: Vec<String>,
    /// How many.
    pub subjects: u64,
}

/// A check on a column that the analysis does not use.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ColumnCheck {
    /// Column of the data file.
    pub column: String,
    /// What its cells must be.
    pub kind: ColumnKind,
}

/// What the cells of a checked column must be.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum ColumnKind {
    /// Text, perhaps of a list.
    Text {
        /// The texts allowed; `None`: any.
        allowed: Option<Vec<String>>,
    },
    /// A number, perhaps in a range.
    Number {
        /// Least and greatest value allowed; `None`: any.
        range: Option<[f64; 2]>,
    },
}

/// Factors and levels. Between cells and occasions are numbered with the last factor fastest.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Design {
    /// Between factors; may be empty.
    pub between: Vec<Factor>,
    /// Within factors; may be empty.
    pub within: Vec<Factor>,
    /// What was randomised, where the plan says so.
    pub randomised: Option<Randomised>,
}

impl Design {
    /// Number of between cells (one where there is no between factor).
    pub fn cells(&self) -> usize {
        self.between.iter().map(|factor| factor.levels.len()).product()
    }

    /// Number of occasions, that is of within cells (one where there is no within factor).
    pub fn occasions(&self) -> usize {
        self.within.iter().map(|factor| factor.levels.len()).product()
    }

    /// Levels of the between cell number `cell`, in design order.
    pub fn cell_levels(&self, cell: usize) -> Vec<&str> {
        levels_of(&self.between, cell)
    }

    /// Levels of the occasion number `occasion`, in design order.
    pub fn occasion_levels(&self, occasion: usize) -> Vec<&str> {
        levels_of(&self.within, occasion)
    }
}

fn levels_of(factors: &[Factor], number: usize) -> Vec<&str> {
    let mut rest = number;
    let mut levels: Vec<&str> = factors
        .iter()
        .rev()
        .map(|factor| {
            let level = rest % factor.levels.len();
            rest /= factor.levels.len();
            factor.levels[level].as_str()
        })
        .collect();
    levels.reverse();
    levels
}

/// A factor with its levels in plan order.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Factor {
    /// Name.
    pub name: String,
    /// Levels, at least two; the first is the reference.
    pub levels: Vec<String>,
    /// Time or condition for a within factor, `between` for a between factor.
    pub kind: FactorKind,
}

/// What a factor's levels are.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum FactorKind {
    /// Groups of subjects.
    Between,
    /// Occasions in the order of time.
    Time,
    /// Conditions that every subject meets.
    Condition,
}

/// What was randomised.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Randomised {
    /// Between factors whose levels were dealt at random.
    pub factors: Vec<String>,
    /// Scheme, as written.
    pub scheme: Option<String>,
    /// Columns that stratified the randomisation.
    pub strata: Vec<String>,
}

/// One outcome.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Outcome {
    /// Name in the plan.
    pub name: String,
    /// What the report calls it; the name where the plan says nothing.
    pub label: String,
    /// Unit.
    pub unit: Option<String>,
    /// Least and greatest possible value.
    pub range: Option<[f64; 2]>,
    /// Which direction is better.
    pub better: Option<Better>,
    /// Smallest worthwhile difference, in the outcome's unit.
    pub smallest_worthwhile_difference: Option<f64>,
}

/// Which direction of an outcome is better.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Better {
    /// Smaller values.
    Lower,
    /// Larger values.
    Higher,
}

/// What is done about missing values.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct MissingData {
    /// The only rule so far: subjects with a missing value are left out.
    pub rule: MissingRule,
    /// Over which occasions a subject must be complete.
    pub over: CompleteOver,
}

/// Rule for missing values.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum MissingRule {
    /// Subjects with a missing value are left out.
    #[serde(rename = "complete cases")]
    CompleteCases,
}

/// Over which occasions a subject must be complete.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum CompleteOver {
    /// All occasions of the outcome.
    #[serde(rename = "all occasions")]
    AllOccasions,
    /// Only the occasions that the step's error and hypotheses use.
    #[serde(rename = "the step's occasions")]
    StepOccasions,
}
