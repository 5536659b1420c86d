//! Expectations over the scale S of a t statistic, df S^2 being a chi-squared variable.
//!
//! With S = e^w the density of w falls off exponentially on the left and faster on the right, so that the plain
//! trapezoidal rule converges geometrically (Trefethen & Weideman 2014, *SIAM Review* 56:385). Every term of a tail is
//! positive: nothing cancels, however far out it lies.

use std::f64::consts::PI;

use libm::{exp, expm1, hypot, log};

use super::gamma::stirling_error;

/// Terms below this fraction of the largest one are left out.
const NEGLIGIBLE: f64 = 1e-19;

/// Points of a rule after which it is given up.
const MOST_POINTS: usize = 100_000;

/// Beyond this statistic (squared) the tail of a joint distribution falls like that of a single normal variable, and its
/// sharpness is that of the scale's density alone.
const PLATEAU: f64 = 60.0;

/// The rule would need more points than are allowed.
#[derive(Clone, Copy, Debug)]
pub(super) struct TooManyPoints;

/// ln of the density of w, up to a constant: df (w - (e^2w - 1) / 2).
pub(super) fn log_density(w: f64, df: f64) -> f64 {
    df * (w - 0.5 * expm1(2.0 * w))
}

/// The density of w at S = 1.
pub(super) fn density_at_one(df: f64) -> f64 {
    (df / PI).sqrt() * exp(-stirling_error(df / 2.0))
}

/// Walks away from `centre` on both sides, summing what `term` gives until it is negligible.
pub(super) fn sum_around(centre: f64, step: f64, term: impl FnMut(f64) -> f64) -> Result<(), TooManyPoints> {
    sum_until(NEGLIGIBLE, centre, step, term)
}

/// As [`sum_around`], up to terms below the fraction `negligible` of the largest.
pub(super) fn sum_until(negligible: f64, centre: f64, step: f64, mut term: impl FnMut(f64) -> f64) -> Result<(), TooManyPoints> {
    let mut largest = term(centre);
    for side in [-1.0, 1.0] {
        let mut previous = largest;
        for k in 1.. {
            let here = term(centre + side * k as f64 * step);
            largest = largest.max(here);
            if here <= negligible * largest && here <= previous {
                break;
            }
            if k > MOST_POINTS {
                return Err(TooManyPoints);
            }
            previous = here;
        }
    }
    Ok(())
}

/// Where E g(c S) has most of its mass, and the step of the rule there, for a g that falls like e^(-x^2 / 2).
///
/// At distance theta off the real line the integrand grows by exp(theta^2 times its sharpness) at most, which for
/// far tails is that of the density: the step makes exp(-2 pi theta / step) of it negligible.
pub(super) fn centre_and_step(c: f64, df: f64) -> (f64, f64) {
    let centre = 0.5 * log(df) - log(hypot(df.sqrt(), c));
    let step = 0.42 / (df + (c * c).min(PLATEAU) + 10.0).sqrt();
    (centre, step)
}

/// A tail with its derivative.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct TailAndSlope {
    pub tail: f64,
    pub slope: f64,
}

/// E g(S) and E g'(S), g' being the derivative by ln S, for a tail g that falls like e^(-c^2 S^2 / 2).
pub(super) fn tail_over_scale(df: f64, c: f64, mut at: impl FnMut(f64) -> TailAndSlope) -> Result<TailAndSlope, TooManyPoints> {
    if df.is_infinite() {
        return Ok(at(1.0));
    }
    let (centre, step) = centre_and_step(c, df);
    let mut sum = TailAndSlope { tail: 0.0, slope: 0.0 };
    sum_around(centre, step, |w| {
        let density = exp(log_density(w, df));
        let here = at(exp(w));
        sum.tail += density * here.tail;
        sum.slope += density * here.slope;
        density * here.tail
    })?;
    let factor = step * density_at_one(df);
    Ok(TailAndSlope { tail: factor * sum.tail, slope: factor * sum.slope })
}
