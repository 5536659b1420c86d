//! Eigenvalues and eigenvectors of symmetric matrices.

use super::{DoubleDouble, Matrix};

/// Off-diagonal entries below this share of the largest diagonal one are what the arithmetic leaves of zero.
const SETTLED: f64 = 1e-31;

/// More sweeps than any matrix has been seen to need.
const MOST_SWEEPS: usize = 60;

/// Eigenvalues, largest first, and the eigenvectors in the columns, in that order.
#[derive(Clone, Debug)]
pub struct Eigen {
    /// Eigenvalues, largest first.
    pub values: Vec<DoubleDouble>,
    /// Unit eigenvectors, one a column.
    pub vectors: Matrix,
}

/// The eigenvalues and eigenvectors of a symmetric matrix, by Jacobi's rotations (Golub & Van Loan, *Matrix Computations*,
/// 8.5), which give small eigenvalues as accurately as the entries allow.
///
/// ```
/// use aforesaid::stats::linear::{Matrix, symmetric_eigen};
/// let matrix = Matrix::from_rows(&[vec![2.0, 1.0], vec![1.0, 2.0]]);
/// let values: Vec<f64> = symmetric_eigen(&matrix).values.iter().map(|value| value.value()).collect();
/// assert_eq!(values, [3.0, 1.0]);
/// ```
pub fn symmetric_eigen(matrix: &Matrix) -> Eigen {
    let size = matrix.rows();
    debug_assert_eq!(size, matrix.columns());
    let mut left = matrix.clone();
    let mut vectors = Matrix::identity(size);
    for _ in 0..MOST_SWEEPS {
        let largest = (0..size).map(|index| left[(index, index)].value().abs()).fold(0.0_f64, f64::max);
        let mut settled = true;
        for row in 0..size {
            for column in row + 1..size {
                let off = left[(row, column)];
                let pair = (left[(row, row)].value() * left[(column, column)].value()).abs().sqrt();
                if off.value().abs() <= (SETTLED * pair).max(SETTLED * SETTLED * largest) {
                    continue;
                }
                settled = false;
                rotate(&mut left, &mut vectors, row, column);
            }
        }
        if settled {
            break;
        }
    }
    let mut order: Vec<usize> = (0..size).collect();
    order.sort_by(|&one, &other| left[(other, other)].value().total_cmp(&left[(one, one)].value()));
    let mut sorted = Matrix::zeros(size, size);
    for (place, &from) in order.iter().enumerate() {
        for row in 0..size {
            sorted[(row, place)] = vectors[(row, from)];
        }
    }
    Eigen { values: order.iter().map(|&index| left[(index, index)]).collect(), vectors: sorted }
}

/// One rotation, which makes the entry at (`row`, `column`) zero.
fn rotate(left: &mut Matrix, vectors: &mut Matrix, row: usize, column: usize) {
    let one = DoubleDouble::ONE;
    let off = left[(row, column)];
    let theta = (left[(column, column)] - left[(row, row)]) / (off + off);
    let sign = if theta.value() < 0.0 { -one } else { one };
    let tangent = sign / (theta.abs() + (theta.square() + one).sqrt());
    let cosine = one / (tangent.square() + one).sqrt();
    let sine = tangent * cosine;
    let size = left.rows();
    for index in 0..size {
        let (first, second) = (left[(index, row)], left[(index, column)]);
        left[(index, row)] = cosine * first - sine * second;
        left[(index, column)] = sine * first + cosine * second;
    }
    for index in 0..size {
        let (first, second) = (left[(row, index)], left[(column, index)]);
        left[(row, index)] = cosine * first - sine * second;
        left[(column, index)] = sine * first + cosine * second;
    }
    left[(row, column)] = DoubleDouble::ZERO;
    left[(column, row)] = DoubleDouble::ZERO;
    for index in 0..size {
        let (first, second) = (vectors[(index, row)], vectors[(index, column)]);
        vectors[(index, row)] = cosine * first - sine * second;
        vectors[(index, column)] = sine * first + cosine * second;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn second_differences_have_the_eigenvalues_of_theory() {
        // The tridiagonal matrix (-1, 2, -1) of size n has the eigenvalues 2 - 2 cos(k pi / (n + 1)) (common knowledge).
        let size = 6;
        let mut matrix = Matrix::zeros(size, size);
        for index in 0..size {
            matrix[(index, index)] = DoubleDouble::from(2.0);
            if index > 0 {
                matrix[(index, index - 1)] = -DoubleDouble::ONE;
                matrix[(index - 1, index)] = -DoubleDouble::ONE;
            }
        }
        let eigen = symmetric_eigen(&matrix);
        for (place, value) in eigen.values.iter().enumerate() {
            let wanted = 2.0 - 2.0 * libm::cos((size - place) as f64 * std::f64::consts::PI / (size + 1) as f64);
            assert!((value.value() - wanted).abs() < 1e-15, "{} {wanted}", value.value());
        }
        let back = eigen.vectors.transpose().multiply(&matrix.multiply(&eigen.vectors));
        for row in 0..size {
            for column in 0..size {
                let wanted = if row == column { eigen.values[row] } else { DoubleDouble::ZERO };
                assert!((back[(row, column)] - wanted).value().abs() < 1e-29);
            }
        }
    }
}
