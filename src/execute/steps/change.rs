//! Standardized change between two occasions within each cell.

use super::sample::Sample;
use super::sizes::{Bootstrap, of_pair};
use super::test::parts;
use super::{entry, in_plan_words, put, refused};
use crate::canon::number::Finite;
use crate::data::trial::Trial;
use crate::execute::machine::{Machine, setting};
use crate::execute::words;
use crate::plan::resolved::{self, Change, ChangeIntervalMethod, Design, SmallSample, Standardizer};
use crate::results::{Detail, Entry};
use crate::stats::hypothesis::{FactorPart, Hypothesis, Part, Weighting};
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{Moments, Refusal};
use crate::stats::resample::ArmMoments;
use crate::stats::sizes::{self, IntervalMethod, PairedSummary, change_interval, hedges_j_approximate, hedges_j_exact, standardizer_value};

/// What the plan chose for the step.
pub(super) struct Choices {
    pub standardizer: Standardizer,
    pub small_sample: SmallSample,
    pub method: ChangeIntervalMethod,
    pub level: f64,
    pub resamples: Option<u64>,
}

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, choices: &Choices, items: &[Change], sample: &Sample<'_>) {
    let settings = &mut machine.steps[number].settings;
    setting(settings, "standardizer", in_plan_words(&choices.standardizer));
    setting(settings, "small-sample correction", in_plan_words(&choices.small_sample));
    setting(settings, "interval method", in_plan_words(&choices.method));
    for item in items {
        let design = &machine.program.plan.design;
        let found = one(design, machine.samples.trial, choices, item, sample);
        machine.steps[number].results.push(found);
    }
}

fn one(design: &Design, trial: &Trial, choices: &Choices, item: &Change, sample: &Sample<'_>) -> Entry {
    let mut entry = entry(&item.reference, &item.label);
    entry.level = Finite::new(choices.level);
    let pair = sample.moments.as_ref().map_err(Clone::clone).and_then(|moments| Pair::of(design, item, moments));
    let pair = match pair {
        Ok(pair) => pair,
        Err(refusal) => return refused(entry, words::refusal(&refusal, design)),
    };
    entry.n = Some(pair.n);
    let details = &mut entry.details;
    let finite = |numbers: [f64; 2]| Detail::Numbers(numbers.into_iter().filter_map(Finite::new).collect());
    details.insert("means".to_owned(), finite(pair.means));
    details.insert("sds".to_owned(), finite(pair.sds));
    put(details, "change", pair.change);
    put(details, "sd_of_change", pair.sd_of_change);
    // The change was formed at full precision; only it enters, not the means.
    let summary = match PairedSummary::with_sd_of_change(pair.n, (0.0, pair.change), (pair.sds[0], pair.sds[1]), pair.sd_of_change) {
        Ok(summary) => summary,
        Err(refusal) => return refused(entry, refusal.reason),
    };
    if let Some(r) = summary.correlation() {
        put(&mut entry.details, "correlation", r);
    }
    if let Err(refusal) = size(&mut entry, &summary, choices, pair.n) {
        return refused(entry, refusal.reason);
    }
    if choices.method == ChangeIntervalMethod::Bca {
        match bootstrapped(design, trial, choices, item, sample, &mut entry) {
            Ok((lower, upper)) => entry.interval = Finite::new(lower).zip(Finite::new(upper)).map(|(lower, upper)| [lower, upper]),
            Err(because) => no_interval(&mut entry, &because),
        }
    }
    entry
}

fn no_interval(entry: &mut Entry, because: &str) {
    let earlier = entry.because.take().map(|earlier| format!("{earlier}; ")).unwrap_or_default();
    entry.because = Some(format!("{earlier}no interval: {because}"));
}

/// The bootstrap interval of d, uncorrected.
fn bootstrapped(
    design: &Design,
    trial: &Trial,
    choices: &Choices,
    item: &Change,
    sample: &Sample<'_>,
    entry: &mut Entry,
) -> Result<(f64, f64), String> {
    let in_words = |refusal| words::refusal(&refusal, design);
    let (first, second) = (weights(design, &item.first).map_err(in_words)?, weights(design, &item.second).map_err(in_words)?);
    let score = |subject: usize, weights: &[DoubleDouble]| -> f64 {
        let row = &sample.values[subject * design.occasions()..(subject + 1) * design.occasions()];
        row.iter().zip(weights).map(|(value, weight)| DoubleDouble::from(*value) * *weight).sum::<DoubleDouble>().value()
    };
    let pairs: Vec<f64> = (0..trial.cell.len())
        .filter(|subject| trial.cell[*subject] as usize == item.cell && sample.kept.as_ref().is_none_or(|kept| kept[*subject]))
        .flat_map(|subject| [score(subject, &first), score(subject, &second)])
        .collect();
    let mut identity = vec![item.cell as u64];
    identity.extend(first.iter().chain(&second).map(|weight| (weight.value() + 0.0).to_bits()));
    let asked = Bootstrap { resamples: choices.resamples, level: choices.level, identity: &identity };
    let standardizer = in_stats(choices.standardizer);
    let of = |arm: &ArmMoments| {
        let sds = (arm.standard_deviation(0), arm.standard_deviation(1));
        let of_change = (arm.covariance(0, 0) + arm.covariance(1, 1) - 2.0 * arm.covariance(0, 1)).max(0.0).sqrt();
        PairedSummary::with_sd_of_change(arm.subjects as usize, (arm.mean[0], arm.mean[1]), sds, of_change)
            .and_then(|summary| sizes::standardized_change(&summary, standardizer))
            .unwrap_or(f64::NAN)
    };
    if entry.details.contains_key("J") {
        entry.details.insert("interval_of".to_owned(), Detail::Text("d, uncorrected".to_owned()));
    }
    of_pair(&asked, &pairs, &of, entry)
}

