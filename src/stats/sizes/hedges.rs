//! Hedges' factor that removes the bias of a standardized difference.

use libm::{exp, log1p};

use super::Refusal;
use crate::stats::dist::gamma::stirling_error;

fn check(m: f64) -> Result<(), Refusal> {
    if m.is_finite() && m > 1.0 {
        Ok(())
    } else {
        Err(Refusal::new(format!("Hedges' correction needs more than 1 degree of freedom for the standard deviation; there are {m}")))
    }
}

/// Hedges' factor in its exact gamma form (Hedges 1981, *Journal of Educational
/// Statistics* 6:107):
///
/// J(m) = Gamma(m / 2) / [sqrt(m / 2) Gamma((m - 1) / 2)]
///
/// with `m` the degrees of freedom of the standard deviation: n - 1 for paired
/// data, n1 + n2 - 2 for two arms.
///
/// # Errors
/// `m` not finite and above 1.
///
/// ```
/// let j = aforesaid::stats::sizes::hedges_j_exact(3.0).unwrap();
/// assert!((j - (2.0 / (3.0 * std::f64::consts::PI)).sqrt() * 1.5707963267948966).abs() < 1e-14);
/// ```
pub fn hedges_j_exact(m: f64) -> Result<f64, Refusal> {
    check(m)?;
    // ln Gamma(a) - ln Gamma(a - 1/2) - ln(a) / 2 with the large parts taken out by hand.
    let a = m / 2.0;
    let log_j = -(a - 1.0) * log1p(-0.5 / a) - 0.5 + (stirling_error(a) - stirling_error(a - 0.5));
    Ok(exp(log_j))
}

/// Hedges' approximation, 1 - 3 / (4 m - 1) (Hedges 1981).
///
/// # Errors
/// `m` not finite and above 1.
pub fn hedges_j_approximate(m: f64) -> Result<f64, Refusal> {
    check(m)?;
    Ok(1.0 - 3.0 / (4.0 * m - 1.0))
}
