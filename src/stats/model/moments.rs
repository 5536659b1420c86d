use super::accumulate::{Rows, worth_threads};
use super::refusal::Refusal;
use crate::stats::linear::{DoubleDouble, Matrix};

/// Count, means and centred cross-products of the subjects of one between cell.
#[derive(Clone, Debug)]
pub struct CellMoments {
    /// Number of subjects.
    pub subjects: usize,
    /// Mean at each occasion; zero where there is no subject.
    pub mean: Vec<DoubleDouble>,
    /// Centred cross-products, occasions by occasions, not divided by anything.
    pub cross_products: Matrix,
    /// Largest magnitude of a value at each occasion, by which "no variance" is judged against rounding.
    pub largest: Vec<f64>,
}

/// Everything that the tests need of the values, cell by cell.
///
/// # What counts as zero
///
/// A value read from text is off by up to half a unit in its last place, so that a variance that ought to be zero may not
/// come out as zero. A sum of squares of a combination of occasions with weights w is treated as zero when it is
/// at most df sum_k (w_k u_k)^2 with u_k = 4 eps max|y_k|, eps = 2^-52 and the largest magnitude taken over the
/// cells concerned. [`ErrorMatrix`] applies this one rule to traces and to the pivots by which a rank is judged.
#[derive(Clone, Debug)]
pub struct Moments {
    occasions: usize,
    /// Columns after the occasions in every cell's moments.
    covariates: usize,
    cells: Vec<CellMoments>,
}

/// What covariates do to means and errors of a model fitted to some of the cells.
///
/// With Z centred at the mean of the subjects of these cells and E pooled over them, the slopes are G = Ezz^-1 Ezy, the error
/// is Eyy - Eyz G, an adjusted cell mean is ybar - (zbar - centre)'G, and (X'X)^-1 of the cells is
/// diag(1 / n) + D Ezz^-1 D' with the rows of D being zbar - centre. All of it is in terms of R, R R' = Ezz.
#[derive(Clone, Debug)]
pub(crate) struct Adjustment {
    /// R, lower triangular.
    root: Matrix,
    /// R^-1 Ezy, covariates by occasions.
    pub explained: Matrix,
    /// Mean of each covariate over the subjects of the cells.
    centre: Vec<DoubleDouble>,
}

impl Adjustment {
    /// R^-1 (L D)', covariates by rows of L, for combinations L of cells.
    pub fn leverage(&self, moments: &Moments, between: &Matrix) -> Matrix {
        let count = self.centre.len();
        let mut distance = Matrix::zeros(count, between.rows());
        for (index, cell) in moments.cells.iter().enumerate().filter(|(_, cell)| cell.subjects > 0) {
            for covariate in 0..count {
                let away = cell.mean[moments.occasions + covariate] - self.centre[covariate];
                for row in 0..between.rows() {
                    distance[(covariate, row)] += between[(row, index)] * away;
                }
            }
        }
        self.root.solve_lower(&distance)
    }
}

/// M'EM for orthonormal contrasts M between occasions, pooled over the cells kept.
#[derive(Clone, Debug)]
pub struct ErrorMatrix {
    /// M'EM, contrasts by contrasts.
    pub matrix: Matrix,
    /// Error degrees of freedom: subjects less cells, both among the cells kept, less covariates.
    pub df: usize,
    /// Subjects of the cells kept.
    pub subjects: usize,
    /// Cells kept that have subjects.
    pub cells: usize,
    within: Matrix,
    pooled: Matrix,
    rounding: Vec<f64>,
}

