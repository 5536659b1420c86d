//! The probability of superiority.

use libm::{exp, log};

use super::Refusal;
use crate::stats::dist::normal;

/// A probability and what its interval rests on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Superiority {
    /// The probability, ties counted half.
    pub p: f64,
    /// Variance of the estimate; absent where a group has one subject.
    pub variance: Option<f64>,
}

/// P(second > first) + P(second = first) / 2 over all pairs of a subject of each group: Mann and Whitney's U / (n1 n2). Its
/// variance is that of the placements (DeLong, DeLong & Clarke-Pearson 1988). Takes time n log n.
///
/// # Errors
/// An empty group; a value that is not a number.
///
/// ```
/// use aforesaid::stats::sizes::superiority;
/// let found = superiority(&[1.0, 2.0, 3.0], &[2.0, 4.0]).unwrap();
/// assert_eq!(found.p, 4.5 / 6.0);
/// ```
pub fn superiority(first: &[f64], second: &[f64]) -> Result<Superiority, Refusal> {
    if first.is_empty() || second.is_empty() {
        return Err(Refusal::new("a probability of superiority needs subjects in both arms"));
    }
    let (first, second) = (sorted(first)?, sorted(second)?);
    let above = placements(&second, &first);
    let below = placements(&first, &second);
    let p = mean(&above);
    let variance =
        (first.len() > 1 && second.len() > 1).then(|| variance_of(&above) / second.len() as f64 + variance_of(&below) / first.len() as f64);
    Ok(Superiority { p, variance })
}

/// P(change > 0) + P(change = 0) / 2 of one group measured twice.
///
/// # Errors
/// No subject; a value that is not a number.
pub fn superiority_of_change(changes: &[f64]) -> Result<Superiority, Refusal> {
    if changes.is_empty() {
        return Err(Refusal::new("a probability of superiority needs subjects"));
    }
    let changes = sorted(changes)?;
    let scores: Vec<f64> = changes
        .iter()
        .map(|&change| {
            if change > 0.0 {
                1.0
            } else if change == 0.0 {
                0.5
            } else {
                0.0
            }
        })
        .collect();
    let variance = (scores.len() > 1).then(|| variance_of(&scores) / scores.len() as f64);
    Ok(Superiority { p: mean(&scores), variance })
}

impl Superiority {
    /// Limits at confidence `level`: normal on the logit, which keeps them between 0 and 1.
    ///
    /// # Errors
    /// A probability of 0 or 1, or no variance, where the logit has no interval.
    pub fn logit_interval(&self, level: f64) -> Result<(f64, f64), Refusal> {
        let variance = self.variance.filter(|variance| *variance > 0.0 && self.p > 0.0 && self.p < 1.0);
        let variance = variance.ok_or_else(|| {
            Refusal::new("the interval on the logit needs values of the two sides that overlap; here one side lies wholly above the other, or nothing varies")
        })?;
        let odds = log(self.p) - libm::log1p(-self.p);
        let half = normal::quantile_upper(0.5 * (1.0 - level))? * variance.sqrt() / (self.p * (1.0 - self.p));
        let back = |logit: f64| 1.0 / (1.0 + exp(-logit));
        Ok((back(odds - half), back(odds + half)))
    }
}

fn sorted(values: &[f64]) -> Result<Vec<f64>, Refusal> {
    if let Some(bad) = values.iter().find(|value| !value.is_finite()) {
        return Err(Refusal::new(format!("a probability of superiority needs finite values; one is {bad}")));
    }
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    Ok(sorted)
}

/// For each of `values`: the share of `others` below it, ties counted half; both sorted.
fn placements(values: &[f64], others: &[f64]) -> Vec<f64> {
    let count = others.len() as f64;
    values
        .iter()
        .map(|value| {
            let below = others.partition_point(|other| other < value);
            let not_above = others.partition_point(|other| other <= value);
            (below as f64 + 0.5 * (not_above - below) as f64) / count
        })
        .collect()
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

fn variance_of(values: &[f64]) -> f64 {
    let centre = mean(values);
    values.iter().map(|value| (value - centre) * (value - centre)).sum::<f64>() / (values.len() as f64 - 1.0)
}
