//! Partial and generalized eta squared, from uncorrected sums of squares.

use super::Refusal;
use crate::stats::dist::noncentral_f;

fn check_sums<'a>(sums: impl IntoIterator<Item = &'a f64>) -> Result<(), Refusal> {
    match sums.into_iter().find(|s| !s.is_finite() || **s < 0.0) {
        None => Ok(()),
        Some(bad) => Err(Refusal::new(format!("eta squared needs sums of squares that are finite and not negative; one is {bad}"))),
    }
}

fn share(part: f64, whole: f64) -> Result<f64, Refusal> {
    if whole > 0.0 {
        Ok(part / whole)
    } else {
        Err(Refusal::new("eta squared is undefined: effect and error sums of squares are all 0, so the data do not vary"))
    }
}

/// Partial eta squared: SS effect / (SS effect + SS error).
///
/// # Errors
/// A sum of squares that is negative or not finite; both 0.
pub fn partial_eta_squared(ss_effect: f64, ss_error: f64) -> Result<f64, Refusal> {
    check_sums([&ss_effect, &ss_error])?;
    share(ss_effect, ss_effect + ss_error)
}

/// The interval for partial eta squared at confidence `level`, lower limit first:
/// lambda / (lambda + df1 + df2 + 1) at the noncentrality limits of `f` (Steiger
/// 2004, *Psychological Methods* 9:164).
///
/// `df1` and `df2` are the uncorrected degrees of freedom. The lower limit is 0
/// where p > (1 - level) / 2, both are 0 where p > (1 + level) / 2; the estimate
/// can then lie outside, which the reader must be told.
///
/// # Errors
/// Arguments outside their domain, and values that the noncentral F cannot give.
pub fn partial_eta_squared_interval(f: f64, df1: f64, df2: f64, level: f64) -> Result<(f64, f64), Refusal> {
    let (lower, upper) = noncentral_f::noncentrality_limits(f, df1, df2, level)?;
    let to_eta = |lambda: f64| lambda / (lambda + df1 + df2 + 1.0);
    Ok((to_eta(lower), to_eta(upper)))
}

/// The sum of squares of one effect of a design.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EffectSum {
    /// The uncorrected sum of squares.
    pub sum_of_squares: f64,
    /// Whether at least one of its factors is measured (a trait of the subjects)
    /// rather than manipulated.
    pub measured: bool,
}

/// Generalized eta squared (Olejnik & Algina 2003, *Psychological Methods* 8:434)
/// of the effect at position `effect` of `effects`:
///
/// SS / [d SS + sum of SS of the effects with a measured factor + sum of error SS]
///
/// with d = 1 where the effect's own factors are all manipulated, else 0.
/// `effects` are all effects of the design, `errors` all its error sums of squares
/// (between subjects and every within stratum).
///
/// # Errors
/// A sum of squares that is negative or not finite; a denominator of 0; a position
/// past the end.
pub fn generalized_eta_squared(effect: usize, effects: &[EffectSum], errors: &[f64]) -> Result<f64, Refusal> {
    check_sums(effects.iter().map(|e| &e.sum_of_squares).chain(errors))?;
    let own = effects.get(effect).ok_or_else(|| Refusal::new(format!("there is no effect number {} in the design", effect + 1)))?;
    let measured: f64 = effects.iter().filter(|e| e.measured).map(|e| e.sum_of_squares).sum();
    let error: f64 = errors.iter().sum();
    let manipulated = if own.measured { 0.0 } else { own.sum_of_squares };
    share(own.sum_of_squares, manipulated + measured + error)
}
