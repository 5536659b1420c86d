//! The allocation file: who had which arm; or, blind, who is listed in it.

use super::read::read;
use super::schema::Schema;
use super::table::Sorted;
use super::trial::Subjects;
use crate::plan::resolved::ResolvedPlan;
use crate::text::diagnostic::Diagnostic;
use std::io::Read;

/// The allocation, subjects in the order of their identifiers' bytes.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Allocation {
    /// Name of the file, as the person typed it.
    pub name: String,
    /// The subjects.
    pub subjects: Subjects,
    /// Line of each.
    pub lines: Vec<u32>,
    /// Between cell of each.
    pub cell: Vec<u32>,
}

/// Who is listed in an allocation file. No line numbers: a list may be sorted by arm, so that a line would tell one.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Identifiers {
    /// Name of the file, as the person typed it.
    pub name: String,
    /// The subjects, in the order of their identifiers' bytes.
    pub subjects: Subjects,
}

/// Reads an allocation file, which is written like the data file (separator, header): a row per subject.
///
/// # Errors
/// All that keeps the file from agreeing with the plan, in the order of the file.
pub fn read_allocation(plan: &ResolvedPlan, name: &str, reader: impl Read + Send) -> Result<Allocation, Vec<Diagnostic>> {
    let Sorted { subjects, lines, cell, .. } = read(Schema::of_allocation(plan, true), name, reader)?.sorted;
    Ok(Allocation { name: name.to_owned(), subjects, lines, cell })
}

/// Reads the identifiers of an allocation file and nothing else: the columns of the arms must be there, but no cell of them
/// is looked at or shown.
///
/// # Errors
/// As for [`read_allocation`], but for the arms.
pub fn read_identifiers(plan: &ResolvedPlan, name: &str, reader: impl Read + Send) -> Result<Identifiers, Vec<Diagnostic>> {
    let Sorted { subjects, .. } = read(Schema::of_allocation(plan, false), name, reader)?.sorted;
    Ok(Identifiers { name: name.to_owned(), subjects })
}
