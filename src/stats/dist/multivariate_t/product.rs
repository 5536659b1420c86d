//! Correlations of product form: given one common normal variable U the others are independent (Dunnett & Sobel 1955,
//! *Biometrika* 42:258), which leaves an integral over U and one over the scale.

use libm::{exp, expm1, log1p};

use super::super::normal;
use super::super::scale::{TailAndSlope, TooManyPoints, tail_over_scale};
use super::region::{Interval, Region};

/// Half the width, in u, around a peak of the inner integrand where it counts.
const HALF_WIDTH: f64 = 8.8;

/// No normal density is left beyond this u.
const LAST_U: f64 = 38.6;

/// A finer step than this is too slow: the loadings are too near to 1.
const FINEST_STEP: f64 = 0.005;

/// Which probability is wanted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Wanted {
    Inside,
    Outside,
}

/// Variables with the same loading and bounds.
struct Group {
    loading: f64,
    /// sqrt(1 - loading^2).
    rest: f64,
    bounds: Interval,
    count: f64,
}

/// A region whose correlations are products of loadings.
pub(super) struct Product {
    groups: Vec<Group>,
    step: f64,
    symmetric: bool,
}

impl Product {
    /// None where the loadings are too near to 1 for the quadrature.
    pub fn new(region: &Region, loadings: &[f64]) -> Option<Self> {
        let symmetric = region.bounds.iter().all(|interval| interval.symmetric());
        let mut groups: Vec<Group> = Vec::new();
        for (&bounds, &loading) in region.bounds.iter().zip(loadings) {
            let loading = if symmetric { loading.abs() } else { loading };
            // Loadings that are equal but for rounding share a group, to the accuracy that they have.
            match groups.iter_mut().find(|g| g.bounds == bounds && (g.loading - loading).abs() <= 4.0 * f64::EPSILON) {
                Some(group) => group.count += 1.0,
                None => groups.push(Group { loading, rest: ((1.0 - loading) * (1.0 + loading)).sqrt(), bounds, count: 1.0 }),
            }
        }
        // Off the real line the integrand grows by exp(y^2 / 2 times this) at most.
        let sharpness = 1.0 + groups.iter().map(|g| g.count * (g.loading / g.rest) * (g.loading / g.rest)).sum::<f64>();
        let step = 0.7 / sharpness.sqrt();
        (step >= FINEST_STEP).then_some(Self { groups, step, symmetric })
    }

    /// The probability that is wanted, with `df` degrees of freedom (or infinity).
    pub fn probability(&self, df: f64, wanted: Wanted) -> Result<f64, TooManyPoints> {
        let bounds = || self.groups.iter().map(|g| g.bounds);
        let c = match wanted {
            Wanted::Outside => bounds().map(Interval::room).fold(f64::INFINITY, f64::min),
            Wanted::Inside => bounds().map(Interval::distance).fold(0.0, f64::max),
        };
        let here = tail_over_scale(df, c, |s| TailAndSlope { tail: self.at(s, wanted), slope: 0.0 })?;
        Ok(here.tail.min(1.0))
    }

    /// The normal probability with all bounds `s` times as far out.
    fn at(&self, s: f64, wanted: Wanted) -> f64 {
        let (from, to) = self.stretch(s, wanted);
        let mut sum = 0.0;
        for index in from..=to {
            let u = index as f64 * self.step;
            let weight = if self.symmetric && index > 0 { 2.0 } else { 1.0 };
            sum += weight * normal::density(u) * self.given(u, s, wanted);
        }
        sum * self.step
    }

    fn given(&self, u: f64, s: f64, wanted: Wanted) -> f64 {
        let split = |g: &Group| g.bounds.stretched(s / g.rest, g.loading * u / g.rest).split();
        match wanted {
            Wanted::Outside => {
                let log_inside: f64 = self.groups.iter().map(|g| g.count * log1p(-split(g).outside().min(1.0))).sum();
                -expm1(log_inside)
            }
            Wanted::Inside => exp(self.groups.iter().map(|g| g.count * libm::log(split(g).inside)).sum()),
        }
    }

    /// The lattice indices between which the integrand counts.
    fn stretch(&self, s: f64, wanted: Wanted) -> (i64, i64) {
        let (mut low, mut high) = (0.0_f64, 0.0_f64);
        for g in &self.groups {
            for bound in [g.bounds.lower, g.bounds.upper] {
                // Near its bound a variable has U near loading times bound; all together may press U further.
                let peak = match wanted {
                    Wanted::Outside => g.loading * s * bound,
                    Wanted::Inside if g.loading != 0.0 => s * bound / g.loading,
                    Wanted::Inside => 0.0,
                };
                if peak.is_finite() {
                    low = low.min(peak);
                    high = high.max(peak);
                }
            }
        }
        let index = |u: f64| (u.clamp(-LAST_U, LAST_U) / self.step) as i64;
        let from = if self.symmetric { 0 } else { index(low - HALF_WIDTH) };
        (from, index(high + HALF_WIDTH))
    }
}
