//! The test of Welch and James.

use super::super::put;
use super::comparison::Compared;
use super::{Case, Tested};
use crate::canon::number::Finite;
use crate::execute::verdict::Direction;
use crate::results::{Entry, Statistic};
use crate::stats::dist::Tail;
use crate::stats::hypothesis::test_welch_james;

pub(super) fn test(case: &Case<'_>, entry: &mut Entry) -> Result<Tested, String> {
    let tested = test_welch_james(case.moments, case.lowered).map_err(case.in_words)?;
    entry.statistic = Finite::new(tested.f).map(|value| Statistic {
        name: "F".to_owned(),
        value,
        df: [tested.df1, tested.df2].into_iter().filter_map(Finite::new).collect(),
    });
    put(&mut entry.details, "welch_james_t", tested.t);
    put(&mut entry.details, "welch_james_c", tested.c);
    let reported = Tail::reported(tested.p().map_err(case.in_words)?);
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    match tested.estimate.filter(|_| case.hypothesis.comparison) {
        Some(estimate) => {
            let (value, standard_error) = (estimate.value, estimate.standard_error);
            Compared { estimate: value, standard_error, df: tested.df2, two_sided: reported.p }.put(case, entry)
        }
        None => Ok(Tested { p: reported.p, direction: Direction::None }),
    }
}
