//! The regularised incomplete beta function, both tails.

use std::f64::consts::TAU;

use libm::{exp, log};

use super::gamma::{deviance, stirling_error};
use super::{DistributionError, Domain, fisher};

const DOMAIN: Domain = Domain("beta");

/// Terms after which the continued fraction is given up; df of 1e6 need under 2,000.
const MOST_TERMS: usize = 200_000;

/// Stands in for a zero denominator in Lentz's algorithm.
const TINY: f64 = 1e-300;

/// The two tails of a beta distribution at one point.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BothTails {
    /// P(X <= x).
    pub lower: f64,
    /// P(X > x).
    pub upper: f64,
}

/// A point of a beta distribution, kept in the pieces that do not lose digits.
#[derive(Clone, Copy, Debug)]
pub(super) struct Point {
    /// First parameter.
    pub a: f64,
    /// Second parameter.
    pub b: f64,
    /// The point.
    pub x: f64,
    /// 1 - x, computed apart.
    pub y: f64,
    /// a y - b x: how far the point lies below the mean, times a + b.
    pub below_mean: f64,
    /// ln x, which stays finite where `x` underflows.
    pub log_x: f64,
    /// ln y, likewise.
    pub log_y: f64,
}

impl Point {
    /// The point with y / x = (b / a) `ratio`; `ratio` is an F statistic, say.
    ///
    /// `less_one` is `ratio` - 1 to full accuracy and `log_ratio` its logarithm,
    /// which serves where the ratio leaves the range of doubles.
    pub fn at_ratio(a: f64, b: f64, ratio: f64, less_one: f64, log_ratio: f64) -> Self {
        let odds = b / a * ratio;
        let log_odds = log(b) - log(a) + log_ratio;
        let x = 1.0 / (1.0 + odds);
        let y = if odds.is_finite() { odds / (1.0 + odds) } else { 1.0 };
        let extreme = 1e100;
        let log_x = if odds > extreme { -log_odds } else { log(x) };
        let log_y = if odds < 1.0 / extreme { log_odds } else { log(y) };
        // a y - b x with y = odds x is b x (ratio - 1), which keeps the digits near the mean.
        let below_mean = if odds > extreme { a } else { b * less_one / (1.0 + odds) };
        Self { a, b, x, y, below_mean, log_x, log_y }
    }

    /// The same point seen from the other side: 1 - X at y.
    pub fn mirrored(self) -> Self {
        Self { a: self.b, b: self.a, x: self.y, y: self.x, below_mean: -self.below_mean, log_x: self.log_y, log_y: self.log_x }
    }

    /// x^a y^b / B(a, b).
    pub fn density_factor(self) -> f64 {
        let Self { a, b, below_mean, .. } = self;
        let sum = a + b;
        let log_sum_over = |part: f64, log_part: f64| log(sum / part) + log_part;
        let exponent = stirling_error(sum)
            - stirling_error(a)
            - stirling_error(b)
            - deviance(a, below_mean, || log_sum_over(a, self.log_x))
            - deviance(b, -below_mean, || log_sum_over(b, self.log_y));
        (a / sum * b / TAU).sqrt() * exp(exponent)
    }

    /// Both tails at the point.
    pub fn both_tails(self) -> Result<BothTails, DistributionError> {
        // The fraction converges fast on the short side of (a + 1) / (a + b + 2). The
        // other tail is then the complement of one that is not near 1.
        if self.x * (self.b + 1.0) <= self.y * (self.a + 1.0) {
            let lower = self.short_tail()?;
            Ok(BothTails { lower, upper: 1.0 - lower })
        } else {
            let upper = self.mirrored().short_tail()?;
            Ok(BothTails { lower: 1.0 - upper, upper })
        }
    }

    fn short_tail(self) -> Result<f64, DistributionError> {
        let factor = self.density_factor();
        if factor == 0.0 {
            return Ok(0.0);
        }
        Ok((factor * self.fraction()?).min(1.0))
    }

    /// I_x(a, b) over the density factor: the continued fraction of DiDonato & Morris
    /// (1992, *ACM Trans. Math. Softw.* 18:360, eq. 9) by Lentz's algorithm.
    ///
    /// Its terms hold the distance below the mean as such, so that nothing cancels
    /// where a is large and x close to 1.
    fn fraction(self) -> Result<f64, DistributionError> {
        let Self { a, b, x, y, below_mean, .. } = self;
        let guarded = |v: f64| if v.abs() < TINY { TINY } else { v };
        let mut value = guarded(a / (a + 1.0) * (below_mean + 1.0));
        let mut c = value;
        let mut d = 0.0;
        for step in 1..=MOST_TERMS {
            let n = step as f64;
            let twice = a + 2.0 * n;
            let shared = n * (b - n) * x / (twice - 1.0);
            let alpha = (a + n - 1.0) * (a + b + n - 1.0) / (twice - 1.0) * x * shared;
            let beta = n + shared + (a + n) / (twice + 1.0) * (below_mean + 1.0 + n * (1.0 + y));
            d = 1.0 / guarded(beta + alpha * d);
            c = guarded(beta + alpha / c);
            let change = d * c;
            value *= change;
            if (change - 1.0).abs() < 2e-16 {
                return Ok(1.0 / value);
            }
        }
        Err(DOMAIN.out_of_reach("the continued fraction did not settle for parameters this large"))
    }
}

/// Both tails of the beta distribution with parameters `a` and `b` at `x`, that
/// is I_x(a, b) and I_(1-x)(b, a).
///
/// Each tail keeps its relative accuracy down to underflow as far as `x` itself
/// determines it.
///
/// # Errors
/// `a` or `b` not finite and above 0; `x` outside 0 to 1.
pub fn both_tails(a: f64, b: f64, x: f64) -> Result<BothTails, DistributionError> {
    DOMAIN.positive("the first parameter", a)?;
    DOMAIN.positive("the second parameter", b)?;
    DOMAIN.not_negative("the point", x)?;
    DOMAIN.not_negative("one minus the point", 1.0 - x)?;
    if x == 0.0 {
        return Ok(BothTails { lower: 0.0, upper: 1.0 });
    }
    if x == 1.0 {
        return Ok(BothTails { lower: 1.0, upper: 0.0 });
    }
    let y = 1.0 - x;
    let point = Point { a, b, x, y, below_mean: a * y - b * x, log_x: log(x), log_y: libm::log1p(-x) };
    point.both_tails()
}

/// The x with P(X <= x) = `p` under the beta distribution with parameters `a` and `b`, by the F distribution's quantile:
/// (1 - X) / X a / b has 2 b and 2 a degrees of freedom.
///
/// # Errors
/// `p` not inside 0 to 1; `a` or `b` not finite and above 0; a quantile nearer to 0 than doubles reach.
///
/// ```
/// // With a = 1 the quantile is 1 - (1 - p)^(1 / b).
/// let x = aforesaid::stats::dist::beta::quantile(0.1, 1.0, 2.0).unwrap();
/// assert!((x - (1.0 - 0.9_f64.sqrt())).abs() < 1e-15);
/// ```
pub fn quantile(p: f64, a: f64, b: f64) -> Result<f64, DistributionError> {
    DOMAIN.probability("the probability", p)?;
    DOMAIN.positive("the first parameter", a)?;
    DOMAIN.positive("the second parameter", b)?;
    let f = fisher::quantile_upper(p, 2.0 * b, 2.0 * a)?;
    let odds = b / a * f;
    if odds.is_finite() { Ok(1.0 / (1.0 + odds)) } else { Err(DOMAIN.out_of_reach("the quantile leaves the range of double precision")) }
}
