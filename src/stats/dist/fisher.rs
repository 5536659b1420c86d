//! Fisher's F distribution.

use libm::{exp, log, log1p};

use super::beta::{BothTails, Point};
use super::root::falling_log_tail;
use super::{DistributionError, Domain, normal};

const DOMAIN: Domain = Domain("F");

fn check(df1: f64, df2: f64) -> Result<(), DistributionError> {
    DOMAIN.positive("the numerator's degrees of freedom", df1)?;
    DOMAIN.positive("the denominator's degrees of freedom", df2)
}

/// The point df2 / (df2 + df1 f), whose lower beta tail is the upper tail of F.
fn point(f: f64, df1: f64, df2: f64) -> Point {
    Point::at_ratio(df2 / 2.0, df1 / 2.0, f, f - 1.0, log(f))
}

fn tails(f: f64, df1: f64, df2: f64) -> Result<BothTails, DistributionError> {
    DOMAIN.finite("the statistic", f)?;
    check(df1, df2)?;
    if f <= 0.0 {
        return Ok(BothTails { lower: 0.0, upper: 1.0 });
    }
    let swapped = point(f, df1, df2).both_tails()?;
    Ok(BothTails { lower: swapped.upper, upper: swapped.lower })
}

/// P(F > `f`) with `df1` and `df2` degrees of freedom, fractional ones included;
/// 1 for `f` not above 0.
///
/// I_x(df2 / 2, df1 / 2) with x = df2 / (df2 + df1 f).
///
/// # Errors
/// `f` not finite; df not finite and above 0.
///
/// ```
/// // Potthoff & Roy (1964): sex, F(1, 25) = 9.2921
/// let p = aforesaid::stats::dist::fisher::upper_tail(9.292098843389569, 1.0, 25.0).unwrap();
/// assert!((p - 0.005375055921594551).abs() < 1e-15);
/// ```
pub fn upper_tail(f: f64, df1: f64, df2: f64) -> Result<f64, DistributionError> {
    Ok(tails(f, df1, df2)?.upper)
}

/// P(F <= `f`), the companion of [`upper_tail`].
///
/// # Errors
/// As for [`upper_tail`].
pub fn lower_tail(f: f64, df1: f64, df2: f64) -> Result<f64, DistributionError> {
    Ok(tails(f, df1, df2)?.lower)
}

/// The f with P(F > f) = `p`.
///
/// # Errors
/// `p` not inside 0 to 1; df not finite and above 0; a quantile beyond the
/// range of doubles.
pub fn quantile_upper(p: f64, df1: f64, df2: f64) -> Result<f64, DistributionError> {
    DOMAIN.probability("the tail", p)?;
    check(df1, df2)?;
    let log_f = if p > 0.5 { -log_quantile_upper(1.0 - p, df2, df1)? } else { log_quantile_upper(p, df1, df2)? };
    let f = exp(log_f);
    if f.is_finite() && f > 0.0 { Ok(f) } else { Err(DOMAIN.out_of_reach("the quantile leaves the range of double precision")) }
}

/// ln of the upper quantile for `p` not above 1/2.
fn log_quantile_upper(p: f64, df1: f64, df2: f64) -> Result<f64, DistributionError> {
    let start = first_guess(p, df1, df2)?;
    let log_tail = |u: f64| {
        // expm1 keeps f - 1 exact near 1.
        let here = Point::at_ratio(df2 / 2.0, df1 / 2.0, exp(u), libm::expm1(u), u);
        let upper = here.both_tails()?.lower;
        // d/du of the tail is -f times the density, which is the density factor.
        Ok((log(upper), -here.density_factor() / upper))
    };
    falling_log_tail(log_tail, log(p), start).map_err(|e| e.unwrap_or(DOMAIN.out_of_reach("the search for the quantile did not settle")))
}

/// A start for the search: Abramowitz & Stegun 26.5.22 for moderate tails, the
/// power law of the far tail otherwise.
fn first_guess(p: f64, df1: f64, df2: f64) -> Result<f64, DistributionError> {
    let z = normal::quantile_upper(p)?;
    let (a, b) = (df2 / 2.0, df1 / 2.0);
    let log_power = (log(p * a) + log_beta(a, b)) / a;
    let by_power = if log_power < -1.0 { Some(log1p(-exp(log_power)) - log_power + log(df2 / df1)) } else { None };
    if df1 > 1.0 && df2 > 1.0 {
        let (inverse1, inverse2) = (1.0 / (df1 - 1.0), 1.0 / (df2 - 1.0));
        let h = 2.0 / (inverse1 + inverse2);
        let lambda = (z * z - 3.0) / 6.0;
        let root = (h + lambda).max(0.0).sqrt();
        let w = z * root / h - (inverse1 - inverse2) * (lambda + 5.0 / 6.0 - 2.0 / (3.0 * h));
        if w.abs() < 1.0 {
            return Ok(2.0 * w);
        }
    }
    Ok(by_power.unwrap_or(0.0))
}

fn log_beta(a: f64, b: f64) -> f64 {
    libm::lgamma(a) + libm::lgamma(b) - libm::lgamma(a + b)
}
