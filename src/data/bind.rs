//! Data and allocation, made into a trial.

use super::allocation::Allocation;
use super::problems::{and_more, grouped, line_of, quoted};
use super::table::{NO_CELL, Table};
use super::trial::{Subjects, Trial};
use crate::plan::resolved::{AllocationPlace, ResolvedPlan};
use crate::text::diagnostic::Diagnostic;
use crate::text::suggest::same_but_for_case_or_space;
use std::cmp::Ordering;

/// Subjects that are named one by one where two files disagree; the rest are counted.
const NAMED: usize = 10;

/// Subjects among which one that differs by case or space is looked for.
const COMPARED: usize = 1000;

/// Least number of subjects in an arm.
const LEAST: usize = 2;

/// Gives each subject of the data its between cell. Notes say where the numbers are not those planned.
///
/// # Errors
/// Subjects that stand only in the data or only in the allocation, a cell with fewer than two subjects, or arms that are
/// not where the plan says.
pub fn bind(plan: &ResolvedPlan, table: Table, allocation: Option<Allocation>) -> Result<(Trial, Vec<Diagnostic>), Vec<Diagnostic>> {
    let count = table.subjects.len();
    let cell = match (plan.data.allocation, &table.cell, allocation) {
        (AllocationPlace::NoArms, _, None) => vec![0; count],
        (AllocationPlace::InTheData, Some(_), None) => table.cell.unwrap_or_default(),
        (AllocationPlace::SeparateFile, _, Some(allocation)) => {
            let list = Listed { name: &allocation.name, subjects: &allocation.subjects, lines: Some(&allocation.lines) };
            let problems = disagreements(&table.name, &table.subjects, &table.lines, &list);
            if !problems.is_empty() {
                return Err(problems);
            }
            // The same subjects, sorted alike.
            allocation.cell
        }
        (AllocationPlace::SeparateFile, _, None) => return Err(vec![no_allocation()]),
        (AllocationPlace::InTheData, None, _) => return Err(vec![arms_not_read()]),
        (_, _, Some(allocation)) => return Err(vec![not_announced(&allocation.name)]),
    };
    let design = &plan.design;
    let mut sizes = vec![0_usize; design.cells()];
    cell.iter().filter(|cell| **cell != NO_CELL).for_each(|cell| sizes[*cell as usize] += 1);
    let small: Vec<Diagnostic> = (0..sizes.len())
        .filter(|cell| sizes[*cell] < LEAST)
        .map(|cell| too_small(&design.cell_levels(cell), sizes[cell], &table.name))
        .collect();
    if !small.is_empty() {
        return Err(small);
    }
    let mut notes = table.notes;
    notes.extend(plan.data.expected_subjects.iter().filter_map(|expected| {
        let cell = (0..sizes.len()).find(|cell| design.cell_levels(*cell) == expected.levels)?;
        (sizes[cell] as u64 != expected.subjects).then(|| {
            let of = if expected.levels.is_empty() { String::new() } else { format!(" in {}", quoted(&expected.levels.join("; "))) };
            Diagnostic::note(
                "subjects-not-as-expected",
                format!("{} subjects{of}, {} were planned", grouped(sizes[cell]), grouped(expected.subjects as usize)),
            )
        })
    }));
    let trial = Trial {
        subjects: table.subjects,
        cell,
        values: table.values,
        covariates: table.covariates,
        strata: table.strata,
        cells: design.cells(),
        occasions: design.occasions(),
    };
    Ok((trial, notes))
}

fn no_allocation() -> Diagnostic {
    Diagnostic::error("allocation-needed", "the plan keeps the arms in a separate file, and none was given")
        .hint("give the allocation file too")
}

fn arms_not_read() -> Diagnostic {
    Diagnostic::error("allocation-needed", "the arms stand in the data, which were read blind").hint("read the data again with their arms")
}

fn not_announced(name: &str) -> Diagnostic {
    Diagnostic::error(
        "allocation-not-announced",
        format!("an allocation file was given ({name}), but the plan has the arms elsewhere or has none"),
    )
    .hint("run without it; where the arms stand is part of the sealed plan")
}

fn too_small(levels: &[&str], size: usize, file: &str) -> Diagnostic {
    let what = if levels.is_empty() { "the data hold".to_owned() } else { format!("the arm {} has", quoted(&levels.join("; "))) };
    let subjects = match size {
        0 => "no subject",
        _ => "only one subject",
    };
    Diagnostic::error("arm-too-small", format!("{what} {subjects}"))
        .at(line_of(file, 1, ""))
        .hint("variation within an arm needs two subjects at least; is the file complete?")
}

/// Subjects listed in an allocation.
pub(super) struct Listed<'a> {
    pub name: &'a str,
    pub subjects: &'a Subjects,
    /// Line of each; `None` where a line could tell an arm.
    pub lines: Option<&'a [u32]>,
}

/// Subjects of only one of the two files.
pub(super) fn disagreements(data: &str, subjects: &Subjects, lines: &[u32], list: &Listed<'_>) -> Vec<Diagnostic> {
    let (mut only_data, mut only_list) = (Vec::new(), Vec::new());
    let (mut one, mut other) = (0, 0);
    while one < subjects.len() || other < list.subjects.len() {
        let order = match (one < subjects.len(), other < list.subjects.len()) {
            (true, true) => subjects.bytes(one).cmp(list.subjects.bytes(other)),
            (true, false) => Ordering::Less,
            _ => Ordering::Greater,
        };
        if order.is_lt() {
            only_data.push(one);
        } else if order.is_gt() {
            only_list.push(other);
        }
        one += usize::from(order.is_le());
        other += usize::from(order.is_ge());
    }
    let alike = |name: &str, others: &Subjects, numbers: &[usize]| {
        numbers
            .iter()
            .take(COMPARED)
            .map(|number| others.get(*number))
            .find(|other| same_but_for_case_or_space(name, other))
            .map(str::to_owned)
    };
    let mut found = Vec::new();
    for subject in only_data.iter().take(NAMED) {
        let name = subjects.get(*subject);
        let hint = match alike(name, list.subjects, &only_list) {
            Some(other) => {
                format!("the allocation lists {}, which differs by case or space; identifiers must agree letter by letter", quoted(&other))
            }
            None => "every subject of the data needs an arm; mend the identifier, or take the rows to the study's records".to_owned(),
        };
        found.push(
            Diagnostic::error(
                "subject-not-allocated",
                format!("subject {} stands in the data, but not in the allocation ({})", quoted(name), list.name),
            )
            .at(line_of(data, lines[*subject] as usize, "first on this line"))
            .hint(hint),
        );
    }
    found.extend((only_data.len() > NAMED).then(|| and_more("subject-not-allocated", only_data.len() - NAMED, data)));
    for subject in only_list.iter().take(NAMED) {
        let name = list.subjects.get(*subject);
        let hint = match alike(name, subjects, &only_data) {
            Some(other) => {
                format!("the data have {}, which differs by case or space; identifiers must agree letter by letter", quoted(&other))
            }
            None => "a subject who was allocated and never measured still needs a row, with its values missing, so that it is counted"
                .to_owned(),
        };
        let finding = Diagnostic::error(
            "subject-without-data",
            format!("subject {} is in the allocation ({}), but has no row in the data ({data})", quoted(name), list.name),
        )
        .hint(hint);
        found.push(match list.lines {
            Some(lines) => finding.at(line_of(list.name, lines[*subject] as usize, "allocated here")),
            None => finding,
        });
    }
    found.extend((only_list.len() > NAMED).then(|| and_more("subject-without-data", only_list.len() - NAMED, list.name)));
    found
}
