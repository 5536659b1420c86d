//! The test statistics of several hypotheses, from cell sums of several deals at once.
//!
//! For a hypothesis (L, M), F = (tr H / r q) / (tr M'EM / nu q). With s_c the sum over the subjects of cell c of M'y, and
//! Q_c that of |M'y|^2, tr M'EM = sum_c (Q_c - |s_c|^2 / n_c) over the cells of the error, and tr H = |K (s_1 ... s_g)'|^2
//! with K = R^-1 L (X'X)^-1, R R' = L (X'X)^-1 L'. So a deal costs the sums of the independent combinations of occasions,
//! and of one square for each different M whose error does not cover everybody who is dealt; the rest is done for
//! [`LANES`] deals side by side.

use crate::stats::hypothesis::{ErrorTerm, Hypothesis, pooled_strata};
use crate::stats::linear::{DoubleDouble, Matrix};

/// Deals evaluated side by side.
pub(super) const LANES: usize = 8;

/// One number for each of the deals side by side.
pub(super) type Lanes = [f64; LANES];

/// An error below this share of the sum of squares of everybody is what rounding leaves of zero.
const NOISE: f64 = 1e-12;

/// M, by coordinates in the common basis: contrasts by columns.
#[derive(Clone, Debug)]
struct Form {
    within: Matrix,
    coordinates: Vec<Vec<f64>>,
    /// Column of |M'y|^2, where sums of it differ between deals.
    square: Option<usize>,
    /// Where its projected sums begin: one for each contrast and cell, contrasts slowest.
    projected: usize,
    /// Where its sums of squares begin, one for each cell.
    scatter: usize,
}

/// A share of an error mean square.
#[derive(Clone, Debug)]
struct ErrorPart {
    form: usize,
    /// Share in the mean square.
    share: f64,
    cells: Vec<usize>,
    /// Sum of |M'y|^2 over the subjects of these cells, where no deal changes it.
    fixed: Option<f64>,
    /// Sum of |M'y|^2 over everybody.
    everybody: f64,
    /// share r q / (nu q_part).
    factor: Lanes,
}

/// One hypothesis.
#[derive(Clone, Debug)]
struct Item {
    form: usize,
    /// -1 where the form's one contrast runs against the hypothesis's.
    sign: f64,
    rank: usize,
    /// L over `cells`, row by row.
    between: Vec<f64>,
    cells: Vec<usize>,
    error: Vec<ErrorPart>,
    /// Where its K begins: rank by cells.
    weights: usize,
    /// An error, as a multiple of the mean square, that is only rounding.
    noise: Lanes,
    df1: f64,
}

/// What a deal comes down to, and how the statistics follow.
#[derive(Clone, Debug)]
pub(super) struct Statistics {
    basis: Vec<Vec<f64>>,
    columns: usize,
    cells: usize,
    forms: Vec<Form>,
    items: Vec<Item>,
    weights: Vec<Lanes>,
    inverse: Vec<Lanes>,
    projected: Vec<Lanes>,
    scatter: Vec<Lanes>,
    lower: Vec<f64>,
}

impl Statistics {
    /// For these hypotheses; `reached` says which cells a dealt subject may come to.
    pub fn new(questions: &[(&Hypothesis, ErrorTerm)], reached: &[bool]) -> Statistics {
        let cells = reached.len();
        let mut forms: Vec<Form> = Vec::new();
        let mut items = Vec::new();
        let mut weights = 0;
        for &(hypothesis, error_term) in questions {
            let form = form_of(&mut forms, hypothesis.within());
            let own = |cells: Vec<usize>| vec![(hypothesis.within().clone(), 1.0, cells)];
            let parts = match error_term {
                ErrorTerm::Own => own((0..cells).filter(|&cell| hypothesis.kept()[cell]).collect()),
                ErrorTerm::OwnOccasions => own((0..cells).collect()),
                ErrorTerm::Pooled => {
                    pooled_strata(hypothesis).into_iter().map(|(basis, share)| (basis, share.value(), (0..cells).collect())).collect()
                }
            };
            let error = parts
                .into_iter()
                .map(|(within, share, cells): (Matrix, f64, Vec<usize>)| {
                    let covers = reached.iter().enumerate().all(|(cell, reached)| !reached || cells.contains(&cell));
                    ErrorPart {
                        form: form_of(&mut forms, &within),
                        share,
                        cells,
                        fixed: covers.then_some(0.0),
                        everybody: 0.0,
                        factor: [0.0; LANES],
                    }
                })
                .collect();
            let kept: Vec<usize> = (0..cells).filter(|&cell| hypothesis.kept()[cell]).collect();
            let between: Vec<f64> =
                (0..hypothesis.rank()).flat_map(|row| kept.iter().map(move |&cell| hypothesis.between()[(row, cell)].value())).collect();
            let sign = if hypothesis.contrasts() == 1 && inner(&forms[form].within, hypothesis.within()) < 0.0 { -1.0 } else { 1.0 };
            let df1 = (hypothesis.rank() * hypothesis.contrasts()) as f64;
            let width = between.len();
            items.push(Item { form, sign, rank: hypothesis.rank(), between, cells: kept, error, weights, noise: [0.0; LANES], df1 });
            weights += width;
        }
        let basis = common_basis(&forms);
        let mut columns = basis.columns();
        let (mut projected, mut scatter) = (0, 0);
        for (index, form) in forms.iter_mut().enumerate() {
            form.coordinates = form.within.transpose().multiply(&basis).to_rows();
            let mut parts = items.iter().flat_map(|item: &Item| &item.error).filter(|part| part.form == index);
            if parts.any(|part| part.fixed.is_none()) {
                form.square = Some(columns);
                columns += 1;
            }
            (form.projected, form.scatter) = (projected, scatter);
            projected += form.coordinates.len() * cells;
            scatter += cells;
        }
        let largest_rank = items.iter().map(|item| item.rank).max().unwrap_or(0);
        Statistics {
            basis: basis.transpose().to_rows(),
            columns,
            cells,
            forms,
            items,
            weights: vec![[0.0; LANES]; weights],
            inverse: vec![[0.0; LANES]; cells],
            projected: vec![[0.0; LANES]; projected],
            scatter: vec![[0.0; LANES]; scatter],
            lower: vec![0.0; largest_rank * largest_rank],
        }
    }

