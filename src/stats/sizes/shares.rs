//! Shares of subjects, and how sure they are; responders and reliable change.

use super::Refusal;
use crate::stats::dist::normal;

/// A count of a number of subjects.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Share {
    /// Those counted.
    pub count: usize,
    /// All.
    pub n: usize,
}

impl Share {
    /// The share.
    ///
    /// # Errors
    /// No subject.
    pub fn value(self) -> Result<f64, Refusal> {
        if self.n == 0 { Err(Refusal::new("a share needs subjects, and there is none")) } else { Ok(self.count as f64 / self.n as f64) }
    }

    /// Wilson's score interval at confidence `level` (Wilson 1927).
    ///
    /// # Errors
    /// No subject; `level` outside 0 to 1.
    pub fn wilson(self, level: f64) -> Result<(f64, f64), Refusal> {
        let p = self.value()?;
        let n = self.n as f64;
        let z = normal::quantile_upper(0.5 * (1.0 - level))?;
        let centre = p + z * z / (2.0 * n);
        let half = z * (p * (1.0 - p) / n + z * z / (4.0 * n * n)).sqrt();
        let whole = 1.0 + z * z / n;
        // At the ends the limits are 0 and 1 exactly.
        let lower = if self.count == 0 { 0.0 } else { (centre - half) / whole };
        let upper = if self.count == self.n { 1.0 } else { (centre + half) / whole };
        Ok((lower, upper))
    }
}

/// Second share minus first, with Newcombe's hybrid score interval (Newcombe 1998, *Statistics in Medicine* 17:873, method 10).
///
/// # Errors
/// As for [`Share::wilson`].
pub fn difference_of_shares(first: Share, second: Share, level: f64) -> Result<(f64, (f64, f64)), Refusal> {
    let (p1, p2) = (first.value()?, second.value()?);
    let ((l1, u1), (l2, u2)) = (first.wilson(level)?, second.wilson(level)?);
    let difference = p2 - p1;
    let root = |a: f64, b: f64| (a * a + b * b).sqrt();
    Ok((difference, (difference - root(p2 - l2, u1 - p1), difference + root(u2 - p2, p1 - l1))))
}

/// Whether a change from `before` to `after` reaches `amount` in the better direction; the boundary counts, whatever
/// rounding of decimals makes of the difference.
pub fn reaches(before: f64, after: f64, amount: f64, higher_is_better: bool) -> bool {
    let gain = if higher_is_better { after - before } else { before - after };
    gain >= amount - 4.0 * f64::EPSILON * before.abs().max(after.abs()).max(amount)
}

/// Who changed reliably.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ReliableChange {
    /// Standard error of a difference, s sqrt(2 (1 - r)).
    pub standard_error_of_difference: f64,
    /// Subjects whose change in the better direction is beyond chance.
    pub improved: usize,
    /// Subjects whose change is not beyond chance.
    pub unchanged: usize,
    /// Subjects whose change in the worse direction is beyond chance.
    pub deteriorated: usize,
}

/// Jacobson and Truax's (1991) reliable change: RC = change / S_diff, S_diff = s sqrt(2 (1 - r)), with the standard deviation `s`
/// before and the `reliability` r of the measure; beyond chance where |RC| is above the normal quantile of `level`, 1.96 for
/// 95 %.
///
/// `changes` holds pairs of before and after.
///
/// # Errors
/// No variation before; a reliability outside 0 to 1.
///
/// ```
/// use aforesaid::stats::sizes::reliable_change;
/// // Jacobson & Truax's own example: s = 7.5, r = .80, from 47.5 to 32.5, lower being better.
/// let found = reliable_change(&[(47.5, 32.5)], 7.5, 0.80, 0.95, false).unwrap();
/// assert!((found.standard_error_of_difference - 4.743).abs() < 5e-4);
/// assert_eq!((found.improved, found.unchanged, found.deteriorated), (1, 0, 0));
/// ```
pub fn reliable_change(
    changes: &[(f64, f64)],
    s: f64,
    reliability: f64,
    level: f64,
    higher_is_better: bool,
) -> Result<ReliableChange, Refusal> {
    if !(reliability > 0.0 && reliability < 1.0) {
        return Err(Refusal::new(format!("a reliability lies between 0 and 1; it is {reliability}")));
    }
    if !(s > 0.0 && s.is_finite()) {
        return Err(Refusal::new("reliable change is undefined: the values before do not vary within arms"));
    }
    let error = s * (2.0 * (1.0 - reliability)).sqrt();
    let limit = normal::quantile_upper(0.5 * (1.0 - level))? * error;
    let mut found = ReliableChange { standard_error_of_difference: error, improved: 0, unchanged: 0, deteriorated: 0 };
    for &(before, after) in changes {
        let gain = if higher_is_better { after - before } else { before - after };
        if gain > limit {
            found.improved += 1;
        } else if gain < -limit {
            found.deteriorated += 1;
        } else {
            found.unchanged += 1;
        }
    }
    Ok(found)
}
