//! Sizes that compare two cells, two occasions, or both.

mod bootstrap;
mod groups;
mod measure;

pub(super) use bootstrap::{Bootstrap, of_pair};

use super::sample::Sample;
use super::{entry, in_plan_words, refused};
use crate::canon::number::Finite;
use crate::execute::machine::{Machine, setting};
use crate::execute::words;
use crate::plan::resolved::{Better, Comparison, DifferenceStandardizer, Hypothesis, IntervalMethod, Measure, SmallSample};
use crate::results::{Detail, Entry};
use groups::Groups;

/// A comparison, every choice taken.
struct Chosen<'c> {
    comparison: &'c Comparison,
    standardizer: Option<DifferenceStandardizer>,
    small_sample: SmallSample,
    method: IntervalMethod,
    higher_is_better: bool,
}

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, comparison: &Comparison, sample: &Sample<'_>) {
    let chosen = Chosen {
        comparison,
        standardizer: comparison.standardizer.as_ref().map(|choice| machine.choose(number, "standardizer", choice)),
        small_sample: comparison
            .small_sample_correction
            .as_ref()
            .map_or(SmallSample::No, |choice| machine.choose(number, "small-sample correction", choice)),
        method: machine.choose(number, "interval method", &comparison.method),
        higher_is_better: machine.program.plan.outcomes[sample.outcome].better == Some(Better::Higher),
    };
    put_settings(machine, number, &chosen);
    for item in &comparison.items {
        let found = one(machine, &chosen, item, sample);
        machine.steps[number].results.push(found);
    }
}

fn put_settings(machine: &mut Machine<'_, '_>, number: usize, chosen: &Chosen<'_>) {
    let comparison = chosen.comparison;
    let settings = &mut machine.steps[number].settings;
    if let Some(standardizer) = &chosen.standardizer {
        setting(settings, "standardizer", in_plan_words(standardizer));
        setting(settings, "small-sample correction", in_plan_words(&chosen.small_sample));
    }
    match comparison.measure {
        Measure::DifferenceInStandardizedChange => {
            setting(settings, "standardizer", "baseline sd, pooled over the two arms");
            setting(settings, "small-sample correction", "approximate (Morris)");
        }
        Measure::RobustStandardizedDifference => setting(settings, "trimmed and Winsorized", "20 % at each end"),
        _ => {}
    }
    if comparison.measure == Measure::ReliableChange {
        setting(settings, "standard deviation", "at the earlier occasion, pooled over all arms");
    } else {
        setting(settings, "interval method", in_plan_words(&chosen.method));
    }
    for (key, value) in [
        ("reaching", comparison.reaching.map(|value| value.to_string())),
        ("reliability", comparison.reliability.map(|value| value.to_string())),
        ("resamples", comparison.resamples.map(|value| value.to_string())),
    ] {
        if let Some(value) = value {
            setting(settings, key, value);
        }
    }
}

fn one(machine: &Machine<'_, '_>, chosen: &Chosen<'_>, item: &Hypothesis, sample: &Sample<'_>) -> Entry {
    let (design, trial) = (&machine.program.plan.design, machine.samples.trial);
    let mut entry = entry(&item.reference, &item.label);
    entry.level = Finite::new(chosen.comparison.level);
    let groups = sample.moments.as_ref().map_err(Clone::clone).and_then(|_| Groups::of(design, trial, sample, item));
    let groups = match groups {
        Ok(groups) => groups,
        Err(refusal) => return refused(entry, words::refusal(&refusal, design)),
    };
    entry.n = Some(groups.subjects());
    entry.details.insert("n_by_arm".to_owned(), Detail::Numbers(groups.rows.iter().map(|rows| count(rows.len())).collect()));
    match measure::put(machine, chosen, item, &groups, sample, &mut entry) {
        Ok(()) => entry,
        Err(because) => refused(entry, because),
    }
}

fn count(n: usize) -> Finite {
    Finite::new(n as f64).unwrap_or_default()
}
