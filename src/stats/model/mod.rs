//! What the values come down to: counts, means and cross-products per between cell, and why a quantity is refused.

mod accumulate;
mod moments;
mod refusal;

pub use moments::{CellMoments, ErrorMatrix, Moments};
pub(crate) use moments::{first_dependent, rounding_noise, rounding_unit};
pub use refusal::Refusal;
