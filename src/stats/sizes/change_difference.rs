//! The difference of two groups in standardized change.

use super::Refusal;
use crate::stats::dist::normal;

/// What two independent groups, each measured twice, come down to.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TwoChanges {
    /// Subjects of the first and of the second group.
    pub n: [usize; 2],
    /// Mean change (later minus earlier) of the first and of the second group.
    pub change: [f64; 2],
    /// Standard deviation at the earlier occasion, pooled over the groups.
    pub pooled_sd: f64,
    /// Correlation of the two occasions, pooled within groups; absent where one of them does not vary.
    pub correlation: Option<f64>,
}

/// The difference in standardized change, and what it rests on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ChangeDifference {
    /// Difference of the changes over the pooled standard deviation, before its correction for bias.
    pub uncorrected: f64,
    /// The factor 1 - 3 / (4 m - 1), m = n1 + n2 - 2.
    pub factor: f64,
    /// Their product, d_ppc2.
    pub d: f64,
}

/// d_ppc2: (second change - first change) / pooled standard deviation at the earlier occasion, times 1 - 3 / (4 m - 1) (Morris
/// 2008, *Organizational Research Methods* 11:364).
///
/// # Errors
/// Fewer than three subjects in all; no variance at the earlier occasion.
pub fn change_difference(groups: &TwoChanges) -> Result<ChangeDifference, Refusal> {
    let m = degrees(groups)?;
    let uncorrected = (groups.change[1] - groups.change[0]) / groups.pooled_sd;
    if !(groups.pooled_sd > 0.0 && uncorrected.is_finite()) {
        return Err(Refusal::new("the change cannot be standardized: values at the earlier occasion do not vary within arms"));
    }
    let factor = 1.0 - 3.0 / (4.0 * m - 1.0);
    Ok(ChangeDifference { uncorrected, factor, d: factor * uncorrected })
}

/// Limits at confidence `level` and standard error, from Morris's variance (eq. 25, with the estimate and the pooled
/// correlation put in):
///
/// c^2 2 (1 - r) h m / (m - 2) (1 + d^2 / (2 (1 - r) h)) - d^2, h = (n1 + n2) / (n1 n2).
///
/// # Errors
/// A correlation of 1 or none; too few subjects; a variance that comes out negative.
pub fn change_difference_interval(groups: &TwoChanges, level: f64) -> Result<(f64, f64, f64), Refusal> {
    let found = change_difference(groups)?;
    let m = degrees(groups)?;
    if m <= 2.0 {
        return Err(Refusal::new("Morris's variance needs more than four subjects in all"));
    }
    let r = groups.correlation.filter(|r| *r < 1.0);
    let r = r.ok_or_else(|| {
        Refusal::new(
            "Morris's variance needs the correlation of the two occasions, below 1; here there is none, or they correlate perfectly",
        )
    })?;
    let [n1, n2] = groups.n.map(|n| n as f64);
    let h = (n1 + n2) / (n1 * n2);
    let spread = 2.0 * (1.0 - r) * h;
    let d = found.d;
    let variance = found.factor * found.factor * spread * m / (m - 2.0) * (1.0 + d * d / spread) - d * d;
    if variance <= 0.0 {
        return Err(Refusal::new("Morris's variance comes out negative in so small a sample; `bca` may be asked for"));
    }
    let standard_error = variance.sqrt();
    let half = normal::quantile_upper(0.5 * (1.0 - level))? * standard_error;
    Ok((d - half, d + half, standard_error))
}

fn degrees(groups: &TwoChanges) -> Result<f64, Refusal> {
    let m = (groups.n[0] + groups.n[1]) as f64 - 2.0;
    if m < 1.0 || groups.n.contains(&0) {
        return Err(Refusal::new("a difference in change needs subjects in both arms, three at least"));
    }
    Ok(m)
}
