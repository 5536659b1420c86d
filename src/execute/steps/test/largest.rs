//! The largest product contrast of an interaction.

use super::super::{in_plan_words, put};
use super::univariate::{by_epsilon, in_engine};
use super::{Case, Tested, term};
use crate::canon::number::Finite;
use crate::execute::machine::Machine;
use crate::execute::verdict::Direction;
use crate::results::{Detail, Entry, Statistic};
use crate::stats::dist::Tail;
use crate::stats::hypothesis::largest_contrast;
use std::collections::BTreeMap;

pub(super) fn test(machine: &mut Machine<'_, '_>, number: usize, case: &Case<'_>, entry: &mut Entry) -> Result<Tested, String> {
    let found = largest_contrast(case.moments, case.lowered, term(case.chosen.error)).map_err(case.in_words)?;
    let correction = by_epsilon(machine, number, case.hypothesis, &case.chosen.correction, &found.whole)?;
    let used = in_engine(correction);
    let (df1, df2) = found.whole.df(used).map_err(case.in_words)?;
    let reported = Tail::reported(found.p_bound(used).map_err(case.in_words)?);
    entry.statistic = Finite::new(found.f).map(|value| Statistic {
        name: "F".to_owned(),
        value,
        df: [1.0, found.whole.df2].into_iter().filter_map(Finite::new).collect(),
    });
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    let design = &machine.program.plan.design;
    let cells = (0..found.between.len()).map(|cell| (design.cell_levels(cell).join("; "), found.between[cell]));
    let occasions = (0..found.within.len()).map(|occasion| (design.occasion_levels(occasion).join("; "), found.within[occasion]));
    let details = &mut entry.details;
    details.insert("weights_of_cells".to_owned(), named(cells));
    details.insert("weights_of_occasions".to_owned(), named(occasions));
    put(details, "estimate", found.estimate);
    put(details, "sum_of_squares", found.ss);
    put(details, "share_of_effect", found.share);
    put(details, "error_mean_square", found.whole.ms_error);
    details.insert("correction".to_owned(), Detail::Text(in_plan_words(&correction)));
    details.insert("df_of_bound".to_owned(), Detail::Numbers([df1, df2].into_iter().filter_map(Finite::new).collect()));
    details.insert("p_is".to_owned(), Detail::Text("a bound that holds for all contrasts of the effect at once (Scheffe)".to_owned()));
    Ok(Tested { p: reported.p, direction: Direction::None })
}

fn named(weights: impl Iterator<Item = (String, f64)>) -> Detail {
    let finite = weights.filter_map(|(name, weight)| Finite::new(weight).map(|weight| (name, weight)));
    Detail::Named(finite.collect::<BTreeMap<_, _>>())
}