impl Moments {
    /// Reads `values` (one row of `occasions` values for each subject) in two passes; `cell` gives the between cell of each
    /// subject, counted from 0 and below `cells`; `kept`, where given, says which subjects take part.
    ///
    /// The result is the same, bit for bit, whatever the number of threads; it depends on the order of the subjects in
    /// the last bits, so callers sort them by identifier.
    ///
    /// ```
    /// use aforesaid::stats::model::Moments;
    /// let values = [1e12 + 1.0, 2.0, 1e12 + 2.0, 4.0, 1e12 + 3.0, 9.0]; // invented
    /// let moments = Moments::new(&values, 2, &[0, 0, 0], 1, None).unwrap();
    /// assert_eq!(moments.mean(0, 1), 5.0);
    /// assert_eq!(moments.covariance(0, 0, 0), Some(1.0));
    /// assert_eq!(moments.covariance(0, 0, 1), Some(3.5));
    /// ```
    ///
    /// # Errors
    /// No subject, a value that is not finite, or magnitudes beyond 1e70 or (all of an occasion) below 1e-60.
    ///
    /// # Panics
    /// Where lengths do not agree or a cell is out of range: a slip of the caller, not of the data.
    pub fn new(values: &[f64], occasions: usize, cell: &[u32], cells: usize, kept: Option<&[bool]>) -> Result<Moments, Refusal> {
        assert_eq!(values.len(), cell.len() * occasions, "one row of values for each subject");
        assert!(kept.is_none_or(|kept| kept.len() == cell.len()), "one flag for each subject");
        assert!(cell.iter().all(|&cell| (cell as usize) < cells), "every cell is below the number of cells");
        let rows = Rows { values, occasions, cell, cells, kept, threaded: worth_threads(values.len()) };
        let centres = rows.centres()?;
        let deviations = rows.deviations(&centres.centre);
        let pairs = occasions * (occasions + 1) / 2;
        let cells = (0..cells).map(|cell| {
            let subjects = centres.count[cell];
            let places = cell * occasions..(cell + 1) * occasions;
            let centre = &centres.centre[places.clone()];
            let mut moments = CellMoments {
                subjects,
                mean: centre.iter().map(|&centre| centre.into()).collect(),
                cross_products: Matrix::zeros(occasions, occasions),
                largest: centres.largest[places.clone()].to_vec(),
            };
            if subjects == 0 {
                return moments;
            }
            let count = DoubleDouble::from(subjects);
            let sum = &deviations.sum[places];
            let product = &deviations.product[cell * pairs..(cell + 1) * pairs];
            let mut pair = 0;
            for first in 0..occasions {
                moments.mean[first] += sum[first] / count;
                for second in 0..=first {
                    let centred = product[pair] - sum[first] * sum[second] / count;
                    moments.cross_products[(first, second)] = centred;
                    moments.cross_products[(second, first)] = centred;
                    pair += 1;
                }
            }
            moments
        });
        Ok(Moments { occasions, covariates: 0, cells: cells.collect() })
    }

    /// As [`new`](Self::new), with covariates: `covariates` has one row for each subject, of as many values as there are
    /// covariates. They are carried as further columns of every cell's moments, after the occasions.
    ///
    /// # Errors
    /// As for [`new`](Self::new).
    ///
    /// # Panics
    /// As for [`new`](Self::new).
    pub fn with_covariates(
        values: &[f64],
        occasions: usize,
        covariates: &[f64],
        cell: &[u32],
        cells: usize,
        kept: Option<&[bool]>,
    ) -> Result<Moments, Refusal> {
        let subjects = cell.len();
        assert!(subjects > 0 && covariates.len().is_multiple_of(subjects), "one row of covariates for each subject");
        let further = covariates.len() / subjects;
        let rows: Vec<f64> = (0..subjects)
            .flat_map(|subject| {
                let outcome = &values[subject * occasions..(subject + 1) * occasions];
                outcome.iter().chain(&covariates[subject * further..(subject + 1) * further]).copied()
            })
            .collect();
        let joined = Moments::new(&rows, occasions + further, cell, cells, kept)?;
        Ok(Moments { occasions, covariates: further, cells: joined.cells })
    }

    /// The same without the covariates.
    pub fn without_covariates(&self) -> Moments {
        let occasions = self.occasions;
        let cells = self.cells.iter().map(|cell| {
            let mut cross_products = Matrix::zeros(occasions, occasions);
            for row in 0..occasions {
                for column in 0..occasions {
                    cross_products[(row, column)] = cell.cross_products[(row, column)];
                }
            }
            CellMoments {
                subjects: cell.subjects,
                mean: cell.mean[..occasions].to_vec(),
                cross_products,
                largest: cell.largest[..occasions].to_vec(),
            }
        });
        Moments { occasions, covariates: 0, cells: cells.collect() }
    }

    /// Moments that were not read from rows, as where they are drawn directly from their distribution.
    ///
    /// # Panics
    /// Where a cell has another number of occasions than the first.
    pub fn from_cells(cells: Vec<CellMoments>) -> Moments {
        let occasions = cells.first().map_or(0, |cell| cell.mean.len());
        for cell in &cells {
            assert_eq!(cell.mean.len(), occasions, "one number of occasions");
            assert_eq!(cell.largest.len(), occasions, "one number of occasions");
            assert_eq!((cell.cross_products.rows(), cell.cross_products.columns()), (occasions, occasions));
        }
        Moments { occasions, covariates: 0, cells }
    }

