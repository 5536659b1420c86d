//! The chi-squared distribution.

use std::f64::consts::TAU;

use libm::{exp, log};

use super::beta::BothTails;
use super::gamma::{deviance, stirling_error};
use super::{DistributionError, Domain};

const DOMAIN: Domain = Domain("chi-squared");

/// Terms after which the series or fraction is given up.
const MOST_TERMS: usize = 200_000;

fn tails(x: f64, df: f64) -> Result<BothTails, DistributionError> {
    DOMAIN.finite("the statistic", x)?;
    DOMAIN.positive("the degrees of freedom", df)?;
    if x <= 0.0 {
        return Ok(BothTails { lower: 0.0, upper: 1.0 });
    }
    let (a, x) = (df / 2.0, x / 2.0);
    // x^a e^-x / Gamma(a)
    let exponent = -stirling_error(a) - deviance(a, a - x, || log(x / a));
    let factor = (a / TAU).sqrt() * exp(exponent);
    if x <= a + 1.0 {
        let lower = (factor * lower_series(a, x)?).min(1.0);
        Ok(BothTails { lower, upper: 1.0 - lower })
    } else {
        let upper = factor * upper_fraction(a, x)?;
        Ok(BothTails { lower: 1.0 - upper, upper })
    }
}

/// sum of x^n / (a (a+1) ... (a+n)) (Abramowitz & Stegun 6.5.29).
fn lower_series(a: f64, x: f64) -> Result<f64, DistributionError> {
    let mut term = 1.0 / a;
    let mut sum = term;
    for n in 1..=MOST_TERMS {
        term *= x / (a + n as f64);
        sum += term;
        if term < 1e-17 * sum {
            return Ok(sum);
        }
    }
    Err(unsettled())
}

/// The continued fraction of the upper incomplete gamma function by Lentz's
/// algorithm (Abramowitz & Stegun 6.5.31, contracted).
fn upper_fraction(a: f64, x: f64) -> Result<f64, DistributionError> {
    let mut b = x + 1.0 - a;
    let mut c = 1e300;
    let mut d = 1.0 / b;
    let mut value = d;
    for n in 1..=MOST_TERMS {
        let m = n as f64;
        let numerator = -m * (m - a);
        b += 2.0;
        let denominator = numerator * d + b;
        d = 1.0 / if denominator.abs() < 1e-300 { 1e-300 } else { denominator };
        c = b + numerator / c;
        if c.abs() < 1e-300 {
            c = 1e-300;
        }
        let change = d * c;
        value *= change;
        if (change - 1.0).abs() < 2e-16 {
            return Ok(value);
        }
    }
    Err(unsettled())
}

fn unsettled() -> DistributionError {
    DOMAIN.out_of_reach("the expansion did not settle for degrees of freedom this large")
}

/// P(X > `x`) with `df` degrees of freedom, fractional ones included; 1 for
/// `x` not above 0.
///
/// # Errors
/// `x` not finite; `df` not finite and above 0.
///
/// ```
/// // Two degrees of freedom: exp(-x / 2).
/// let p = aforesaid::stats::dist::chi_squared::upper_tail(1400.0, 2.0).unwrap();
/// assert!((p / libm::exp(-700.0) - 1.0).abs() < 1e-12);
/// ```
pub fn upper_tail(x: f64, df: f64) -> Result<f64, DistributionError> {
    Ok(tails(x, df)?.upper)
}

/// P(X <= `x`), the companion of [`upper_tail`].
///
/// # Errors
/// As for [`upper_tail`].
pub fn lower_tail(x: f64, df: f64) -> Result<f64, DistributionError> {
    Ok(tails(x, df)?.lower)
}
