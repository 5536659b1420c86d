//! Share of variance that tested effects explain.

use super::{entry, in_plan_words, refused};
use crate::canon::number::Finite;
use crate::execute::machine::{Machine, setting};
use crate::execute::words;
use crate::plan::resolved::{Action, ErrorTerm, FactorPart, Hypothesis, TestKind, VarianceExplainedKind, Weights};
use crate::results::{Entry, Size, State};
use crate::stats::hypothesis::{self as engine, UnivariateTest, Weighting, crossed_effects, error_strata, test_univariate};
use crate::stats::model::Refusal;
use crate::stats::sizes::{self, EffectSum, generalized_eta_squared, partial_eta_squared as share, partial_eta_squared_interval};

/// What a step asks for.
pub(super) struct Request<'a> {
    pub of: &'a [String],
    pub kinds: &'a [VarianceExplainedKind],
    pub measured_factors: &'a [String],
    pub level: f64,
    pub references: &'a [String],
}

/// Partial eta squared of a test at uncorrected sums of squares and df, with its interval at confidence `level`.
pub(super) fn partial_eta_squared(tested: &UnivariateTest, level: f64) -> Size {
    let name = "partial eta squared".to_owned();
    let value = match share(tested.ss, tested.ss_error) {
        Ok(value) => value,
        Err(refusal) => return Size { name, value: None, interval: None, level: None, because: Some(refusal.reason) },
    };
    let level = super::test::rounded(level);
    let (interval, because) = match partial_eta_squared_interval(tested.f, tested.df1, tested.df2, level) {
        Ok((lower, upper)) => {
            let outside = (value < lower || value > upper).then(|| "the estimate lies outside its interval".to_owned());
            (Finite::new(lower).zip(Finite::new(upper)).map(|(lower, upper)| [lower, upper]), outside)
        }
        Err(refusal) => (None, Some(format!("no interval: {}", refusal.reason))),
    };
    Size { name, value: Finite::new(value), interval, level: Finite::new(level), because }
}

/// Omega squared of a test at uncorrected df, with its interval at confidence `level`.
fn omega_squared(tested: &UnivariateTest, level: f64) -> Size {
    let name = "omega squared".to_owned();
    let value = match sizes::omega_squared(tested.f, tested.df1, tested.df2) {
        Ok(value) => value,
        Err(refusal) => return Size { name, value: None, interval: None, level: None, because: Some(refusal.reason) },
    };
    let level = super::test::rounded(level);
    match sizes::omega_squared_interval(tested.f, tested.df1, tested.df2, level) {
        Ok((lower, upper)) => {
            let interval = Finite::new(lower).zip(Finite::new(upper)).map(|(lower, upper)| [lower, upper]);
            let outside = (value < lower || value > upper).then(|| "the estimate lies outside its interval".to_owned());
            Size { name, value: Finite::new(value), interval, level: Finite::new(level), because: outside }
        }
        Err(refusal) => Size {
            name,
            value: Finite::new(value),
            interval: None,
            level: Finite::new(level),
            because: Some(format!("no interval: {}", refusal.reason)),
        },
    }
}

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, request: &Request<'_>) {
    let settings = &mut machine.steps[number].settings;
    setting(settings, "kind", request.kinds.iter().map(in_plan_words).collect::<Vec<_>>().join(", "));
    if request.kinds.contains(&VarianceExplainedKind::OmegaSquared) {
        setting(settings, "omega squared", sizes::OMEGA_SQUARED_FORMULA);
    }
    setting(
        settings,
        "measured factors",
        if request.measured_factors.is_empty() { "none".to_owned() } else { request.measured_factors.join(", ") },
    );
    for (of, reference) in request.of.iter().zip(request.references) {
        let found = one(machine, of, reference, request);
        machine.steps[number].results.push(found);
    }
}

