//! Probabilities of the multivariate t and normal distributions: the largest of several correlated statistics, and
//! rectangles.
//!
//! T = Z / S with Z normal of mean 0 and the given correlations and S one common scale, df S^2 a chi-squared variable.
//! The route is chosen first, by the correlations alone ([`Method`]), then taken. Where several would do, the first of
//! these serves: a single variable; correlations that are products; all pairwise differences; the lattice rule.
//!
//! Probabilities outside a region are computed as such: a small one keeps its relative accuracy. Singular correlations
//! are welcome.

mod critical;
mod lattice;
mod method;
mod product;
mod region;
mod sampler;
mod separation;
mod structure;

pub use critical::CriticalValue;
pub use method::Method;

use self::method::Route;
use self::product::Wanted;
use self::region::{Interval, Region};
use super::{DistributionError, Domain};

const DOMAIN: Domain = Domain("multivariate t");

/// How near a lattice rule is to come, and how long it may try.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Accuracy {
    /// The error bound may not exceed this.
    pub absolute: f64,
    /// Nor this times the probability.
    pub relative: f64,
    /// Points of the largest lattice, over all its shifts.
    pub most_points: usize,
}

impl Default for Accuracy {
    /// 1e-5, a thousandth of the probability, and eight million points.
    fn default() -> Self {
        Self { absolute: 1e-5, relative: 1e-3, most_points: 8_000_000 }
    }
}

impl Accuracy {
    fn wanted(&self, p: f64) -> f64 {
        self.absolute.min(self.relative * p)
    }
}

/// A probability with what is known of its error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Probability {
    /// The probability.
    pub p: f64,
    /// A bound of its error: of the quadrature, or 3.5 standard errors of the lattice rule over its random shifts.
    pub error_bound: f64,
    /// True where quadrature gave it, whose error is of the order of rounding.
    pub exact: bool,
    /// False where the lattice rule reached its most points with an error bound above the accuracy asked for.
    pub reached: bool,
    /// How it was computed.
    pub method: Method,
}

/// A joint distribution of t (or normal) statistics that share their estimate of error.
///
/// ```
/// use aforesaid::stats::dist::multivariate_t::MultivariateT;
/// // Three treatments and a control of equal size: Dunnett's two-sided 5 % point at 10 df is 2.76.
/// let correlation = vec![vec![1.0, 0.5, 0.5], vec![0.5, 1.0, 0.5], vec![0.5, 0.5, 1.0]];
/// let joint = MultivariateT::new(&correlation, Some(10.0)).unwrap();
/// let critical = joint.critical_value_two_sided(0.05).unwrap();
/// assert!(critical.exact && (critical.value - 2.7590).abs() < 5e-5);
/// ```
#[derive(Clone, Debug, PartialEq)]
pub struct MultivariateT {
    correlation: Vec<Vec<f64>>,
    df: f64,
    accuracy: Accuracy,
}

impl MultivariateT {
    /// The distribution with these correlations and `df` degrees of freedom; none, or infinitely many, make it normal.
    ///
    /// # Errors
    /// No variable; rows of the wrong length; a diagonal other than 1, entries that are not symmetric (both within 1e-9)
    /// or not within -1 to 1; `df` not above 0. That a matrix has a negative eigenvalue shows only in the lattice rule,
    /// which then refuses it.
    pub fn new(correlation: &[Vec<f64>], df: Option<f64>) -> Result<Self, DistributionError> {
        /// Rounding that a matrix of correlations may show.
        const ROUNDING: f64 = 1e-9;
        let k = correlation.len();
        let df = df.unwrap_or(f64::INFINITY);
        DOMAIN.holds(k > 0, "the number of variables", 0.0, "at least 1")?;
        DOMAIN.holds(df > 0.0, "the degrees of freedom", df, "above 0 (infinity included)")?;
        for (i, row) in correlation.iter().enumerate() {
            DOMAIN.holds(row.len() == k, "the length of a row of correlations", row.len() as f64, "the number of rows")?;
            DOMAIN.holds((row[i] - 1.0).abs() <= ROUNDING, "a diagonal entry of the correlations", row[i], "1")?;
            for (j, &r) in row.iter().enumerate() {
                let fine = r.abs() <= 1.0 + ROUNDING && (r - correlation[j].get(i).copied().unwrap_or(r)).abs() <= ROUNDING;
                DOMAIN.holds(fine, "a correlation", r, "within -1 to 1, and the same in both halves of the matrix")?;
            }
        }
        let entry = |i: usize, j: usize| if i == j { 1.0 } else { correlation[i.max(j)][i.min(j)].clamp(-1.0, 1.0) };
        let correlation = (0..k).map(|i| (0..k).map(|j| entry(i, j)).collect()).collect();
        Ok(Self { correlation, df, accuracy: Accuracy::default() })
    }

    /// The same distribution, to be computed to another accuracy where the lattice rule serves.
    pub fn with_accuracy(self, accuracy: Accuracy) -> Self {
        Self { accuracy, ..self }
    }

