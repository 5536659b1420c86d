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

/// The z with P(Z > z) = `p`, by Wichura's rational approximations (1988, algorithm AS 241, *Applied Statistics*
/// 37:477), good to about 1e-15: for the many quantiles of a lattice rule.
pub(super) fn quick_quantile_upper(p: f64) -> f64 {
    const CENTRE: [f64; 8] = [
        3.387_132_872_796_366_5,
        1.331_416_678_917_843_8e2,
        1.971_590_950_306_551_3e3,
        1.373_169_376_550_946e4,
        4.592_195_393_154_987e4,
        6.726_577_092_700_87e4,
        3.343_057_558_358_813e4,
        2.509_080_928_730_122_7e3,
    ];
    const CENTRE_BELOW: [f64; 8] = [
        1.0,
        4.231_333_070_160_091e1,
        6.871_870_074_920_579e2,
        5.394_196_021_424_751e3,
        2.121_379_430_158_659_7e4,
        3.930_789_580_009_271e4,
        2.872_908_573_572_194_3e4,
        5.226_495_278_852_854e3,
    ];
    const SIDE: [f64; 8] = [
        1.423_437_110_749_683_5,
        4.630_337_846_156_546,
        5.769_497_221_460_691,
        3.647_848_324_763_204_5,
        1.270_458_252_452_368_4,
        2.417_807_251_774_506e-1,
        2.272_384_498_926_918_4e-2,
        7.745_450_142_783_414e-4,
    ];
    const SIDE_BELOW: [f64; 8] = [
        1.0,
        2.053_191_626_637_759,
        1.676_384_830_183_803_8,
        6.897_673_349_851e-1,
        1.481_039_764_274_800_8e-1,
        1.519_866_656_361_645_7e-2,
        5.475_938_084_995_345e-4,
        1.050_750_071_644_416_9e-9,
    ];
    const FAR: [f64; 8] = [
        6.657_904_643_501_103,
        5.463_784_911_164_114,
        1.784_826_539_917_291_3,
        2.965_605_718_285_049e-1,
        2.653_218_952_657_612_4e-2,
        1.242_660_947_388_078_4e-3,
        2.711_555_568_743_487_6e-5,
        2.010_334_399_292_288_1e-7,
    ];
    const FAR_BELOW: [f64; 8] = [
        1.0,
        5.998_322_065_558_88e-1,
        1.369_298_809_227_358e-1,
        1.487_536_129_085_061_5e-2,
        7.868_691_311_456_133e-4,
        1.846_318_317_510_054_8e-5,
        1.421_511_758_316_446e-7,
        2.044_263_103_389_939_8e-15,
    ];
    let ratio = |above: &[f64; 8], below: &[f64; 8], x: f64| {
        let polynomial = |coefficients: &[f64; 8]| coefficients.iter().rev().fold(0.0, |sum, c| sum * x + c);
        polynomial(above) / polynomial(below)
    };
    let from_centre = 0.5 - p;
    if from_centre.abs() <= 0.425 {
        return from_centre * ratio(&CENTRE, &CENTRE_BELOW, 0.180_625 - from_centre * from_centre);
    }
    let root = (-log(p.min(1.0 - p))).sqrt();
    let z = if root <= 5.0 { ratio(&SIDE, &SIDE_BELOW, root - 1.6) } else { ratio(&FAR, &FAR_BELOW, root - 5.0) };
    if from_centre < 0.0 { -z } else { z }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// scipy 1.17, `scipy.special.ndtri`.
    #[test]
    fn quick_quantiles_agree_with_scipy() {
        for (p, z) in [
            (0.5, 0.0),
            (0.3, 0.5244005127080409),
            (0.07, 1.4757910281791706),
            (0.93, -1.475791028179171),
            (1e-6, 4.753424308822899),
            (1e-12, 7.034483825301131),
            (1e-30, 11.464024688443613),
            (1e-200, 30.20559417957964),
        ] {
            assert!((quick_quantile_upper(p) - z).abs() <= 4e-15 * z.abs(), "{p}");
        }
    }
}
