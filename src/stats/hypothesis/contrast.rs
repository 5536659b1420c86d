use crate::stats::linear::{DoubleDouble, Matrix};
use crate::stats::model::Refusal;

/// What a hypothesis does with one factor.
#[derive(Clone, Debug, PartialEq)]
pub enum Part {
    /// All differences among the levels: k - 1 contrasts. With two levels the estimate is second minus first.
    Whole,
    /// All differences among these levels, counted from 0; the others take no part.
    Among(Vec<usize>),
    /// The mean of the levels.
    Average,
    /// One level, counted from 0.
    Hold(usize),
    /// Weights as written, one row of k weights for each contrast.
    Weights(Vec<Vec<f64>>),
    /// The mean of these levels minus one level, counted from 0.
    MeanMinus {
        /// The levels whose mean is taken.
        of: Vec<usize>,
        /// The level that is taken away.
        level: usize,
    },
    /// The polynomial contrast of this degree over unequally spaced levels, per unit of spacing: see [`trend_weights`].
    Trend {
        /// Position of each level.
        spacing: Vec<f64>,
        /// 1 is linear.
        degree: usize,
    },
}

/// A factor's number of levels and its part in a hypothesis.
#[derive(Clone, Debug, PartialEq)]
pub struct FactorPart {
    /// Number of levels, k.
    pub levels: usize,
    /// What is done with them.
    pub part: Part,
}

impl FactorPart {
    /// A factor of `levels` levels with this part.
    pub fn new(levels: usize, part: Part) -> FactorPart {
        FactorPart { levels, part }
    }

    /// The rows of weights, contrasts by levels.
    pub(super) fn rows(&self) -> Matrix {
        let levels = self.levels;
        match &self.part {
            Part::Whole => successive(levels, &(0..levels).collect::<Vec<_>>()),
            Part::Among(among) => successive(levels, among),
            Part::Average => Matrix::from_rows(&[vec![DoubleDouble::ONE / DoubleDouble::from(levels); levels]]),
            Part::Hold(level) => {
                let mut row = Matrix::zeros(1, levels);
                row[(0, *level)] = DoubleDouble::ONE;
                row
            }
            Part::Weights(rows) => Matrix::from_rows(rows),
            Part::MeanMinus { of, level } => {
                let mut row = Matrix::zeros(1, levels);
                of.iter().for_each(|one| row[(0, *one)] = DoubleDouble::ONE / DoubleDouble::from(of.len()));
                row[(0, *level)] = -DoubleDouble::ONE;
                row
            }
            Part::Trend { spacing, degree } => Matrix::from_rows(&[trend_weights(spacing, *degree)]),
        }
    }
}

/// Each level against the ones before it, in whole numbers (Helmert).
fn successive(levels: usize, among: &[usize]) -> Matrix {
    let mut rows = Matrix::zeros(among.len().saturating_sub(1), levels);
    for row in 0..rows.rows() {
        for &level in &among[..=row] {
            rows[(row, level)] = -DoubleDouble::ONE;
        }
        rows[(row, among[row + 1])] = DoubleDouble::from(row + 1);
    }
    rows
}

/// Weights whose combination of means estimates the coefficient of the monic orthogonal polynomial of `degree` over the
/// positions `spacing`; for degree 1 that is the least-squares slope per unit of spacing.
///
/// Positions that coincide leave fewer polynomials than levels; beyond those the weights are all zero.
pub fn trend_weights(spacing: &[f64], degree: usize) -> Vec<DoubleDouble> {
    let count = DoubleDouble::from(spacing.len());
    let mean = spacing.iter().map(|&place| DoubleDouble::from(place)).sum::<DoubleDouble>() / count;
    let mut powers = Matrix::zeros(spacing.len(), degree + 1);
    for (row, &place) in spacing.iter().enumerate() {
        let mut power = DoubleDouble::ONE;
        for column in 0..=degree {
            powers[(row, column)] = power;
            power *= DoubleDouble::from(place) - mean;
        }
    }
    let basis = powers.orthonormal_columns();
    if basis.columns() <= degree {
        return vec![DoubleDouble::ZERO; spacing.len()];
    }
    // The monic polynomial is c times the unit vector u with c = u'x^degree; the coefficient of c u in y is u'y / c.
    let unit = basis.column(degree);
    let length: DoubleDouble = unit.iter().zip(powers.column(degree)).map(|(&a, b)| a * b).sum();
    unit.into_iter().map(|weight| weight / length).collect()
}

/// How between cells are weighted where a factor is averaged over. Occasions always count equally.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Weighting<'a> {
    /// Every cell mean counts the same (the hypotheses called Type III).
    Equal,
    /// Cells count by these numbers of subjects.
    Observed(&'a [usize]),
}

/// A hypothesis L B M = 0 and the cells it is about.
#[derive(Clone, Debug)]
pub struct Hypothesis {
    between: Matrix,
    within: Matrix,
    kept: Vec<bool>,
    within_levels: Vec<usize>,
    single: Option<(Vec<DoubleDouble>, Vec<DoubleDouble>)>,
}

