//! Tests of hypotheses L B M = 0 by the univariate F.

use super::sample::Sample;
use super::{entry, in_plan_words, put, refused};
use crate::canon::number::Finite;
use crate::execute::machine::{Machine, Raw, setting};
use crate::execute::verdict::Direction;
use crate::execute::words;
use crate::plan::resolved::{self, Correction, CorrectionRule, ErrorTerm, Factor, Hypothesis, Test};
use crate::results::{Detail, Entry, Matrices, Statistic};
use crate::stats::dist::{Tail, student};
use crate::stats::hypothesis::{self as engine, Epsilons, FactorPart, Part, UnivariateTest, Weighting, test_univariate};
use crate::stats::model::Moments;
use serde_json::{Map, json};
use std::collections::BTreeMap;

/// What a hypothesis does with each factor, in the engine's terms.
pub(crate) fn parts(factors: &[Factor], parts: &[resolved::FactorPart]) -> Vec<FactorPart> {
    let place = |factor: &Factor, name: &str| factor.levels.iter().position(|level| level == name).unwrap_or(0);
    factors
        .iter()
        .zip(parts)
        .map(|(factor, part)| {
            let part = match part {
                resolved::FactorPart::Average => Part::Average,
                resolved::FactorPart::Whole => Part::Whole,
                resolved::FactorPart::Hold(level) => Part::Hold(place(factor, level)),
                resolved::FactorPart::Weights(weights) => {
                    let mut row = vec![0.0; factor.levels.len()];
                    weights.iter().for_each(|weight| row[place(factor, &weight.level)] = weight.weight);
                    Part::Weights(vec![row])
                }
            };
            FactorPart::new(factor.levels.len(), part)
        })
        .collect()
}

pub(super) fn run(machine: &mut Machine<'_, '_>, number: usize, test: &Test, sample: &Sample<'_>) {
    let error = machine.choose(number, "error", &test.error);
    let rule = machine.choose(number, "correction", &test.correction);
    let level = level_of(machine, number, test);
    let settings = &mut machine.steps[number].settings;
    setting(settings, "method", in_plan_words(&test.method));
    setting(settings, "error", in_plan_words(&error));
    setting(settings, "weights", in_plan_words(&test.weights));
    setting(settings, "correction", words::correction_rule(&rule));
    for (index, hypothesis) in test.hypotheses.iter().enumerate() {
        let slot = machine.program.steps[number].slots.start + index;
        let (entry, raw) = match one(machine, number, hypothesis, error, &rule, level, sample) {
            Ok((entry, raw)) => (entry, raw),
            Err((entry, because)) => {
                let mut entry = refused(*entry, because);
                entry.verdict = Some("refused".to_owned());
                (entry, Raw::Refused)
            }
        };
        machine.raw[slot] = raw;
        machine.steps[number].results.push(entry);
    }
}

/// The level that a step's tests are judged at: their family's, else the step's own.
fn level_of(machine: &Machine<'_, '_>, number: usize, test: &Test) -> f64 {
    let program = machine.program;
    let family = program.steps[number].slots.clone().find_map(|slot| program.slots[slot].family);
    family.map_or(test.level, |family| program.plan.families[family].alpha)
}

type Refused = (Box<Entry>, String);

