use super::contrast::Hypothesis;
use super::sphericity::Correction;
use super::univariate::{ErrorTerm, UnivariateTest, fitted_cells, hypothesis_root, probability, test_univariate};
use crate::stats::dist::fisher;
use crate::stats::linear::{DoubleDouble, Matrix, symmetric_eigen};
use crate::stats::model::{Moments, Refusal};

/// The product contrast on which a hypothesis has its largest sum of squares.
#[derive(Clone, Debug, PartialEq)]
pub struct LargestContrast {
    /// Weight of each cell; the positive ones sum to one where they compare.
    pub between: Vec<f64>,
    /// Weight of each occasion; the positive ones sum to one where they compare.
    pub within: Vec<f64>,
    /// The combination of cell means with these weights.
    pub estimate: f64,
    /// Its sum of squares: the largest root of H.
    pub ss: f64,
    /// Its share of the sum of squares of the whole hypothesis.
    pub share: f64,
    /// Its F against the same error as the whole hypothesis, on 1 and that error's df.
    pub f: f64,
    /// The test of the whole hypothesis.
    pub whole: UnivariateTest,
}

impl LargestContrast {
    /// A bound of the probability that holds for all contrasts of the hypothesis at once, product contrasts among them:
    /// P(F' > F / (r q)) on the df of the whole test (Scheffe 1953; Gabriel 1968 for the interactions of two factors).
    ///
    /// # Errors
    /// The correction has no value, or the probability could not be computed.
    pub fn p_bound(&self, correction: Correction) -> Result<f64, Refusal> {
        let (df1, df2) = self.whole.df(correction)?;
        fisher::upper_tail(self.f / self.whole.df1, df1, df2).map_err(probability)
    }
}

/// Finds the weights a of cells and b of occasions for which the sum of squares of a'Bb is largest: the first singular
/// vectors of R^-1 L B M, where R R' = L (X'X)^-1 L'. Each side is scaled so that its positive weights sum to one, and signed
/// so that its largest weight (the first, where several are as large) is positive.
///
/// # Errors
/// As for [`test_univariate`]; means that do not differ, so that no contrast is the largest.
pub fn largest_contrast(moments: &Moments, hypothesis: &Hypothesis, error_term: ErrorTerm) -> Result<LargestContrast, Refusal> {
    let whole = test_univariate(moments, hypothesis, error_term)?;
    if whole.ss == 0.0 {
        return Err(Refusal::NotEstimable);
    }
    let fitted = fitted_cells(moments, hypothesis, error_term);
    let found = hypothesis_root(moments, hypothesis, hypothesis.within(), &fitted)?;
    let eigen = symmetric_eigen(&found.root.multiply(&found.root.transpose()));
    let ss = eigen.values[0];
    let left = Matrix::from_rows(&[eigen.vectors.column(0)]);
    // a' = u' R^-1 L and b = M v with v = (R^-1 L B M)'u / length.
    let right = left.multiply(&found.root).scaled(DoubleDouble::ONE / ss.sqrt());
    let cells = found.scale.solve_lower(hypothesis.between());
    let between = scaled(left.multiply(&cells).row(0));
    let within = scaled(hypothesis.within().multiply(&right.transpose()).column(0).as_slice());
    let (estimate, _) = super::univariate::combination(moments, &between, &within, &fitted)?;
    let value = |weights: &[DoubleDouble]| weights.iter().map(|weight| weight.value()).collect();
    Ok(LargestContrast {
        between: value(&between),
        within: value(&within),
        estimate: estimate.value(),
        ss: ss.value(),
        share: ss.value() / whole.ss,
        f: ss.value() / whole.ms_error,
        whole,
    })
}

/// Weights whose positive ones sum to one and whose largest is positive; what is left of a zero is zero.
fn scaled(weights: &[DoubleDouble]) -> Vec<DoubleDouble> {
    const NEGLIGIBLE: f64 = 1e-28;
    let size = |weight: &DoubleDouble| weight.value().abs();
    let largest = weights.iter().map(size).fold(0.0, f64::max);
    let first = weights.iter().find(|weight| size(weight) >= largest * (1.0 - 1e-12));
    let sign = if first.is_some_and(|weight| weight.value() < 0.0) { -DoubleDouble::ONE } else { DoubleDouble::ONE };
    let positive: DoubleDouble = weights.iter().map(|&weight| weight * sign).filter(|weight| weight.value() > 0.0).sum();
    weights.iter().map(|weight| if size(weight) <= NEGLIGIBLE * largest { DoubleDouble::ZERO } else { *weight * sign / positive }).collect()
}
