//! Cells in which a mean, a standard deviation and an F test rest on very few subjects.

use super::{Plan, Rule};
use crate::text::diagnostic::{Diagnostic, Severity};

/// Fewest subjects in a cell that pass without a word (common practice; no published bound).
const FEWEST: u64 = 5;

pub(super) const RULE: Rule = Rule {
    name: "small-cells",
    severity: Severity::Warning,
    explanation: "A planned arm has fewer than five subjects. Its standard deviation is then hardly known, and intervals and \
                  tests lean on normality more than such data can show. Plan more subjects, or acknowledge it with the reason \
                  why that cannot be. The bound of five is common practice.",
    flagged: ("expected subjects: {booklet: 36, coached: 36}", "expected subjects: {booklet: 4, coached: 36}"),
    check,
};

fn check(plan: &Plan<'_>) -> Vec<Diagnostic> {
    let small: Vec<String> = plan
        .resolved
        .data
        .expected_subjects
        .iter()
        .filter(|planned| planned.subjects < FEWEST)
        .map(|planned| {
            format!("{} in {}", planned.subjects, if planned.levels.is_empty() { "all".to_owned() } else { planned.levels.join("; ") })
        })
        .collect();
    if small.is_empty() {
        return Vec::new();
    }
    let place = plan.places.keys.get("data").copied().unwrap_or_default();
    vec![
        Diagnostic::warning(RULE.name, format!("very few subjects are planned: {}", small.join(", ")))
            .at(plan.source.label(place, "`expected subjects` in here"))
            .hint("plan more, or write why that cannot be under `acknowledged: {small-cells: REASON}`"),
    ]
}
