//! Omega squared of an effect within its own error stratum.

use super::Refusal;
use crate::stats::dist::noncentral_f;

/// The formula, as reports print it.
pub const OMEGA_SQUARED_FORMULA: &str = "df1 (F - 1) / (df1 (F - 1) + df1 + df2 + 1), of the effect and its own error stratum, uncorrected";

/// Partial omega squared, df1 (F - 1) / (df1 (F - 1) + df1 + df2 + 1): in a one-way design, where df1 + df2 + 1 is the number of
/// subjects, the omega squared of Hays (1963); elsewhere the same with the df of the effect's own stratum (Olejnik & Algina
/// 2003 for its partial form). It may be negative, and is then given as it is.
///
/// # Errors
/// F negative or not finite; a denominator that is not above 0.
///
/// ```
/// let omega = aforesaid::stats::sizes::omega_squared(4.2, 3.0, 57.0).unwrap();
/// assert!((omega - 9.6 / 70.6).abs() < 1e-15);
/// ```
pub fn omega_squared(f: f64, df1: f64, df2: f64) -> Result<f64, Refusal> {
    if !(f.is_finite() && f >= 0.0) {
        return Err(Refusal::new(format!("omega squared needs an F that is finite and not negative; it is {f}")));
    }
    let effect = df1 * (f - 1.0);
    let whole = effect + df1 + df2 + 1.0;
    if whole > 0.0 { Ok(effect / whole) } else { Err(Refusal::new("omega squared is undefined: its denominator is not above 0")) }
}

/// The interval at confidence `level`, lower limit first: it estimates what partial eta squared estimates,
/// lambda / (lambda + df1 + df2 + 1), and has that one's limits (Steiger 2004).
///
/// # Errors
/// Arguments outside their domain, and values that the noncentral F cannot give.
pub fn omega_squared_interval(f: f64, df1: f64, df2: f64, level: f64) -> Result<(f64, f64), Refusal> {
    let (lower, upper) = noncentral_f::noncentrality_limits(f, df1, df2, level)?;
    let share = |lambda: f64| lambda / (lambda + df1 + df2 + 1.0);
    Ok((share(lower), share(upper)))
}
