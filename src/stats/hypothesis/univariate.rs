use super::contrast::Hypothesis;
use super::effects::strata;
use super::sphericity::{Correction, Epsilons, epsilons};
use crate::stats::dist::fisher;
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{ErrorMatrix, Moments, Refusal};

/// Which error a hypothesis is tested against.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ErrorTerm {
    /// The hypothesis's own contrasts between occasions, in the cells that it is about; nu is their subjects less the cells.
    Own,
    /// The hypothesis's own contrasts between occasions, in all cells.
    OwnOccasions,
    /// The whole stratum of the within factors that the hypothesis contrasts, in all cells.
    ///
    /// Where M lies in several strata (as where an occasion is held), each gives its mean square in the share w_s that it has
    /// in M, w_s = tr(M' P_s M) / q with P_s the projection on stratum s. The mean square is sum_s w_s MS_s on
    /// (sum_s w_s MS_s)^2 / sum_s ((w_s MS_s)^2 / df_s) df (Satterthwaite 1946). One occasion of a single factor held has
    /// w_s = df_s / sum df, so that this is (SS subjects + SS residual) / (sum of their df).
    Pooled,
}

/// The combination of cell means that a hypothesis of one contrast is about, with weights as written.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Estimate {
    /// Its value.
    pub value: f64,
    /// Its standard error, by the error term of the test.
    pub standard_error: f64,
    /// Value / standard error; its square is the F ratio.
    pub t: f64,
}

/// The F test of a hypothesis, and what its degrees of freedom may be multiplied by.
#[derive(Clone, Debug, PartialEq)]
pub struct UnivariateTest {
    /// Sum of squares of the hypothesis, tr H.
    pub ss: f64,
    /// Its df, r q.
    pub df1: f64,
    /// Sum of squares of the error: tr E_M, or that of the stratum. Where strata are mixed, the mean square times
    /// [`error_df`](Self::error_df).
    pub ss_error: f64,
    /// Mean square of the error.
    pub ms_error: f64,
    /// Df on which `ss_error` stands; where strata are mixed, the sum over them.
    pub error_df: f64,
    /// Denominator df of F before any correction: `error_df`, or Satterthwaite's where strata are mixed.
    pub df2: f64,
    /// The F ratio.
    pub f: f64,
    /// Number of contrasts between occasions in the hypothesis, q.
    pub contrasts: usize,
    /// The estimate, where the hypothesis is one contrast.
    pub estimate: Option<Estimate>,
    /// Epsilons of the matrix that supplies the error; none where strata are mixed.
    pub epsilons: Option<Epsilons>,
}

impl UnivariateTest {
    /// Numerator and denominator df after a correction.
    ///
    /// Both are multiplied by the epsilon, but a hypothesis of one contrast keeps its numerator df: one contrast
    /// cannot depart from sphericity, only the pooled error behind it can. Where strata are mixed, a hypothesis of one
    /// contrast has Satterthwaite's df, which need no epsilon.
    ///
    /// # Errors
    /// The epsilon has no value, or several contrasts are tested against mixed strata.
    pub fn df(&self, correction: Correction) -> Result<(f64, f64), Refusal> {
        if correction == Correction::None {
            return Ok((self.df1, self.df2));
        }
        match &self.epsilons {
            Some(epsilons) => {
                let factor = epsilons.factor(correction)?;
                let numerator = if self.contrasts == 1 { 1.0 } else { factor };
                Ok((self.df1 * numerator, self.df2 * factor))
            }
            None if self.contrasts == 1 => Ok((self.df1, self.df2)),
            None => Err(Refusal::SeveralStrata),
        }
    }

    /// P(F' > F) with the df of [`df`](Self::df); for one contrast that is both tails of t.
    ///
    /// # Errors
    /// As for [`df`](Self::df).
    pub fn p(&self, correction: Correction) -> Result<f64, Refusal> {
        let (df1, df2) = self.df(correction)?;
        fisher::upper_tail(self.f, df1, df2).map_err(probability)
    }
}

/// A tail that could not be computed, as a refusal.
pub(super) fn probability(error: impl std::fmt::Display) -> Refusal {
    Refusal::Probability { reason: error.to_string() }
}

/// Error mean square with what goes with it.
struct Error {
    ss: DoubleDouble,
    df_sum: f64,
    df: f64,
    epsilons: Option<Epsilons>,
}

impl Error {
    fn of(matrix: &ErrorMatrix) -> Result<Error, Refusal> {
        let df = (matrix.df * matrix.contrasts()) as f64;
        Ok(Error { ss: matrix.trace()?, df_sum: df, df, epsilons: Some(epsilons(matrix)?) })
    }

