//! The studentized range: the largest less the smallest of k standard normal variables, over an independent scale.
//!
//! With S the scale of [`student`]'s t, P(Q > q) = E R(q S), where
//! R(w) = k int phi(z) {Phi(z)^(k-1) - [Phi(z) - Phi(z - w)]^(k-1)} dz is the tail of the range of k normal variables.
//! Both integrals are of analytic functions that die off, which the trapezoidal rule does best; every term is positive,
//! so that small tails keep their relative accuracy.

use std::f64::consts::SQRT_2;

use libm::{exp, expm1, log, log1p};

use super::root::falling_log_tail;
use super::scale::{TailAndSlope, tail_over_scale};
use super::{DistributionError, Domain, normal, student};

const DOMAIN: Domain = Domain("studentized range");

/// Means beyond which the steps chosen here have not been tried.
const MOST_MEANS: usize = 200;

/// Half the width, in z, of the stretch around w / 2 where the inner integrand counts.
const HALF_WIDTH: f64 = 8.8;

/// No normal density is left beyond this z.
const LAST_Z: f64 = 38.6;

fn check(k: usize, df: f64) -> Result<(), DistributionError> {
    DOMAIN.holds((2..=MOST_MEANS).contains(&k), "the number of means", k as f64, "between 2 and 200")?;
    DOMAIN.holds(df > 0.0, "the degrees of freedom", df, "above 0 (infinity included)")
}

/// The inner integral's points, which all widths share.
struct Range {
    /// Number of means less one.
    others: f64,
    step: f64,
    /// Index of the first point on the lattice of `step`.
    first: f64,
    points: Vec<Point>,
}

struct Point {
    z: f64,
    /// Phi(z).
    below: f64,
    /// k phi(z) Phi(z)^(k - 1), times the step.
    weight: f64,
}

impl Range {
    fn new(k: usize) -> Self {
        let means = k as f64;
        let others = means - 1.0;
        // Off the real line the integrand grows like exp(k y^2 / 2) at most.
        let step = (0.7 / means.sqrt()).max(0.06);
        let first = -(HALF_WIDTH / step).ceil();
        let last = (LAST_Z / step).floor();
        let points = (0..=(last - first) as usize)
            .map(|index| {
                let z = (first + index as f64) * step;
                let below = normal::tail(-z);
                Point { z, below, weight: step * means * normal::density(z) * exp(others * log(below)) }
            })
            .collect();
        Self { others, step, first, points }
    }

    /// The tail of the range at width `w`, with its derivative by ln w.
    fn at(&self, w: f64) -> TailAndSlope {
        let index = |z: f64| (z / self.step - self.first).clamp(0.0, self.points.len() as f64) as usize;
        let (from, to) = (index(0.5 * w - HALF_WIDTH), index(0.5 * w + HALF_WIDTH));
        let mut sum = TailAndSlope { tail: 0.0, slope: 0.0 };
        for point in &self.points[from..to] {
            // The share of the others that lies below z - w.
            let share = (normal::tail(w - point.z) / point.below).min(1.0);
            let log_rest = log1p(-share);
            sum.tail += point.weight * -expm1(self.others * log_rest);
            let rest = if self.others > 1.0 { exp((self.others - 1.0) * log_rest) } else { 1.0 };
            sum.slope -= point.weight * self.others * normal::density(point.z - w) / point.below * rest;
        }
        sum.slope *= w;
        sum
    }

    fn over_scale(&self, q: f64, df: f64) -> Result<TailAndSlope, DistributionError> {
        tail_over_scale(df, q / SQRT_2, |s| self.at(q * s))
            .map_err(|_| DOMAIN.out_of_reach("with so few degrees of freedom the quadrature would need too many points"))
    }
}

/// P(Q > `q`) for the studentized range of `k` means with `df` degrees of freedom, which may be fractional or infinite;
/// 1 for `q` not above 0.
///
/// Relative error below 1e-12 down to the smallest tails (measured for 2 to 100 means and 1 df to infinity).
///
/// # Errors
/// `q` not finite; `k` not within 2 to 200; `df` not above 0.
///
/// ```
/// // Tukey's table: 5 % lie above 3.88 for 3 means and 10 df.
/// let p = aforesaid::stats::dist::studentized_range::upper_tail(3.8768, 3, 10.0).unwrap();
/// assert!((p - 0.05).abs() < 1e-5);
/// ```
pub fn upper_tail(q: f64, k: usize, df: f64) -> Result<f64, DistributionError> {
    DOMAIN.finite("the statistic", q)?;
    check(k, df)?;
    if q <= 0.0 {
        return Ok(1.0);
    }
    Ok(Range::new(k).over_scale(q, df)?.tail.min(1.0))
}

/// The q with P(Q > q) = `p`.
///
/// # Errors
/// `p` not inside 0 to 1; as for [`upper_tail`]; a quantile beyond the range of doubles.
pub fn quantile_upper(p: f64, k: usize, df: f64) -> Result<f64, DistributionError> {
    DOMAIN.probability("the tail", p)?;
    check(k, df)?;
    let pairs = (k * (k - 1) / 2) as f64;
    // Bonferroni: an upper bound, from where Newton's method comes down.
    let each = 0.5 * p / pairs;
    let t = if df.is_infinite() { normal::quantile_upper(each)? } else { student::quantile_upper(each, df)? };
    let range = Range::new(k);
    let log_tail = |u: f64| {
        let here = range.over_scale(exp(u), df)?;
        Ok((log(here.tail), here.slope / here.tail))
    };
    let log_q = falling_log_tail(log_tail, log(p), log(SQRT_2 * t))
        .map_err(|e| e.unwrap_or(DOMAIN.out_of_reach("the search for the quantile did not settle")))?;
    let q = exp(log_q);
    if q.is_finite() { Ok(q) } else { Err(DOMAIN.out_of_reach("the quantile leaves the range of double precision")) }
}
