use super::univariate::probability;
use crate::stats::dist::chi_squared;
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{ErrorMatrix, Moments, Refusal};

/// Whether and how the degrees of freedom are reduced for departures from sphericity.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Correction {
    /// They stay.
    None,
    /// By Greenhouse and Geisser's epsilon.
    GreenhouseGeisser,
    /// By Huynh and Feldt's epsilon with Lecoutre's correction for groups.
    HuynhFeldt,
    /// By Huynh and Feldt's epsilon as printed in 1976.
    HuynhFeldt1976,
    /// By the lower bound 1 / q.
    LowerBound,
}

/// Estimates of Box's epsilon from an error matrix of q contrasts, not capped at 1.
#[derive(Clone, Debug, PartialEq)]
pub struct Epsilons {
    /// Number of contrasts, q.
    pub contrasts: usize,
    /// (tr E)^2 / (q tr E^2); Greenhouse & Geisser 1959.
    pub greenhouse_geisser: f64,
    /// ((nu + 1) q e - 2) / (q (nu - q e)); Huynh & Feldt 1976 with Lecoutre 1991.
    pub huynh_feldt: Result<f64, Refusal>,
    /// (n q e - 2) / (q (nu - q e)) with n subjects; Huynh & Feldt 1976.
    pub huynh_feldt_1976: Result<f64, Refusal>,
    /// 1 / q; Geisser & Greenhouse 1958.
    pub lower_bound: f64,
}

impl Epsilons {
    /// What degrees of freedom are multiplied by: the estimate, at most 1. It is 1 where there is one contrast.
    ///
    /// # Errors
    /// The estimate asked for has no value.
    pub fn factor(&self, correction: Correction) -> Result<f64, Refusal> {
        if self.contrasts == 1 {
            return Ok(1.0);
        }
        let epsilon = match correction {
            Correction::None => 1.0,
            Correction::GreenhouseGeisser => self.greenhouse_geisser,
            Correction::HuynhFeldt => self.huynh_feldt.clone()?,
            Correction::HuynhFeldt1976 => self.huynh_feldt_1976.clone()?,
            Correction::LowerBound => self.lower_bound,
        };
        Ok(epsilon.min(1.0))
    }
}

/// Epsilons of an error matrix; a singular one has them too, as long as its trace is not zero.
///
/// # Errors
/// The trace is zero.
pub fn epsilons(error: &ErrorMatrix) -> Result<Epsilons, Refusal> {
    let contrasts = error.contrasts();
    let trace = error.trace()?;
    let q = DoubleDouble::from(contrasts);
    // Scaled to a trace of 1 first, since fourth powers of the values could leave the range of a double.
    let scaled = error.matrix.scaled(DoubleDouble::ONE / trace);
    let rank_like = DoubleDouble::ONE / scaled.sum_of_squares(); // q e
    let df = DoubleDouble::from(error.df);
    let denominator = q * (df - rank_like);
    let two = DoubleDouble::from(2.0);
    let huynh_feldt = |count: usize| {
        // nu - q e is a difference of numbers of order nu: what is left of an exact zero is below 1e-25 of it.
        if denominator.value() <= 1e-25 * df.value() {
            Err(Refusal::HuynhFeldtUndefined)
        } else {
            Ok(((DoubleDouble::from(count) * rank_like - two) / denominator).value())
        }
    };
    Ok(Epsilons {
        contrasts,
        greenhouse_geisser: (rank_like / q).value(),
        huynh_feldt: huynh_feldt(error.df + 1),
        huynh_feldt_1976: huynh_feldt(error.subjects),
        lower_bound: 1.0 / contrasts as f64,
    })
}

/// Mauchly's test of sphericity.
#[derive(Clone, Debug, PartialEq)]
pub struct Mauchly {
    /// W = det E / (tr E / q)^q; Mauchly 1940.
    pub w: f64,
    /// -nu rho ln W with rho = 1 - (2 q^2 + q + 2) / (6 q nu); Anderson 1958.
    pub chi_squared: f64,
    /// q (q + 1) / 2 - 1.
    pub df: f64,
    /// Weight of the second term of the expansion of W's distribution, with q contrasts throughout.
    pub second_term: f64,
}

impl Mauchly {
    /// Two terms of the expansion: P(chi2_df > x) + w (P(chi2_(df + 4) > x) - P(chi2_df > x)); Anderson 1958, 10.7.
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p(&self) -> Result<f64, Refusal> {
        let first = self.p_one_term()?;
        let second = self.tail(self.df + 4.0)?;
        // In very small samples two terms can leave the unit interval.
        Ok((first + self.second_term * (second - first)).clamp(0.0, 1.0))
    }

    /// The chi-square probability alone, shown for comparison.
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p_one_term(&self) -> Result<f64, Refusal> {
        self.tail(self.df)
    }

    fn tail(&self, df: f64) -> Result<f64, Refusal> {
        chi_squared::upper_tail(self.chi_squared, df).map_err(probability)
    }
}

/// Mauchly's test for the contrasts `within` (orthonormal columns) with the error of the cells kept.
///
/// # Errors
/// One contrast only, no error variance, or a singular error matrix.
pub fn mauchly(moments: &Moments, within: &Matrix, kept: &[bool]) -> Result<Mauchly, Refusal> {
    if within.columns() == 1 {
        return Err(Refusal::OneContrast);
    }
    let error = moments.error(within, kept)?;
    let trace = error.trace()?;
    let q = DoubleDouble::from(error.contrasts());
    let log_w = error.log_determinant()? - q * (trace / q).ln();
    let (q, nu) = (error.contrasts() as f64, error.df as f64);
    let rho = 1.0 - (2.0 * q * q + q + 2.0) / (6.0 * q * nu);
    let scale = nu * q * rho;
    let second_term = (q + 2.0) * (q - 1.0) * (q - 2.0) * (2.0 * q * q * q + 6.0 * q * q + 3.0 * q + 2.0) / (288.0 * scale * scale);
    Ok(Mauchly {
        w: libm::exp(log_w.value()),
        chi_squared: (-log_w * DoubleDouble::from(nu * rho)).value(),
        df: q * (q + 1.0) / 2.0 - 1.0,
        second_term,
    })
}
