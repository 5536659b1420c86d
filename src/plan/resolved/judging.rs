//! Conditions, families and conclusions: everything written in verdicts.

use serde::{Deserialize, Serialize};

/// A condition in verdicts. Three-valued: a refusal makes it unknown.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Condition {
    /// All must hold.
    All(Vec<Condition>),
    /// One must hold.
    Either(Vec<Condition>),
    /// Turned over within the tested verdicts only.
    Not(Box<Condition>),
    /// The verdict of what is referred to is one of these words.
    Is {
        /// A step, or one hypothesis of a step.
        reference: String,
        /// The words; any of them will do.
        verdicts: Vec<String>,
    },
}

/// A family of tests.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Family {
    /// Identifier.
    pub id: String,
    /// References of its hypotheses, in order.
    pub members: Vec<String>,
    /// How the error is controlled.
    pub control: Control,
    /// Level of the family.
    pub alpha: f64,
    /// Share of alpha that each member starts with, for `fallback` and `graph`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub weights: Option<Vec<f64>>,
    /// What each member hands to each other when it is significant, for `graph`: rows give, columns receive.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub transfer: Option<Vec<Vec<f64>>>,
    /// How many deals of the arms, for `westfall-young`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub deals: Option<u64>,
}

/// How a family controls its error.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Control {
    /// Each p as it is.
    None,
    /// Bonferroni.
    Bonferroni,
    /// Sidak.
    Sidak,
    /// Holm.
    Holm,
    /// Holm's steps with Sidak's levels.
    HolmSidak,
    /// Hochberg.
    Hochberg,
    /// Hommel.
    Hommel,
    /// Benjamini and Hochberg (false discovery rate).
    BenjaminiHochberg,
    /// Benjamini and Yekutieli (false discovery rate under any dependence).
    BenjaminiYekutieli,
    /// In the order given, stopping at the first that is not significant.
    #[serde(rename = "fixed sequence")]
    FixedSequence,
    /// Shaffer's divisors for all pairs of the levels of one factor.
    Shaffer,
    /// In the order given, each handing its alpha to the next.
    Fallback,
    /// A graph of weights and transfers.
    Graph,
    /// The largest statistic by the multivariate t.
    MaxT,
    /// The largest statistic by the deals of the arms.
    WestfallYoung,
}

impl Control {
    /// Whether members can be judged before the last of them is computed.
    pub fn judges_in_turn(self) -> bool {
        matches!(self, Control::FixedSequence | Control::Fallback | Control::Graph)
    }
}

/// A conclusion.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Conclusion {
    /// When it applies; `None` for `otherwise`.
    pub when: Option<Condition>,
    /// What is said.
    pub say: Vec<SayPart>,
}

/// A part of what a conclusion says.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum SayPart {
    /// Words as written.
    Text(String),
    /// A number of a result.
    Quote {
        /// Of which result.
        reference: String,
        /// Which number.
        what: Quoted,
    },
}

/// A number that a conclusion may quote.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Quoted {
    /// The p-value, uncorrected for multiplicity.
    #[serde(rename = "p")]
    P,
    /// The adjusted p-value.
    #[serde(rename = "adjusted p")]
    AdjustedP,
    /// The estimate.
    #[serde(rename = "estimate")]
    Estimate,
    /// The interval.
    #[serde(rename = "interval")]
    Interval,
    /// The standard error.
    #[serde(rename = "standard error")]
    StandardError,
    /// The test statistic.
    #[serde(rename = "statistic")]
    Statistic,
    /// Its degrees of freedom.
    #[serde(rename = "df")]
    Df,
    /// Subjects analysed.
    #[serde(rename = "n")]
    N,
}
