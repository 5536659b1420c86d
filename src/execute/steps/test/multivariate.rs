//! The multivariate criteria.

use super::super::{in_plan_words, put};
use super::comparison::Compared;
use super::{Case, Tested, term};
use crate::canon::number::Finite;
use crate::execute::verdict::Direction;
use crate::plan::resolved::Criterion;
use crate::results::{Detail, Entry, Statistic};
use crate::stats::dist::Tail;
use crate::stats::hypothesis::{self as engine, test_multivariate, test_univariate};
use crate::stats::model::Refusal;

pub(super) fn test(case: &Case<'_>, entry: &mut Entry) -> Result<Tested, String> {
    let Some(criterion) = case.chosen.criterion else { return Err("the plan names no criterion".to_owned()) };
    let error = term(case.chosen.error);
    let tested = test_multivariate(case.moments, case.lowered, error, in_engine(criterion)).map_err(case.in_words)?;
    entry.statistic = Finite::new(tested.f).map(|value| Statistic {
        name: "F".to_owned(),
        value,
        df: [tested.df1, tested.df2].into_iter().filter_map(Finite::new).collect(),
    });
    let details = &mut entry.details;
    details.insert("criterion".to_owned(), Detail::Text(in_plan_words(&criterion)));
    put(details, "criterion_value", tested.value);
    details.insert("roots".to_owned(), Detail::Numbers(tested.roots.iter().copied().filter_map(Finite::new).collect()));
    put(details, "df_error", tested.error_df as f64);
    let kind = if tested.lower_bound {
        "upper bound"
    } else if tested.exact {
        "exact"
    } else {
        "approximate"
    };
    details.insert("f_is".to_owned(), Detail::Text(kind.to_owned()));
    let reported = Tail::reported(tested.p().map_err(case.in_words)?);
    if tested.lower_bound {
        put(&mut entry.details, "p_lower_bound", reported.p);
        return Err((case.in_words)(Refusal::SeveralRoots { roots: tested.roots.len() }));
    }
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    if !case.hypothesis.comparison {
        return Ok(Tested { p: reported.p, direction: Direction::None });
    }
    // With one contrast every criterion is the square of this t.
    let own = if error == engine::ErrorTerm::Own { engine::ErrorTerm::Own } else { engine::ErrorTerm::OwnOccasions };
    let single = test_univariate(case.moments, case.lowered, own).map_err(case.in_words)?;
    match single.estimate {
        Some(estimate) => {
            let (value, standard_error) = (estimate.value, estimate.standard_error);
            Compared { estimate: value, standard_error, df: single.df2, two_sided: reported.p }.put(case, entry)
        }
        None => Ok(Tested { p: reported.p, direction: Direction::None }),
    }
}

fn in_engine(criterion: Criterion) -> engine::Criterion {
    match criterion {
        Criterion::Pillai => engine::Criterion::Pillai,
        Criterion::Wilks => engine::Criterion::Wilks,
        Criterion::HotellingLawley => engine::Criterion::HotellingLawley,
        Criterion::Roy => engine::Criterion::Roy,
    }
}
