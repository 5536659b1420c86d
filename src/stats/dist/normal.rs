//! The standard normal distribution.

use std::f64::consts::{FRAC_1_SQRT_2, SQRT_2, TAU};
use std::ops::RangeInclusive;

use libm::{erfc, exp, fma, log};

use super::{DistributionError, Domain};

const DOMAIN: Domain = Domain("normal");

/// Where the rounding of z / sqrt 2 shows in the tail, which is then put right.
const ROUNDING_SHOWS: RangeInclusive<f64> = 5.0..=40.0;

/// The part of 1 / sqrt 2 that its double leaves out.
const FRAC_1_SQRT_2_REST: f64 = -4.833_646_656_726_457e-17;

/// P(Z > z) for any z but NaN; the building block of the checked functions.
pub(super) fn tail(z: f64) -> f64 {
    let x = z * FRAC_1_SQRT_2;
    let upper = 0.5 * erfc(x);
    if !ROUNDING_SHOWS.contains(&z) {
        return upper;
    }
    let rest = fma(z, FRAC_1_SQRT_2, -x) + z * FRAC_1_SQRT_2_REST;
    // d/dx ln erfc(x) is about -(2 x + 1 / x).
    upper * (1.0 - rest * (2.0 * x + 1.0 / x))
}

/// The density at z.
pub(super) fn density(z: f64) -> f64 {
    exp(-0.5 * z * z) / TAU.sqrt()
}

/// P(Z > `z`).
///
/// # Errors
/// `z` not finite.
pub fn upper_tail(z: f64) -> Result<f64, DistributionError> {
    DOMAIN.finite("the statistic", z)?;
    Ok(tail(z))
}

/// P(|Z| > |`z`|).
///
/// # Errors
/// `z` not finite.
pub fn two_tails(z: f64) -> Result<f64, DistributionError> {
    Ok((2.0 * upper_tail(z.abs())?).min(1.0))
}

/// The z with P(Z <= z) = `p`.
///
/// # Errors
/// `p` not inside 0 to 1.
///
/// ```
/// let z = aforesaid::stats::dist::normal::quantile(0.975).unwrap();
/// assert!((z - 1.959963984540054).abs() < 1e-14);
/// ```
pub fn quantile(p: f64) -> Result<f64, DistributionError> {
    Ok(-quantile_upper(p)?)
}

/// The z with P(Z > z) = `p`; keeps its accuracy for the smallest `p`.
///
/// # Errors
/// `p` not inside 0 to 1.
pub fn quantile_upper(p: f64) -> Result<f64, DistributionError> {
    DOMAIN.probability("the probability", p)?;
    Ok(match p.partial_cmp(&0.5) {
        Some(std::cmp::Ordering::Equal) => 0.0,
        Some(std::cmp::Ordering::Greater) => -quantile_above_median(1.0 - p),
        _ => quantile_above_median(p),
    })
}

/// Abramowitz & Stegun 26.2.23, then Newton's method on the log tail, which is concave.
fn quantile_above_median(p: f64) -> f64 {
    let log_p = log(p);
    let s = (-2.0 * log_p).sqrt();
    let above = 2.515_517 + s * (0.802_853 + s * 0.010_328);
    let below = 1.0 + s * (1.432_788 + s * (0.189_269 + s * 0.001_308));
    let mut z = (s - above / below).max(0.0);
    for _ in 0..20 {
        let upper = tail(z);
        let hazard = density(z) / upper;
        let excess = if p > 0.1 { (upper - p) / upper } else { log(upper) - log_p };
        let step = excess / hazard;
        z += step;
        if step.abs() <= 1e-16 * z.abs().max(SQRT_2) {
            break;
        }
    }
    z.max(0.0)
}
