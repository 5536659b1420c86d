//! `seal`: fixes a plan.

use super::output::{Failure, Terminal};
use super::{DONE, files};
use crate::plan::seal::{FINDINGS_VERSION, LANGUAGE_VERSION, RESOLVED_VERSION, seal as seal_plan};
use crate::record::study::{NewPlan, Study};
use std::collections::BTreeMap;
use std::path::Path;

pub(super) fn seal(terminal: &Terminal<'_>, path: &Path, folder: &Path) -> Result<u8, Failure> {
    let compilation = files::compile_file(terminal, path)?;
    let Some(plan) = compilation.plan else { return Err(Failure::Findings(compilation.findings)) };
    let plan = seal_plan(plan).map_err(Failure::Findings)?;
    let new = NewPlan {
        source: plan.bytes(),
        resolved: plan.resolved_bytes(),
        language_version: LANGUAGE_VERSION,
        findings_version: FINDINGS_VERSION,
        resolved_version: RESOLVED_VERSION,
        templates: &BTreeMap::new(),
    };
    let study = Study::seal(terminal.world, folder, &new)?;
    terminal.answer(&format!(
        "sealed in {}\nplan hash     {}\nmeaning hash  {}\nledger head   {}\n",
        folder.display(),
        plan.plan_hash(),
        plan.meaning_hash(),
        study.state().ledger.head
    ));
    terminal
        .aside("Give the plan hash to someone outside now (a registry entry will do): only then does it prove when the plan was fixed.\n");
    Ok(DONE)
}
