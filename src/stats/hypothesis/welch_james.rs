use super::contrast::Hypothesis;
use super::univariate::{Estimate, combination, probability};
use crate::stats::dist::fisher;
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{Moments, Refusal, first_dependent, rounding_noise, rounding_unit};

/// The approximate degrees of freedom test of Welch, James and Johansen.
#[derive(Clone, Debug, PartialEq)]
pub struct WelchJames {
    /// T = (R mu)' (R V R')^-1 (R mu), the R mu being the combinations of cell means and V their covariance matrix.
    pub t: f64,
    /// T / c, referred to F.
    pub f: f64,
    /// Number of combinations, r.
    pub df1: f64,
    /// r (r + 2) / (3 A).
    pub df2: f64,
    /// r + 2 A - 6 A / (r + 2).
    pub c: f64,
    /// The estimate, where the hypothesis is one contrast; its df are `df2` (Welch & Satterthwaite).
    pub estimate: Option<Estimate>,
}

impl WelchJames {
    /// P(F' > T / c).
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p(&self) -> Result<f64, Refusal> {
        fisher::upper_tail(self.f, self.df1, self.df2).map_err(probability)
    }
}

/// Tests L B M = 0 with the own covariance matrix of every cell that L weighs: neither sphericity nor equal covariance
/// matrices are asked for (Johansen 1980; Keselman, Carriere & Lix 1993).
///
/// R = L x M'; A = 1/2 sum_j [tr(P_j^2) + (tr P_j)^2] / (n_j - 1) with P_j = V R' (R V R')^-1 R Q_j and Q_j selecting
/// group j. With two groups at one occasion this is Welch's t.
///
/// # Errors
/// Covariates; a cell with fewer than two subjects; no variance; a singular R V R'.
pub fn test_welch_james(moments: &Moments, hypothesis: &Hypothesis) -> Result<WelchJames, Refusal> {
    if moments.covariates() > 0 {
        return Err(Refusal::TakesNoCovariates);
    }
    let (between, within) = (hypothesis.between(), hypothesis.within());
    let (rank, contrasts) = (hypothesis.rank(), hypothesis.contrasts());
    let size = rank * contrasts;
    let mut total = Matrix::zeros(size, size);
    let mut means = Matrix::zeros(size, 1);
    let mut parts = Vec::new();
    let mut varies = false;
    for (index, cell) in moments.cells().iter().enumerate().filter(|(index, _)| hypothesis.kept()[*index]) {
        match cell.subjects {
            0 => return Err(Refusal::EmptyCell { cell: index }),
            1 => return Err(Refusal::SingularCell { cell: index, subjects: 1, occasions: moments.occasions() }),
            _ => {}
        }
        let only: Vec<bool> = (0..moments.cells().len()).map(|other| other == index).collect();
        let error = moments.error(within, &only)?;
        varies |= error.trace().is_ok();
        let per_mean = error.matrix.scaled(DoubleDouble::ONE / DoubleDouble::from(error.df * cell.subjects));
        let weights = Matrix::from_rows(&[between.column(index)]);
        let own = weights.transpose().multiply(&weights).kronecker(&per_mean);
        total.accumulate(&own);
        parts.push((own, error.df));
        let profile: Vec<DoubleDouble> = (0..contrasts)
            .map(|contrast| (0..moments.occasions()).map(|occasion| within[(occasion, contrast)] * cell.mean[occasion]).sum())
            .collect();
        for row in 0..rank {
            for (contrast, &mean) in profile.iter().enumerate() {
                means[(row * contrasts + contrast, 0)] += between[(row, index)] * mean;
            }
        }
    }
    if !varies {
        return Err(Refusal::NoErrorVariance);
    }
    let error_df: usize = parts.iter().map(|(_, df)| df).sum();
    let singular = |rank| Refusal::SingularError { rank, contrasts: size, error_df };
    // Weights of all cell means, and what rounding of the values may add to the variance of each mean.
    let means_weights = between.kronecker(&within.transpose());
    let units: Vec<f64> = (moments.cells().iter())
        .flat_map(|cell| cell.largest.iter().map(|&largest| rounding_unit(largest) / (cell.subjects.max(1) as f64).sqrt()))
        .collect();
    if let Some(rank) = first_dependent(&total, &means_weights, |weights| rounding_noise(weights, &units)) {
        return Err(singular(rank));
    }
    let root = total.cholesky().map_err(|found| singular(found.rank))?;
    let t = root.solve_lower(&means).sum_of_squares();
    let mut a = DoubleDouble::ZERO;
    for (own, df) in &parts {
        // R^-1 K R^-T has the traces of P_j: K = R Q_j V R'.
        let half = root.solve_lower(own).transpose();
        let scaled = root.solve_lower(&half);
        a += (scaled.sum_of_squares() + scaled.trace().square()) / DoubleDouble::from(2 * df);
    }
    let a = a.value();
    let r = size as f64;
    let c = r + 2.0 * a - 6.0 * a / (r + 2.0);
    let estimate = hypothesis.single().map(|(cells, occasions)| estimate(moments, hypothesis, cells, occasions)).transpose()?;
    Ok(WelchJames { t: t.value(), f: t.value() / c, df1: r, df2: r * (r + 2.0) / (3.0 * a), c, estimate })
}

fn estimate(moments: &Moments, hypothesis: &Hypothesis, cells: &[DoubleDouble], occasions: &[DoubleDouble]) -> Result<Estimate, Refusal> {
    let (value, _) = combination(moments, cells, occasions, hypothesis.kept())?;
    let column = Matrix::from_rows(&[occasions.to_vec()]).transpose();
    let mut variance = DoubleDouble::ZERO;
    for (index, cell) in moments.cells().iter().enumerate().filter(|(index, _)| hypothesis.kept()[*index]) {
        let spread = cell.cross_products.congruence(&column)[(0, 0)];
        variance += cells[index].square() * spread / DoubleDouble::from(cell.subjects * (cell.subjects - 1));
    }
    let standard_error = variance.sqrt();
    Ok(Estimate { value: value.value(), standard_error: standard_error.value(), t: (value / standard_error).value() })
}
