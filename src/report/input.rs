//! What a report is made from.

use crate::plan::resolved::ResolvedPlan;
use crate::results::Results;
use crate::results::decision::Decision;
use std::collections::BTreeMap;

/// A decision with its hash in the chain.
#[derive(Debug, Clone, PartialEq)]
pub struct ChainedDecision {
    /// The decision.
    pub decision: Decision,
    /// Its hash, lower-case hex.
    pub hash: String,
}

/// Circumstances of a run that a report tells of. Times are UTC in RFC 3339.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Status {
    /// When the plan was sealed.
    pub sealed_at: String,
    /// By whom.
    pub sealed_by: String,
    /// The release that runs.
    pub release: String,
    /// Hash of the plan's source, lower-case hex.
    pub plan_sha256: String,
    /// Hash of the resolved plan.
    pub meaning: String,
    /// Whether anyone outside witnessed the seal.
    pub witnessed: bool,
    /// The ledger's head before the run.
    pub ledger_head: String,
    /// When the arms were opened.
    pub unblinded_at: String,
    /// By whom the run was done.
    pub run_by: String,
    /// Number of the record, from 1.
    pub record: u32,
    /// Why this run corrects an earlier one.
    pub correction: Option<String>,
    /// What the first record concluded, where this is not the first.
    pub first_conclusion: Option<String>,
}

/// All that a report is made from.
#[derive(Debug, Clone, Copy)]
pub struct ReportInput<'a> {
    /// The plan.
    pub plan: &'a ResolvedPlan,
    /// The results.
    pub results: &'a Results,
    /// The decisions, in the order taken.
    pub decisions: &'a [ChainedDecision],
    /// The circumstances.
    pub status: &'a Status,
    /// Templates by path in place of the built-in ones.
    pub templates: Option<&'a BTreeMap<String, String>>,
}