    /// Numbers kept of each subject.
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// Number of hypotheses.
    pub fn len(&self) -> usize {
        self.items.len()
    }

    /// What is kept of a subject whose values, less the mean of everybody at each occasion, are `centred`.
    pub fn fill(&self, centred: &[f64], row: &mut [f64]) {
        for (out, weights) in row.iter_mut().zip(&self.basis) {
            *out = weights.iter().zip(centred).map(|(weight, value)| weight * value).sum();
        }
        for form in &self.forms {
            if let Some(column) = form.square {
                row[column] = self.square(form, row);
            }
        }
    }

    fn square(&self, form: &Form, row: &[f64]) -> f64 {
        let contrast = |weights: &Vec<f64>| weights.iter().zip(row).map(|(weight, value)| weight * value).sum::<f64>();
        form.coordinates.iter().map(contrast).map(|value| value * value).sum()
    }

    /// Takes in the sums of squares that no deal changes: `rows` gives each subject's row and cell.
    pub fn take_squares<'a>(&mut self, rows: impl Iterator<Item = (&'a [f64], usize)>) {
        let mut squares = vec![0.0; self.forms.len() * self.cells];
        for (row, cell) in rows {
            for (index, form) in self.forms.iter().enumerate() {
                squares[index * self.cells + cell] += self.square(form, row);
            }
        }
        for part in self.items.iter_mut().flat_map(|item| &mut item.error) {
            let of_form = &squares[part.form * self.cells..(part.form + 1) * self.cells];
            part.everybody = of_form.iter().sum();
            if let Some(fixed) = &mut part.fixed {
                *fixed = part.cells.iter().map(|&cell| of_form[cell]).sum();
            }
        }
    }

    /// Takes in the numbers of subjects of the cells in one of the deals side by side; all that depends on nothing else
    /// is worked out here, once where no deal changes them.
    pub fn take_counts(&mut self, lane: usize, counts: &[f64]) {
        for (inverse, &count) in self.inverse.iter_mut().zip(counts) {
            inverse[lane] = if count > 0.0 { 1.0 / count } else { 0.0 };
        }
        for item in &mut self.items {
            let weights = &mut self.weights[item.weights..item.weights + item.between.len()];
            let found = item.take_weights(lane, counts, weights, &mut self.lower);
            item.noise[lane] = 0.0;
            for part in &mut item.error {
                let filled = |cell: &&usize| counts[**cell] > 0.0;
                let df: f64 = part.cells.iter().filter(filled).map(|&cell| counts[cell] - 1.0).sum();
                let contrasts = self.forms[part.form].coordinates.len() as f64;
                // Without a value the error is zero, which the evaluation takes for "none".
                part.factor[lane] = if found && df > 0.0 { part.share * item.df1 / (df * contrasts) } else { 0.0 };
                item.noise[lane] += part.factor[lane] * (NOISE * part.everybody);
            }
        }
    }

    /// F of each hypothesis in each of the deals; that of a single contrast with the sign of its estimate. Infinity where
    /// it has no value: no error variance, or an empty cell.
    ///
    /// `sums` holds the sums of each cell in turn, one for each column.
    pub fn evaluate(&mut self, sums: &[Lanes], found: &mut [Lanes]) {
        self.scatter(sums);
        for (item, out) in self.items.iter().zip(found) {
            let mut error = [0.0; LANES];
            for part in &item.error {
                let scatter = &self.scatter[self.forms[part.form].scatter..];
                let mut trace = [0.0; LANES];
                for &cell in &part.cells {
                    each(&mut trace, |trace, lane| *trace += scatter[cell][lane]);
                }
                let fixed = if self.forms[part.form].square.is_some() { 0.0 } else { part.fixed.unwrap_or(0.0) };
                each(&mut error, |error, lane| *error += part.factor[lane] * (fixed + trace[lane]));
            }
            let form = &self.forms[item.form];
            let width = item.cells.len();
            let single = item.rank == 1 && form.coordinates.len() == 1;
            let mut ss = [0.0; LANES];
            for row in 0..item.rank {
                let weights = &self.weights[item.weights + row * width..item.weights + (row + 1) * width];
                for contrast in 0..form.coordinates.len() {
                    let projected = &self.projected[form.projected + contrast * self.cells..];
                    let mut estimate = [0.0; LANES];
                    for (weight, &cell) in weights.iter().zip(&item.cells) {
                        each(&mut estimate, |estimate, lane| *estimate += weight[lane] * projected[cell][lane]);
                    }
                    if single {
                        each(&mut ss, |ss, lane| *ss = estimate[lane] * estimate[lane].abs() * item.sign);
                    } else {
                        each(&mut ss, |ss, lane| *ss += estimate[lane] * estimate[lane]);
                    }
                }
            }
            each(out, |out, lane| *out = if error[lane] > item.noise[lane] { ss[lane] / error[lane] } else { f64::INFINITY });
        }
    }

    /// Projected sums, and sums of squares about the cell means.
    fn scatter(&mut self, sums: &[Lanes]) {
        for form in &self.forms {
            for cell in 0..self.cells {
                let of_cell = &sums[cell * self.columns..(cell + 1) * self.columns];
                let mut explained = [0.0; LANES];
                for (contrast, weights) in form.coordinates.iter().enumerate() {
                    let mut projected = [0.0; LANES];
                    for (weight, sum) in weights.iter().zip(of_cell) {
                        each(&mut projected, |projected, lane| *projected += weight * sum[lane]);
                    }
                    each(&mut explained, |explained, lane| *explained += projected[lane] * projected[lane]);
                    self.projected[form.projected + contrast * self.cells + cell] = projected;
                }
                let inverse = &self.inverse[cell];
                let scatter = &mut self.scatter[form.scatter + cell];
                match form.square {
                    Some(column) => each(scatter, |scatter, lane| *scatter = of_cell[column][lane] - explained[lane] * inverse[lane]),
                    None => each(scatter, |scatter, lane| *scatter = -(explained[lane] * inverse[lane])),
                }
            }
        }
    }
}