    /// Number of variables.
    pub fn variables(&self) -> usize {
        self.correlation.len()
    }

    /// How probabilities of max |T| will be computed, which does not depend on the point.
    pub fn method_two_sided(&self) -> Method {
        self.route(&Sides::Two.bounds(self.variables(), 1.0)).method()
    }

    /// How probabilities of max T will be computed, which does not depend on the point.
    pub fn method_one_sided(&self) -> Method {
        self.route(&Sides::One.bounds(self.variables(), 1.0)).method()
    }

    /// P(max |T_i| > `c`).
    ///
    /// # Errors
    /// `c` not finite; correlations with a negative eigenvalue; a value out of reach.
    pub fn max_abs_upper_tail(&self, c: f64) -> Result<Probability, DistributionError> {
        DOMAIN.finite("the statistic", c)?;
        self.outside(&Sides::Two.bounds(self.variables(), c))
    }

    /// P(max T_i > `c`).
    ///
    /// # Errors
    /// As for [`max_abs_upper_tail`](Self::max_abs_upper_tail).
    pub fn max_upper_tail(&self, c: f64) -> Result<Probability, DistributionError> {
        DOMAIN.finite("the statistic", c)?;
        self.outside(&Sides::One.bounds(self.variables(), c))
    }

    /// P(lower_i <= T_i <= upper_i for all i); infinite bounds are none.
    ///
    /// # Errors
    /// Bounds of the wrong number, or not numbers; as for [`max_abs_upper_tail`](Self::max_abs_upper_tail).
    pub fn rectangle(&self, lower: &[f64], upper: &[f64]) -> Result<Probability, DistributionError> {
        let bounds = self.checked(lower, upper)?;
        self.route(&bounds).probability(self.df, Wanted::Inside, &self.accuracy)
    }

    /// The probability of the rectangle's complement: that at least one T_i lies outside its bounds.
    ///
    /// # Errors
    /// As for [`rectangle`](Self::rectangle).
    pub fn outside_rectangle(&self, lower: &[f64], upper: &[f64]) -> Result<Probability, DistributionError> {
        let bounds = self.checked(lower, upper)?;
        self.outside(&bounds)
    }

    fn checked(&self, lower: &[f64], upper: &[f64]) -> Result<Vec<Interval>, DistributionError> {
        for bounds in [lower, upper] {
            DOMAIN.holds(bounds.len() == self.variables(), "the number of bounds", bounds.len() as f64, "the number of variables")?;
            for &bound in bounds {
                DOMAIN.holds(!bound.is_nan(), "a bound", bound, "a number, or infinite")?;
            }
        }
        Ok(lower.iter().zip(upper).map(|(&lower, &upper)| Interval { lower, upper }).collect())
    }

    fn route(&self, bounds: &[Interval]) -> Route {
        Route::choose(Region::new(bounds, &self.correlation))
    }

    fn outside(&self, bounds: &[Interval]) -> Result<Probability, DistributionError> {
        self.route(bounds).probability(self.df, Wanted::Outside, &self.accuracy)
    }
}

/// P(max |T_i| > `c`) for T with these correlations and `df` degrees of freedom (none: normal), to the default accuracy.
///
/// # Errors
/// As for [`MultivariateT::new`] and [`MultivariateT::max_abs_upper_tail`].
pub fn max_abs_upper_tail(c: f64, correlation: &[Vec<f64>], df: Option<f64>) -> Result<Probability, DistributionError> {
    MultivariateT::new(correlation, df)?.max_abs_upper_tail(c)
}

/// P(max T_i > `c`), the one-sided companion of [`max_abs_upper_tail`].
///
/// # Errors
/// As for [`max_abs_upper_tail`].
pub fn max_upper_tail(c: f64, correlation: &[Vec<f64>], df: Option<f64>) -> Result<Probability, DistributionError> {
    MultivariateT::new(correlation, df)?.max_upper_tail(c)
}

/// The c with P(max |T_i| > c) = `p`, to the default accuracy.
///
/// # Errors
/// As for [`MultivariateT::new`] and [`MultivariateT::critical_value_two_sided`].
pub fn critical_value_two_sided(p: f64, correlation: &[Vec<f64>], df: Option<f64>) -> Result<CriticalValue, DistributionError> {
    MultivariateT::new(correlation, df)?.critical_value_two_sided(p)
}

/// The c with P(max T_i > c) = `p`, to the default accuracy.
///
/// # Errors
/// As for [`critical_value_two_sided`].
pub fn critical_value_one_sided(p: f64, correlation: &[Vec<f64>], df: Option<f64>) -> Result<CriticalValue, DistributionError> {
    MultivariateT::new(correlation, df)?.critical_value_one_sided(p)
}

/// Which sides of the statistics count.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Sides {
    One,
    Two,
}

impl Sides {
    fn bounds(self, variables: usize, c: f64) -> Vec<Interval> {
        let lower = if self == Sides::Two { -c } else { f64::NEG_INFINITY };
        vec![Interval { lower, upper: c }; variables]
    }
}
