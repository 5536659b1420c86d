//! One file per species of step. Each says what it uses, computes, and writes its entries.

mod change;
mod describe;
mod explained;
mod sample;
mod screen;
mod test;

pub(crate) use describe::describe;
pub(crate) use sample::{Sample, Samples};

use crate::canon::number::Finite;
use crate::execute::machine::{Machine, setting};
use crate::plan::resolved::{Action, Choice, Condition, Estimate, ScreenKind, Step, TestKind};
use crate::results::{Detail, Entry, State, StepResult};
use std::collections::BTreeMap;

/// The conditions of each choice by cases of a step, by key.
pub(crate) fn cases(action: &Action) -> Vec<(&'static str, Vec<&Condition>)> {
    fn of<T>(choice: &Choice<T>) -> Vec<&Condition> {
        match choice {
            Choice::Fixed(_) => Vec::new(),
            Choice::Cases { cases, .. } => cases.iter().map(|case| &case.when).collect(),
        }
    }
    match action {
        Action::Screen(screen) => match &screen.kind {
            ScreenKind::EqualVariances { method } => vec![("threshold", of(&screen.threshold)), ("method", of(method))],
            _ => vec![("threshold", of(&screen.threshold))],
        },
        Action::Test(test) => vec![("error", of(&test.error)), ("correction", of(&test.correction))],
        Action::Estimate(Estimate::StandardizedChange { standardizer, small_sample_correction, interval, .. }) => vec![
            ("standardizer", of(standardizer)),
            ("small-sample correction", of(small_sample_correction)),
            ("interval method", of(&interval.method)),
        ],
        Action::Estimate(_) => Vec::new(),
    }
}

/// The result of a step before anything is known of it.
pub(crate) fn blank(step: &Step) -> StepResult {
    let (species, kind) = match &step.action {
        Action::Screen(screen) => (
            "screen",
            match screen.kind {
                ScreenKind::Sphericity { .. } => "sphericity",
                ScreenKind::EqualCovarianceMatrices => "equal covariance matrices",
                ScreenKind::EqualVariances { .. } => "equal variances",
            },
        ),
        Action::Test(test) => (
            "test",
            match test.kind {
                TestKind::Omnibus => "omnibus",
                TestKind::PartialInteractions => "partial interactions",
                TestKind::SimpleEffects => "simple effects",
            },
        ),
        Action::Estimate(estimate) => (
            "estimate",
            match estimate {
                Estimate::CellMeans { .. } => "cell means",
                Estimate::StandardizedChange { .. } => "standardized change",
                Estimate::VarianceExplained { .. } => "variance explained",
            },
        ),
    };
    let mut settings = BTreeMap::new();
    setting(&mut settings, "decided by", crate::plan::resolved::DECISION_RULE);
    StepResult {
        id: step.id.clone(),
        species: species.to_owned(),
        kind: kind.to_owned(),
        outcome: step.outcome.clone(),
        role: in_plan_words(&step.role),
        state: State::Done,
        because: None,
        settings: if species == "test" { settings } else { BTreeMap::new() },
        verdict: None,
        decision: None,
        moments: Vec::new(),
        moments_of: None,
        results: Vec::new(),
    }
}

/// How the plan writes an enumerated value: the serialized form is the language's word.
pub(crate) fn in_plan_words<T: serde::Serialize>(value: &T) -> String {
    match serde_json::to_value(value) {
        Ok(serde_json::Value::String(text)) => text,
        Ok(other) => other.to_string(),
        Err(_) => String::new(),
    }
}

/// An entry with nothing in it yet.
pub(crate) fn entry(reference: &str, label: &str) -> Entry {
    Entry {
        reference: reference.to_owned(),
        label: label.to_owned(),
        state: State::Done,
        because: None,
        statistic: None,
        p: None,
        p_bound: false,
        p_adjusted: None,
        level: None,
        verdict: None,
        n: None,
        estimate: None,
        standard_error: None,
        interval: None,
        details: BTreeMap::new(),
        sizes: Vec::new(),
        hypothesis: None,
    }
}

/// The same entry, refused.
pub(crate) fn refused(mut entry: Entry, because: impl Into<String>) -> Entry {
    entry.state = State::Refused;
    entry.because = Some(because.into());
    entry
}

/// The entries of a step that is not run: every reference stands, with the reason.
pub(crate) fn not_run_entries(action: &Action, reason: &str) -> Vec<Entry> {
    let names: Vec<(&str, &str)> = match action {
        Action::Screen(screen) => screen.references.iter().map(|reference| (reference.as_str(), "")).collect(),
        Action::Test(test) => test.hypotheses.iter().map(|hypothesis| (hypothesis.reference.as_str(), hypothesis.label.as_str())).collect(),
        Action::Estimate(Estimate::CellMeans { items, .. }) => {
            items.iter().map(|item| (item.reference.as_str(), item.label.as_str())).collect()
        }
        Action::Estimate(Estimate::StandardizedChange { items, .. }) => {
            items.iter().map(|item| (item.reference.as_str(), item.label.as_str())).collect()
        }
        Action::Estimate(Estimate::VarianceExplained { references, .. }) => {
            references.iter().map(|reference| (reference.as_str(), "")).collect()
        }
    };
    let is_test = matches!(action, Action::Test(_));
    names
        .into_iter()
        .map(|(reference, label)| {
            let mut entry = entry(reference, label);
            entry.state = State::NotRun;
            entry.because = Some(reason.to_owned());
            entry.verdict = is_test.then(|| "not tested".to_owned());
            entry
        })
        .collect()
}

/// Puts a finite number under `name`; a number that is not finite is left out, which callers explain in words.
pub(crate) fn put(details: &mut BTreeMap<String, Detail>, name: &str, value: f64) {
    if let Some(value) = Finite::new(value) {
        details.insert(name.to_owned(), Detail::Number(value));
    }
}

/// Carries out a step whose gate is open; `machine.steps[number]` is there to be filled.
pub(crate) fn run(machine: &mut Machine<'_, '_>, number: usize, sample: &Sample<'_>) {
    let plan = machine.program.plan;
    match &plan.steps[number].action {
        Action::Screen(screen) => screen::run(machine, number, screen, sample),
        Action::Test(test) => test::run(machine, number, test, sample),
        Action::Estimate(Estimate::CellMeans { level, items }) => describe::cell_means(machine, number, *level, items, sample),
        Action::Estimate(Estimate::StandardizedChange { standardizer, small_sample_correction, interval, items }) => {
            let choices = change::Choices {
                standardizer: machine.choose(number, "standardizer", standardizer),
                small_sample: machine.choose(number, "small-sample correction", small_sample_correction),
                method: machine.choose(number, "interval method", &interval.method),
                level: interval.level,
            };
            change::run(machine, number, &choices, items, sample);
        }
        Action::Estimate(Estimate::VarianceExplained { of, kinds, measured_factors, level, references }) => {
            explained::run(machine, number, &explained::Request { of, kinds, measured_factors, level: *level, references });
        }
    }
}
