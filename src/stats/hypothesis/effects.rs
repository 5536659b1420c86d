use super::contrast::{FactorPart, Hypothesis, Part, Weighting};
use super::univariate::{ErrorTerm, UnivariateTest, hypothesis_ss, test_univariate};
use crate::stats::linear::Matrix;
use crate::stats::model::{Moments, Refusal};

/// The contrasts that belong to a set of within factors.
pub(super) struct Stratum {
    /// Which within factors are contrasted; the others are averaged over.
    pub within: Vec<bool>,
    /// Orthonormal columns, occasions by contrasts.
    pub basis: Matrix,
}

/// All strata: the subjects' means first, then every set of within factors, the first factor varying fastest.
pub(super) fn strata(within_levels: &[usize]) -> Vec<Stratum> {
    subsets(within_levels)
        .map(|within| {
            let basis = parts(within_levels, &within)
                .iter()
                .fold(Matrix::identity(1), |product, factor| product.kronecker(&factor.rows().transpose().orthonormal_columns()));
            Stratum { within, basis }
        })
        .collect()
}

/// Sets of the factors with two levels or more, as flags, the empty set first.
fn subsets(levels: &[usize]) -> impl Iterator<Item = Vec<bool>> {
    (0..1_usize << levels.len())
        .map(|set| (0..levels.len()).map(|factor| set >> factor & 1 == 1).collect::<Vec<bool>>())
        .filter(move |set| set.iter().zip(levels).all(|(&inside, &levels)| !inside || levels > 1))
}

fn parts(levels: &[usize], contrasted: &[bool]) -> Vec<FactorPart> {
    let part = |inside| if inside { Part::Whole } else { Part::Average };
    levels.iter().zip(contrasted).map(|(&levels, &inside)| FactorPart::new(levels, part(inside))).collect()
}

/// The error of one stratum, pooled over all cells.
#[derive(Clone, Debug, PartialEq)]
pub struct ErrorStratum {
    /// Which within factors are contrasted; none in the stratum of subjects.
    pub within: Vec<bool>,
    /// Error sum of squares; zero where it is zero by the rule of [`Moments`].
    pub ss: f64,
    /// Its df, nu times the number of contrasts.
    pub df: f64,
}

/// Error sums of squares of all strata: subjects first, then every set of within factors.
///
/// # Errors
/// No cell has two subjects.
pub fn error_strata(moments: &Moments, within_levels: &[usize]) -> Result<Vec<ErrorStratum>, Refusal> {
    let everyone = vec![true; moments.cells().len()];
    strata(within_levels)
        .into_iter()
        .map(|stratum| {
            let error = moments.error(&stratum.basis, &everyone)?;
            let ss = match error.trace() {
                Ok(trace) => trace.value(),
                Err(Refusal::NoErrorVariance) => 0.0,
                Err(other) => return Err(other),
            };
            Ok(ErrorStratum { within: stratum.within, ss, df: (error.df * error.contrasts()) as f64 })
        })
        .collect()
}

/// One omnibus effect of a crossed design.
#[derive(Clone, Debug, PartialEq)]
pub struct Effect {
    /// Which between factors it involves.
    pub between: Vec<bool>,
    /// Which within factors it involves.
    pub within: Vec<bool>,
    /// Its sum of squares, given even where the test is refused.
    pub ss: f64,
    /// Its df.
    pub df: f64,
    /// Its test against the error of its stratum.
    pub test: Result<UnivariateTest, Refusal>,
}

/// Every effect of the crossed factors, that of the grand mean first; within each stratum the between effects in turn,
/// the first factor varying fastest. With the sums of squares of [`error_strata`] all that generalized eta squared needs.
///
/// # Errors
/// A cell without subjects.
pub fn crossed_effects(
    moments: &Moments,
    between_levels: &[usize],
    within_levels: &[usize],
    weighting: Weighting<'_>,
) -> Result<Vec<Effect>, Refusal> {
    let mut effects = Vec::new();
    let everyone = vec![true; moments.cells().len()];
    for within in subsets(within_levels) {
        for between in subsets(between_levels) {
            let hypothesis = Hypothesis::new(&parts(between_levels, &between), &parts(within_levels, &within), weighting)?;
            effects.push(Effect {
                ss: hypothesis_ss(moments, &hypothesis, &everyone)?.value(),
                df: (hypothesis.rank() * hypothesis.contrasts()) as f64,
                test: test_univariate(moments, &hypothesis, ErrorTerm::Pooled),
                between,
                within: within.clone(),
            });
        }
    }
    Ok(effects)
}
