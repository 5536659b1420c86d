//! Claims: that a difference lies within margins, or is not worse than one.

use super::super::put;
use super::comparison::{Compared, statistic_t};
use super::{Case, Tested};
use crate::canon::number::Finite;
use crate::execute::verdict::Direction;
use crate::plan::resolved::{Margin, MarginStandardizer};
use crate::results::{Detail, Entry};
use crate::stats::dist::{Tail, student};
use crate::stats::linear::{DoubleDouble, Matrix};

/// One or two one-sided tests against the margins, each at the level; the larger p counts (Schuirmann 1987).
pub(super) fn test(compared: &Compared, case: &Case<'_>, entry: &mut Entry) -> Result<Tested, String> {
    let Some(margin) = &case.chosen.test.margin else { return Err("the plan gives no margin".to_owned()) };
    let unit = unit(margin, case, entry)?;
    // Of each margin: its value, and how far the estimate lies on the safe side of it.
    let sides = [
        ("lower", margin.lower.map(|lower| (lower * unit, compared.estimate - lower * unit))),
        ("upper", margin.upper.map(|upper| (upper * unit, upper * unit - compared.estimate))),
    ];
    let mut worst: Option<(f64, f64)> = None;
    for (name, side) in sides {
        let Some((limit, inside)) = side else { continue };
        let t = inside / compared.standard_error;
        let p = Tail::reported(student::upper_tail(t, compared.df).map_err(|error| error.to_string())?).p;
        let details = &mut entry.details;
        put(details, &format!("margin_{name}"), limit);
        put(details, &format!("t_{name}"), t);
        put(details, &format!("p_{name}"), p);
        if worst.is_none_or(|(_, other)| p > other) {
            worst = Some((t, p));
        }
    }
    let (t, p) = worst.ok_or("the plan gives no margin")?;
    let reported = Tail::reported(p);
    entry.statistic = statistic_t(t, compared.df);
    entry.p = Finite::new(reported.p);
    entry.p_bound = reported.bound;
    entry.details.insert("p_two_sided".to_owned(), Detail::Number(Finite::new(Tail::reported(compared.two_sided).p).unwrap_or_default()));
    entry.sizes.clear();
    compared.put_interval(entry, case.chosen.level, 1.0 - 2.0 * case.chosen.level);
    Ok(Tested { p, direction: Direction::None })
}

/// What margins are multiples of: one, or a standard deviation pooled over the cells that the contrast compares.
fn unit(margin: &Margin, case: &Case<'_>, entry: &mut Entry) -> Result<f64, String> {
    let Some(standardizer) = margin.standardizer else { return Ok(1.0) };
    let Some((_, weights)) = case.lowered.single() else { return Err("its contrast is not a single one".to_owned()) };
    let used: Vec<usize> = (0..weights.len()).filter(|occasion| !weights[*occasion].is_zero()).collect();
    let variance = |weights: Vec<DoubleDouble>| -> Result<f64, String> {
        let column = Matrix::from_rows(&[weights]).transpose();
        let error = case.moments.error(&column, case.lowered.kept()).map_err(case.in_words)?;
        Ok((error.trace().map_err(case.in_words)? / DoubleDouble::from(error.df)).value())
    };
    let alone = |occasion: usize| -> Vec<DoubleDouble> {
        (0..weights.len()).map(|other| if other == occasion { DoubleDouble::ONE } else { DoubleDouble::ZERO }).collect()
    };
    let squared = match standardizer {
        MarginStandardizer::ChangeSd => variance(weights.to_vec())?,
        MarginStandardizer::BaselineSd => variance(alone(used[0]))?,
        MarginStandardizer::RootMeanSquareSd => {
            let each: Result<Vec<f64>, String> = used.iter().map(|occasion| variance(alone(*occasion))).collect();
            let each = each?;
            each.iter().sum::<f64>() / each.len() as f64
        }
    };
    let unit = squared.sqrt();
    put(&mut entry.details, "margin_standardizer", unit);
    Ok(unit)
}
