//! Tests of hypotheses L B M = 0: each method in a file of its own.

mod claim;
mod comparison;
mod largest;
mod multivariate;
mod randomised;
mod univariate;
mod welch_james;

use super::sample::Sample;
use super::{entry, in_plan_words, refused};
use crate::canon::number::Finite;
use crate::execute::machine::{Machine, Raw, setting};
use crate::execute::verdict::Direction;
use crate::execute::words;
use crate::plan::resolved::{
    self, CorrectionRule, Criterion, Design, ErrorTerm, Factor, Hypothesis, Method, Sides, Test, TestKind, Weights,
};
use crate::results::{Entry, ErrorStratum, Matrices};
use crate::stats::hypothesis::{self as engine, FactorPart, Part, Weighting};
use crate::stats::linear::Matrix;
use crate::stats::model::{Moments, Refusal};

pub(crate) use comparison::{one_side, rounded};

/// What a hypothesis does with each factor, in the engine's terms.
pub(crate) fn parts(factors: &[Factor], parts: &[resolved::FactorPart]) -> Vec<FactorPart> {
    let place = |factor: &Factor, name: &str| factor.levels.iter().position(|level| level == name).unwrap_or(0);
    let row = |factor: &Factor, weights: &[resolved::LevelWeight]| {
        let mut row = vec![0.0; factor.levels.len()];
        weights.iter().for_each(|weight| row[place(factor, &weight.level)] = weight.weight);
        Part::Weights(vec![row])
    };
    factors
        .iter()
        .zip(parts)
        .map(|(factor, part)| {
            let part = match part {
                resolved::FactorPart::Average => Part::Average,
                resolved::FactorPart::Whole => Part::Whole,
                resolved::FactorPart::Hold(level) => Part::Hold(place(factor, level)),
                resolved::FactorPart::Weights(weights) | resolved::FactorPart::Mean(weights) => row(factor, weights),
                resolved::FactorPart::AgainstLater(level) => {
                    let level = place(factor, level);
                    Part::MeanMinus { of: (level + 1..factor.levels.len()).collect(), level }
                }
                resolved::FactorPart::Trend { degree, spacing } => Part::Trend { spacing: spacing.clone(), degree: *degree },
            };
            FactorPart::new(factor.levels.len(), part)
        })
        .collect()
}

/// A hypothesis in matrices.
pub(crate) fn lowered(
    design: &Design,
    hypothesis: &Hypothesis,
    weights: Weights,
    moments: &Moments,
) -> Result<engine::Hypothesis, Refusal> {
    let sizes = moments.cell_sizes();
    let weighting = match weights {
        Weights::Equal => Weighting::Equal,
        Weights::Observed => Weighting::Observed(&sizes),
    };
    engine::Hypothesis::new(&parts(&design.between, &hypothesis.between), &parts(&design.within, &hypothesis.within), weighting)
}

/// How the tests of a step are carried out, every choice taken.
struct Chosen<'t> {
    test: &'t Test,
    method: Method,
    criterion: Option<Criterion>,
    error: ErrorTerm,
    correction: CorrectionRule,
    /// Level of the family, else of the step.
    level: f64,
}

/// What a test found, its numbers being in its entry.
struct Tested {
    p: f64,
    direction: Direction,
}

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, test: &Test, sample: &Sample<'_>) {
    let method = machine.choose(number, "method", &test.method);
    let chosen = Chosen {
        test,
        method,
        criterion: test.criterion.as_ref().map(|choice| machine.choose(number, "criterion", choice)),
        error: machine.choose(number, "error", &test.error),
        correction: machine.choose(number, "correction", &test.correction),
        level: level_of(machine, number, test),
    };
    put_settings(machine, number, &chosen, sample);
    for (index, hypothesis) in test.hypotheses.iter().enumerate() {
        let slot = machine.program.steps[number].slots.start + index;
        let mut entry = entry(&hypothesis.reference, &hypothesis.label);
        entry.level = Finite::new(chosen.level);
        let (entry, raw) = match one(machine, number, &chosen, hypothesis, sample, &mut entry) {
            Ok(tested) => (entry, Raw::Tested { p: tested.p, direction: tested.direction }),
            Err(because) => {
                let mut entry = refused(entry, because);
                entry.verdict = Some("refused".to_owned());
                (entry, Raw::Refused)
            }
        };
        machine.raw[slot] = raw;
        machine.steps[number].results.push(entry);
    }
}

