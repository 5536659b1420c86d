//! Every test as a hypothesis L B M = 0 on a set of cells.
//!
//! B holds the cell means (cells by occasions), L combines cells, M combines occasions with orthonormal columns. An
//! omnibus effect, a piece of an interaction, a simple effect or a trend differ only in L, M and the cells kept. With E the
//! centred cross-products pooled over those cells,
//! H = (LBM)' [L (X'X)^-1 L']^-1 (LBM) and E_M = M'EM
//! (Kirk 2013; Maxwell & Delaney 2004; Muller & Peterson 1984).

mod contrast;
mod covariances;
mod effects;
mod normality;
mod sphericity;
mod spread;
mod univariate;

pub use contrast::{FactorPart, Hypothesis, Part, Weighting, trend_weights};
pub use covariances::{BoxM, box_m};
pub use effects::{Effect, ErrorStratum, crossed_effects, error_strata};
pub use normality::{ShapiroWilk, shapiro_wilk};
pub use sphericity::{Correction, Epsilons, Mauchly, epsilons, mauchly};
pub use spread::{Centre, SpreadTest, equal_spread};
pub use univariate::{ErrorTerm, Estimate, UnivariateTest, hypothesis_matrix, test_univariate};