fn size(entry: &mut Entry, summary: &PairedSummary, choices: &Choices, n: usize) -> Result<(), sizes::Refusal> {
    let standardizer = in_stats(choices.standardizer);
    let divisor = standardizer_value(summary, standardizer)?;
    let d = sizes::standardized_change(summary, standardizer)?;
    put(&mut entry.details, "standardizer", divisor);
    put(&mut entry.details, "d", d);
    let m = n as f64 - 1.0;
    let j = match choices.small_sample {
        SmallSample::No => Ok(None),
        SmallSample::Yes | SmallSample::Both => hedges_j_exact(m).map(Some),
        SmallSample::Approximate => hedges_j_approximate(m).map(Some),
    };
    // Where both are asked for, d stands although g cannot.
    let j = match j {
        Err(refusal) if choices.small_sample == SmallSample::Both => {
            entry.because = Some(format!("no g: {}", refusal.reason));
            None
        }
        other => other?,
    };
    if let Some(j) = j {
        put(&mut entry.details, "J", j);
        put(&mut entry.details, "g", j * d);
    }
    let reported = match (choices.small_sample, j) {
        (SmallSample::Yes | SmallSample::Approximate, Some(j)) => j * d,
        _ => d,
    };
    entry.estimate = Finite::new(reported);
    let method = match choices.method {
        ChangeIntervalMethod::Bonett => IntervalMethod::Bonett,
        ChangeIntervalMethod::NoncentralT => IntervalMethod::NoncentralT,
        // It needs the subjects, not their summary.
        ChangeIntervalMethod::Bca => return Ok(()),
        ChangeIntervalMethod::None => {
            entry.level = None;
            return Ok(());
        }
    };
    match change_interval(summary, standardizer, method, choices.level) {
        Ok(found) => {
            entry.interval = Finite::new(found.lower).zip(Finite::new(found.upper)).map(|(lower, upper)| [lower, upper]);
            entry.standard_error = found.standard_error.and_then(Finite::new);
            if j.is_some() {
                entry.details.insert("interval_of".to_owned(), Detail::Text("d, uncorrected".to_owned()));
            }
        }
        Err(refusal) => {
            no_interval(entry, &refusal.reason);
        }
    }
    Ok(())
}

/// Two scores of the subjects of one cell.
struct Pair {
    n: usize,
    means: [f64; 2],
    sds: [f64; 2],
    change: f64,
    sd_of_change: f64,
}

impl Pair {
    fn of(design: &Design, item: &Change, moments: &Moments) -> Result<Pair, Refusal> {
        let cell = &moments.cells()[item.cell];
        let n = cell.subjects;
        if n < 2 {
            return Err(if n == 0 { Refusal::EmptyCell { cell: item.cell } } else { Refusal::NoErrorDf });
        }
        let first = weights(design, &item.first)?;
        let second = weights(design, &item.second)?;
        let difference: Vec<DoubleDouble> = first.iter().zip(&second).map(|(first, second)| *second - *first).collect();
        let mean = |weights: &[DoubleDouble]| weights.iter().zip(&cell.mean).map(|(weight, mean)| *weight * *mean).sum::<DoubleDouble>();
        let basis = Matrix::from_rows(&[first.clone(), second.clone(), difference.clone()]).transpose();
        let products = cell.cross_products.congruence(&basis);
        let sd = |place: usize| {
            let variance = products[(place, place)] / DoubleDouble::from(n - 1);
            // What rounding leaves of a zero is zero, by the rule of the engine.
            let largest = cell.largest.iter().fold(0.0_f64, |so_far, value| so_far.max(*value));
            if variance.value() <= moments_floor(largest) { 0.0 } else { variance.sqrt().value() }
        };
        Ok(Pair {
            n,
            means: [mean(&first).value(), mean(&second).value()],
            sds: [sd(0), sd(1)],
            change: mean(&difference).value(),
            sd_of_change: sd(2),
        })
    }
}

/// A variance of values up to `largest` at or below this is what rounding of the inputs leaves.
fn moments_floor(largest: f64) -> f64 {
    let step = 4.0 * f64::EPSILON * largest;
    step * step
}

/// One weight per occasion.
fn weights(design: &Design, within: &[resolved::FactorPart]) -> Result<Vec<DoubleDouble>, Refusal> {
    let one_group = [FactorPart::new(1, Part::Average)];
    let hypothesis = Hypothesis::new(&one_group, &parts(&design.within, within), Weighting::Equal)?;
    hypothesis.single().map(|(_, within)| within.to_vec()).ok_or(Refusal::NotEstimable)
}

fn in_stats(standardizer: Standardizer) -> sizes::Standardizer {
    match standardizer {
        Standardizer::AverageSd => sizes::Standardizer::AverageSd,
        Standardizer::RootMeanSquareSd => sizes::Standardizer::RootMeanSquareSd,
        Standardizer::BaselineSd => sizes::Standardizer::BaselineSd,
        Standardizer::ChangeSd => sizes::Standardizer::ChangeSd,
        Standardizer::ChangeSdCorrelationRemoved => sizes::Standardizer::ChangeSdCorrelationRemoved,
    }
}