fn put_settings(machine: &mut Machine<'_, '_>, number: usize, chosen: &Chosen<'_>, sample: &Sample<'_>) {
    let test = chosen.test;
    let settings = &mut machine.steps[number].settings;
    setting(settings, "method", in_plan_words(&chosen.method));
    setting(settings, "weights", in_plan_words(&test.weights));
    if chosen.method != Method::WelchJames {
        setting(settings, "error", in_plan_words(&chosen.error));
    }
    match chosen.method {
        Method::Univariate => setting(settings, "correction", words::correction_rule(&chosen.correction)),
        Method::Multivariate => {
            if let Some(criterion) = &chosen.criterion {
                setting(settings, "criterion", in_plan_words(criterion));
            }
        }
        Method::Randomisation => {
            if let Some(deals) = test.deals {
                setting(settings, "deals", deals.to_string());
            }
        }
        Method::WelchJames => {}
    }
    if let Sides::One { favours } = &test.sides {
        setting(settings, "sides", format!("one, {}", words::direction(favours)));
    }
    if !sample.covariates.is_empty() {
        setting(settings, "covariates", words::covariates(&sample.covariates));
        if sample.without_covariate > 0 {
            setting(settings, "left out for a missing covariate", sample.without_covariate.to_string());
        }
    }
}

/// The level that a step's tests are judged at: their family's, else the step's own.
fn level_of(machine: &Machine<'_, '_>, number: usize, test: &Test) -> f64 {
    let program = machine.program;
    let family = program.steps[number].slots.clone().find_map(|slot| program.slots[slot].family);
    family.map_or(test.level, |family| program.plan.families[family].alpha)
}

fn one(
    machine: &mut Machine<'_, '_>,
    number: usize,
    chosen: &Chosen<'_>,
    hypothesis: &Hypothesis,
    sample: &Sample<'_>,
    entry: &mut Entry,
) -> Result<Tested, String> {
    let design = &machine.program.plan.design;
    let in_words = |refusal: Refusal| words::refusal_with(&refusal, design, &sample.covariates);
    let moments = sample.moments.as_ref().map_err(|refusal| in_words(refusal.clone()))?;
    let lowered = lowered(design, hypothesis, chosen.test.weights, moments).map_err(in_words)?;
    let own = chosen.error == ErrorTerm::Own || chosen.method == Method::WelchJames;
    let error_cells: Vec<usize> = (0..design.cells()).filter(|cell| !own || lowered.kept()[*cell]).collect();
    entry.n = Some(error_cells.iter().map(|cell| moments.cells()[*cell].subjects).sum());
    let pooled = chosen.error == ErrorTerm::Pooled && chosen.method != Method::WelchJames;
    entry.hypothesis = Some(matrices(&lowered, &sample.occasions, error_cells, pooled));
    let case = Case { chosen, hypothesis, moments, lowered: &lowered, in_words: &in_words };
    match (chosen.test.kind, chosen.method) {
        (TestKind::LargestContrast, _) => largest::test(machine, number, &case, entry),
        (_, Method::Univariate) => univariate::test(machine, number, &case, entry),
        (_, Method::Multivariate) => multivariate::test(&case, entry),
        (_, Method::WelchJames) => welch_james::test(&case, entry),
        (_, Method::Randomisation) => randomised::test(machine, &case, sample, entry),
    }
}

/// One hypothesis about to be tested.
struct Case<'c> {
    chosen: &'c Chosen<'c>,
    hypothesis: &'c Hypothesis,
    moments: &'c Moments,
    lowered: &'c engine::Hypothesis,
    in_words: &'c dyn Fn(Refusal) -> String,
}

/// The error term in the engine's terms.
pub(crate) fn term(error: ErrorTerm) -> engine::ErrorTerm {
    match error {
        ErrorTerm::Own => engine::ErrorTerm::Own,
        ErrorTerm::OwnOccasions => engine::ErrorTerm::OwnOccasions,
        ErrorTerm::Pooled => engine::ErrorTerm::Pooled,
    }
}

/// L and M as written for one contrast, else the orthonormal rows and columns that were used.
pub(super) fn matrices(lowered: &engine::Hypothesis, occasions: &[usize], error_cells: Vec<usize>, pooled: bool) -> Matrices {
    let finite = |row: Vec<f64>| row.into_iter().filter_map(Finite::new).collect::<Vec<_>>();
    let of_occasions = |matrix: &Matrix| {
        let rows = matrix.to_rows();
        occasions.iter().map(|occasion| finite(rows[*occasion].clone())).collect::<Vec<_>>()
    };
    let (l, m) = match lowered.single() {
        Some((between, within)) => (
            vec![finite(between.iter().map(|weight| weight.value()).collect())],
            occasions.iter().map(|occasion| finite(vec![within[*occasion].value()])).collect(),
        ),
        None => (lowered.between().to_rows().into_iter().map(finite).collect(), of_occasions(lowered.within())),
    };
    let strata = if pooled { engine::pooled_strata(lowered) } else { Vec::new() };
    let error_strata = strata
        .iter()
        .filter_map(|(basis, share)| Some(ErrorStratum { share: Finite::new(share.value())?, m: of_occasions(basis) }))
        .collect();
    Matrices { l, m, error_cells, error_strata }
}
