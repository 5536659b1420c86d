use std::ops::{Index, IndexMut};

use super::DoubleDouble;

/// A dense matrix of [`DoubleDouble`], stored by rows.
#[derive(Clone, Debug, PartialEq)]
pub struct Matrix {
    rows: usize,
    columns: usize,
    entries: Vec<DoubleDouble>,
}

/// A matrix that was to be factored is not positive definite.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct NotPositiveDefinite {
    /// Rows that could be factored before a pivot vanished.
    pub rank: usize,
}

impl Matrix {
    /// Relative squared length at or below which a column counts as a combination of the columns before it.
    ///
    /// Weights come as doubles, so an exact dependence shows as a relative length of about 1e-16, squared 1e-32.
    pub const DEPENDENCE: f64 = 1e-24;

    /// All zeros.
    pub fn zeros(rows: usize, columns: usize) -> Matrix {
        Matrix { rows, columns, entries: vec![DoubleDouble::ZERO; rows * columns] }
    }

    /// Ones on the diagonal.
    pub fn identity(size: usize) -> Matrix {
        let mut identity = Matrix::zeros(size, size);
        for index in 0..size {
            identity[(index, index)] = DoubleDouble::ONE;
        }
        identity
    }

    /// The matrix with these rows, all of one length.
    pub fn from_rows<T: Copy + Into<DoubleDouble>>(rows: &[Vec<T>]) -> Matrix {
        let columns = rows.first().map_or(0, Vec::len);
        debug_assert!(rows.iter().all(|row| row.len() == columns));
        let entries = rows.iter().flatten().map(|&entry| entry.into()).collect();
        Matrix { rows: rows.len(), columns, entries }
    }

    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Number of columns.
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// One row.
    pub fn row(&self, row: usize) -> &[DoubleDouble] {
        &self.entries[row * self.columns..(row + 1) * self.columns]
    }

    /// One column, copied.
    pub fn column(&self, column: usize) -> Vec<DoubleDouble> {
        (0..self.rows).map(|row| self[(row, column)]).collect()
    }

    /// The transpose.
    pub fn transpose(&self) -> Matrix {
        let mut transpose = Matrix::zeros(self.columns, self.rows);
        for row in 0..self.rows {
            for column in 0..self.columns {
                transpose[(column, row)] = self[(row, column)];
            }
        }
        transpose
    }

    /// The product `self * other`.
    pub fn multiply(&self, other: &Matrix) -> Matrix {
        debug_assert_eq!(self.columns, other.rows);
        let mut product = Matrix::zeros(self.rows, other.columns);
        for row in 0..self.rows {
            for inner in 0..self.columns {
                let factor = self[(row, inner)];
                if factor.is_zero() {
                    continue;
                }
                for column in 0..other.columns {
                    product[(row, column)] += factor * other[(inner, column)];
                }
            }
        }
        product
    }

    /// `basis' * self * basis` for a symmetric `self`.
    pub fn congruence(&self, basis: &Matrix) -> Matrix {
        let mut form = basis.transpose().multiply(&self.multiply(basis));
        for row in 0..form.rows {
            for column in 0..row {
                form[(column, row)] = form[(row, column)];
            }
        }
        form
    }

    /// The Kronecker product, `other` varying fastest.
    pub fn kronecker(&self, other: &Matrix) -> Matrix {
        let mut product = Matrix::zeros(self.rows * other.rows, self.columns * other.columns);
        for (row, column) in self.places() {
            for (inner_row, inner_column) in other.places() {
                product[(row * other.rows + inner_row, column * other.columns + inner_column)] =
                    self[(row, column)] * other[(inner_row, inner_column)];
            }
        }
        product
    }

    /// Adds `other` entry by entry.
    pub fn accumulate(&mut self, other: &Matrix) {
        debug_assert_eq!((self.rows, self.columns), (other.rows, other.columns));
        for (entry, &more) in self.entries.iter_mut().zip(&other.entries) {
            *entry += more;
        }
    }

    /// Every entry times `factor`.
    pub fn scaled(&self, factor: DoubleDouble) -> Matrix {
        Matrix { entries: self.entries.iter().map(|&entry| entry * factor).collect(), ..*self }
    }

    /// Sum of the diagonal.
    pub fn trace(&self) -> DoubleDouble {
        (0..self.rows.min(self.columns)).map(|index| self[(index, index)]).sum()
    }

    /// Sum of the squares of all entries; for a symmetric matrix the trace of its square.
    pub fn sum_of_squares(&self) -> DoubleDouble {
        self.entries.iter().map(|entry| entry.square()).sum()
    }