fn one(
    machine: &mut Machine<'_, '_>,
    number: usize,
    hypothesis: &Hypothesis,
    error: ErrorTerm,
    rule: &CorrectionRule,
    level: f64,
    sample: &Sample<'_>,
) -> Result<(Entry, Raw), Refused> {
    let design = &machine.program.plan.design;
    let mut entry = entry(&hypothesis.reference, &hypothesis.label);
    entry.level = Finite::new(level);
    macro_rules! or_refuse {
        ($result:expr) => {
            match $result {
                Ok(value) => value,
                Err(refusal) => return Err((Box::new(entry), refusal)),
            }
        };
    }
    let in_words = |refusal| words::refusal(&refusal, design);
    let moments = or_refuse!(sample.moments.as_ref().map_err(|refusal| in_words(refusal.clone())));
    let lowered = or_refuse!(
        engine::Hypothesis::new(&parts(&design.between, &hypothesis.between), &parts(&design.within, &hypothesis.within), Weighting::Equal)
            .map_err(in_words)
    );
    let error_cells: Vec<usize> = (0..design.cells()).filter(|cell| error != ErrorTerm::Own || lowered.kept()[*cell]).collect();
    entry.n = Some(error_cells.iter().map(|cell| moments.cells()[*cell].subjects).sum());
    entry.hypothesis = Some(matrices(&lowered, &sample.occasions, error_cells));
    let tested = or_refuse!(test_univariate(moments, &lowered, term(error)).map_err(in_words));
    describe(&mut entry, &tested, moments, &lowered, hypothesis);

    let correction = by_epsilon(machine, number, hypothesis, rule, &tested);
    let correction = or_refuse!(correction);
    let correction_used = in_engine(correction);
    let (df1, df2) = or_refuse!(tested.df(correction_used).map_err(in_words));
    let p = or_refuse!(tested.p(correction_used).map_err(in_words));
    let details = &mut entry.details;
    details.insert("correction".to_owned(), Detail::Text(in_plan_words(&correction)));
    details.insert("df_corrected".to_owned(), Detail::Numbers([df1, df2].into_iter().filter_map(Finite::new).collect()));
    if let Ok(uncorrected) = tested.p(engine::Correction::None) {
        put(details, "p_uncorrected", Tail::reported(uncorrected).p);
    }
    let reported = Tail::reported(p);
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    let direction = match &tested.estimate {
        Some(estimate) if hypothesis.comparison => {
            if let Ok(width) = student::quantile_upper(level / 2.0, df2) {
                let half = width * estimate.standard_error;
                interval(&mut entry.details, [estimate.value - half, estimate.value + half], 1.0 - level);
            }
            if estimate.value > 0.0 { Direction::Above } else { Direction::Below }
        }
        _ => Direction::None,
    };
    entry.sizes.push(super::explained::partial_eta_squared(&tested, 1.0 - 2.0 * level));
    Ok((entry, Raw::Tested { p: reported.p, direction }))
}

fn interval(details: &mut BTreeMap<String, Detail>, limits: [f64; 2], level: f64) {
    let limits: Vec<Finite> = limits.into_iter().filter_map(Finite::new).collect();
    if limits.len() == 2 {
        details.insert("interval".to_owned(), Detail::Numbers(limits));
        put(details, "interval_level", rounded(level));
    }
}

/// A level such as 1 - 0.05, without the last bit that the subtraction leaves.
pub(super) fn rounded(level: f64) -> f64 {
    (level * 1e12).round() / 1e12
}

/// The correction that applies: fixed, or by the size of epsilon, which is a decision of its own.
fn by_epsilon(
    machine: &mut Machine<'_, '_>,
    number: usize,
    hypothesis: &Hypothesis,
    rule: &CorrectionRule,
    tested: &UnivariateTest,
) -> Result<Correction, String> {
    let (below, otherwise) = match rule {
        CorrectionRule::Always(correction) => return Ok(*correction),
        CorrectionRule::ByEpsilon { below, otherwise } => (below, otherwise),
    };
    let Some(epsilons) = &tested.epsilons else {
        return Err("its correction follows epsilon, and its error mixes several strata, so that no single epsilon applies".to_owned());
    };
    let epsilon = epsilons.greenhouse_geisser;
    let taken = below.iter().find(|(bound, _)| epsilon < *bound).map_or(*otherwise, |(_, correction)| *correction);
    let mut evidence = Map::new();
    evidence.insert("greenhouse-geisser epsilon".to_owned(), json!(Finite::new(epsilon)));
    evidence.insert("ref".to_owned(), json!(hypothesis.reference));
    let id = machine.program.plan.steps[number].id.clone();
    let hash = machine.take_down(&id, "choice", json!({ "key": "correction", "rule": rule }), evidence, &in_plan_words(&taken));
    if hash.is_some() {
        machine.steps[number].decision = hash;
    }
    Ok(taken)
}

