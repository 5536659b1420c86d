//! Screens: what they see steers choices; it is never worded as an assumption met.

mod residuals;

use super::sample::Sample;
use super::{entry, in_plan_words, put, refused};
use crate::canon::number::Finite;
use crate::execute::machine::{Machine, setting};
use crate::execute::verdict::Verdict;
use crate::execute::words;
use crate::plan::resolved::{Choice, FactorPart, OutlyingMethod, Screen, ScreenKind, VarianceMethod};
use crate::results::{Detail, Entry, State, Statistic};
use crate::stats::adjust::{Procedure, adjust};
use crate::stats::dist::{Tail, chi_squared};
use crate::stats::hypothesis::{self as engine, Centre, Weighting, box_m, equal_spread, mauchly};
use crate::stats::model::Refusal;
use serde_json::{Map, json};

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, screen: &Screen, sample: &Sample<'_>) {
    let threshold = machine.choose(number, "threshold", &screen.threshold);
    setting(&mut machine.steps[number].settings, "threshold", threshold.to_string());
    let mut entries = match &screen.kind {
        ScreenKind::Sphericity { of } => {
            setting(&mut machine.steps[number].settings, "of", of.join(" by "));
            vec![sphericity(machine, of, &screen.references[0], sample)]
        }
        ScreenKind::EqualCovarianceMatrices => vec![covariances(machine, &screen.references[0], sample)],
        ScreenKind::EqualVariances { method } => {
            let method = machine.choose(number, "method", method);
            setting(&mut machine.steps[number].settings, "method", in_plan_words(&method));
            screen.references.iter().enumerate().map(|(occasion, reference)| spread(machine, reference, occasion, method, sample)).collect()
        }
        ScreenKind::NormalResiduals => {
            screen.references.iter().enumerate().map(|(place, reference)| residuals::normality(machine, reference, place, sample)).collect()
        }
        ScreenKind::OutlyingValues { method } => {
            let method = machine.choose(number, "method", method);
            setting(&mut machine.steps[number].settings, "method", in_plan_words(&method));
            residuals::outlying(machine, &screen.references, method, threshold, sample)
        }
        ScreenKind::Missingness => missing(machine, &screen.references, sample),
    };
    let measured = match &screen.kind {
        ScreenKind::Missingness => Some("share missing"),
        ScreenKind::OutlyingValues { method: Choice::Fixed(OutlyingMethod::StudentizedResiduals) } => Some("largest residual"),
        _ => None,
    };
    let verdict = match measured {
        Some(_) => judge_sizes(&mut entries, threshold),
        // A Mahalanobis threshold is the probability of one subject's distance, not of the largest.
        None => judge(&mut entries, threshold),
    };
    let mut evidence = Map::new();
    for entry in &entries {
        let mut seen = json!({ "p": entry.p, "p_adjusted": entry.p_adjusted, "state": entry.state });
        if let Some(statistic) = entry.statistic.as_ref().filter(|_| measured.is_some()) {
            seen[&statistic.name] = json!(statistic.value);
        }
        evidence.insert(entry.reference.clone(), seen);
    }
    let id = machine.program.plan.steps[number].id.clone();
    let words = match measured {
        Some(what) => format!("departure shown where {what} >= threshold"),
        None => "departure shown where p <= threshold".to_owned(),
    };
    let rule = json!({ "screen": machine.steps[number].kind, "threshold": threshold, "rule": words });
    let hash = machine.take_down(&id, "verdict", rule, evidence, &words::verdict(verdict, None));
    let slot = machine.program.steps[number].slots.start;
    machine.verdicts[slot] = verdict;
    let step = &mut machine.steps[number];
    step.results = entries;
    step.decision = hash.or_else(|| step.decision.take());
}

/// Adjusts over several occasions by Holm, gives each entry its verdict, and says what the screen as a whole saw.
fn judge(entries: &mut [Entry], threshold: f64) -> Verdict {
    let p: Vec<Option<f64>> = entries.iter().map(|entry| entry.p.map(Finite::get)).collect();
    let several = entries.len() > 1;
    let judged = if several { adjust(Procedure::Holm, &p) } else { p };
    for (entry, p) in entries.iter_mut().zip(&judged) {
        entry.level = Finite::new(threshold);
        if several {
            entry.p_adjusted = p.and_then(Finite::new);
        }
        entry.verdict = Some(words::verdict(p.map_or(Verdict::Refused, |p| seen(p, threshold)), None));
    }
    let verdicts: Vec<Verdict> = judged.iter().map(|p| p.map_or(Verdict::Refused, |p| seen(p, threshold))).collect();
    joined(&verdicts)
}

/// Gives each entry its verdict by the size of its statistic.
fn judge_sizes(entries: &mut [Entry], threshold: f64) -> Verdict {
    let mut all = Vec::new();
    for entry in entries.iter_mut() {
        entry.level = Finite::new(threshold);
        let verdict = match &entry.statistic {
            Some(statistic) if statistic.value.get().abs() >= threshold => Verdict::DepartureShown,
            Some(_) => Verdict::NoDepartureShown,
            None => Verdict::Refused,
        };
        entry.verdict = Some(words::verdict(verdict, None));
        all.push(verdict);
    }
    joined(&all)
}

fn joined(verdicts: &[Verdict]) -> Verdict {
    if verdicts.contains(&Verdict::DepartureShown) {
        Verdict::DepartureShown
    } else if verdicts.contains(&Verdict::Refused) {
        Verdict::Refused
    } else {
        Verdict::NoDepartureShown
    }
}

fn seen(p: f64, threshold: f64) -> Verdict {
    if p <= threshold { Verdict::DepartureShown } else { Verdict::NoDepartureShown }
}

