//! Families of tests: how each was judged.

use super::decisions::short;
use super::escape::markdown;
use super::figures::{Figure, Shows};
use super::input::ReportInput;
use super::tables::{self, Table};
use super::view::{Picture, picture};
use crate::results::{Entry, FamilyResult, numbers};
use serde::Serialize;

/// Members of one table; more stand in results.json.
const MOST_ROWS: usize = 200;

/// A family of the report.
#[derive(Debug, Serialize)]
pub(super) struct Judged {
    heading: String,
    how: String,
    members: Table,
    updates: Option<Table>,
    picture: Option<Picture>,
}

pub(super) fn families(input: &ReportInput<'_>, figures: &[Figure]) -> Vec<Judged> {
    input
        .results
        .families
        .iter()
        .map(|family| {
            let decision = family.decision.as_deref().map(|hash| format!(", decision `{}`", short(hash))).unwrap_or_default();
            let notes = if family.notes.is_empty() { String::new() } else { format!(" {}.", markdown(&family.notes.join("; "))) };
            let planned = input.plan.families.iter().find(|planned| planned.id == family.id);
            Judged {
                heading: format!("{}: {}", markdown(&family.id), family.control),
                how: format!("Alpha {}{decision}.{notes}", family.alpha.get()),
                members: members(input, family),
                updates: (!family.updates.is_empty()).then(|| updates(family, planned.and_then(|planned| planned.weights.as_deref()))),
                picture: figures.iter().find(|figure| figure.shows == Shows::Weights && figure.about == family.id).map(picture),
            }
        })
        .collect()
}

fn entry<'r>(input: &'r ReportInput<'_>, reference: &str) -> Option<&'r Entry> {
    input.results.steps.iter().flat_map(|step| &step.results).find(|entry| entry.reference == reference)
}

fn members(input: &ReportInput<'_>, family: &FamilyResult) -> Table {
    let mut table = Table::new(&["#No.", "Test", "#p", "#adjusted p", "Verdict"]);
    for (number, member) in family.members.iter().take(MOST_ROWS).enumerate() {
        let found = entry(input, member);
        table.row([
            (number + 1).to_string(),
            markdown(member),
            found.map(|entry| tables::p(entry.p, entry.p_bound)).unwrap_or_default(),
            found.map(|entry| tables::p(entry.p_adjusted, false)).unwrap_or_default(),
            found.and_then(|entry| entry.verdict.as_deref()).map(markdown).unwrap_or_default(),
        ]);
    }
    if family.members.len() > MOST_ROWS {
        table.notes.push(format!("{} more stand in results.json.", family.members.len() - MOST_ROWS));
    }
    let absent = |member: &String| entry(input, member).is_none_or(|entry| entry.p.is_none());
    if family.members.iter().any(absent) {
        table.notes.push("A member that was not tested or was refused counts in its family as if its p were 1.".to_owned());
    }
    table
}

fn updates(family: &FamilyResult, start: Option<&[f64]>) -> Table {
    let weights: Vec<String> = (1..=family.members.len()).map(|number| format!("#weight {number}")).collect();
    let mut heads = vec!["Taken out", "#adjusted p", "Significant"];
    heads.extend(weights.iter().map(String::as_str));
    let mut table = Table::new(&heads);
    if let Some(start) = start {
        let mut row = vec!["at the start".to_owned(), String::new(), String::new()];
        row.extend(start.iter().map(|weight| numbers::significant(*weight, 4)));
        table.row(row);
    }
    for update in &family.updates {
        let number = family.members.iter().position(|member| *member == update.member).map_or(0, |place| place + 1);
        let mut row = vec![
            format!("No. {number}"),
            tables::p(Some(update.p_adjusted), false),
            if update.significant { "yes" } else { "no" }.to_owned(),
        ];
        row.extend(update.weights.iter().map(|weight| numbers::significant(weight.get(), 4)));
        table.row(row);
    }
    table.notes.push(
        "Tests are taken out in the order of p over weight, each handing its weight on; up to the first that is not significant these are the rejections, the rest shows how the adjusted p came about.".to_owned(),
    );
    table
}
