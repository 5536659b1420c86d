use super::univariate::probability;
use crate::stats::dist::{beta, student};
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{Moments, Refusal};

/// How far one subject lies from the rest of its cell.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Distance {
    /// Row of the subject.
    pub subject: usize,
    /// The studentized residual, or the squared Mahalanobis distance.
    pub value: f64,
    /// Probability of one as far or further, under normality.
    pub p: f64,
}

/// The subjects whose residuals are looked at.
#[derive(Clone, Copy)]
pub struct Sample<'a> {
    /// One row of values for each subject, as many as there are occasions.
    pub values: &'a [f64],
    /// Cell of each subject.
    pub cell: &'a [u32],
    /// Which subjects take part.
    pub kept: Option<&'a [bool]>,
}

impl Sample<'_> {
    fn subjects<'s>(&'s self, moments: &'s Moments) -> impl Iterator<Item = (usize, usize)> + 's {
        let alone = |cell: usize| moments.cells()[cell].subjects < 2;
        (0..self.cell.len())
            .filter(|&subject| self.kept.is_none_or(|kept| kept[subject]))
            .map(|subject| (subject, self.cell[subject] as usize))
            .filter(move |(_, cell)| !alone(*cell))
    }
}

/// Externally studentized residuals from the cell means at one occasion: e / (s_(i) sqrt(1 - 1/n)), s_(i) pooled over cells
/// without the subject itself; Student's t with nu - 1 df (Belsley, Kuh & Welsch 1980). A subject alone in its cell has none. Covariates play no part.
///
/// # Errors
/// Fewer than two error df, no variance, or a residual that is all the variance there is.
pub fn studentized_residuals(sample: &Sample<'_>, moments: &Moments, occasion: usize) -> Result<Vec<Distance>, Refusal> {
    let moments = &moments.without_covariates();
    let column = one_occasion(moments.occasions(), occasion);
    let error = moments.error(&column, &vec![true; moments.cells().len()])?;
    let ss = error.trace()?;
    let df = error.df as f64;
    if error.df < 2 {
        return Err(Refusal::NoErrorDf);
    }
    sample
        .subjects(moments)
        .map(|(subject, cell)| {
            let count = DoubleDouble::from(moments.cells()[cell].subjects);
            let leverage = DoubleDouble::ONE - DoubleDouble::ONE / count;
            let residual =
                DoubleDouble::from(sample.values[subject * moments.occasions() + occasion]) - moments.cells()[cell].mean[occasion];
            let own = residual.square() / leverage;
            let rest = (ss - own) / DoubleDouble::from(error.df - 1);
            if rest.value() <= 1e-24 * ss.value() {
                return Err(Refusal::NoErrorVariance);
            }
            let value = (residual / (rest * leverage).sqrt()).value();
            Ok(Distance { subject, value, p: student::two_tails(value, df - 1.0).map_err(probability)? })
        })
        .collect()
}

/// Squared Mahalanobis distances from the cell means over all occasions, with the covariance matrix S pooled over cells:
/// D^2 / ((1 - 1/n) nu) has the beta distribution with b / 2 and (nu - b) / 2 (Gnanadesikan & Kettenring 1972 for one
/// group). A subject alone in its cell has none. Covariates play no part.
///
/// # Errors
/// A singular pooled covariance matrix, or as many occasions as error df.
pub fn mahalanobis_distances(sample: &Sample<'_>, moments: &Moments) -> Result<Vec<Distance>, Refusal> {
    let moments = &moments.without_covariates();
    let occasions = moments.occasions();
    let error = moments.error(&Matrix::identity(occasions), &vec![true; moments.cells().len()])?;
    let singular = |rank| Refusal::SingularError { rank, contrasts: occasions, error_df: error.df };
    error.log_determinant()?;
    if error.df <= occasions {
        return Err(singular(occasions));
    }
    let root = error.matrix.cholesky().map_err(|found| singular(found.rank))?;
    let df = error.df as f64;
    sample
        .subjects(moments)
        .map(|(subject, cell)| {
            let count = moments.cells()[cell].subjects as f64;
            let row = &sample.values[subject * occasions..(subject + 1) * occasions];
            let residual: Vec<Vec<DoubleDouble>> =
                row.iter().zip(&moments.cells()[cell].mean).map(|(&value, &mean)| vec![DoubleDouble::from(value) - mean]).collect();
            let share = root.solve_lower(&Matrix::from_rows(&residual)).sum_of_squares().value();
            let scaled = (share / (1.0 - 1.0 / count)).clamp(0.0, 1.0);
            let b = occasions as f64;
            let p = if scaled >= 1.0 {
                0.0
            } else if scaled <= 0.0 {
                1.0
            } else {
                beta::both_tails(b / 2.0, (df - b) / 2.0, scaled).map_err(probability)?.upper
            };
            Ok(Distance { subject, value: share * df, p })
        })
        .collect()
}

fn one_occasion(occasions: usize, occasion: usize) -> Matrix {
    let mut column = Matrix::zeros(occasions, 1);
    column[(occasion, 0)] = DoubleDouble::ONE;
    column
}
