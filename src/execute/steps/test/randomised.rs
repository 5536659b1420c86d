//! The randomisation test: arms are dealt again as the plan says they were dealt.

use super::super::put;
use super::super::sample::Sample;
use super::comparison::{Compared, one_side};
use super::{Case, Tested, term};
use crate::canon::number::Finite;
use crate::execute::deals::{Dealing, key};
use crate::execute::machine::Machine;
use crate::execute::verdict::Direction;
use crate::results::{Detail, Entry, Statistic};
use crate::stats::dist::Tail;
use crate::stats::hypothesis::test_univariate;
use crate::stats::resample::{Deals, Question, Side, Statistic as Dealt, freedman_lane, randomisation};

pub(super) fn test(machine: &Machine<'_, '_>, case: &Case<'_>, sample: &Sample<'_>, entry: &mut Entry) -> Result<Tested, String> {
    let Some(asked) = case.chosen.test.deals else { return Err("the plan does not say how often arms are dealt again".to_owned()) };
    let design = &machine.program.plan.design;
    let dealing = Dealing::new(design, machine.samples.trial, sample, &[case.lowered.kept()])?;
    let side = match one_side(&case.chosen.test.sides, case.hypothesis) {
        None => Side::Both,
        Some(Direction::Below) => Side::Lower,
        Some(_) => Side::Upper,
    };
    let error = term(case.chosen.error);
    let question = Question { hypothesis: case.lowered, error, side };
    let deals =
        Deals { asked, key: key("randomisation", asked, &[case.lowered], &[case.chosen.error]), threads: crate::execute::deals::threads() };
    let tested = if sample.covariates.is_empty() {
        let found = randomisation(&dealing.data(), &[question], &deals);
        found.and_then(|mut found| found.swap_remove(0))
    } else {
        freedman_lane(&dealing.adjusted(machine.samples.trial, sample), case.lowered, error, side, &deals)
    };
    let tested = tested.map_err(|refusal| dealing.in_words(&refusal, case.in_words))?;
    let (name, value) = match tested.statistic {
        Dealt::T(value) => ("t", value),
        Dealt::F(value) => ("F", value),
    };
    entry.statistic = Finite::new(value).map(|value| Statistic { name: name.to_owned(), value, df: Vec::new() });
    let details = &mut entry.details;
    put(details, "deals", tested.deals as f64);
    put(details, "at_least_as_large", tested.at_least_as_large as f64);
    put(details, "monte_carlo_error", tested.monte_carlo_error);
    put(details, "deals_without_value", tested.without_value as f64);
    let mut kind = if tested.exact { "exact: all deals are listed" } else { "by random deals" }.to_owned();
    if !sample.covariates.is_empty() {
        kind.push_str("; approximate: residuals of the model without the hypothesis are dealt (Freedman & Lane 1983)");
    }
    details.insert("p_is".to_owned(), Detail::Text(kind));
    let near = !tested.exact && (tested.p - case.chosen.level).abs() <= tested.monte_carlo_error;
    if near {
        let words = "p is within its Monte Carlo error of the level: other deals could turn the verdict";
        details.insert("near_level".to_owned(), Detail::Text(words.to_owned()));
    }
    entry.p = Finite::new(Tail::reported(tested.p).p);
    if !case.hypothesis.comparison {
        return Ok(Tested { p: tested.p, direction: Direction::None });
    }
    let single = test_univariate(case.moments, case.lowered, error).map_err(case.in_words)?;
    let Some(estimate) = single.estimate else { return Ok(Tested { p: tested.p, direction: Direction::None }) };
    let (value, standard_error) = (estimate.value, estimate.standard_error);
    let compared = Compared { estimate: value, standard_error, df: single.df2, two_sided: tested.p };
    compared.put_estimate(case, entry);
    entry
        .details
        .insert("interval_note".to_owned(), Detail::Text("its interval is that of the t distribution, not of the deals".to_owned()));
    let direction = one_side(&case.chosen.test.sides, case.hypothesis);
    match direction {
        None => compared.put_interval(entry, case.chosen.level / 2.0, 1.0 - case.chosen.level),
        Some(_) => compared.put_interval(entry, case.chosen.level, 1.0 - 2.0 * case.chosen.level),
    }
    let seen = if value > 0.0 { Direction::Above } else { Direction::Below };
    Ok(Tested { p: tested.p, direction: direction.unwrap_or(seen) })
}