fn sphericity(machine: &Machine<'_, '_>, of: &[String], reference: &str, sample: &Sample<'_>) -> Entry {
    let design = &machine.program.plan.design;
    let entry = entry(reference, &format!("sphericity of {}", of.join(" by ")));
    let part = |name: &String| if of.contains(name) { FactorPart::Whole } else { FactorPart::Average };
    let within: Vec<FactorPart> = design.within.iter().map(|factor| part(&factor.name)).collect();
    let between = vec![FactorPart::Average; design.between.len()];
    let found = sample.moments.as_ref().map_err(Clone::clone).and_then(|moments| {
        let hypothesis = engine::Hypothesis::new(
            &super::test::parts(&design.between, &between),
            &super::test::parts(&design.within, &within),
            Weighting::Equal,
        )?;
        let everyone = vec![true; design.cells()];
        Ok((mauchly(moments, hypothesis.within(), &everyone)?, moments.subjects(), hypothesis))
    });
    let (found, n, hypothesis) = match found {
        Ok(found) => found,
        Err(refusal) => return refuse(machine, entry, &refusal),
    };
    let mut entry = with_statistic(entry, "W", found.w, &[]);
    entry.n = Some(n);
    entry.hypothesis = Some(super::test::matrices(&hypothesis, &sample.occasions, (0..design.cells()).collect(), false));
    put(&mut entry.details, "chi_squared", found.chi_squared);
    put(&mut entry.details, "df", found.df);
    match found.p() {
        Ok(p) => with_p(entry, p),
        Err(refusal) => refuse(machine, entry, &refusal),
    }
}

fn covariances(machine: &Machine<'_, '_>, reference: &str, sample: &Sample<'_>) -> Entry {
    let entry = entry(reference, "equal covariance matrices");
    let found = sample.moments.as_ref().map_err(Clone::clone).and_then(|moments| Ok((box_m(moments)?, moments.subjects())));
    let (found, n) = match found {
        Ok(found) => found,
        Err(refusal) => return refuse(machine, entry, &refusal),
    };
    let mut entry = with_statistic(entry, "M", found.m, &[]);
    entry.n = Some(n);
    put(&mut entry.details, "F", found.f);
    entry.details.insert("df".to_owned(), Detail::Numbers([found.df1, found.df2].into_iter().filter_map(Finite::new).collect()));
    put(&mut entry.details, "chi_squared", found.chi_squared);
    put(&mut entry.details, "chi_squared_df", found.df1);
    if let Ok(p) = chi_squared::upper_tail(found.chi_squared, found.df1) {
        put(&mut entry.details, "p_chi_squared", Tail::reported(p).p);
    }
    match found.p() {
        Ok(p) => with_p(entry, p),
        Err(refusal) => refuse(machine, entry, &refusal),
    }
}

/// Share of subjects of each cell without a value at each occasion.
fn missing(machine: &Machine<'_, '_>, references: &[String], sample: &Sample<'_>) -> Vec<Entry> {
    let (design, trial) = (&machine.program.plan.design, machine.samples.trial);
    let occasions = design.occasions();
    let values = &trial.values[sample.outcome];
    references
        .iter()
        .enumerate()
        .map(|(place, reference)| {
            let (cell, occasion) = (place / occasions, place % occasions);
            let name = reference.split_once(" / ").map_or(reference.as_str(), |(_, name)| name);
            let entry = entry(reference, &format!("share missing of {name}"));
            let of_cell = || (0..trial.cell.len()).filter(|subject| trial.cell[*subject] as usize == cell);
            let count = of_cell().count();
            let without = of_cell().filter(|subject| values[subject * occasions + occasion].is_nan()).count();
            if count == 0 {
                return refused(entry, "no subject is in this arm".to_owned());
            }
            let mut entry = with_statistic(entry, "share", without as f64 / count as f64, &[]);
            entry.n = Some(count);
            put(&mut entry.details, "missing", without as f64);
            entry
        })
        .collect()
}

fn spread(machine: &Machine<'_, '_>, reference: &str, occasion: usize, method: VarianceMethod, sample: &Sample<'_>) -> Entry {
    let (design, trial) = (&machine.program.plan.design, machine.samples.trial);
    let levels = design.occasion_levels(occasion);
    let label = if levels.is_empty() { "equal variances".to_owned() } else { format!("equal variances at {}", levels.join("; ")) };
    let entry = entry(reference, &label);
    let centre = match method {
        VarianceMethod::Levene => Centre::Mean,
        VarianceMethod::BrownForsythe => Centre::Median,
    };
    let found = equal_spread(&sample.values, trial.occasions, &trial.cell, trial.cells, sample.kept.as_deref(), occasion, centre);
    let found = match found {
        Ok(found) => found,
        Err(refusal) => return refuse(machine, entry, &refusal),
    };
    let mut entry = with_statistic(entry, "F", found.f, &[found.df1, found.df2]);
    entry.n = Some((found.df1 + found.df2 + 1.0) as usize);
    match found.p() {
        Ok(p) => with_p(entry, p),
        Err(refusal) => refuse(machine, entry, &refusal),
    }
}

fn with_statistic(mut entry: Entry, name: &str, value: f64, df: &[f64]) -> Entry {
    entry.statistic = Finite::new(value).map(|value| Statistic {
        name: name.to_owned(),
        value,
        df: df.iter().filter_map(|df| Finite::new(*df)).collect(),
    });
    entry
}

fn with_p(mut entry: Entry, p: f64) -> Entry {
    let reported = Tail::reported(p);
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    entry.state = State::Done;
    entry
}

fn refuse(machine: &Machine<'_, '_>, entry: Entry, refusal: &Refusal) -> Entry {
    refused(entry, words::refusal(refusal, &machine.program.plan.design))
}
