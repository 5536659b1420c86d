use super::univariate::probability;
use crate::stats::dist::{chi_squared, fisher};
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{Moments, Refusal};

/// Box's M test of equal covariance matrices.
#[derive(Clone, Debug, PartialEq)]
pub struct BoxM {
    /// nu ln|S| - sum nu_j ln|S_j|; Box 1949.
    pub m: f64,
    /// The F approximation.
    pub f: f64,
    /// Its numerator df, b (b + 1) (g - 1) / 2, which are also the df of the chi-square.
    pub df1: f64,
    /// Its denominator df; infinite where Box's second constant is the square of the first.
    pub df2: f64,
    /// The chi-square approximation, M (1 - c1).
    pub chi_squared: f64,
    /// Box's first constant.
    pub c1: f64,
    /// Box's second constant.
    pub c2: f64,
}

impl BoxM {
    /// P of the F approximation, which decides.
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p(&self) -> Result<f64, Refusal> {
        if self.df2.is_infinite() {
            return self.p_chi_squared();
        }
        fisher::upper_tail(self.f, self.df1, self.df2).map_err(probability)
    }

    /// P of the chi-square approximation, which is shown beside it.
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p_chi_squared(&self) -> Result<f64, Refusal> {
        chi_squared::upper_tail(self.chi_squared, self.df1).map_err(probability)
    }
}

/// Box's M over all cells. Covariates play no part.
///
/// # Errors
/// One cell only; a cell whose covariance matrix is singular (fewer than b + 1 subjects, constant or copied occasions);
/// an M beyond the F approximation.
pub fn box_m(moments: &Moments) -> Result<BoxM, Refusal> {
    let moments = &moments.without_covariates();
    let (cells, occasions) = (moments.cells().len(), moments.occasions());
    if cells < 2 {
        return Err(Refusal::OneCell);
    }
    let every_occasion = Matrix::identity(occasions);
    let log_determinant = |kept: &[bool]| -> Result<(DoubleDouble, usize), Refusal> {
        let error = moments.error(&every_occasion, kept)?;
        let per_df = DoubleDouble::from(error.df).ln() * DoubleDouble::from(occasions);
        Ok((error.log_determinant()? - per_df, error.df))
    };
    let mut weighted = DoubleDouble::ZERO;
    let mut inverse_sum = DoubleDouble::ZERO;
    let mut inverse_square_sum = DoubleDouble::ZERO;
    for cell in 0..cells {
        let only: Vec<bool> = (0..cells).map(|other| other == cell).collect();
        let subjects = moments.cells()[cell].subjects;
        let (logarithm, df) = log_determinant(&only).map_err(|_| Refusal::SingularCell { cell, subjects, occasions })?;
        let inverse = DoubleDouble::ONE / DoubleDouble::from(df);
        weighted += logarithm * DoubleDouble::from(df);
        inverse_sum += inverse;
        inverse_square_sum += inverse.square();
    }
    let (logarithm, df) = log_determinant(&vec![true; cells])?;
    let m = (logarithm * DoubleDouble::from(df) - weighted).value().max(0.0);
    let inverse = DoubleDouble::ONE / DoubleDouble::from(df);
    let (b, g) = (occasions as f64, cells as f64);
    let c1 = (inverse_sum - inverse).value() * (2.0 * b * b + 3.0 * b - 1.0) / (6.0 * (b + 1.0) * (g - 1.0));
    let c2 = (inverse_square_sum - inverse.square()).value() * (b - 1.0) * (b + 2.0) / (6.0 * (g - 1.0));
    let df1 = b * (b + 1.0) * (g - 1.0) / 2.0;
    let excess = c2 - c1 * c1;
    let (f, df2) = if excess > 0.0 {
        let df2 = (df1 + 2.0) / excess;
        (m * (1.0 - c1 - df1 / df2) / df1, df2)
    } else if excess < 0.0 {
        let df2 = (df1 + 2.0) / -excess;
        let limit = df2 / (1.0 - c1 + 2.0 / df2);
        (df2 * m / (df1 * (limit - m)), df2)
    } else {
        (m * (1.0 - c1) / df1, f64::INFINITY)
    };
    // In small samples the constants can outgrow 1, and in the second form M can pass its limit.
    if f.is_nan() || f < 0.0 || c1 >= 1.0 {
        return Err(Refusal::BoxApproximation);
    }
    Ok(BoxM { m, f, df1, df2, chi_squared: m * (1.0 - c1), c1, c2 })
}
