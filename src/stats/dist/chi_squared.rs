//! The chi-squared distribution.

use std::f64::consts::TAU;

use libm::{exp, log};

use super::beta::BothTails;
use super::gamma::{deviance, stirling_error};
use super::root::falling_log_tail;
use super::{DistributionError, Domain, normal};

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
    let factor = density_factor(a, x);
    if x <= a + 1.0 {
        let lower = (factor * lower_series(a, x)?).min(1.0);
        Ok(BothTails { lower, upper: 1.0 - lower })
    } else {
        let upper = factor * upper_fraction(a, x)?;
        Ok(BothTails { lower: 1.0 - upper, upper })
    }
}

/// x^a e^-x / Gamma(a), which is the statistic times the density.
fn density_factor(a: f64, x: f64) -> f64 {
    let exponent = -stirling_error(a) - deviance(a, a - x, || log(x / a));
    (a / TAU).sqrt() * exp(exponent)
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

/// The x with P(X > x) = `p`.
///
/// # Errors
/// `p` not inside 0 to 1; `df` not finite and above 0; a quantile below the range of doubles.
///
/// ```
/// // Two degrees of freedom: -2 ln p.
/// let x = aforesaid::stats::dist::chi_squared::quantile_upper(0.05, 2.0).unwrap();
/// assert!((x + 2.0 * libm::log(0.05)).abs() < 1e-14);
/// ```
pub fn quantile_upper(p: f64, df: f64) -> Result<f64, DistributionError> {
    DOMAIN.probability("the tail", p)?;
    DOMAIN.positive("the degrees of freedom", df)?;
    // The search runs on the side where the tail is small, in ln x or its negative.
    let side = if p > 0.5 { -1.0 } else { 1.0 };
    let target = if p > 0.5 { 1.0 - p } else { p };
    let log_tail = |u: f64| {
        let x = exp(side * u);
        let both = tails(x, df)?;
        let tail = if side > 0.0 { both.upper } else { both.lower };
        Ok((log(tail), -density_factor(0.5 * df, 0.5 * x) / tail))
    };
    // Wilson & Hilferty (1931): the cube root is nearly normal. Far below, P(X <= x) is about (x / 2)^(df / 2) / Gamma(df / 2 + 1).
    let spread = 2.0 / (9.0 * df);
    let root = 1.0 - spread + normal::quantile_upper(p)? * spread.sqrt();
    let log_x =
        if root > 0.2 { log(df) + 3.0 * log(root) } else { (log(target) + libm::lgamma(0.5 * df + 1.0)) * 2.0 / df + libm::log(2.0) };
    let found = falling_log_tail(log_tail, log(target), side * log_x)
        .map_err(|e| e.unwrap_or(DOMAIN.out_of_reach("the search for the quantile did not settle")))?;
    let x = exp(side * found);
    if x.is_finite() && x > 0.0 { Ok(x) } else { Err(DOMAIN.out_of_reach("the quantile leaves the range of double precision")) }
}
