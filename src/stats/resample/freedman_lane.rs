//! Randomisation tests with covariates.

use super::random::Stream;
use super::randomisation::{Deals, RandomisationTest, Side, Statistic};
use super::refusal::Refusal;
use crate::stats::hypothesis::{ErrorTerm, Hypothesis, UnivariateTest, test_univariate};
use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::{self, Moments};

/// Statistics this close, relatively, count as equal.
const TIE: f64 = 1e-9;

/// Values, covariates and cells of the subjects; slices have one entry or row for each.
#[derive(Clone, Copy, Debug)]
pub struct AdjustedData<'a> {
    /// One row of `occasions` values for each subject.
    pub values: &'a [f64],
    /// Number of occasions.
    pub occasions: usize,
    /// One row of covariates for each subject.
    pub covariates: &'a [f64],
    /// Between cell of each subject.
    pub cell: &'a [u32],
    /// Number of cells.
    pub cells: usize,
    /// Who takes part; everybody where none.
    pub kept: Option<&'a [bool]>,
    /// The stratum within which residuals are dealt; one stratum where none.
    pub strata: Option<&'a [u32]>,
    /// Among whom residuals are dealt.
    pub eligible: &'a [bool],
}

/// Tests a hypothesis in a model with covariates by dealing the residuals of the model without it (Freedman & Lane 1983).
///
/// The model without the hypothesis has the cells' means restricted to L B = 0, and the covariates. Its residuals, whole rows
/// of a subject at a time, are dealt among the eligible subjects within strata and added to its fitted values; the
/// statistic is that of [`test_univariate`] in the whole model. The deals are always drawn at random; the test is approximate.
///
/// # Errors
/// Nobody to deal among, no deals asked for, a side for several contrasts, or a statistic without a value on the data as
/// they are.
pub fn freedman_lane(
    data: &AdjustedData<'_>,
    hypothesis: &Hypothesis,
    error: ErrorTerm,
    side: Side,
    deals: &Deals,
) -> Result<RandomisationTest, Refusal> {
    if deals.asked == 0 {
        return Err(Refusal::NoneAsked);
    }
    let df = hypothesis.rank() * hypothesis.contrasts();
    if side != Side::Both && df > 1 {
        return Err(Refusal::DirectionOfSeveral { df });
    }
    let test = |values: &[f64]| -> Result<UnivariateTest, model::Refusal> {
        let moments = Moments::with_covariates(values, data.occasions, data.covariates, data.cell, data.cells, data.kept)?;
        test_univariate(&moments, hypothesis, error)
    };
    let observed = test(data.values)?;
    let (fitted, residuals) = reduced(data, hypothesis)?;
    let mut groups = groups(data);
    if groups.iter().all(|group| group.len() < 2) {
        return Err(Refusal::NothingToDeal);
    }
    let size = |test: &UnivariateTest| match (&test.estimate, side) {
        (Some(estimate), Side::Upper) => estimate.t,
        (Some(estimate), Side::Lower) => -estimate.t,
        _ => test.f,
    };
    let threshold = size(&observed) - TIE * size(&observed).abs();
    let (mut count, mut without_value) = (0_u64, 0_u64);
    let mut values = data.values.to_vec();
    let mut stream = Stream::new(deals.key, 0);
    for _ in 0..deals.asked {
        for group in &mut groups {
            let before = group.clone();
            for place in (1..group.len()).rev() {
                group.swap(place, stream.below(place as u32 + 1) as usize);
            }
            for (to, from) in before.iter().zip(group.iter()) {
                for occasion in 0..data.occasions {
                    let place = to * data.occasions + occasion;
                    values[place] = fitted[place] + residuals[from * data.occasions + occasion];
                }
            }
            *group = before;
        }
        match test(&values) {
            Ok(dealt) if size(&dealt) < threshold => {}
            Ok(_) => count += 1,
            Err(_) => {
                count += 1;
                without_value += 1;
            }
        }
    }
    let p = (1.0 + count as f64) / (1.0 + deals.asked as f64);
    Ok(RandomisationTest {
        statistic: observed.estimate.as_ref().map_or(Statistic::F(observed.f), |estimate| Statistic::T(estimate.t)),
        p,
        at_least_as_large: count,
        deals: deals.asked,
        exact: false,
        monte_carlo_error: (p * (1.0 - p) / deals.asked as f64).sqrt(),
        without_value,
    })
}

/// The subjects among whom residuals are dealt, stratum by stratum.
fn groups(data: &AdjustedData<'_>) -> Vec<Vec<usize>> {
    let strata = data.strata.map_or(1, |strata| strata.iter().max().map_or(1, |most| *most as usize + 1));
    let mut groups = vec![Vec::new(); strata];
    for subject in 0..data.cell.len() {
        if data.eligible[subject] && data.kept.is_none_or(|kept| kept[subject]) {
            groups[data.strata.map_or(0, |strata| strata[subject] as usize)].push(subject);
        }
    }
    groups
}

/// Fitted values and residuals of the model restricted to L B = 0, for every subject; of those who do not take part the
/// values stay as they are.
fn reduced(data: &AdjustedData<'_>, hypothesis: &Hypothesis) -> Result<(Vec<f64>, Vec<f64>), Refusal> {
    let subjects: Vec<usize> = (0..data.cell.len()).filter(|subject| data.kept.is_none_or(|kept| kept[*subject])).collect();
    let further = data.covariates.len() / data.cell.len();
    let count = DoubleDouble::from(subjects.len());
    let mean = |covariate: usize| {
        subjects.iter().map(|subject| DoubleDouble::from(data.covariates[subject * further + covariate])).sum::<DoubleDouble>() / count
    };
    let means: Vec<DoubleDouble> = (0..further).map(mean).collect();
    // Combinations of cells that L leaves free: the columns after those of L' in an orthonormal basis of all.
    let rank = hypothesis.rank();
    let mut all = Matrix::zeros(data.cells, rank + data.cells);
    for cell in 0..data.cells {
        for row in 0..rank {
            all[(cell, row)] = hypothesis.between()[(row, cell)];
        }
        all[(cell, rank + cell)] = DoubleDouble::ONE;
    }
    let basis = all.orthonormal_columns();
    let free = basis.columns() - rank;
    let mut design = Matrix::zeros(subjects.len(), free + further);
    for (row, &subject) in subjects.iter().enumerate() {
        for column in 0..free {
            design[(row, column)] = basis[(data.cell[subject] as usize, rank + column)];
        }
        for covariate in 0..further {
            design[(row, free + covariate)] = DoubleDouble::from(data.covariates[subject * further + covariate]) - means[covariate];
        }
    }
    let columns = design.orthonormal_columns();
    let mut fitted = data.values.to_vec();
    let mut residuals = vec![0.0; data.values.len()];
    for occasion in 0..data.occasions {
        let value = |subject: usize| DoubleDouble::from(data.values[subject * data.occasions + occasion]);
        let along: Vec<DoubleDouble> = (0..columns.columns())
            .map(|column| subjects.iter().enumerate().map(|(row, &subject)| columns[(row, column)] * value(subject)).sum())
            .collect();
        for (row, &subject) in subjects.iter().enumerate() {
            let own: DoubleDouble = along.iter().enumerate().map(|(column, &along)| columns[(row, column)] * along).sum();
            let place = subject * data.occasions + occasion;
            fitted[place] = own.value();
            residuals[place] = (value(subject) - own).value();
        }
    }
    Ok((fitted, residuals))
}
