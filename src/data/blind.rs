//! What can be said of data without knowing, or showing, who had which arm.

use super::allocation::Identifiers;
use super::bind::{Listed, disagreements};
use super::problems::grouped;
use super::table::{Checked, Table};
use crate::plan::resolved::ResolvedPlan;
use crate::text::diagnostic::Diagnostic;
use serde::Serialize;
use std::fmt::Write;

/// A data file looked at blind. Nothing in it depends on the arms: it is the same, byte for byte, however they are dealt.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct BlindReport {
    /// Rows of data.
    pub rows: usize,
    /// Subjects in the data.
    pub subjects: usize,
    /// Subjects planned, over all arms, where the plan says.
    pub expected_subjects: Option<u64>,
    /// The outcomes, in plan order.
    pub outcomes: Vec<BlindOutcome>,
    /// The columns that the plan has checked, in plan order.
    pub checked: Vec<Checked>,
    /// Subjects listed in the allocation, where it was given.
    pub allocated: Option<usize>,
    /// Where data and allocation disagree.
    pub findings: Vec<Diagnostic>,
}

/// An outcome over all subjects.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct BlindOutcome {
    /// Its name in the plan.
    pub outcome: String,
    /// Subjects with a value at every occasion.
    pub complete: usize,
    /// Subjects without any value.
    pub empty: usize,
    /// The occasions, in design order.
    pub occasions: Vec<BlindOccasion>,
}

/// An outcome at one occasion, over all subjects.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct BlindOccasion {
    /// Level of each within factor, joined by `; `; empty where there is none.
    pub occasion: String,
    /// Subjects with a value.
    pub values: usize,
    /// Subjects without.
    pub missing: usize,
    /// Least value.
    pub least: Option<f64>,
    /// Greatest value.
    pub greatest: Option<f64>,
}

/// Looks at data blind; `allocation` is who is listed there, without arms.
pub fn check(plan: &ResolvedPlan, table: &Table, allocation: Option<&Identifiers>) -> BlindReport {
    let findings = allocation.map_or(Vec::new(), |list| {
        let listed = Listed { name: &list.name, subjects: &list.subjects, lines: None };
        disagreements(&table.name, &table.subjects, &table.lines, &listed)
    });
    let expected = &plan.data.expected_subjects;
    BlindReport {
        rows: table.rows,
        subjects: table.subjects.len(),
        expected_subjects: (!expected.is_empty()).then(|| expected.iter().map(|expected| expected.subjects).sum()),
        outcomes: plan.outcomes.iter().zip(&table.values).map(|(outcome, values)| of_outcome(plan, &outcome.name, values)).collect(),
        checked: table.checked.clone(),
        allocated: allocation.map(|list| list.subjects.len()),
        findings,
    }
}

fn of_outcome(plan: &ResolvedPlan, name: &str, values: &[f64]) -> BlindOutcome {
    let design = &plan.design;
    let mut occasions: Vec<BlindOccasion> = (0..design.occasions())
        .map(|occasion| BlindOccasion {
            occasion: design.occasion_levels(occasion).join("; "),
            values: 0,
            missing: 0,
            least: None,
            greatest: None,
        })
        .collect();
    let (mut complete, mut empty) = (0, 0);
    for row in values.chunks_exact(occasions.len()) {
        let mut found = 0;
        for (value, at) in row.iter().zip(&mut occasions) {
            if value.is_nan() {
                at.missing += 1;
                continue;
            }
            found += 1;
            at.values += 1;
            at.least = Some(at.least.map_or(*value, |least| least.min(*value)));
            at.greatest = Some(at.greatest.map_or(*value, |greatest| greatest.max(*value)));
        }
        complete += usize::from(found == row.len());
        empty += usize::from(found == 0);
    }
    BlindOutcome { outcome: name.to_owned(), complete, empty, occasions }
}

impl BlindReport {
    /// The report as lines of text; the findings are not in it.
    pub fn to_text(&self) -> String {
        let mut text = String::new();
        // Writing to a string cannot fail.
        let _ = self.write(&mut text);
        text
    }

    fn write(&self, text: &mut String) -> std::fmt::Result {
        write!(text, "{}, {}", counted(self.rows, "row"), counted(self.subjects, "subject"))?;
        if let Some(expected) = self.expected_subjects {
            write!(text, " ({} planned)", grouped(expected as usize))?;
        }
        writeln!(text)?;
        if let Some(allocated) = self.allocated {
            writeln!(text, "{} listed in the allocation", counted(allocated, "subject"))?;
        }
        for outcome in &self.outcomes {
            writeln!(text, "\noutcome `{}`, all arms together", outcome.outcome)?;
            let mut rows = vec![["occasion", "values", "missing", "least", "greatest"].map(str::to_owned)];
            rows.extend(outcome.occasions.iter().map(|at| {
                let number = |value: Option<f64>| value.map_or("-".to_owned(), |value| value.to_string());
                let name = if at.occasion.is_empty() { "(one)".to_owned() } else { at.occasion.clone() };
                [name, grouped(at.values), grouped(at.missing), number(at.least), number(at.greatest)]
            }));
            table(text, &rows)?;
            write!(text, "  complete at every occasion: {}", counted(outcome.complete, "subject"))?;
            writeln!(text, "; without any value: {}", grouped(outcome.empty))?;
        }
        if !self.checked.is_empty() {
            writeln!(text, "\ncolumns checked")?;
            let mut rows = vec![["column", "as allowed", "missing"].map(str::to_owned)];
            rows.extend(self.checked.iter().map(|checked| match checked.values {
                Some(values) => [checked.column.clone(), grouped(values), grouped(checked.missing)],
                None => [checked.column.clone(), "not looked at".to_owned(), "-".to_owned()],
            }));
            table(text, &rows)?;
        }
        Ok(())
    }
}

fn counted(count: usize, what: &str) -> String {
    format!("{} {what}{}", grouped(count), if count == 1 { "" } else { "s" })
}

/// Rows with the first column to the left and the others to the right.
fn table<const N: usize>(text: &mut String, rows: &[[String; N]]) -> std::fmt::Result {
    let widths: [usize; N] = std::array::from_fn(|column| rows.iter().map(|row| row[column].chars().count()).max().unwrap_or(0));
    for row in rows {
        write!(text, "  {:<width$}", row[0], width = widths[0])?;
        for column in 1..N {
            write!(text, "  {:>width$}", row[column], width = widths[column])?;
        }
        writeln!(text)?;
    }
    Ok(())
}
