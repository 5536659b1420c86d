//! One run of a sealed plan, from bound data to the files of its record. Nothing here touches the outside.
//!
//! `run` writes what this yields; `audit` yields it again and compares, so that what is audited is what was run.

use crate::canon::chain::Chain;
use crate::canon::hash::Digest;
use crate::canon::json::{CanonError, file_bytes, from_file_bytes};
use crate::data::trial::Trial;
use crate::execute::lower::LowerError;
use crate::execute::machine::{Bound, Execution};
use crate::plan::seal::SealedPlan;
use crate::record::decisions::DecisionLog;
use crate::record::format::Seal;
use crate::record::ledger::{Event, Happening};
use crate::report::input::{ChainedDecision, ReportInput, Status};
use crate::report::{ReportError, render};
use crate::results::decision::{Decision, Witness};
use crate::results::{DataStamp, PlanStamp, RESULTS_FORMAT, Results};
use std::collections::BTreeMap;
use std::fmt;

/// Hashes of what a run reads.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct DataHashes {
    /// The data file's bytes.
    pub data: Digest,
    /// The canonical table.
    pub content: Digest,
    /// The allocation file's bytes, where there is one.
    pub allocation: Option<Digest>,
}

/// What a run yields.
#[derive(Debug)]
pub struct Conducted {
    /// The files of the record by path, without the manifest.
    pub files: BTreeMap<String, Vec<u8>>,
    /// The head of the chain of decisions.
    pub decisions: Digest,
    /// The results.
    pub results: Results,
}

/// Why a run could not be put into files.
#[derive(Debug)]
pub enum ConductError {
    /// The resolved plan contradicts itself.
    Plan(LowerError),
    /// Something has no canonical form.
    Canon(CanonError),
    /// The report could not be rendered.
    Report(ReportError),
}

impl fmt::Display for ConductError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ConductError::Plan(error) => write!(out, "{error}"),
            ConductError::Canon(error) => write!(out, "the results cannot be written: {error}"),
            ConductError::Report(error) => write!(out, "the report cannot be rendered: {error}"),
        }
    }
}

impl std::error::Error for ConductError {}

/// Chains decisions as they are taken.
struct Recorder<'w> {
    watch: &'w mut dyn FnMut(&str),
    log: DecisionLog,
    taken: Vec<ChainedDecision>,
    failed: Option<CanonError>,
}

impl Witness for Recorder<'_> {
    fn begins(&mut self, step: &str) {
        (self.watch)(step);
    }

    fn take_down(&mut self, decision: Decision) -> Option<String> {
        let mut rule = decision.rule.clone();
        if let Some(rule) = rule.as_object_mut() {
            rule.insert("kind".to_owned(), decision.kind.clone().into());
        }
        match self.log.push(&decision.step, &rule, &decision.evidence, &decision.verdict) {
            Ok(hash) => {
                let hash = hash.to_string();
                self.taken.push(ChainedDecision { decision, hash: hash.clone() });
                Some(hash)
            }
            Err(error) => {
                self.failed.get_or_insert(error);
                None
            }
        }
    }
}

/// Executes a sealed plan and puts what it finds into the files of a record. `unblinded` is the hash of the event after
/// which the arms were opened; `status` is what the report says of the circumstances; `watch` hears of each step as it begins.
///
/// # Errors
/// A plan that contradicts itself, a number without canonical form, or a template that does not render.
pub fn conduct(
    plan: &SealedPlan,
    trial: &Trial,
    hashes: &DataHashes,
    unblinded: &Digest,
    status: &Status,
    watch: &mut dyn FnMut(&str),
) -> Result<Conducted, ConductError> {
    let root = Chain::decisions(&plan.meaning_hash(), &hashes.data, hashes.allocation.as_ref(), unblinded);
    let mut recorder = Recorder { watch, log: DecisionLog::new(root), taken: Vec::new(), failed: None };
    let execution = Bound::new(plan, trial).map_err(ConductError::Plan)?.run(&mut recorder);
    if let Some(error) = recorder.failed {
        return Err(ConductError::Canon(error));
    }
    let results = stamp(plan, trial, hashes, status, execution);
    let input = ReportInput { plan: plan.resolved(), results: &results, decisions: &recorder.taken, status, templates: None };
    let rendered = render(&input).map_err(ConductError::Report)?;
    let mut files = BTreeMap::new();
    files.insert("results.json".to_owned(), file_bytes(&results).map_err(ConductError::Canon)?);
    files.insert("decisions.jsonl".to_owned(), recorder.log.bytes().to_vec());
    files.insert("report.md".to_owned(), rendered.markdown.into_bytes());
    files.insert("report.html".to_owned(), rendered.html.into_bytes());
    for (name, svg) in rendered.figures {
        files.insert(format!("figures/{name}"), svg.into_bytes());
    }
    Ok(Conducted { files, decisions: recorder.log.head(), results })
}

/// What the report says of the circumstances of the run whose event `unblinded` has this hash, from the ledger. `first` is
/// `results.json` of the first record, where this is a later one.
pub fn status_of(seal: &Seal, events: &[Event], unblinded: &Digest, record: u32, first: Option<&[u8]>) -> Status {
    let place = events.iter().position(|event| event.hash == *unblinded).unwrap_or(0);
    let event = events.get(place);
    let correction =
        events[..place].iter().rev().take_while(|event| !matches!(event.what, Happening::Run { .. })).find_map(|event| match &event.what {
            Happening::Corrected { why, .. } => Some(why.clone()),
            _ => None,
        });
    let first_conclusion = first.and_then(|bytes| from_file_bytes::<Results>(bytes).ok()).map(|results| results.conclusion.text);
    Status {
        sealed_at: seal.sealed_at.to_string(),
        sealed_by: seal.who.clone(),
        release: event.map_or_else(String::new, |event| event.release.clone()),
        plan_sha256: seal.sha256.to_string(),
        meaning: seal.meaning.to_string(),
        witnessed: events[..place].iter().any(|event| matches!(event.what, Happening::Anchored { .. } | Happening::Signed { .. })),
        ledger_head: unblinded.to_string(),
        unblinded_at: event.map_or_else(String::new, |event| event.time.to_string()),
        run_by: event.map_or_else(String::new, |event| event.who.clone()),
        record,
        correction,
        first_conclusion,
    }
}

fn stamp(plan: &SealedPlan, trial: &Trial, hashes: &DataHashes, status: &Status, execution: Execution) -> Results {
    Results {
        format: RESULTS_FORMAT.to_owned(),
        plan: PlanStamp {
            sha256: plan.plan_hash().to_string(),
            meaning: plan.meaning_hash().to_string(),
            sealed_at: status.sealed_at.clone(),
        },
        data: DataStamp {
            sha256: hashes.data.to_string(),
            content: hashes.content.to_string(),
            allocation_sha256: hashes.allocation.map(|hash| hash.to_string()),
            subjects: trial.subjects.len(),
            used: execution.used,
            left_out: execution.left_out,
            arms: execution.arms,
        },
        descriptions: execution.descriptions,
        steps: execution.steps,
        families: execution.families,
        conclusion: execution.conclusion,
    }
}