    /// Number of covariates; their moments stand after those of the occasions.
    pub fn covariates(&self) -> usize {
        self.covariates
    }

    /// Number of occasions, b.
    pub fn occasions(&self) -> usize {
        self.occasions
    }

    /// The cells, in the order of the plan.
    pub fn cells(&self) -> &[CellMoments] {
        &self.cells
    }

    /// Subjects in all cells.
    pub fn subjects(&self) -> usize {
        self.cells.iter().map(|cell| cell.subjects).sum()
    }

    /// Subjects of each cell.
    pub fn cell_sizes(&self) -> Vec<usize> {
        self.cells.iter().map(|cell| cell.subjects).collect()
    }

    /// Mean of a cell at an occasion.
    pub fn mean(&self, cell: usize, occasion: usize) -> f64 {
        self.cells[cell].mean[occasion].value()
    }

    /// Covariance of two occasions in a cell (a variance where they are the same); none below two subjects.
    pub fn covariance(&self, cell: usize, first: usize, second: usize) -> Option<f64> {
        let cell = &self.cells[cell];
        (cell.subjects >= 2).then(|| (cell.cross_products[(first, second)] / DoubleDouble::from(cell.subjects - 1)).value())
    }

    /// Standard deviation of a cell at an occasion; none below two subjects.
    pub fn standard_deviation(&self, cell: usize, occasion: usize) -> Option<f64> {
        let cell = &self.cells[cell];
        (cell.subjects >= 2).then(|| (cell.cross_products[(occasion, occasion)] / DoubleDouble::from(cell.subjects - 1)).sqrt().value())
    }

    /// Correlation of two occasions within a cell.
    ///
    /// # Errors
    /// An empty cell, or an occasion whose variance there is zero by the rule of [`Moments`].
    pub fn correlation(&self, cell: usize, first: usize, second: usize) -> Result<f64, Refusal> {
        let moments = &self.cells[cell];
        if moments.subjects == 0 {
            return Err(Refusal::EmptyCell { cell });
        }
        for occasion in [first, second] {
            let unit = rounding_unit(moments.largest[occasion]);
            let df = (moments.subjects - 1) as f64;
            if moments.cross_products[(occasion, occasion)].value() <= df * unit * unit {
                return Err(Refusal::ConstantOccasion { cell, occasion });
            }
        }
        let product = moments.cross_products[(first, first)] * moments.cross_products[(second, second)];
        Ok((moments.cross_products[(first, second)] / product.sqrt()).value().clamp(-1.0, 1.0))
    }

    /// M'EM pooled over the cells kept, for `within` (occasions by contrasts) with orthonormal columns. Covariates, where
    /// there are some, have been taken out.
    ///
    /// # Errors
    /// No error degrees of freedom among the cells kept; a covariate that does not vary within them or is a linear copy of
    /// others.
    pub fn error(&self, within: &Matrix, kept: &[bool]) -> Result<ErrorMatrix, Refusal> {
        let size = self.occasions + self.covariates;
        let mut joined = Matrix::zeros(size, size);
        let mut rounding = vec![0.0_f64; self.occasions];
        let (mut subjects, mut cells) = (0, 0);
        for cell in self.with_subjects(kept) {
            joined.accumulate(&cell.cross_products);
            subjects += cell.subjects;
            cells += 1;
            for (unit, &largest) in rounding.iter_mut().zip(&cell.largest) {
                *unit = unit.max(rounding_unit(largest));
            }
        }
        if subjects <= cells + self.covariates {
            return Err(if subjects <= cells { Refusal::NoErrorDf } else { Refusal::NoErrorDfLeft { covariates: self.covariates } });
        }
        let df = subjects - cells - self.covariates;
        let pooled = match self.adjustment(kept)? {
            None => joined,
            Some(adjustment) => {
                let mut pooled = Matrix::zeros(self.occasions, self.occasions);
                let explained = adjustment.explained.transpose().multiply(&adjustment.explained);
                for row in 0..self.occasions {
                    for column in 0..self.occasions {
                        pooled[(row, column)] = joined[(row, column)] - explained[(row, column)];
                    }
                }
                pooled
            }
        };
        Ok(ErrorMatrix { matrix: pooled.congruence(within), df, subjects, cells, within: within.clone(), pooled, rounding })
    }

    fn with_subjects<'a>(&'a self, kept: &'a [bool]) -> impl Iterator<Item = &'a CellMoments> {
        self.cells.iter().zip(kept).filter(|(cell, kept)| **kept && cell.subjects > 0).map(|(cell, _)| cell)
    }