impl Hypothesis {
    /// The hypothesis that these parts of the between and within factors make; in both lists the last factor varies fastest.
    ///
    /// An empty list of between factors is one group. Cells are kept where L has a weight other than zero.
    ///
    /// ```
    /// use aforesaid::stats::hypothesis::{FactorPart, Hypothesis, Part, Weighting};
    /// let arms = FactorPart::new(2, Part::Whole);
    /// let visits = FactorPart::new(3, Part::Weights(vec![vec![-1.0, 1.0, 0.0]]));
    /// let piece = Hypothesis::new(&[arms], &[visits], Weighting::Equal).unwrap();
    /// assert_eq!((piece.rank(), piece.contrasts()), (1, 1));
    /// ```
    ///
    /// # Errors
    /// All weights of a side are zero.
    ///
    /// # Panics
    /// Where a level is out of range or rows of weights do not have one weight for each level: slips of the caller.
    pub fn new(between: &[FactorPart], within: &[FactorPart], weighting: Weighting<'_>) -> Result<Hypothesis, Refusal> {
        let combine = |factors: &mut dyn Iterator<Item = &FactorPart>| {
            factors.fold(Matrix::identity(1), |product, factor| {
                let rows = factor.rows();
                assert!(rows.rows() == 0 || rows.columns() == factor.levels, "one weight for each level");
                product.kronecker(&rows)
            })
        };
        let between_rows = match weighting {
            Weighting::Equal => combine(&mut between.iter()),
            Weighting::Observed(sizes) => {
                let named = combine(&mut between.iter().filter(|factor| factor.part != Part::Average));
                spread_by_size(&named, between, sizes)?
            }
        };
        let within_levels: Vec<usize> = within.iter().map(|factor| factor.levels).collect();
        Hypothesis::from_rows(&between_rows, &combine(&mut within.iter()), &within_levels)
    }

    /// The hypothesis with these rows of weights: `between` has one column for each cell, `within` one for each occasion.
    /// Rows that depend on earlier ones add nothing. `within_levels` says how the occasions are crossed.
    ///
    /// # Errors
    /// All weights of a side are zero.
    pub fn from_rows(between: &Matrix, within: &Matrix, within_levels: &[usize]) -> Result<Hypothesis, Refusal> {
        assert_eq!(within.columns(), within_levels.iter().product::<usize>(), "one weight for each occasion");
        let single = (between.rows() == 1 && within.rows() == 1).then(|| (between.row(0).to_vec(), within.row(0).to_vec()));
        let between = between.transpose().orthonormal_columns().transpose();
        let within = within.transpose().orthonormal_columns();
        if between.rows() == 0 || within.columns() == 0 {
            return Err(Refusal::NotEstimable);
        }
        let kept = (0..between.columns()).map(|cell| (0..between.rows()).any(|row| !between[(row, cell)].is_zero())).collect();
        Ok(Hypothesis { between, within, kept, within_levels: within_levels.to_vec(), single })
    }

    /// L: rank by cells, orthonormal rows.
    pub fn between(&self) -> &Matrix {
        &self.between
    }

    /// M: occasions by contrasts, orthonormal columns.
    pub fn within(&self) -> &Matrix {
        &self.within
    }

    /// Rank of L, r.
    pub fn rank(&self) -> usize {
        self.between.rows()
    }

    /// Rank of M, q.
    pub fn contrasts(&self) -> usize {
        self.within.columns()
    }

    /// The cells that the hypothesis is about.
    pub fn kept(&self) -> &[bool] {
        &self.kept
    }

    /// Levels of the within factors, the last varying fastest.
    pub fn within_levels(&self) -> &[usize] {
        &self.within_levels
    }

    /// Weights of cells and of occasions as written, where the hypothesis is one contrast.
    pub fn single(&self) -> Option<(&[DoubleDouble], &[DoubleDouble])> {
        self.single.as_ref().map(|(between, within)| (&between[..], &within[..]))
    }
}

/// Spreads rows over the combinations of the named factors to the cells, each combination shared out by cell size.
fn spread_by_size(named: &Matrix, between: &[FactorPart], sizes: &[usize]) -> Result<Matrix, Refusal> {
    let cells = sizes.len();
    assert_eq!(cells, between.iter().map(|factor| factor.levels).product::<usize>(), "one size for each cell");
    let combination = |cell: usize| {
        let (mut rest, mut combination, mut step) = (cell, 0, 1);
        for factor in between.iter().rev() {
            if factor.part != Part::Average {
                combination += rest % factor.levels * step;
                step *= factor.levels;
            }
            rest /= factor.levels;
        }
        combination
    };
    let mut totals = vec![0usize; named.columns()];
    for (cell, size) in sizes.iter().enumerate() {
        totals[combination(cell)] += size;
    }
    let mut rows = Matrix::zeros(named.rows(), cells);
    for cell in 0..cells {
        let place = combination(cell);
        for row in 0..named.rows() {
            if named[(row, place)].is_zero() {
                continue;
            }
            if totals[place] == 0 {
                return Err(Refusal::EmptyCell { cell });
            }
            rows[(row, cell)] = named[(row, place)] * DoubleDouble::from(sizes[cell]) / DoubleDouble::from(totals[place]);
        }
    }
    Ok(rows)
}
