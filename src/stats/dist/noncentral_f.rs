//! The noncentral F distribution, as a Poisson mixture of beta distributions.
//!
//! P(F <= f) = sum over j of Poisson(j; lambda / 2) I_y(df1 / 2 + j, df2 / 2)
//! with y = df1 f / (df1 f + df2), summed from the mode of the Poisson weights
//! outwards with the beta tails stepped by recurrence (Benton & Krishnamoorthy
//! 2003, *Computational Statistics & Data Analysis* 43:249).

use std::f64::consts::TAU;

use libm::{exp, log};

use super::beta::Point;
use super::gamma::{deviance, stirling_error};
use super::{DistributionError, Domain, fisher, normal};

const DOMAIN: Domain = Domain("noncentral F");

/// Terms are left out below this fraction of the sum.
const NEGLIGIBLE: f64 = 1e-18;

/// Terms of the mixture after which it is given up (lambda of about 1e10).
const MOST_TERMS: usize = 2_000_000;

const TOO_MANY_TERMS: &str = "the noncentrality is too large for the series";
const TOO_FAR: &str = "the value lies too far in the tail to be computed";

fn check(f: f64, df1: f64, df2: f64) -> Result<(), DistributionError> {
    DOMAIN.not_negative("the statistic", f)?;
    DOMAIN.positive("the numerator's degrees of freedom", df1)?;
    DOMAIN.positive("the denominator's degrees of freedom", df2)
}

/// Both tails at one point, and the rate at which the upper one grows with lambda.
#[derive(Clone, Copy)]
struct Mixture {
    lower: f64,
    upper: f64,
    slope: f64,
}

/// One term of the mixture: the Poisson weight, both beta tails and their next difference.
#[derive(Clone, Copy)]
struct Term {
    weight: f64,
    lower: f64,
    upper: f64,
    difference: f64,
}

/// Poisson probability of `count` at `mean` (Loader 2000).
fn poisson(count: f64, mean: f64) -> f64 {
    if count == 0.0 {
        return exp(-mean);
    }
    let exponent = -stirling_error(count) - deviance(count, count - mean, || log(mean / count));
    exp(exponent) / (TAU * count).sqrt()
}

/// The beta point y = df1 f / (df1 f + df2) of the term with `count` events.
fn beta_point(f: f64, df1: f64, df2: f64, count: f64) -> Point {
    let (a, b) = (df1 / 2.0 + count, df2 / 2.0);
    // Seen from the other side the point has ratio (df1 f / 2) / a.
    let ratio = df1 / 2.0 * f / a;
    let less_one = (df1 / 2.0 * (f - 1.0) - count) / a;
    Point::at_ratio(b, a, ratio, less_one, log(f) + log(df1 / (2.0 * a))).mirrored()
}

fn mixture(f: f64, df1: f64, df2: f64, lambda: f64) -> Result<Mixture, DistributionError> {
    let mean = lambda / 2.0;
    let (half1, half2) = (df1 / 2.0, df2 / 2.0);
    let mode = mean.floor();
    let point = beta_point(f, df1, df2, mode);
    let (y, tails) = (point.x, point.both_tails()?);
    let start = Term {
        weight: poisson(mode, mean),
        lower: tails.lower,
        upper: tails.upper,
        // I_y(a, b) - I_y(a + 1, b)
        difference: point.density_factor() / point.a,
    };
    let mut sum = Mixture { lower: 0.0, upper: 0.0, slope: 0.0 };
    let mut previous = (0.0, 0.0);
    // True once the term no longer counts and the terms shrink.
    let mut add = |term: Term| {
        let (lower, upper) = (term.weight * term.lower, term.weight * term.upper);
        sum.lower += lower;
        sum.upper += upper;
        sum.slope += 0.5 * term.weight * term.difference;
        let done = lower <= NEGLIGIBLE * sum.lower && upper <= NEGLIGIBLE * sum.upper && lower <= previous.0 && upper <= previous.1;
        previous = (lower, upper);
        done
    };
    add(start);
    let mut term = start;
    let mut count = mode;
    let mut steps = 0;
    loop {
        let a = half1 + count;
        term.lower = (term.lower - term.difference).max(0.0);
        term.upper = (term.upper + term.difference).min(1.0);
        term.difference *= y * (a + half2) / (a + 1.0);
        count += 1.0;
        term.weight *= mean / count;
        if add(term) {
            break;
        }
        steps += 1;
        if steps > MOST_TERMS {
            return Err(DOMAIN.out_of_reach(TOO_MANY_TERMS));
        }
    }
    let mut term = start;
    let mut count = mode;
    while count > 0.0 {
        let a = half1 + count;
        term.difference *= a / (y * (a - 1.0 + half2));
        term.lower = (term.lower + term.difference).min(1.0);
        term.upper = (term.upper - term.difference).max(0.0);
        term.weight *= count / mean;
        count -= 1.0;
        if add(term) {
            break;
        }
        steps += 1;
        if steps > MOST_TERMS {
            return Err(DOMAIN.out_of_reach(TOO_MANY_TERMS));
        }
    }
    Ok(sum)
}

