//! Differences of means in the outcome's unit.

use super::sample::Sample;
use super::test::{lowered, term};
use super::{entry, in_plan_words, put, refused};
use crate::canon::number::Finite;
use crate::execute::machine::{Machine, setting};
use crate::execute::words;
use crate::plan::resolved::{Design, ErrorTerm, Hypothesis, Weights};
use crate::results::Entry;
use crate::stats::dist::student;
use crate::stats::hypothesis::test_univariate;
use crate::stats::model::Refusal;

/// What a step asks for.
pub(super) struct Request<'a> {
    pub error: ErrorTerm,
    pub weights: Weights,
    pub level: f64,
    pub hypotheses: &'a [Hypothesis],
}

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, request: &Request<'_>, sample: &Sample<'_>) {
    let settings = &mut machine.steps[number].settings;
    setting(settings, "error", in_plan_words(&request.error));
    setting(settings, "weights", in_plan_words(&request.weights));
    for hypothesis in request.hypotheses {
        let found = one(&machine.program.plan.design, request, hypothesis, sample);
        machine.steps[number].results.push(found);
    }
}

fn one(design: &Design, request: &Request<'_>, hypothesis: &Hypothesis, sample: &Sample<'_>) -> Entry {
    let mut entry = entry(&hypothesis.reference, &hypothesis.label);
    entry.level = Finite::new(request.level);
    let found = sample.moments.as_ref().map_err(Clone::clone).and_then(|moments| {
        let lowered = lowered(design, hypothesis, request.weights, moments)?;
        let tested = test_univariate(moments, &lowered, term(request.error))?;
        let estimate = tested.estimate.ok_or(Refusal::NotEstimable)?;
        let own = request.error == ErrorTerm::Own;
        let cells = (0..design.cells()).filter(|cell| !own || lowered.kept()[*cell]);
        Ok((estimate, tested.df2, cells.map(|cell| moments.cells()[cell].subjects).sum::<usize>()))
    });
    let (estimate, df, n) = match found {
        Ok(found) => found,
        Err(refusal) => return refused(entry, words::refusal(&refusal, design)),
    };
    entry.n = Some(n);
    entry.estimate = Finite::new(estimate.value);
    entry.standard_error = Finite::new(estimate.standard_error);
    put(&mut entry.details, "df", df);
    match student::quantile_upper((1.0 - request.level) / 2.0, df) {
        Ok(width) => {
            let half = width * estimate.standard_error;
            entry.interval =
                Finite::new(estimate.value - half).zip(Finite::new(estimate.value + half)).map(|(lower, upper)| [lower, upper]);
        }
        Err(error) => entry.because = Some(format!("no interval: {error}")),
    }
    entry
}
