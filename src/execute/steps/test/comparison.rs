//! A single comparison: its estimate, its interval, its direction, one-sided or two-sided.

use super::super::put;
use super::{Case, Tested, claim};
use crate::canon::number::Finite;
use crate::execute::verdict::Direction;
use crate::plan::resolved::{Hypothesis, Sides};
use crate::results::{Detail, Entry, Statistic};
use crate::stats::dist::{Tail, student};
use std::collections::BTreeMap;

/// What a method says of one comparison.
pub(super) struct Compared {
    pub estimate: f64,
    pub standard_error: f64,
    pub df: f64,
    /// p of both tails.
    pub two_sided: f64,
}

impl Compared {
    /// Puts estimate and interval into the entry and judges by the sides of the test, or by its margins.
    pub fn put(&self, case: &Case<'_>, entry: &mut Entry) -> Result<Tested, String> {
        self.put_estimate(case, entry);
        if case.chosen.test.is_claim() {
            return claim::test(self, case, entry);
        }
        match one_side(&case.chosen.test.sides, case.hypothesis) {
            None => {
                self.put_interval(entry, case.chosen.level / 2.0, 1.0 - case.chosen.level);
                let direction = if self.estimate > 0.0 { Direction::Above } else { Direction::Below };
                Ok(Tested { p: self.two_sided, direction })
            }
            Some(direction) => {
                let sign = if direction == Direction::Above { 1.0 } else { -1.0 };
                let t = self.estimate / self.standard_error;
                let tail = student::upper_tail(sign * t, self.df).map_err(|error| error.to_string())?;
                let reported = Tail::reported(tail);
                entry.statistic = statistic_t(t, self.df);
                entry.p = Finite::new(reported.p);
                entry.p_bound = reported.bound;
                put(&mut entry.details, "p_two_sided", Tail::reported(self.two_sided).p);
                self.put_interval(entry, case.chosen.level, 1.0 - 2.0 * case.chosen.level);
                Ok(Tested { p: reported.p, direction })
            }
        }
    }

    /// Puts the estimate and what it rests on into the entry.
    pub fn put_estimate(&self, case: &Case<'_>, entry: &mut Entry) {
        let details = &mut entry.details;
        put(details, "estimate", self.estimate);
        put(details, "standard_error", self.standard_error);
        put(details, "t", self.estimate / self.standard_error);
        put(details, "df_of_t", self.df);
        if let Some((between, within)) = case.lowered.single() {
            let cells = (0..between.len()).filter(|cell| !between[*cell].is_zero());
            let mean = |cell: usize| -> f64 {
                (0..within.len()).map(|occasion| within[occasion].value() * case.moments.mean(cell, occasion)).sum()
            };
            details.insert("means".to_owned(), Detail::Numbers(cells.filter_map(|cell| Finite::new(mean(cell))).collect()));
        }
    }

    /// The interval with this much outside on each side.
    pub fn put_interval(&self, entry: &mut Entry, each_side: f64, level: f64) {
        if let Ok(width) = student::quantile_upper(each_side, self.df) {
            let half = width * self.standard_error;
            interval(&mut entry.details, [self.estimate - half, self.estimate + half], level);
        }
    }
}

/// The t of a comparison as the statistic of its entry.
pub(super) fn statistic_t(t: f64, df: f64) -> Option<Statistic> {
    Finite::new(t).map(|value| Statistic { name: "t".to_owned(), value, df: Finite::new(df).into_iter().collect() })
}

/// The direction that a one-sided test counts; `None` for a two-sided one.
pub(crate) fn one_side(sides: &Sides, hypothesis: &Hypothesis) -> Option<Direction> {
    let Sides::One { favours } = sides else { return None };
    let above = match favours.as_str() {
        "above zero" => true,
        "below zero" => false,
        level => hypothesis.favours.as_ref().is_some_and(|favours| favours.above == level),
    };
    Some(if above { Direction::Above } else { Direction::Below })
}

/// Puts an interval and its level into details.
pub(super) fn interval(details: &mut BTreeMap<String, Detail>, limits: [f64; 2], level: f64) {
    let limits: Vec<Finite> = limits.into_iter().filter_map(Finite::new).collect();
    if limits.len() == 2 {
        details.insert("interval".to_owned(), Detail::Numbers(limits));
        put(details, "interval_level", rounded(level));
    }
}

/// A level such as 1 - 0.05, without the last bit that the subtraction leaves.
pub(crate) fn rounded(level: f64) -> f64 {
    (level * 1e12).round() / 1e12
}
