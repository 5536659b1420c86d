//! Every test as a hypothesis L B M = 0 on a set of cells.
//!
//! B holds the cell means (cells by occasions), L combines cells, M combines occasions with orthonormal columns. An
//! omnibus effect, a piece of an interaction, a simple effect or a trend differ only in L, M and the cells kept. With E the
//! centred cross-products pooled over those cells,
//! H = (LBM)' [L (X'X)^-1 L']^-1 (LBM) and E_M = M'EM
//! (Kirk 2013; Maxwell & Delaney 2004; Muller & Peterson 1984).

mod contrast;
mod correlations;
mod covariances;
mod effects;
mod largest_contrast;
mod multivariate;
mod normality;
mod outlying;
mod sphericity;
mod spread;
mod univariate;
mod welch_james;

pub use contrast::{FactorPart, Hypothesis, Part, Weighting, trend_weights};
pub use correlations::{OccasionErrors, contrast_correlations};
pub use covariances::{BoxM, box_m};
pub use effects::{Effect, ErrorStratum, crossed_effects, error_strata};
pub use largest_contrast::{LargestContrast, largest_contrast};
pub use multivariate::{Criterion, MultivariateTest, test_multivariate};
pub use normality::{ShapiroWilk, shapiro_wilk};
pub use outlying::{Distance, Sample, mahalanobis_distances, studentized_residuals};
pub use sphericity::{Correction, Epsilons, Mauchly, epsilons, mauchly};
pub use spread::{Centre, SpreadTest, equal_spread};
pub(crate) use univariate::pooled_strata;
pub use univariate::{ErrorTerm, Estimate, UnivariateTest, hypothesis_matrix, test_univariate};
pub use welch_james::{WelchJames, test_welch_james};