    /// What the covariates do in a model fitted to the cells kept; `None` where there are none.
    ///
    /// # Errors
    /// A covariate that does not vary within these cells, or is a linear copy of others.
    pub(crate) fn adjustment(&self, kept: &[bool]) -> Result<Option<Adjustment>, Refusal> {
        let count = self.covariates;
        if count == 0 {
            return Ok(None);
        }
        let mut among = Matrix::zeros(count, count);
        let mut with_outcome = Matrix::zeros(count, self.occasions);
        let mut centre = vec![DoubleDouble::ZERO; count];
        let mut largest = vec![0.0_f64; count];
        let (mut subjects, mut cells) = (0, 0);
        for cell in self.with_subjects(kept) {
            subjects += cell.subjects;
            cells += 1;
            for one in 0..count {
                let place = self.occasions + one;
                largest[one] = largest[one].max(cell.largest[place]);
                centre[one] += cell.mean[place] * DoubleDouble::from(cell.subjects);
                for other in 0..count {
                    among[(one, other)] += cell.cross_products[(place, self.occasions + other)];
                }
                for occasion in 0..self.occasions {
                    with_outcome[(one, occasion)] += cell.cross_products[(place, occasion)];
                }
            }
        }
        let df = subjects.saturating_sub(cells) as f64;
        for covariate in 0..count {
            let unit = rounding_unit(largest[covariate]);
            if among[(covariate, covariate)].value() <= df * unit * unit {
                return Err(Refusal::ConstantCovariate { covariate });
            }
        }
        centre.iter_mut().for_each(|sum| *sum = *sum / DoubleDouble::from(subjects));
        let units: Vec<f64> = largest.iter().map(|&largest| rounding_unit(largest)).collect();
        let noise = |weights: &[DoubleDouble]| df * rounding_noise(weights, &units);
        if let Some(covariate) = first_dependent(&among, &Matrix::identity(count), noise) {
            return Err(Refusal::CollinearCovariate { covariate });
        }
        // Covariates come in units of their own; here each has a variance of one.
        let scale: Vec<DoubleDouble> = (0..count).map(|covariate| DoubleDouble::ONE / among[(covariate, covariate)].sqrt()).collect();
        let mut scaled = among.clone();
        for row in 0..count {
            for column in 0..count {
                scaled[(row, column)] = among[(row, column)] * scale[row] * scale[column];
            }
        }
        let mut root = scaled.cholesky().map_err(|singular| Refusal::CollinearCovariate { covariate: singular.rank })?;
        for row in 0..count {
            for column in 0..count {
                root[(row, column)] = root[(row, column)] / scale[row];
            }
        }
        let explained = root.solve_lower(&with_outcome);
        Ok(Some(Adjustment { root, explained, centre }))
    }
}

/// The first of several combinations that depends on those before it, where there is one: what elimination leaves of its sum
/// of squares is at most `noise` of the weights that it then has, or 1e-20 of what it was.
///
/// `matrix` holds the sums of squares and products of the combinations, `weights` their weights, one combination a row.
pub(crate) fn first_dependent(matrix: &Matrix, weights: &Matrix, noise: impl Fn(&[DoubleDouble]) -> f64) -> Option<usize> {
    const COPY: f64 = 1e-20;
    let (mut left, mut weights) = (matrix.clone(), weights.clone());
    for row in 0..left.rows() {
        let pivot = left[(row, row)];
        if pivot.value() <= noise(weights.row(row)).max(COPY * matrix[(row, row)].value()) {
            return Some(row);
        }
        for below in row + 1..left.rows() {
            let factor = left[(below, row)] / pivot;
            left.subtract_row(below, row, factor);
            weights.subtract_row(below, row, factor);
        }
    }
    None
}

/// sum_k (w_k u_k)^2: the sum of squares, per df, that rounding alone may leave in a combination (see [`Moments`]).
pub(crate) fn rounding_noise(weights: &[DoubleDouble], units: &[f64]) -> f64 {
    weights.iter().zip(units).map(|(weight, unit)| weight.value() * unit).map(|amount| amount * amount).sum()
}

impl ErrorMatrix {
    /// Number of contrasts, q.
    pub fn contrasts(&self) -> usize {
        self.matrix.rows()
    }