fn one(machine: &mut Machine<'_, '_>, of: &str, reference: &str, request: &Request<'_>) -> Entry {
    let mut entry = entry(reference, of);
    entry.level = Finite::new(request.level);
    let plan = machine.program.plan;
    let Some(slot) = machine.program.slots.iter().find(|slot| slot.reference == of) else {
        return refused(entry, format!("{of} is not a test of the plan"));
    };
    let (Action::Test(test), Some(done)) = (&plan.steps[slot.step].action, machine.steps.get(slot.step)) else {
        return refused(entry, format!("{of} has not been tested when this step runs"));
    };
    let Some(result) = done.results.get(slot.hypothesis).filter(|result| result.state == State::Done) else {
        let state = done.because.clone().or_else(|| done.results.get(slot.hypothesis).and_then(|result| result.because.clone()));
        entry.state = State::NotRun;
        entry.because = Some(format!("{of} has no result: {}", state.unwrap_or_else(|| "it was not tested".to_owned())));
        return entry;
    };
    entry.n = result.n;
    if let Some(method) = done.settings.get("method").filter(|method| *method != "univariate") {
        return refused(entry, format!("{of} was tested by the method {method}, and shares of variance belong to the univariate test"));
    }
    let error = match done.settings.get("error").map(String::as_str) {
        Some("own") => ErrorTerm::Own,
        Some("own occasions") => ErrorTerm::OwnOccasions,
        _ => ErrorTerm::Pooled,
    };
    let hypothesis = &test.hypotheses[slot.hypothesis];
    let kind = test.kind;
    let sample = machine.samples.of(&plan.steps[slot.step]);
    let tested = tested(machine, hypothesis, error, test.weights, &sample);
    for kind_of_size in request.kinds {
        let size = match (&tested, kind_of_size) {
            (Err(refusal), _) => Size {
                name: in_plan_words(kind_of_size),
                value: None,
                interval: None,
                level: None,
                because: Some(words::refusal(refusal, &plan.design)),
            },
            (Ok(tested), VarianceExplainedKind::PartialEtaSquared) => partial_eta_squared(tested, request.level),
            (Ok(tested), VarianceExplainedKind::OmegaSquared) => omega_squared(tested, request.level),
            (Ok(_), VarianceExplainedKind::GeneralizedEtaSquared) => {
                let found = if !test.covariates.is_empty() {
                    Err("the generalized form does not say where the variance of covariates belongs; the partial form may be asked for"
                        .to_owned())
                } else if kind == TestKind::Omnibus {
                    generalized(machine, hypothesis, test.weights, request.measured_factors, &sample)
                } else {
                    Err("the generalized form is defined for the effects of a whole design, not for a piece of one; the partial form may be asked for".to_owned())
                };
                let name = in_plan_words(kind_of_size);
                match found {
                    Ok(value) => Size {
                        name,
                        value: Finite::new(value),
                        interval: None,
                        level: None,
                        because: Some("no interval is published for it".to_owned()),
                    },
                    Err(because) => Size { name, value: None, interval: None, level: None, because: Some(because) },
                }
            }
        };
        entry.sizes.push(size);
    }
    entry.estimate = entry.sizes.first().and_then(|size| size.value);
    entry.interval = entry.sizes.first().and_then(|size| size.interval);
    if entry.sizes.iter().all(|size| size.value.is_none()) {
        let because = entry.sizes.first().and_then(|size| size.because.clone()).unwrap_or_default();
        return refused(entry, because);
    }
    entry
}

fn tested(
    machine: &Machine<'_, '_>,
    hypothesis: &Hypothesis,
    error: ErrorTerm,
    weights: Weights,
    sample: &super::Sample<'_>,
) -> Result<UnivariateTest, Refusal> {
    let design = &machine.program.plan.design;
    let moments = sample.moments.as_ref().map_err(Clone::clone)?;
    let lowered = super::test::lowered(design, hypothesis, weights, moments)?;
    test_univariate(moments, &lowered, super::test::term(error))
}

/// Olejnik and Algina's form for an effect of the whole design.
fn generalized(
    machine: &Machine<'_, '_>,
    hypothesis: &Hypothesis,
    weights: Weights,
    measured: &[String],
    sample: &super::Sample<'_>,
) -> Result<f64, String> {
    let design = &machine.program.plan.design;
    let in_words = |refusal: Refusal| words::refusal(&refusal, design);
    let moments = sample.moments.as_ref().map_err(|refusal| in_words(refusal.clone()))?;
    let levels = |factors: &[crate::plan::resolved::Factor]| factors.iter().map(|factor| factor.levels.len()).collect::<Vec<_>>();
    let (between, within) = (levels(&design.between), levels(&design.within));
    let counts = moments.cell_sizes();
    let weighting = match weights {
        Weights::Equal => Weighting::Equal,
        Weights::Observed => Weighting::Observed(&counts),
    };
    let effects = crossed_effects(moments, &between, &within, weighting).map_err(in_words)?;
    let strata = error_strata(moments, &within).map_err(in_words)?;
    let involved = |parts: &[FactorPart]| parts.iter().map(|part| *part == FactorPart::Whole).collect::<Vec<_>>();
    let (own_between, own_within) = (involved(&hypothesis.between), involved(&hypothesis.within));
    let is_grand_mean = |effect: &engine::Effect| !effect.between.contains(&true) && !effect.within.contains(&true);
    let effects: Vec<&engine::Effect> = effects.iter().filter(|effect| !is_grand_mean(effect)).collect();
    let place = effects
        .iter()
        .position(|effect| effect.between == own_between && effect.within == own_within)
        .ok_or("the effect is not one of the crossed design's")?;
    let names = design.between.iter().chain(&design.within).map(|factor| factor.name.as_str()).collect::<Vec<_>>();
    let sums: Vec<EffectSum> = effects
        .iter()
        .map(|effect| EffectSum {
            sum_of_squares: effect.ss,
            measured: effect
                .between
                .iter()
                .chain(&effect.within)
                .zip(&names)
                .any(|(involved, name)| *involved && measured.iter().any(|m| m == name)),
        })
        .collect();
    let errors: Vec<f64> = strata.iter().map(|stratum| stratum.ss).collect();
    generalized_eta_squared(place, &sums, &errors).map_err(|refusal| refusal.reason)
}
