//! The noncentral t distribution, by quadrature over the scale.
//!
//! T = (Z + delta) / S with S^2 df a chi-squared variable, so that
//! P(T <= t) = E Phi(t S - delta), which the trapezoidal rule in ln S gives to
//! full accuracy. Every term is positive: both tails keep their relative
//! accuracy, far tails and large df included.

use libm::{exp, expm1};

use super::scale::{TooManyPoints, density_at_one, log_density, sum_around, sum_until};
use super::{DistributionError, Domain, normal};

const DOMAIN: Domain = Domain("noncentral t");

const TOO_SHARP: &str = "the statistic is so many times the square root of its degrees of freedom \
                         that the quadrature would need too many points";

fn too_sharp(_: TooManyPoints) -> DistributionError {
    DOMAIN.out_of_reach(TOO_SHARP)
}

fn check(t: f64, df: f64) -> Result<(), DistributionError> {
    DOMAIN.finite("the statistic", t)?;
    DOMAIN.positive("the degrees of freedom", df)
}

/// Step of the rule: the error is about exp(-2 pi theta / step) times the
/// growth of the integrand at distance theta off the real line, which df and
/// t^2 govern, at the `scale` S where the integrand lies.
fn step(t: f64, df: f64, scale: f64) -> f64 {
    let sharpness = df + t * t * (0.5 + 1.0 / df.sqrt());
    0.42 / (sharpness * (scale * scale).max(1.0) + 10.0).sqrt()
}

/// E Phi(sign (t S - delta)).
fn tail(t: f64, df: f64, delta: f64, sign: f64) -> Result<f64, DistributionError> {
    if t == 0.0 {
        return Ok(normal::tail(sign * delta));
    }
    let mode = mode(t, df, delta, sign);
    let step = step(t, df, exp(mode));
    let mut sum = 0.0;
    sum_around(mode, step, |w| {
        let here = exp(log_density(w, df)) * normal::tail(-sign * (t * exp(w) - delta));
        sum += here;
        here
    })
    .map_err(too_sharp)?;
    Ok((step * sum * density_at_one(df)).min(1.0))
}

/// Where the integrand is largest. It has one peak: in S its logarithm is concave.
fn mode(t: f64, df: f64, delta: f64, sign: f64) -> f64 {
    let rises_at = |w: f64| {
        let shifted = t * exp(w);
        let x = sign * (shifted - delta);
        let pull = sign * shifted * inverse_mills(x);
        -df * expm1(2.0 * w) + pull > 0.0
    };
    let (mut left, mut right) = (-1.0, 1.0);
    while !rises_at(left) && left > -600.0 {
        left *= 2.0;
    }
    while rises_at(right) && right < 300.0 {
        right *= 2.0;
    }
    for _ in 0..40 {
        let middle = 0.5 * (left + right);
        if rises_at(middle) {
            left = middle;
        } else {
            right = middle;
        }
    }
    0.5 * (left + right)
}

/// phi(x) / Phi(x).
fn inverse_mills(x: f64) -> f64 {
    if x < -30.0 {
        // Phi(x) is about phi(x) / |x| there.
        return -x - 1.0 / x;
    }
    normal::density(x) / normal::tail(-x)
}

/// P(T <= `t`) with `df` degrees of freedom and noncentrality `delta`.
///
/// # Errors
/// `t` or `delta` not finite; `df` not finite and above 0; |t| beyond some
/// thousand times sqrt(df).
///
/// ```
/// use aforesaid::stats::dist::noncentral_t::lower_tail;
/// // At t = 0 only the sign of Z + delta counts.
/// let p = lower_tail(0.0, 7.0, 1.959963984540054).unwrap();
/// assert!((p - 0.025).abs() < 1e-15);
/// ```
pub fn lower_tail(t: f64, df: f64, delta: f64) -> Result<f64, DistributionError> {
    check(t, df)?;
    DOMAIN.finite("the noncentrality", delta)?;
    tail(t, df, delta, 1.0)
}

/// P(T > `t`), the companion of [`lower_tail`].
///
/// # Errors
/// As for [`lower_tail`].
pub fn upper_tail(t: f64, df: f64, delta: f64) -> Result<f64, DistributionError> {
    check(t, df)?;
    DOMAIN.finite("the noncentrality", delta)?;
    tail(t, df, delta, -1.0)
}

/// The interval for the noncentrality at confidence `level`: the lower limit
/// has P(T >= t) = (1 - level) / 2, the upper limit P(T <= t) = (1 - level) / 2
/// (Steiger & Fouladi 1997; Cumming & Finch 2001).
///
/// # Errors
/// As for [`lower_tail`]; `level` not inside 0 to 1.
///
/// ```
/// use aforesaid::stats::dist::noncentral_t::noncentrality_limits;
/// let (lower, upper) = noncentrality_limits(2.5, 38.0, 0.95).unwrap();
/// assert!((lower - 0.44635507).abs() < 1e-8 && (upper - 4.52324620).abs() < 1e-8);
/// ```
pub fn noncentrality_limits(t: f64, df: f64, level: f64) -> Result<(f64, f64), DistributionError> {
    check(t, df)?;
    DOMAIN.probability("the confidence level", level)?;
    let z = normal::quick_quantile_upper(0.5 * (1.0 - level));
    if t == 0.0 {
        return Ok((-z, z));
    }
    let rule = ScaleRule::new(t, df)?;
    // T is about normal with mean delta and variance 1 + t^2 / (2 df).
    let spread = z * (1.0 + 0.5 * t * t / df).sqrt();
    let lower = rule.solve(z, -1.0, t - spread)?;
    let upper = rule.solve(z, 1.0, t + spread)?;
    Ok((lower, upper))
}

