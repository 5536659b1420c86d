//! Findings about a plan that resolves: one file each, with its explanation, its check and examples.
//!
//! Rules that cannot do without the text (unknown keys, wrong types) stand where the text is read; these look at the
//! resolved plan.

mod small_cells;

use crate::plan::resolve::Places;
use crate::plan::resolved::ResolvedPlan;
use crate::text::diagnostic::{Diagnostic, Severity};
use crate::text::source::Source;

/// One rule.
pub struct Rule {
    /// Name in kebab case, for the flaw.
    pub name: &'static str,
    /// How grave it is.
    pub severity: Severity,
    /// What it means, why it matters, how to mend it, and its source.
    pub explanation: &'static str,
    /// Part of a plan that it flags, put into the example plan by a replacement: what is replaced, by what.
    pub flagged: (&'static str, &'static str),
    /// The check.
    pub check: fn(&Plan<'_>) -> Vec<Diagnostic>,
}

/// What a rule looks at.
pub struct Plan<'p> {
    /// The text.
    pub source: &'p Source,
    /// The resolved plan.
    pub resolved: &'p ResolvedPlan,
    /// Where its parts stand.
    pub places: &'p Places,
}

/// Every rule, by name.
pub fn all() -> &'static [Rule] {
    &[small_cells::RULE]
}

/// Everything that the rules find.
pub fn check(source: &Source, resolved: &ResolvedPlan, places: &Places) -> Vec<Diagnostic> {
    let plan = Plan { source, resolved, places };
    all().iter().flat_map(|rule| (rule.check)(&plan)).collect()
}