    /// An orthonormal basis of the space that the columns span, in their order (Gram-Schmidt, twice over); columns
    /// that depend on those before them, by [`DEPENDENCE`](Self::DEPENDENCE), are left out. The result may have no column.
    pub fn orthonormal_columns(&self) -> Matrix {
        let mut basis: Vec<Vec<DoubleDouble>> = Vec::new();
        for index in 0..self.columns {
            let mut column = self.column(index);
            let before = dot(&column, &column);
            for _ in 0..2 {
                for direction in &basis {
                    let along = dot(&column, direction);
                    for (entry, &unit) in column.iter_mut().zip(direction) {
                        *entry -= along * unit;
                    }
                }
            }
            let after = dot(&column, &column);
            if after.value() <= Self::DEPENDENCE * before.value() {
                continue;
            }
            let length = after.sqrt();
            basis.push(column.into_iter().map(|entry| entry / length).collect());
        }
        let mut columns = Matrix::zeros(self.rows, basis.len());
        for (index, direction) in basis.iter().enumerate() {
            for (row, &entry) in direction.iter().enumerate() {
                columns[(row, index)] = entry;
            }
        }
        columns
    }

    /// The lower triangular factor R of a positive definite matrix, R R' = self.
    ///
    /// # Errors
    /// A pivot is not above [`DEPENDENCE`](Self::DEPENDENCE) of its diagonal entry.
    pub fn cholesky(&self) -> Result<Matrix, NotPositiveDefinite> {
        debug_assert_eq!(self.rows, self.columns);
        let mut factor = Matrix::zeros(self.rows, self.rows);
        for row in 0..self.rows {
            for column in 0..=row {
                let known: DoubleDouble = (0..column).map(|inner| factor[(row, inner)] * factor[(column, inner)]).sum();
                let rest = self[(row, column)] - known;
                if row == column {
                    if rest.value() <= Self::DEPENDENCE * self[(row, row)].value().abs() {
                        return Err(NotPositiveDefinite { rank: row });
                    }
                    factor[(row, row)] = rest.sqrt();
                } else {
                    factor[(row, column)] = rest / factor[(column, column)];
                }
            }
        }
        Ok(factor)
    }

    /// Solves `self * X = right` where `self` is lower triangular with a non-zero diagonal.
    pub fn solve_lower(&self, right: &Matrix) -> Matrix {
        let mut solution = right.clone();
        for row in 0..self.rows {
            for column in 0..right.columns {
                let known: DoubleDouble = (0..row).map(|inner| self[(row, inner)] * solution[(inner, column)]).sum();
                solution[(row, column)] = (solution[(row, column)] - known) / self[(row, row)];
            }
        }
        solution
    }

    /// The entries rounded to doubles, row by row.
    pub fn to_rows(&self) -> Vec<Vec<f64>> {
        (0..self.rows).map(|row| self.row(row).iter().map(|entry| entry.value()).collect()).collect()
    }

    fn places(&self) -> impl Iterator<Item = (usize, usize)> + use<> {
        let columns = self.columns;
        (0..self.rows).flat_map(move |row| (0..columns).map(move |column| (row, column)))
    }
}

fn dot(left: &[DoubleDouble], right: &[DoubleDouble]) -> DoubleDouble {
    left.iter().zip(right).map(|(&a, &b)| a * b).sum()
}

impl Index<(usize, usize)> for Matrix {
    type Output = DoubleDouble;
    #[inline]
    fn index(&self, (row, column): (usize, usize)) -> &DoubleDouble {
        &self.entries[row * self.columns + column]
    }
}

impl IndexMut<(usize, usize)> for Matrix {
    #[inline]
    fn index_mut(&mut self, (row, column): (usize, usize)) -> &mut DoubleDouble {
        &mut self.entries[row * self.columns + column]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cholesky_recovers_the_inverse_hilbert_determinant() {
        // det of the 8 x 8 Hilbert matrix is 1 / 365356847125734485878112256000000 (OEIS A005249).
        let hilbert: Vec<Vec<DoubleDouble>> =
            (0..8usize).map(|row| (0..8usize).map(|column| DoubleDouble::ONE / DoubleDouble::from(row + column + 1)).collect()).collect();
        let factor = Matrix::from_rows(&hilbert).cholesky().expect("positive definite");
        let mut determinant = DoubleDouble::ONE;
        for index in 0..8 {
            determinant *= factor[(index, index)].square();
        }
        let product = determinant.value() * 365_356_847_125_734_485_878_112_256_000_000.0;
        assert!((product - 1.0).abs() < 1e-14, "{product}");
    }

    #[test]
    fn a_repeated_row_is_reported_with_its_rank() {
        let matrix = Matrix::from_rows(&[vec![1.0, 2.0, 1.0], vec![2.0, 5.0, 2.0], vec![1.0, 2.0, 1.0]]);
        assert_eq!(matrix.cholesky(), Err(NotPositiveDefinite { rank: 2 }));
    }

    #[test]
    fn dependent_columns_are_left_out_of_the_basis() {
        let pairs = Matrix::from_rows(&[vec![1.0, -1.0, 0.0], vec![0.0, 1.0, -1.0], vec![-1.0, 0.0, 1.0]]).transpose();
        let basis = pairs.orthonormal_columns();
        assert_eq!(basis.columns(), 2);
        let gram = basis.transpose().multiply(&basis);
        for (row, column) in gram.places() {
            let wanted = if row == column { 1.0 } else { 0.0 };
            assert!((gram[(row, column)] - DoubleDouble::from(wanted)).value().abs() < 1e-31);
        }
    }
}
