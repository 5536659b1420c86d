//! Standardized differences of trimmed means.

use super::Refusal;

/// Share that is trimmed from, or Winsorized at, each end.
const TRIMMED: f64 = 0.2;

/// The Winsorized standard deviation of a normal variable over its ordinary one: by it d_R equals d under normality.
const SCALE: f64 = 0.642;

/// Trimmed mean and Winsorized variance (divisor n - 1) at 20 % from each end.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Trimmed {
    /// Values.
    pub n: usize,
    /// Mean of the middle 60 %.
    pub mean: f64,
    /// Variance after the ends are drawn in to the nearest value kept.
    pub winsorized_variance: f64,
}

/// Trims and Winsorizes; floor(0.2 n) values at each end.
///
/// # Errors
/// Fewer than two values; one that is not finite.
pub fn trimmed(values: &[f64]) -> Result<Trimmed, Refusal> {
    let n = values.len();
    if n < 2 {
        return Err(Refusal::new(format!("a trimmed mean with its Winsorized variance needs two values at least; there are {n}")));
    }
    if let Some(bad) = values.iter().find(|value| !value.is_finite()) {
        return Err(Refusal::new(format!("a trimmed mean needs finite values; one is {bad}")));
    }
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let cut = libm::floor(TRIMMED * n as f64) as usize;
    let (low, high) = (sorted[cut], sorted[n - 1 - cut]);
    let middle = &sorted[cut..n - cut];
    // Differences to one of the values lose nothing where all are far from zero.
    let mean = low + middle.iter().map(|value| value - low).sum::<f64>() / middle.len() as f64;
    let drawn_in = |value: f64| value.clamp(low, high) - low;
    let centre = sorted.iter().map(|&value| drawn_in(value)).sum::<f64>() / n as f64;
    let squares: f64 = sorted.iter().map(|&value| (drawn_in(value) - centre) * (drawn_in(value) - centre)).sum();
    Ok(Trimmed { n, mean, winsorized_variance: squares / (n as f64 - 1.0) })
}

/// d_R = 0.642 (second trimmed mean - first) / pooled Winsorized standard deviation (Algina, Keselman & Penfield 2005,
/// *Psychological Methods* 10:317).
///
/// # Errors
/// As for [`trimmed`]; no Winsorized variance.
pub fn robust_difference(first: &[f64], second: &[f64]) -> Result<f64, Refusal> {
    let (first, second) = (trimmed(first)?, trimmed(second)?);
    let (df1, df2) = (first.n as f64 - 1.0, second.n as f64 - 1.0);
    let variance = (df1 * first.winsorized_variance + df2 * second.winsorized_variance) / (df1 + df2);
    over(second.mean - first.mean, variance)
}

/// d_R of a change within one group: 0.642 times the trimmed mean of the changes over their Winsorized standard deviation.
///
/// # Errors
/// As for [`robust_difference`].
pub fn robust_change(changes: &[f64]) -> Result<f64, Refusal> {
    let found = trimmed(changes)?;
    over(found.mean, found.winsorized_variance)
}

fn over(difference: f64, variance: f64) -> Result<f64, Refusal> {
    let d = SCALE * difference / variance.sqrt();
    if variance > 0.0 && d.is_finite() {
        Ok(d)
    } else {
        Err(Refusal::new("the robust difference is undefined: after Winsorizing the values do not vary"))
    }
}
