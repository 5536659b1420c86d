use std::f64::consts::PI;

use libm::{asin, exp, log};

use super::univariate::probability;
use crate::stats::dist::normal;
use crate::stats::linear::DoubleDouble;
use crate::stats::model::{Refusal, rounding_unit};

/// The fewest values that W is defined for.
const FEWEST: usize = 3;

/// The most values that Royston's approximation was made for.
const MOST: usize = 5000;

/// What Royston's algorithm gives for up to 11 values where W lies below the range of its transformation.
const BELOW_THE_RANGE: f64 = 1e-99;

/// Shapiro and Wilk's test that values come from a normal distribution.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShapiroWilk {
    /// The squared correlation of the ordered values with (approximately) their expectations under normality.
    pub w: f64,
    /// P(W' < W) under normality.
    pub p: f64,
}

/// Shapiro and Wilk's W with Royston's approximations to its coefficients and to its probability (Shapiro & Wilk 1965,
/// *Biometrika* 52:591; Royston 1995, algorithm AS R94, *Applied Statistics* 44:547).
///
/// Ties are taken as they are. For up to 11 values a W below the range of the approximation has p = 1e-99, as the
/// algorithm lays down.
///
/// # Errors
/// Fewer than 3 or more than 5,000 values, a value that is not finite, or values that do not vary (by the rule of
/// [`Moments`](crate::stats::model::Moments)).
///
/// ```
/// use aforesaid::stats::hypothesis::shapiro_wilk;
/// // The weights of eleven men, the worked example of Shapiro & Wilk (1965).
/// let weights = [148.0, 154.0, 158.0, 160.0, 161.0, 162.0, 166.0, 170.0, 182.0, 195.0, 236.0];
/// let test = shapiro_wilk(&weights).unwrap();
/// assert!((test.w - 0.78881).abs() < 5e-6 && (test.p - 0.006704).abs() < 5e-7);
/// ```
pub fn shapiro_wilk(values: &[f64]) -> Result<ShapiroWilk, Refusal> {
    let n = values.len();
    if n < FEWEST {
        return Err(Refusal::TooFewValues { given: n, fewest: FEWEST });
    }
    if n > MOST {
        return Err(Refusal::TooManyValues { given: n, most: MOST });
    }
    if let Some(position) = values.iter().position(|value| !value.is_finite()) {
        return Err(Refusal::ValueNotFinite { position });
    }
    let mut ordered = values.to_vec();
    ordered.sort_unstable_by(f64::total_cmp);
    let unit = convenient_unit(ordered[0].abs().max(ordered[n - 1].abs()));
    ordered.iter_mut().for_each(|x| *x *= unit);
    let (smallest, largest) = (ordered[0], ordered[n - 1]);
    if largest - smallest <= rounding_unit(smallest.abs().max(largest.abs())) {
        return Err(Refusal::ConstantValues);
    }
    let range = DoubleDouble::from(largest) - DoubleDouble::from(smallest);
    let scaled: Vec<DoubleDouble> = ordered.iter().map(|&x| (DoubleDouble::from(x) - DoubleDouble::from(smallest)) / range).collect();
    let weights = coefficients(n)?;
    let mean = scaled.iter().copied().sum::<DoubleDouble>() / DoubleDouble::from(n);
    let squares: DoubleDouble = scaled.iter().map(|&x| (x - mean).square()).sum();
    let lengths = weights.iter().map(|&a| DoubleDouble::from(a).square()).sum::<DoubleDouble>() * DoubleDouble::from(2.0) * squares;
    let along: DoubleDouble = weights.iter().enumerate().map(|(i, &a)| DoubleDouble::from(a) * (scaled[n - 1 - i] - scaled[i])).sum();
    let w = (along.square() / lengths).value();
    let one_less_w = ((lengths - along.square()) / lengths).value();
    Ok(ShapiroWilk { w, p: tail(n, w, one_less_w)? })
}

/// A power of two that brings values of this size to where their squares can be held; W does not depend on it.
fn convenient_unit(largest: f64) -> f64 {
    const FAR: f64 = 1.606_938_044_258_990_3e60; // 2^200
    match largest {
        x if x > 1e250 => 1.0 / FAR,
        x if x < 1e-200 => FAR,
        _ => 1.0,
    }
}

/// The coefficients of the upper half of the order statistics, the largest first.
fn coefficients(n: usize) -> Result<Vec<f64>, Refusal> {
    if n == 3 {
        return Ok(vec![0.5_f64.sqrt()]);
    }
    let count = n as f64;
    let scores = (1..=n / 2)
        .map(|i| normal::quantile_upper((i as f64 - 0.375) / (count + 0.25)).map_err(probability))
        .collect::<Result<Vec<f64>, Refusal>>()?;
    let squares = 2.0 * scores.iter().map(|m| m * m).sum::<f64>();
    let root = 1.0 / count.sqrt();
    let first = scores[0] / squares.sqrt() + polynomial(&[0.0, 0.221157, -0.147981, -2.07119, 4.434685, -2.706056], root);
    let mut weights = vec![first];
    let mut rest_of_scores = squares - 2.0 * scores[0] * scores[0];
    let mut rest_of_weights = 1.0 - 2.0 * first * first;
    if n > 5 {
        let second = scores[1] / squares.sqrt() + polynomial(&[0.0, 0.042981, -0.293762, -1.752461, 5.682633, -3.582633], root);
        weights.push(second);
        rest_of_scores -= 2.0 * scores[1] * scores[1];
        rest_of_weights -= 2.0 * second * second;
    }
    let factor = (rest_of_scores / rest_of_weights).sqrt();
    let rest: Vec<f64> = scores[weights.len()..].iter().map(|m| m / factor).collect();
    weights.extend(rest);
    Ok(weights)
}

/// P(W' < W): exact for three values, Royston's normalising transformations otherwise.
fn tail(n: usize, w: f64, one_less_w: f64) -> Result<f64, Refusal> {
    let count = n as f64;
    if n == 3 {
        // 6 / pi [asin sqrt W - asin sqrt(3/4)], the difference of angles taken as one angle.
        let angle = asin((0.5 * w.sqrt() - (0.75 * one_less_w).sqrt()).clamp(-1.0, 1.0));
        return Ok((6.0 / PI * angle).clamp(0.0, 1.0));
    }
    let log_rest = log(one_less_w);
    let (y, mean, log_sd) = if n <= 11 {
        let bound = polynomial(&[-2.273, 0.459], count);
        if log_rest >= bound {
            return Ok(BELOW_THE_RANGE);
        }
        (
            -log(bound - log_rest),
            polynomial(&[0.544, -0.39978, 0.025054, -6.714e-4], count),
            polynomial(&[1.3822, -0.77857, 0.062767, -0.0020322], count),
        )
    } else {
        let u = log(count);
        (log_rest, polynomial(&[-1.5861, -0.31082, -0.083751, 0.0038915], u), polynomial(&[-0.4803, -0.082676, 0.0030302], u))
    };
    normal::upper_tail((y - mean) / exp(log_sd)).map_err(probability)
}

/// The polynomial with these coefficients, the constant first.
fn polynomial(coefficients: &[f64], x: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, &coefficient| sum * x + coefficient)
}