    /// tr M'EM.
    ///
    /// # Errors
    /// The trace is zero by the rule of [`Moments`].
    pub fn trace(&self) -> Result<DoubleDouble, Refusal> {
        let trace = self.matrix.trace();
        let noise: f64 = (0..self.contrasts()).map(|contrast| self.noise(&self.within.column(contrast))).sum();
        if trace.value() <= noise { Err(Refusal::NoErrorVariance) } else { Ok(trace) }
    }

    /// ln det M'EM.
    ///
    /// M is first brought to a basis in which the occasion with the largest variance enters one contrast only, then the
    /// next largest, and so on: whatever the units, no contrast drowns in another, and the judgement of the rank does not
    /// depend on the basis given. The rank is judged by the pivots of an elimination that takes the relatively largest
    /// next: a pivot is the sum of squares of what is left of a contrast after those before it, and counts as zero by the
    /// rule of [`Moments`], or below 1e-24 of the contrast's own sum of squares, where the arithmetic ends.
    ///
    /// # Errors
    /// More contrasts than degrees of freedom, or contrasts that are linear copies of others.
    pub fn log_determinant(&self) -> Result<DoubleDouble, Refusal> {
        const PIVOT: f64 = 1e-24;
        let size = self.contrasts();
        let singular = |rank| Refusal::SingularError { rank, contrasts: size, error_df: self.df };
        if size > self.df {
            return Err(singular(self.df));
        }
        let (mut weights, mut logarithm) = self.graded_basis();
        let mut left = self.pooled.congruence(&weights.transpose());
        let own: Vec<f64> = (0..size).map(|index| left[(index, index)].value()).collect();
        let mut waiting: Vec<usize> = (0..size).collect();
        while !waiting.is_empty() {
            let share = |index: usize| {
                if own[index] > 0.0 { left[(index, index)].value() / own[index] } else { 0.0 }
            };
            let best = (0..waiting.len()).fold(0, |best, next| if share(waiting[next]) > share(waiting[best]) { next } else { best });
            let pivot = waiting.swap_remove(best);
            let value = left[(pivot, pivot)];
            if value.value() <= (PIVOT * own[pivot]).max(self.noise(weights.row(pivot))) {
                return Err(singular(size - waiting.len() - 1));
            }
            logarithm += value.ln();
            for &row in &waiting {
                let factor = left[(row, pivot)] / value;
                for &column in &waiting {
                    let known = factor * left[(pivot, column)];
                    left[(row, column)] -= known;
                }
                weights.subtract_row(row, pivot, factor);
            }
        }
        Ok(logarithm)
    }

    /// Rows W that span the contrasts, reduced so that each has a 1 where the others have 0, at the occasions of largest
    /// variance; and 2 ln|det T| with M' = T W, so that det M'EM = det T^2 det WEW'.
    pub(crate) fn graded_basis(&self) -> (Matrix, DoubleDouble) {
        // Rows of M' have length 1: an entry below this is what is left of an exact zero.
        const NEGLIGIBLE: f64 = 1e-15;
        let mut rows = self.within.transpose();
        let mut occasions: Vec<usize> = (0..rows.columns()).collect();
        let variance = |occasion: usize| self.pooled[(occasion, occasion)].value();
        occasions.sort_by(|&a, &b| variance(b).total_cmp(&variance(a)));
        let mut waiting: Vec<usize> = (0..rows.rows()).collect();
        let mut logarithm = DoubleDouble::ZERO;
        for occasion in occasions {
            let size = |row: usize| rows[(row, occasion)].value().abs();
            let Some(best) = (0..waiting.len()).reduce(|best, next| if size(waiting[next]) > size(waiting[best]) { next } else { best })
            else {
                break;
            };
            if size(waiting[best]) <= NEGLIGIBLE {
                continue;
            }
            let pivot = waiting.swap_remove(best);
            let value = rows[(pivot, occasion)];
            logarithm += value.abs().ln();
            rows.divide_row(pivot, value);
            for row in (0..rows.rows()).filter(|&row| row != pivot) {
                let factor = rows[(row, occasion)];
                rows.subtract_row(row, pivot, factor);
                rows[(row, occasion)] = DoubleDouble::ZERO;
            }
        }
        (rows, logarithm + logarithm)
    }

    /// The sum of squares that rounding of the values alone may leave in a combination of occasions.
    fn noise(&self, weights: &[DoubleDouble]) -> f64 {
        rounding_noise(weights, &self.rounding) * self.df as f64
    }
}

/// 4 eps max|y|: what a value may be off by, with room.
pub(crate) fn rounding_unit(largest: f64) -> f64 {
    4.0 * f64::EPSILON * largest
}