    fn pooled(moments: &Moments, hypothesis: &Hypothesis) -> Result<Error, Refusal> {
        let spanned = pooled_strata(hypothesis);
        let everyone = vec![true; moments.cells().len()];
        if let [(basis, _)] = &spanned[..] {
            return Error::of(&moments.error(basis, &everyone)?);
        }
        let (mut mean_square, mut df_sum, mut variance) = (DoubleDouble::ZERO, 0.0, DoubleDouble::ZERO);
        for (basis, share) in &spanned {
            let error = moments.error(basis, &everyone)?;
            let df = DoubleDouble::from(error.df * error.contrasts());
            df_sum += df.value();
            match error.trace() {
                Ok(trace) => {
                    let part = *share * trace / df;
                    mean_square += part;
                    variance += part.square() / df;
                }
                Err(Refusal::NoErrorVariance) => {}
                Err(other) => return Err(other),
            }
        }
        if mean_square.is_zero() {
            return Err(Refusal::NoErrorVariance);
        }
        Ok(Error { ss: mean_square * DoubleDouble::from(df_sum), df_sum, df: (mean_square.square() / variance).value(), epsilons: None })
    }
}

/// The strata that a hypothesis's contrasts lie in, each with its orthonormal basis (occasions by contrasts) and the share
/// w_s that [`ErrorTerm::Pooled`] gives it.
pub(crate) fn pooled_strata(hypothesis: &Hypothesis) -> Vec<(Matrix, DoubleDouble)> {
    let spanned = strata(hypothesis.within_levels()).into_iter().map(|stratum| {
        let projected = stratum.basis.transpose().multiply(hypothesis.within());
        let share = projected.sum_of_squares() / DoubleDouble::from(hypothesis.contrasts());
        (stratum.basis, share)
    });
    spanned.filter(|(_, share)| share.value() > Matrix::DEPENDENCE).collect()
}

/// H = (LBM)' [L (X'X)^-1 L']^-1 (LBM), contrasts by contrasts, of a model fitted to the cells in `fitted`.
///
/// # Errors
/// A cell that L weighs has no subject; a covariate that cannot be adjusted for.
pub fn hypothesis_matrix(moments: &Moments, hypothesis: &Hypothesis, fitted: &[bool]) -> Result<Matrix, Refusal> {
    let root = hypothesis_root(moments, hypothesis, hypothesis.within(), fitted)?.root;
    Ok(root.transpose().multiply(&root))
}

/// R^-1 L B W and R, where R R' = L (X'X)^-1 L'.
pub(super) struct HypothesisRoot {
    /// R^-1 L B W, rank by columns of W; H is its square.
    pub root: Matrix,
    /// R, lower triangular.
    pub scale: Matrix,
}

/// For any combinations W of occasions (occasions by columns), M itself or another basis of its space.
pub(super) fn hypothesis_root(
    moments: &Moments,
    hypothesis: &Hypothesis,
    within: &Matrix,
    fitted: &[bool],
) -> Result<HypothesisRoot, Refusal> {
    let between = hypothesis.between();
    assert_eq!(between.columns(), moments.cells().len(), "the hypothesis and the data have the same cells");
    let mut covariance = Matrix::zeros(between.rows(), between.rows());
    let mut means = Matrix::zeros(between.rows(), moments.occasions());
    for (index, cell) in moments.cells().iter().enumerate().filter(|(index, _)| hypothesis.kept()[*index]) {
        if cell.subjects == 0 {
            return Err(Refusal::EmptyCell { cell: index });
        }
        let count = DoubleDouble::from(cell.subjects);
        for row in 0..between.rows() {
            let weight = between[(row, index)];
            for column in 0..=row {
                covariance[(row, column)] += weight * between[(column, index)] / count;
            }
            for (occasion, &mean) in cell.mean[..moments.occasions()].iter().enumerate() {
                means[(row, occasion)] += weight * mean;
            }
        }
    }
    if let Some(adjustment) = moments.adjustment(fitted)? {
        let leverage = adjustment.leverage(moments, between);
        let more = leverage.transpose().multiply(&leverage);
        let explained = leverage.transpose().multiply(&adjustment.explained);
        for row in 0..between.rows() {
            for column in 0..=row {
                covariance[(row, column)] += more[(row, column)];
            }
            for occasion in 0..moments.occasions() {
                means[(row, occasion)] -= explained[(row, occasion)];
            }
        }
    }
    let scale = covariance.cholesky().map_err(|_| Refusal::NotEstimable)?;
    let root = scale.solve_lower(&means.multiply(within));
    Ok(HypothesisRoot { root, scale })
}

/// Below this relative size a combination of means is what double-double arithmetic leaves of an exact zero.
const RESIDUE: f64 = 1e-29;

/// tr H, exactly zero where the combinations of means are zero but for the arithmetic.
pub(super) fn hypothesis_ss(moments: &Moments, hypothesis: &Hypothesis, fitted: &[bool]) -> Result<DoubleDouble, Refusal> {
    let ss = hypothesis_root(moments, hypothesis, hypothesis.within(), fitted)?.root.sum_of_squares();
    let residue = residue(moments, hypothesis);
    Ok(if ss.value() <= residue { DoubleDouble::ZERO } else { ss })
}

