//! Student's t distribution.

use libm::{exp, lgamma, log};

use super::beta::Point;
use super::root::falling_log_tail;
use super::{DistributionError, Domain, normal};

const DOMAIN: Domain = Domain("t");

/// The point df / (df + t^2) for t = e^`log_t`.
fn point(t: f64, log_t: f64, df: f64) -> Point {
    Point::at_ratio(df / 2.0, 0.5, t * t, (t - 1.0) * (t + 1.0), 2.0 * log_t)
}

/// P(|T| > |`t`|) with `df` degrees of freedom, fractional ones included.
///
/// I_x(df / 2, 1/2) with x = df / (df + t^2).
///
/// # Errors
/// `t` not finite; `df` not finite and above 0.
pub fn two_tails(t: f64, df: f64) -> Result<f64, DistributionError> {
    DOMAIN.finite("the statistic", t)?;
    DOMAIN.positive("the degrees of freedom", df)?;
    if t == 0.0 {
        return Ok(1.0);
    }
    Ok(point(t.abs(), log(t.abs()), df).both_tails()?.lower)
}

/// P(T > `t`).
///
/// # Errors
/// As for [`two_tails`].
///
/// ```
/// // One degree of freedom is Cauchy's distribution: a quarter lies above 1.
/// let p = aforesaid::stats::dist::student::upper_tail(1.0, 1.0).unwrap();
/// assert!((p - 0.25).abs() < 1e-15);
/// ```
pub fn upper_tail(t: f64, df: f64) -> Result<f64, DistributionError> {
    let half = 0.5 * two_tails(t, df)?;
    // For a negative t the tail is at least 1/2: nothing cancels.
    Ok(if t < 0.0 { 0.5 + (0.5 - half) } else { half })
}

/// The t with P(T > t) = `p`; negative for `p` above 1/2.
///
/// # Errors
/// `p` not inside 0 to 1; `df` not finite and above 0; a quantile beyond the
/// range of doubles.
pub fn quantile_upper(p: f64, df: f64) -> Result<f64, DistributionError> {
    DOMAIN.probability("the tail", p)?;
    DOMAIN.positive("the degrees of freedom", df)?;
    if p > 0.5 {
        return Ok(-quantile_upper(1.0 - p, df)?);
    }
    if p == 0.5 {
        return Ok(0.0);
    }
    // Two lower bounds of the quantile: the normal one, since t has longer tails, and
    // the one from I_x(a, 1/2) >= x^a / (a B(a, 1/2)).
    let z = normal::quantile_upper(p)?;
    let a = df / 2.0;
    let log_beta = lgamma(a) + lgamma(0.5) - lgamma(a + 0.5);
    let log_x = ((log(2.0 * p * a) + log_beta) / a).min(-1e-300);
    let log_by_power = 0.5 * (log(df) + log(-libm::expm1(log_x)) - log_x);
    let start = log(z).max(log_by_power);
    let log_tail = |u: f64| {
        let here = point(exp(u), u, df);
        let both = here.both_tails()?.lower;
        Ok((log(0.5 * both), -2.0 * here.density_factor() / both))
    };
    let log_t = falling_log_tail(log_tail, log(p), start)
        .map_err(|e| e.unwrap_or(DOMAIN.out_of_reach("the search for the quantile did not settle")))?;
    let t = exp(log_t);
    if t.is_finite() && t > 0.0 { Ok(t) } else { Err(DOMAIN.out_of_reach("the quantile leaves the range of double precision")) }
}
