//! Small dense linear algebra in double-double arithmetic.
//!
//! The matrices of these designs are small (occasions by occasions), the data behind them may be many and badly
//! scaled. About 31 decimal digits in the small algebra leave a double's worth of correct digits after the
//! cancellations that offsets, nearly collinear occasions and determinants bring.

mod double_double;
mod eigen;
mod matrix;

pub use double_double::{DoubleDouble, Split, two_difference, two_product, two_product_split, two_sum};
pub use eigen::{Eigen, symmetric_eigen};
pub use matrix::{Matrix, NotPositiveDefinite};