fn tails(f: f64, df1: f64, df2: f64, lambda: f64) -> Result<Mixture, DistributionError> {
    check(f, df1, df2)?;
    DOMAIN.not_negative("the noncentrality", lambda)?;
    if f == 0.0 {
        return Ok(Mixture { lower: 0.0, upper: 1.0, slope: 0.0 });
    }
    mixture(f, df1, df2, lambda)
}

fn within_reach(p: f64, f: f64) -> Result<f64, DistributionError> {
    if p > 1e-290 || f == 0.0 { Ok(p.min(1.0)) } else { Err(DOMAIN.out_of_reach(TOO_FAR)) }
}

/// P(F <= `f`) with `df1` and `df2` degrees of freedom and noncentrality `lambda`.
///
/// # Errors
/// `f` or `lambda` not finite and at least 0; df not finite and above 0;
/// `lambda` beyond about 1e10; a value below 1e-290.
pub fn lower_tail(f: f64, df1: f64, df2: f64, lambda: f64) -> Result<f64, DistributionError> {
    within_reach(tails(f, df1, df2, lambda)?.lower, f)
}

/// P(F > `f`), the companion of [`lower_tail`].
///
/// # Errors
/// As for [`lower_tail`].
pub fn upper_tail(f: f64, df1: f64, df2: f64, lambda: f64) -> Result<f64, DistributionError> {
    within_reach(tails(f, df1, df2, lambda)?.upper, f)
}

/// The interval for the noncentrality at confidence `level`: the lower limit
/// has P(F >= f) = (1 - level) / 2, the upper limit P(F <= f) = (1 - level) / 2
/// (Steiger 2004).
///
/// With p the central tail at `f`, the lower limit is 0 where p > (1 - level) / 2
/// and both are 0 where p > (1 + level) / 2: no noncentrality reaches those tails.
///
/// # Errors
/// As for [`lower_tail`]; `level` not inside 0 to 1.
///
/// ```
/// use aforesaid::stats::dist::noncentral_f::noncentrality_limits;
/// let (lower, upper) = noncentrality_limits(4.2, 3.0, 57.0, 0.90).unwrap();
/// assert!((lower - 1.76850706).abs() < 1e-8 && (upper - 25.34825156).abs() < 1e-8);
/// ```
pub fn noncentrality_limits(f: f64, df1: f64, df2: f64, level: f64) -> Result<(f64, f64), DistributionError> {
    check(f, df1, df2)?;
    DOMAIN.probability("the confidence level", level)?;
    let each = 0.5 * (1.0 - level);
    let z = normal::quantile_upper(each)?;
    let lower = if fisher::upper_tail(f, df1, df2)? >= each { 0.0 } else { solve(f, df1, df2, each, z, Side::Lower)? };
    let upper = if fisher::lower_tail(f, df1, df2)? <= each { 0.0 } else { solve(f, df1, df2, each, z, Side::Upper)? };
    Ok((lower, upper))
}

/// Which limit is looked for.
#[derive(Clone, Copy, PartialEq)]
enum Side {
    Lower,
    Upper,
}

/// Newton's method on the probit scale in the root of lambda, inside a bracket.
fn solve(f: f64, df1: f64, df2: f64, target: f64, z: f64, side: Side) -> Result<f64, DistributionError> {
    let (mut left, mut right) = (0.0_f64, f64::INFINITY);
    let mut root = first_guess(f, df1, df2, if side == Side::Lower { -z } else { z });
    for _ in 0..200 {
        let here = mixture(f, df1, df2, root * root)?;
        let (tail, sign) = if side == Side::Lower { (here.upper, 1.0) } else { (here.lower, -1.0) };
        if sign * (tail - target) > 0.0 {
            right = right.min(root);
        } else {
            left = left.max(root);
        }
        // d tail / d root = sign * 2 root * slope
        let newton = if tail > 0.0 && tail < 1.0 && here.slope > 0.0 {
            let probit = normal::quantile_upper(tail)?;
            root - sign * (z - probit) * normal::density(probit) / (2.0 * root * here.slope)
        } else {
            f64::NAN
        };
        // The steps converge quadratically: after one this small nothing is left to gain.
        if (newton - root).abs() <= 1e-8 * root {
            return Ok(newton * newton);
        }
        root = if newton > left && newton < right {
            newton
        } else if right.is_finite() {
            0.5 * (left + right)
        } else {
            2.0 * root + 1.0
        };
    }
    Err(DOMAIN.out_of_reach("the search for the noncentrality did not settle"))
}

/// sqrt of a normal approximation to the limit: df1 F has mean df1 + lambda and
/// variance 2 (df1 + 2 lambda) + 2 (df1 + lambda)^2 / df2.
fn first_guess(f: f64, df1: f64, df2: f64, z: f64) -> f64 {
    let estimate = (df1 * (f - 1.0)).max(0.0);
    let spread = |lambda: f64| {
        let total = df1 + lambda;
        (2.0 * (df1 + 2.0 * lambda) + 2.0 * total * total / df2).sqrt()
    };
    let first = (estimate + z * spread(estimate)).max(0.1);
    let second = estimate + z * spread(first);
    second.max(0.1 * first).sqrt()
}
