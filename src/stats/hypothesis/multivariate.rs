use super::contrast::Hypothesis;
use super::univariate::{ErrorTerm, fitted_cells, hypothesis_root, probability, residue};
use crate::stats::dist::fisher;
use crate::stats::linear::{DoubleDouble, Matrix, symmetric_eigen};
use crate::stats::model::{Moments, Refusal};

/// What is made of the roots of H E_M^-1.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Criterion {
    /// sum of root / (1 + root): Pillai's trace.
    Pillai,
    /// product of 1 / (1 + root): Wilks' lambda.
    Wilks,
    /// sum of the roots: the trace of Hotelling and Lawley.
    HotellingLawley,
    /// The largest root: Roy's.
    Roy,
}

/// The multivariate test of a hypothesis.
#[derive(Clone, Debug, PartialEq)]
pub struct MultivariateTest {
    /// Roots of H E_M^-1, largest first; as many as the smaller of the ranks of L and M.
    pub roots: Vec<f64>,
    /// Value of the criterion.
    pub value: f64,
    /// Its F: exact with one root, and for Wilks' lambda with two; otherwise the usual approximation.
    pub f: f64,
    /// Numerator df.
    pub df1: f64,
    /// Denominator df.
    pub df2: f64,
    /// Whether F is exact under normality.
    pub exact: bool,
    /// Whether F is an upper bound and its p therefore a lower one: Roy's root where there are several.
    pub lower_bound: bool,
    /// Error df, nu.
    pub error_df: usize,
}

impl MultivariateTest {
    /// P(F' > F).
    ///
    /// # Errors
    /// The probability could not be computed.
    pub fn p(&self) -> Result<f64, Refusal> {
        fisher::upper_tail(self.f, self.df1, self.df2).map_err(probability)
    }
}

/// Tests L B M = 0 by the roots of H E_M^-1, E_M being that of the hypothesis's cells or of all cells.
///
/// With p = q contrasts, r = rank of L, nu error df, s = min(p, r), m = (|r - p| - 1) / 2, n = (nu - p - 1) / 2:
///
/// * Pillai V: F = (2n + s + 1) / (2m + s + 1) V / (s - V) on s (2m + s + 1) and s (2n + s + 1) df;
/// * Wilks L: Rao's F = (1 - y) / y df2 / df1, y = L^(1/t), t = sqrt((p^2 r^2 - 4) / (p^2 + r^2 - 5)) or 1, df1 = p r,
///   df2 = (nu - (p - r + 1) / 2) t - (p r - 2) / 2;
/// * Hotelling-Lawley U: F = 2 (s n + 1) U / (s^2 (2m + s + 1)) on s (2m + s + 1) and 2 (s n + 1) df;
/// * Roy's root: F = root (nu - d + r) / d on d and nu - d + r df, d = max(p, r): an upper bound.
///
/// (Rao 1951; Pillai 1955; Muller & Peterson 1984.) The stratum of [`ErrorTerm::Pooled`] is not pooled here: it counts as
/// [`ErrorTerm::OwnOccasions`].
///
/// # Errors
/// An empty cell, more contrasts than error df, or a singular E_M; for Hotelling-Lawley's trace of several roots as many
/// contrasts as error df, where its approximation has no denominator df.
pub fn test_multivariate(
    moments: &Moments,
    hypothesis: &Hypothesis,
    error_term: ErrorTerm,
    criterion: Criterion,
) -> Result<MultivariateTest, Refusal> {
    let fitted = fitted_cells(moments, hypothesis, error_term);
    let error = moments.error(hypothesis.within(), &fitted)?;
    error.trace()?;
    // Judges the rank.
    error.log_determinant()?;
    // The roots do not depend on the basis; in this one no contrast drowns in another.
    let basis = error.graded_basis().0.transpose();
    let spread = moments.error(&basis, &fitted)?;
    let singular = |rank| Refusal::SingularError { rank, contrasts: hypothesis.contrasts(), error_df: error.df };
    let scale = spread.matrix.cholesky().map_err(|found| singular(found.rank))?;
    let root = hypothesis_root(moments, hypothesis, &basis, &fitted)?.root;
    let nothing = root.multiply(&Matrix::identity(root.columns())).sum_of_squares().value() <= residue(moments, hypothesis);
    let scaled = scale.solve_lower(&root.transpose());
    let product =
        if scaled.rows() <= scaled.columns() { scaled.multiply(&scaled.transpose()) } else { scaled.transpose().multiply(&scaled) };
    let zero = DoubleDouble::ZERO;
    let roots: Vec<DoubleDouble> =
        symmetric_eigen(&product).values.into_iter().map(|root| if nothing || root.value() < 0.0 { zero } else { root }).collect();
    if criterion == Criterion::HotellingLawley && roots.len() > 1 && error.df <= hypothesis.contrasts() {
        return Err(Refusal::HotellingLawleyApproximation { contrasts: hypothesis.contrasts(), error_df: error.df });
    }
    let (value, f, df1, df2) = of_roots(criterion, &roots, hypothesis.contrasts(), hypothesis.rank(), error.df);
    let several = roots.len() > 1;
    Ok(MultivariateTest {
        roots: roots.iter().map(|root| root.value()).collect(),
        value,
        f,
        df1,
        df2,
        exact: !several || (criterion == Criterion::Wilks && roots.len() == 2),
        lower_bound: several && criterion == Criterion::Roy,
        error_df: error.df,
    })
}

/// Criterion, F and df.
fn of_roots(criterion: Criterion, roots: &[DoubleDouble], contrasts: usize, rank: usize, error_df: usize) -> (f64, f64, f64, f64) {
    let one = DoubleDouble::ONE;
    let (p, r, nu) = (contrasts as f64, rank as f64, error_df as f64);
    let s = p.min(r);
    let m = ((r - p).abs() - 1.0) / 2.0;
    let n = (nu - p - 1.0) / 2.0;
    match criterion {
        Criterion::Pillai => {
            let value: DoubleDouble = roots.iter().map(|&root| root / (one + root)).sum();
            // s - V as a sum of parts that do not cancel.
            let rest: DoubleDouble = roots.iter().map(|&root| one / (one + root)).sum();
            let f = (2.0 * n + s + 1.0) / (2.0 * m + s + 1.0) * (value / rest).value();
            (value.value(), f, s * (2.0 * m + s + 1.0), s * (2.0 * n + s + 1.0))
        }
        Criterion::Wilks => {
            let log_lambda: DoubleDouble = roots.iter().map(|&root| -(one + root).ln()).sum();
            let under = p * p + r * r - 5.0;
            let t = if under > 0.0 { ((p * p * r * r - 4.0) / under).sqrt() } else { 1.0 };
            let df1 = p * r;
            let df2 = (nu - (p - r + 1.0) / 2.0) * t - (p * r - 2.0) / 2.0;
            // (1 - y) / y = 1 / y - 1 with y = lambda^(1/t).
            let f = libm::expm1(-log_lambda.value() / t) * df2 / df1;
            (libm::exp(log_lambda.value()), f, df1, df2)
        }
        Criterion::HotellingLawley => {
            let value = roots.iter().copied().sum::<DoubleDouble>().value();
            let df1 = s * (2.0 * m + s + 1.0);
            let df2 = 2.0 * (s * n + 1.0);
            (value, df2 * value / (s * df1), df1, df2)
        }
        Criterion::Roy => {
            let value = roots.first().map_or(0.0, |root| root.value());
            let d = p.max(r);
            let df2 = nu - d + r;
            (value, value * df2 / d, d, df2)
        }
    }
}
