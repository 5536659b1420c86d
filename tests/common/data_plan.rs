//! Plans for tests of data: an invented study of two arms and three visits, with a `data` section of the test's own.

use aforesaid::plan::checked::compile;
use aforesaid::plan::resolved::ResolvedPlan;
use aforesaid::text::render::to_text;

/// The `data` section of most tests: long, arms in a separate file.
pub const LONG: &str = "layout: long, subject: person, occasions: {visit: visit}, values: {score: score}, \
    allocation: separate file, arms: {arm: arm}, missing values: ['', NA]";

/// The same with the arms in the data.
pub const LONG_WITH_ARMS: &str = "layout: long, subject: person, occasions: {visit: visit}, values: {score: score}, \
    allocation: in the data, arms: {arm: arm}, missing values: ['', NA]";

/// Wide, arms in the data.
pub const WIDE: &str = "layout: wide, subject: person, values: {score: {start: s1, week 6: s2, month 6: s3}}, \
    allocation: in the data, arms: {arm: arm}, missing values: ['', NA]";

/// A plan whose `data` is the flow map of these entries.
///
/// # Panics
/// Where the plan has an error.
pub fn plan(data: &str) -> ResolvedPlan {
    plan_of(
        data,
        "{between: {arm: [usual, extra]}, within: {visit: [start, week 6, month 6]}}",
        "arm by visit",
        "{score: {range: [0, 100]}}",
    )
}

/// A plan of any design.
///
/// # Panics
/// Where the plan has an error.
pub fn plan_of(data: &str, design: &str, effect: &str, outcomes: &str) -> ResolvedPlan {
    let first = outcomes.trim_start_matches('{').split(':').next().unwrap_or("");
    let text = format!(
        "plan: 1
title: A made-up study
data: {{{data}}}
design: {design}
outcomes: {outcomes}
missing data: {{rule: complete cases}}
alpha: 0.05
steps:
  - {{id: omnibus, test: omnibus, effect: {effect}, correction: none, outcome: {first}}}
conclusions:
  - {{when: {{omnibus: significant}}, say: They differed.}}
  - {{otherwise: They were not shown to differ.}}
"
    );
    let compilation = compile("plan.yaml", text.as_bytes());
    compilation.plan.unwrap_or_else(|| panic!("{}", to_text(&compilation.findings, false))).resolved().clone()
}