impl Item {
    /// K of one deal; false where a cell that L weighs is empty.
    fn take_weights(&self, lane: usize, counts: &[f64], weights: &mut [Lanes], lower: &mut [f64]) -> bool {
        let (rank, width) = (self.rank, self.cells.len());
        if self.cells.iter().any(|&cell| counts[cell] == 0.0) {
            weights.iter_mut().for_each(|weight| weight[lane] = 0.0);
            return false;
        }
        for row in 0..rank {
            for column in 0..=row {
                let product = |place: usize| self.between[row * width + place] * self.between[column * width + place];
                let mut left: f64 = (0..width).map(|place| product(place) / counts[self.cells[place]]).sum();
                left -= (0..column).map(|inner| lower[row * rank + inner] * lower[column * rank + inner]).sum::<f64>();
                // L has orthonormal rows, so that the matrix is as well conditioned as the counts are even.
                lower[row * rank + column] = if row == column { left.sqrt() } else { left / lower[column * rank + column] };
            }
        }
        for (place, &cell) in self.cells.iter().enumerate() {
            for row in 0..rank {
                let mut left = self.between[row * width + place] / counts[cell];
                left -= (0..row).map(|inner| lower[row * rank + inner] * weights[inner * width + place][lane]).sum::<f64>();
                weights[row * width + place][lane] = left / lower[row * rank + row];
            }
        }
        true
    }
}

/// `step` for each of the deals side by side.
#[inline(always)]
fn each(lanes: &mut Lanes, mut step: impl FnMut(&mut f64, usize)) {
    for (lane, value) in lanes.iter_mut().enumerate() {
        step(value, lane);
    }
}

/// The place of the form that spans the same contrasts, added where it is new.
fn form_of(forms: &mut Vec<Form>, within: &Matrix) -> usize {
    let same = |form: &Form| {
        // |A'B|^2 reaches q where orthonormal A and B span the same space.
        let overlap = form.within.transpose().multiply(within).sum_of_squares();
        let gap = DoubleDouble::from(within.columns()) - overlap;
        form.within.columns() == within.columns() && gap.value() <= Matrix::DEPENDENCE
    };
    forms.iter().position(same).unwrap_or_else(|| {
        forms.push(Form { within: within.clone(), coordinates: Vec::new(), square: None, projected: 0, scatter: 0 });
        forms.len() - 1
    })
}

/// Orthonormal columns that span all forms.
fn common_basis(forms: &[Form]) -> Matrix {
    let columns = forms.iter().flat_map(|form| (0..form.within.columns()).map(|column| form.within.column(column)));
    Matrix::from_rows(&columns.collect::<Vec<_>>()).transpose().orthonormal_columns()
}

fn inner(left: &Matrix, right: &Matrix) -> f64 {
    (0..left.rows()).map(|row| left[(row, 0)] * right[(row, 0)]).sum::<DoubleDouble>().value()
}
