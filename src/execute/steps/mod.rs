//! One file per species of step. Each says what it uses, computes, and writes its entries.

mod change;
mod describe;
mod differences;
mod explained;
mod sample;
mod screen;
mod sizes;
mod test;

pub(crate) use describe::describe;
pub(crate) use sample::{Sample, Samples};
pub(crate) use test::{lowered, one_side, rounded, term};

use crate::canon::number::Finite;
use crate::execute::machine::{Machine, setting};
use crate::plan::resolved::{Action, Choice, Comparison, Condition, Estimate, ScreenKind, Step, TestKind};
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
            ScreenKind::OutlyingValues { method } => vec![("threshold", of(&screen.threshold)), ("method", of(method))],
            _ => vec![("threshold", of(&screen.threshold))],
        },
        Action::Test(test) => vec![
            ("method", of(&test.method)),
            ("criterion", test.criterion.as_ref().map_or(Vec::new(), of)),
            ("error", of(&test.error)),
            ("correction", of(&test.correction)),
        ],
        Action::Estimate(Estimate::StandardizedChange { standardizer, small_sample_correction, interval, .. }) => vec![
            ("standardizer", of(standardizer)),
            ("small-sample correction", of(small_sample_correction)),
            ("interval method", of(&interval.method)),
        ],
        Action::Estimate(Estimate::Differences { error, .. }) => vec![("error", of(error))],
        Action::Estimate(Estimate::Comparison(comparison)) => vec![
            ("standardizer", comparison.standardizer.as_ref().map_or(Vec::new(), of)),
            ("small-sample correction", comparison.small_sample_correction.as_ref().map_or(Vec::new(), of)),
            ("interval method", of(&comparison.method)),
        ],
        Action::Estimate(Estimate::CellMeans { .. } | Estimate::VarianceExplained { .. }) => Vec::new(),
    }
}

/// The result of a step before anything is known of it.
pub(crate) fn blank(step: &Step) -> StepResult {
    let (species, kind): (&str, String) = match &step.action {
        Action::Screen(screen) => (
            "screen",
            match &screen.kind {
                ScreenKind::Sphericity { .. } => "sphericity".to_owned(),
                ScreenKind::EqualCovarianceMatrices => "equal covariance matrices".to_owned(),
                ScreenKind::EqualVariances { .. } => "equal variances".to_owned(),
                ScreenKind::NormalResiduals => "normal residuals".to_owned(),
                ScreenKind::OutlyingValues { .. } => "outlying values".to_owned(),
                ScreenKind::Missingness => "missingness".to_owned(),
            },
        ),
        Action::Test(test) => (
            "test",
            match test.kind {
                TestKind::Omnibus => "omnibus".to_owned(),
                TestKind::PartialInteractions => "partial interactions".to_owned(),
                TestKind::SimpleEffects => "simple effects".to_owned(),
                TestKind::Contrasts => "contrasts".to_owned(),
                TestKind::Equivalence => "equivalence".to_owned(),
                TestKind::NonInferiority => "non-inferiority".to_owned(),
                TestKind::LargestContrast => "largest contrast".to_owned(),
            },
        ),
        Action::Estimate(estimate) => (
            "estimate",
            match estimate {
                Estimate::CellMeans { .. } => "cell means".to_owned(),
                Estimate::StandardizedChange { .. } => "standardized change".to_owned(),
                Estimate::VarianceExplained { .. } => "variance explained".to_owned(),
                Estimate::Differences { .. } => "differences".to_owned(),
                Estimate::Comparison(comparison) => in_plan_words(&comparison.measure),
            },
        ),
    };
    let mut settings = BTreeMap::new();
    setting(&mut settings, "decided by", crate::plan::resolved::DECISION_RULE);
    StepResult {
        id: step.id.clone(),
        species: species.to_owned(),
        kind,
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
        Action::Estimate(Estimate::Differences { hypotheses: items, .. } | Estimate::Comparison(Comparison { items, .. })) => {
            items.iter().map(|item| (item.reference.as_str(), item.label.as_str())).collect()
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
                resamples: interval.resamples,
            };
            change::run(machine, number, &choices, items, sample);
        }
        Action::Estimate(Estimate::VarianceExplained { of, kinds, measured_factors, level, references }) => {
            explained::run(machine, number, &explained::Request { of, kinds, measured_factors, level: *level, references });
        }
        Action::Estimate(Estimate::Differences { error, weights, level, hypotheses }) => {
            let error = machine.choose(number, "error", error);
            differences::run(machine, number, &differences::Request { error, weights: *weights, level: *level, hypotheses }, sample);
        }
        Action::Estimate(Estimate::Comparison(comparison)) => sizes::run(machine, number, comparison, sample),
    }
}