/// The points t S and weights of a rule that all values of delta share, the coarse rule's points first.
struct ScaleRule {
    points: Vec<(f64, f64)>,
    coarse: usize,
}

/// Weights of the limits' rule are left out below this: the tails looked for are not small.
const NO_WEIGHT: f64 = 1e-16;

/// The coarse search ends after a step of this size,
const COARSE_STEP: f64 = 0.3;

/// and the fine one after one of this size: its fourth power, times a small factor, is what is left.
const LAST_STEP: f64 = 1e-3;

/// What a tail at some delta is, with what its derivatives need.
struct TailHere {
    tail: f64,
    /// E phi(x) with x = t S - delta.
    density: f64,
    /// E x phi(x), the first derivative of the density by delta.
    first: f64,
    /// E (x^2 - 1) phi(x), the second.
    second: f64,
}

impl TailHere {
    /// How far along, in the direction in which the tail falls, the probit reaches `z`: the inverted Taylor series of
    /// the probit to its third term. `sign` is that of delta in this direction.
    fn step_to(&self, z: f64, sign: f64) -> f64 {
        let probit = normal::quick_quantile_upper(self.tail);
        let at_probit = normal::density(probit);
        let slope = self.density / at_probit;
        let first = sign * self.first / at_probit;
        let bend = first + probit * slope * slope;
        let third = self.second / at_probit + probit * slope * first + slope * slope * slope + 2.0 * probit * slope * bend;
        let newton = (z - probit) / slope;
        let (a, b) = (bend / (2.0 * slope), third / (6.0 * slope));
        let series = 1.0 - newton * (a - newton * (2.0 * a * a - b));
        // Far away the series says nothing.
        newton * if series > 0.5 && series < 2.0 { series } else { 1.0 }
    }
}

impl ScaleRule {
    fn new(t: f64, df: f64) -> Result<Self, DistributionError> {
        let step = step(t, df, 1.0);
        let mut points = Vec::with_capacity(64);
        let mut coarse = 0;
        for centre in [0.0, step] {
            coarse = points.len();
            sum_until(NO_WEIGHT, centre, 2.0 * step, |w| {
                let density = exp(log_density(w, df));
                points.push((t * exp(w), density));
                density
            })
            .map_err(too_sharp)?;
        }
        Ok(Self { points, coarse })
    }

    fn at(&self, points: &[(f64, f64)], delta: f64, sign: f64) -> TailHere {
        let mut sum = TailHere { tail: 0.0, density: 0.0, first: 0.0, second: 0.0 };
        let mut mass = 0.0;
        for &(shifted, weight) in points {
            let x = shifted - delta;
            let density = weight * normal::density(x);
            mass += weight;
            sum.tail += weight * normal::tail(-sign * x);
            sum.density += density;
            sum.first += x * density;
            sum.second += (x * x - 1.0) * density;
        }
        TailHere { tail: sum.tail / mass, density: sum.density / mass, first: sum.first / mass, second: sum.second / mass }
    }

    /// The delta whose tail on the side of `sign` is `target`, with z its normal quantile: by the coarse rule, which is
    /// good to some 1e-3, and from there by the full one.
    fn solve(&self, z: f64, sign: f64, start: f64) -> Result<f64, DistributionError> {
        let near = self.search(&self.points[..self.coarse], z, sign, start, COARSE_STEP)?;
        self.search(&self.points, z, sign, near, LAST_STEP)
    }

    /// The inverted series on the probit scale, on which the tail is almost linear in delta, inside a bracket. Its steps
    /// converge with the fourth power: after one not above `last_step` it is done.
    fn search(&self, points: &[(f64, f64)], z: f64, sign: f64, start: f64, last_step: f64) -> Result<f64, DistributionError> {
        let (mut near, mut far) = (f64::NEG_INFINITY, f64::INFINITY);
        // Along `along` = sign * delta the tail falls.
        let mut along = sign * start;
        for _ in 0..200 {
            let here = self.at(points, sign * along, sign);
            let usable = here.tail > 0.0 && here.tail < 1.0 && here.density > 0.0;
            let step = if usable { here.step_to(z, sign) } else { f64::NAN };
            if step.abs() <= last_step {
                return Ok(sign * (along + step));
            }
            if step > 0.0 || here.tail >= 1.0 {
                near = near.max(along);
            } else {
                far = far.min(along);
            }
            let next = along + step;
            along = if next > near && next < far {
                next
            } else if near.is_finite() && far.is_finite() {
                0.5 * (near + far)
            } else if near.is_finite() {
                along + z.abs().max(1.0)
            } else {
                along - z.abs().max(1.0)
            };
        }
        Err(DOMAIN.out_of_reach("the search for the noncentrality did not settle"))
    }
}