/// A sum of squares of the hypothesis up to this is zero but for the arithmetic.
pub(super) fn residue(moments: &Moments, hypothesis: &Hypothesis) -> f64 {
    let (mut largest, mut subjects) = (0.0_f64, 0);
    for (cell, _) in moments.cells().iter().zip(hypothesis.kept()).filter(|(_, kept)| **kept) {
        subjects += cell.subjects;
        for (occasion, &magnitude) in cell.largest[..moments.occasions()].iter().enumerate() {
            if hypothesis.within().row(occasion).iter().any(|weight| !weight.is_zero()) {
                largest = largest.max(magnitude);
            }
        }
    }
    let residue = RESIDUE * largest;
    residue * residue * subjects as f64
}

/// The cells whose subjects supply the error, and to which the model is fitted.
pub(super) fn fitted_cells(moments: &Moments, hypothesis: &Hypothesis, error_term: ErrorTerm) -> Vec<bool> {
    match error_term {
        ErrorTerm::Own => hypothesis.kept().to_vec(),
        ErrorTerm::OwnOccasions | ErrorTerm::Pooled => vec![true; moments.cells().len()],
    }
}

/// F = (tr H / r q) / (error mean square); Kirk 2013, Maxwell & Delaney 2004.
///
/// A sum of squares of zero gives F = 0. The error matrix may be singular as long as its trace is not zero.
///
/// # Errors
/// An empty cell that the hypothesis weighs, no error df, or an error variance of zero (by the rule of [`Moments`]).
pub fn test_univariate(moments: &Moments, hypothesis: &Hypothesis, error_term: ErrorTerm) -> Result<UnivariateTest, Refusal> {
    let fitted = fitted_cells(moments, hypothesis, error_term);
    let ss = hypothesis_ss(moments, hypothesis, &fitted)?;
    let error = match error_term {
        ErrorTerm::Own | ErrorTerm::OwnOccasions => Error::of(&moments.error(hypothesis.within(), &fitted)?)?,
        ErrorTerm::Pooled => Error::pooled(moments, hypothesis)?,
    };
    let df1 = hypothesis.rank() * hypothesis.contrasts();
    let mean_square = error.ss / DoubleDouble::from(error.df_sum);
    let f = ss / DoubleDouble::from(df1) / mean_square;
    Ok(UnivariateTest {
        ss: ss.value(),
        df1: df1 as f64,
        ss_error: error.ss.value(),
        ms_error: mean_square.value(),
        error_df: error.df_sum,
        df2: error.df,
        f: f.value(),
        contrasts: hypothesis.contrasts(),
        estimate: hypothesis.single().map(|weights| estimate(moments, weights, ss.is_zero(), mean_square, &fitted)).transpose()?,
        epsilons: error.epsilons,
    })
}

fn estimate(
    moments: &Moments,
    (between, within): (&[DoubleDouble], &[DoubleDouble]),
    zero: bool,
    mean_square: DoubleDouble,
    fitted: &[bool],
) -> Result<Estimate, Refusal> {
    let (mut value, spread) = combination(moments, between, within, fitted)?;
    if zero {
        value = DoubleDouble::ZERO;
    }
    let length: DoubleDouble = within.iter().map(|weight| weight.square()).sum();
    let standard_error = (mean_square * length * spread).sqrt();
    Ok(Estimate { value: value.value(), standard_error: standard_error.value(), t: (value / standard_error).value() })
}

/// l'Bm and l'(X'X)^-1 l for weights l of cells and m of occasions, as written.
pub(super) fn combination(
    moments: &Moments,
    between: &[DoubleDouble],
    within: &[DoubleDouble],
    fitted: &[bool],
) -> Result<(DoubleDouble, DoubleDouble), Refusal> {
    let mut value = DoubleDouble::ZERO;
    let mut spread = DoubleDouble::ZERO;
    for (cell, &weight) in moments.cells().iter().zip(between).filter(|(_, weight)| !weight.is_zero()) {
        value += weight * cell.mean.iter().zip(within).map(|(&mean, &weight)| mean * weight).sum();
        spread += weight.square() / DoubleDouble::from(cell.subjects);
    }
    if let Some(adjustment) = moments.adjustment(fitted)? {
        let leverage = adjustment.leverage(moments, &Matrix::from_rows(&[between.to_vec()]));
        for covariate in 0..moments.covariates() {
            let pull = leverage[(covariate, 0)];
            spread += pull.square();
            value -= pull * adjustment.explained.row(covariate).iter().zip(within).map(|(&slope, &weight)| slope * weight).sum();
        }
    }
    Ok((value, spread))
}
