use super::contrast::Hypothesis;
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{Moments, Refusal};

/// How the errors of contrasts between occasions go together.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OccasionErrors {
    /// Alike and independent, as the pooled error under sphericity takes them.
    Spherical,
    /// By the covariance matrix pooled over all cells.
    Estimated,
}

/// Correlations of the estimates of single contrasts, in a model fitted to all cells:
/// l_i'(X'X)^-1 l_j times m_i'S m_j, over the root of the product of both with themselves (Genz & Bretz 2009, 3.1 for S = I).
///
/// # Errors
/// A hypothesis of several contrasts, an empty cell that one weighs, or a contrast without error variance.
pub fn contrast_correlations(moments: &Moments, hypotheses: &[&Hypothesis], errors: OccasionErrors) -> Result<Vec<Vec<f64>>, Refusal> {
    let everyone = vec![true; moments.cells().len()];
    let weights: Vec<(&[DoubleDouble], &[DoubleDouble])> =
        hypotheses.iter().map(|one| one.single().ok_or(Refusal::NotEstimable)).collect::<Result<_, _>>()?;
    let between = Matrix::from_rows(&weights.iter().map(|(between, _)| between.to_vec()).collect::<Vec<_>>());
    let within = Matrix::from_rows(&weights.iter().map(|(_, within)| within.to_vec()).collect::<Vec<_>>()).transpose();
    let mut spread = Matrix::zeros(weights.len(), weights.len());
    for (index, cell) in moments.cells().iter().enumerate() {
        let column = between.column(index);
        if column.iter().all(|weight| weight.is_zero()) {
            continue;
        }
        if cell.subjects == 0 {
            return Err(Refusal::EmptyCell { cell: index });
        }
        let own = Matrix::from_rows(&[column]);
        spread.accumulate(&own.transpose().multiply(&own).scaled(DoubleDouble::ONE / DoubleDouble::from(cell.subjects)));
    }
    if let Some(adjustment) = moments.adjustment(&everyone)? {
        let leverage = adjustment.leverage(moments, &between);
        spread.accumulate(&leverage.transpose().multiply(&leverage));
    }
    let among = match errors {
        OccasionErrors::Spherical => within.transpose().multiply(&within),
        OccasionErrors::Estimated => moments.error(&within, &everyone)?.matrix,
    };
    let covariance = |one: usize, other: usize| spread[(one, other)] * among[(one, other)];
    (0..weights.len())
        .map(|one| {
            (0..weights.len())
                .map(|other| {
                    if one == other {
                        return Ok(1.0);
                    }
                    let product = covariance(one, one) * covariance(other, other);
                    if product.value() <= 0.0 {
                        return Err(Refusal::NoErrorVariance);
                    }
                    Ok((covariance(one, other) / product.sqrt()).value().clamp(-1.0, 1.0))
                })
                .collect()
        })
        .collect()
}