/// The error term in the engine's terms.
pub(super) fn term(error: ErrorTerm) -> engine::ErrorTerm {
    match error {
        ErrorTerm::Own => engine::ErrorTerm::Own,
        ErrorTerm::OwnOccasions => engine::ErrorTerm::OwnOccasions,
        ErrorTerm::Pooled => engine::ErrorTerm::Pooled,
    }
}

fn in_engine(correction: Correction) -> engine::Correction {
    match correction {
        Correction::None => engine::Correction::None,
        Correction::GreenhouseGeisser => engine::Correction::GreenhouseGeisser,
        Correction::HuynhFeldt => engine::Correction::HuynhFeldt,
        Correction::HuynhFeldt1976 => engine::Correction::HuynhFeldt1976,
        Correction::LowerBound => engine::Correction::LowerBound,
    }
}

fn describe(entry: &mut Entry, tested: &UnivariateTest, moments: &Moments, lowered: &engine::Hypothesis, hypothesis: &Hypothesis) {
    entry.statistic = Finite::new(tested.f).map(|value| Statistic {
        name: "F".to_owned(),
        value,
        df: [tested.df1, tested.df2].into_iter().filter_map(Finite::new).collect(),
    });
    let details = &mut entry.details;
    put(details, "sum_of_squares", tested.ss);
    put(details, "error_sum_of_squares", tested.ss_error);
    put(details, "error_mean_square", tested.ms_error);
    put(details, "df_error", tested.error_df);
    if let Some(epsilons) = tested.epsilons.as_ref().filter(|epsilons| epsilons.contrasts > 1) {
        put_epsilons(details, epsilons);
    }
    if let Some(estimate) = tested.estimate.as_ref().filter(|_| hypothesis.comparison) {
        put(details, "estimate", estimate.value);
        put(details, "standard_error", estimate.standard_error);
        put(details, "t", estimate.t);
        if let Some((between, within)) = lowered.single() {
            let cells = (0..between.len()).filter(|cell| !between[*cell].is_zero());
            let weighted =
                |cell: usize| -> f64 { (0..within.len()).map(|occasion| within[occasion].value() * moments.mean(cell, occasion)).sum() };
            details.insert("means".to_owned(), Detail::Numbers(cells.filter_map(|cell| Finite::new(weighted(cell))).collect()));
        }
    }
}

/// The epsilons of the error matrix, uncapped; in place of one that has no value, the reason.
fn put_epsilons(details: &mut BTreeMap<String, Detail>, epsilons: &Epsilons) {
    let mut named = BTreeMap::new();
    let mut why = Vec::new();
    let given = [
        ("greenhouse-geisser", Ok(epsilons.greenhouse_geisser)),
        ("huynh-feldt", epsilons.huynh_feldt.clone()),
        ("huynh-feldt 1976", epsilons.huynh_feldt_1976.clone()),
        ("lower bound", Ok(epsilons.lower_bound)),
    ];
    for (name, value) in given {
        match value.map(Finite::new) {
            Ok(Some(value)) => drop(named.insert(name.to_owned(), value)),
            Ok(None) => why.push(format!("{name}: not a finite number")),
            Err(refusal) => why.push(format!("{name}: {refusal}")),
        }
    }
    details.insert("epsilon".to_owned(), Detail::Named(named));
    if !why.is_empty() {
        details.insert("epsilon_refused".to_owned(), Detail::Text(why.join("; ")));
    }
}

/// L and M as written for one contrast, else the orthonormal rows and columns that were used.
fn matrices(lowered: &engine::Hypothesis, occasions: &[usize], error_cells: Vec<usize>) -> Matrices {
    let finite = |row: Vec<f64>| row.into_iter().filter_map(Finite::new).collect::<Vec<_>>();
    match lowered.single() {
        Some((between, within)) => Matrices {
            l: vec![finite(between.iter().map(|weight| weight.value()).collect())],
            m: occasions.iter().map(|occasion| finite(vec![within[*occasion].value()])).collect(),
            error_cells,
        },
        None => {
            let within = lowered.within().to_rows();
            Matrices {
                l: lowered.between().to_rows().into_iter().map(finite).collect(),
                m: occasions.iter().map(|occasion| finite(within[*occasion].clone())).collect(),
                error_cells,
            }
        }
    }
}
