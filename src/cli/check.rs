//! `check`: a plan by itself, or data against a sealed plan, blind.

use super::output::{Failure, Terminal, counted};
use super::{CheckArguments, DONE, Format, files};
use crate::data::allocation::{Identifiers, read_identifiers};
use crate::data::blind;
use crate::data::read::{ReadArms, read_data};
use crate::plan::resolve::references;
use crate::plan::resolved::AllocationPlace;
use crate::plan::seal::reopen;
use crate::record::run::Copying;
use crate::record::study::Study;
use crate::text::diagnostic::Severity;
use crate::text::render::to_json;
use serde_json::json;
use std::path::Path;

pub(super) fn check(terminal: &Terminal<'_>, arguments: &CheckArguments) -> Result<u8, Failure> {
    match &arguments.data {
        Some(data) => check_data(terminal, arguments, data),
        None => check_plan(terminal, arguments),
    }
}

fn check_plan(terminal: &Terminal<'_>, arguments: &CheckArguments) -> Result<u8, Failure> {
    let compilation = files::compile_file(terminal, &arguments.path)?;
    let sound = compilation.plan.as_ref().is_some_and(|plan| plan.open_warnings().is_empty());
    let meaning = compilation.plan.as_ref().map(|plan| plan.meaning_hash());
    let listed = compilation.plan.as_ref().filter(|_| arguments.tests).map(|plan| references(plan.resolved()));
    match arguments.format {
        Format::Json => {
            let mut answer = to_json(&compilation.findings);
            answer["plan_sha256"] = json!(compilation.sha256);
            answer["meaning"] = json!(meaning);
            if let Some(listed) = &listed {
                answer["references"] =
                    json!(listed.iter().map(|(reference, label)| json!({ "ref": reference, "label": label })).collect::<Vec<_>>());
            }
            terminal.answer(&format!("{answer}\n"));
        }
        Format::Text => {
            if !compilation.findings.is_empty() {
                terminal.answer(&format!("{}\n", terminal.findings_in_text(&compilation.findings, terminal.colour_answer())));
            }
            if let Some(listed) = &listed {
                let width = listed.iter().map(|(reference, _)| reference.chars().count()).max().unwrap_or(0).min(60);
                for (reference, label) in listed {
                    terminal.answer(&format!("{reference:width$}  {label}\n"));
                }
                terminal.answer("\n");
            }
            let name = arguments.path.display();
            match meaning {
                Some(meaning) if sound => terminal.answer(&format!(
                    "{name}: {}; it can be sealed\nplan hash     {}\nmeaning hash  {meaning}\n",
                    counted(&compilation.findings),
                    compilation.sha256
                )),
                _ => terminal.answer(&format!("{name}: {}; it cannot be sealed as it stands\n", counted(&compilation.findings))),
            }
        }
    }
    Ok(if sound { DONE } else { 1 })
}

fn check_data(terminal: &Terminal<'_>, arguments: &CheckArguments, data: &Path) -> Result<u8, Failure> {
    files::must_be_a_file(terminal, data, "data file")?;
    if let Some(allocation) = &arguments.allocation {
        files::must_be_a_file(terminal, allocation, "allocation file")?;
    }
    let mut study = Study::open(terminal.world, &arguments.path)?;
    let (number, folder) = study.current_plan()?;
    let name = format!("plans/{number:03}/plan.yaml");
    let plan = reopen(&name, &folder.source).map_err(Failure::Findings)?;
    let resolved = plan.resolved();
    if resolved.data.allocation != AllocationPlace::SeparateFile && arguments.allocation.is_some() {
        return Err(Failure::other("the sealed plan keeps no allocation in a file of its own", "leave `--allocation` out"));
    }
    let mut reading = study.receive(Copying::HashOnly)?.reading(data, super::run::progress(terminal, data, files::open(terminal, data)?));
    let table = read_data(resolved, &data.display().to_string(), &mut reading, ReadArms::No);
    let received = reading.finish()?;
    let table = table.map_err(Failure::Findings)?;
    let identifiers: Option<Identifiers> = match &arguments.allocation {
        Some(path) => {
            Some(read_identifiers(resolved, &path.display().to_string(), files::open(terminal, path)?).map_err(Failure::Findings)?)
        }
        None => None,
    };
    let report = blind::check(resolved, &table, identifiers.as_ref());
    let wrong = report.findings.iter().any(|finding| finding.severity == Severity::Error);
    match arguments.format {
        Format::Text => {
            if !report.findings.is_empty() {
                terminal.answer(&format!("{}\n", terminal.findings_in_text(&report.findings, terminal.colour_answer())));
            }
            terminal.answer(&report.to_text());
        }
        Format::Json => terminal.answer(&format!("{}\n", json!(report))),
    }
    // Nothing that could tell arms is written before they are opened.
    study.log_data_checked((resolved.data.allocation != AllocationPlace::InTheData).then(|| received.hash()))?;
    Ok(if wrong { 1 } else { DONE })
}
