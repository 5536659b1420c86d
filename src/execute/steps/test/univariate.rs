//! The univariate F.

use super::super::explained::partial_eta_squared;
use super::super::{in_plan_words, put};
use super::comparison::Compared;
use super::{Case, Tested, term};
use crate::canon::number::Finite;
use crate::execute::machine::Machine;
use crate::execute::verdict::Direction;
use crate::plan::resolved::{Correction, CorrectionRule, Hypothesis};
use crate::results::{Detail, Entry, Statistic};
use crate::stats::dist::Tail;
use crate::stats::hypothesis::{self as engine, Epsilons, UnivariateTest, test_univariate};
use serde_json::{Map, json};
use std::collections::BTreeMap;

pub(super) fn test(machine: &mut Machine<'_, '_>, number: usize, case: &Case<'_>, entry: &mut Entry) -> Result<Tested, String> {
    let tested = test_univariate(case.moments, case.lowered, term(case.chosen.error)).map_err(case.in_words)?;
    describe(entry, &tested);
    let correction = by_epsilon(machine, number, case.hypothesis, &case.chosen.correction, &tested)?;
    let correction_used = in_engine(correction);
    let (df1, df2) = tested.df(correction_used).map_err(case.in_words)?;
    let p = tested.p(correction_used).map_err(case.in_words)?;
    let details = &mut entry.details;
    details.insert("correction".to_owned(), Detail::Text(in_plan_words(&correction)));
    details.insert("df_corrected".to_owned(), Detail::Numbers([df1, df2].into_iter().filter_map(Finite::new).collect()));
    if let Ok(uncorrected) = tested.p(engine::Correction::None) {
        put(details, "p_uncorrected", Tail::reported(uncorrected).p);
    }
    let reported = Tail::reported(p);
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    entry.sizes.push(partial_eta_squared(&tested, 1.0 - 2.0 * case.chosen.level));
    match &tested.estimate {
        Some(estimate) if case.hypothesis.comparison => {
            let compared = Compared { estimate: estimate.value, standard_error: estimate.standard_error, df: df2, two_sided: reported.p };
            compared.put(case, entry)
        }
        _ => Ok(Tested { p: reported.p, direction: Direction::None }),
    }
}

/// The correction that applies: fixed, or by the size of epsilon, which is a decision of its own.
pub(super) fn by_epsilon(
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

pub(super) fn in_engine(correction: Correction) -> engine::Correction {
    match correction {
        Correction::None => engine::Correction::None,
        Correction::GreenhouseGeisser => engine::Correction::GreenhouseGeisser,
        Correction::HuynhFeldt => engine::Correction::HuynhFeldt,
        Correction::HuynhFeldt1976 => engine::Correction::HuynhFeldt1976,
        Correction::LowerBound => engine::Correction::LowerBound,
    }
}

fn describe(entry: &mut Entry, tested: &UnivariateTest) {
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
