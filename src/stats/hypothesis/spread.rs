use super::univariate::probability;
use crate::stats::dist::fisher;
use crate::stats::linear::DoubleDouble;
use crate::stats::model::{Refusal, rounding_unit};

/// From where absolute deviations are taken.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Centre {
    /// The cell mean; Levene 1960.
    Mean,
    /// The cell median; Brown & Forsythe 1974.
    Median,
}

/// A one-way analysis of variance of absolute deviations from the cells' centres, at one occasion.
#[derive(Clone, Debug, PartialEq)]
pub struct SpreadTest {
    /// The F ratio.
    pub f: f64,
    /// Cells less one.
    pub df1: f64,
    /// Subjects less cells.
    pub df2: f64,
}

impl SpreadTest {
    /// P(F' > F).
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p(&self) -> Result<f64, Refusal> {
        fisher::upper_tail(self.f, self.df1, self.df2).map_err(probability)
    }
}

/// Tests whether the cells spread alike at `occasion`. `values` has one row of `occasions` values for each subject,
/// `cell` the cell of each subject, below `cells`; `kept`, where given, says which subjects take part. Empty cells are
/// left out.
///
/// # Errors
/// Fewer than two cells with subjects, no cell with two subjects, a value that is not finite, or absolute deviations
/// that do not vary within cells (by the rule of [`Moments`](crate::stats::model::Moments)).
pub fn equal_spread(
    values: &[f64],
    occasions: usize,
    cell: &[u32],
    cells: usize,
    kept: Option<&[bool]>,
    occasion: usize,
    centre: Centre,
) -> Result<SpreadTest, Refusal> {
    let mut members: Vec<Vec<f64>> = vec![Vec::new(); cells];
    let mut largest = 0.0_f64;
    for (subject, &cell) in cell.iter().enumerate() {
        if kept.is_some_and(|kept| !kept[subject]) {
            continue;
        }
        let value = values[subject * occasions + occasion];
        if !value.is_finite() {
            return Err(Refusal::NotFinite { subject, occasion });
        }
        largest = largest.max(value.abs());
        members[cell as usize].push(value);
    }
    members.retain(|values| !values.is_empty());
    let groups = members.len();
    let subjects: usize = members.iter().map(Vec::len).sum();
    if groups < 2 {
        return Err(Refusal::OneCell);
    }
    if subjects == groups {
        return Err(Refusal::NoErrorDf);
    }
    let mut within = DoubleDouble::ZERO;
    let mut means = Vec::with_capacity(groups);
    for values in &mut members {
        let middle = match centre {
            Centre::Mean => mean(values),
            Centre::Median => median(values),
        };
        let deviation = |value: f64| (DoubleDouble::from(value) - middle).abs();
        let count = DoubleDouble::from(values.len());
        let average = values.iter().map(|&value| deviation(value)).sum::<DoubleDouble>() / count;
        within += values.iter().map(|&value| (deviation(value) - average).square()).sum();
        means.push((count, average));
    }
    let (df1, df2) = (groups - 1, subjects - groups);
    let unit = rounding_unit(largest);
    if within.value() <= df2 as f64 * unit * unit {
        return Err(Refusal::ConstantDeviations { occasion });
    }
    let grand = means.iter().map(|&(count, mean)| count * mean).sum::<DoubleDouble>() / DoubleDouble::from(subjects);
    let between: DoubleDouble = means.iter().map(|&(count, mean)| count * (mean - grand).square()).sum();
    let f = (between * DoubleDouble::from(df2)) / (within * DoubleDouble::from(df1));
    Ok(SpreadTest { f: f.value(), df1: df1 as f64, df2: df2 as f64 })
}

fn mean(values: &[f64]) -> DoubleDouble {
    let shift = DoubleDouble::from(values[0]);
    let sum: DoubleDouble = values.iter().map(|&value| DoubleDouble::from(value) - shift).sum();
    shift + sum / DoubleDouble::from(values.len())
}

/// The median, exactly; reorders `values`.
fn median(values: &mut [f64]) -> DoubleDouble {
    let half = values.len() / 2;
    let even = values.len().is_multiple_of(2);
    let (below, &mut upper, _) = values.select_nth_unstable_by(half, f64::total_cmp);
    if !even {
        return DoubleDouble::from(upper);
    }
    let lower = below.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    (DoubleDouble::from(lower) + DoubleDouble::from(upper)) / DoubleDouble::from(2.0)
}
