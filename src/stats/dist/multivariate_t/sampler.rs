//! The scale of a t distribution as a function of a uniform variable, drawn where it matters.

use libm::exp;

use super::super::scale::{TooManyPoints, centre_and_step, density_at_one, log_density, sum_until};

/// Nodes of the table for each step of the quadrature rule.
const FINER: f64 = 6.0;

/// The table ends where less than this is left.
const NEGLIGIBLE: f64 = 1e-17;

/// A distribution of w = ln S given by a table: its distribution function F is a cubic between nodes. A point drawn
/// from F counts density / F', so that the table's own errors cancel.
pub(super) struct ScaleSampler {
    df: f64,
    constant: f64,
    first: f64,
    step: f64,
    cumulative: Vec<f64>,
    slopes: Vec<f64>,
}

impl ScaleSampler {
    /// Draws S with a density about that of the scale times `favoured`, which is to follow the integrand. `c` is as in
    /// [`centre_and_step`].
    pub fn new(df: f64, c: f64, favoured: impl Fn(f64) -> f64) -> Result<Self, TooManyPoints> {
        let (centre, coarse) = centre_and_step(c, df);
        let step = coarse / FINER;
        let constant = density_at_one(df);
        let mut nodes: Vec<(f64, f64)> = Vec::new();
        sum_until(NEGLIGIBLE, centre, step, |w| {
            let density = constant * exp(log_density(w, df)) * favoured(exp(w));
            nodes.push((w, density));
            density
        })?;
        nodes.sort_unstable_by(|a, b| a.0.total_cmp(&b.0));
        let density: Vec<f64> = nodes.iter().map(|node| node.1).collect();
        let at = |index: isize| usize::try_from(index).ok().and_then(|i| density.get(i)).copied().unwrap_or(0.0);
        let mut cumulative = vec![0.0];
        let mut sum = 0.0;
        for m in 0..density.len() as isize - 1 {
            // The cubic through four nodes.
            let area = step / 24.0 * (13.0 * (at(m) + at(m + 1)) - at(m - 1) - at(m + 2));
            sum += if area > 0.0 { area } else { 0.5 * step * (at(m) + at(m + 1)) };
            cumulative.push(sum);
        }
        let slopes = density.iter().map(|d| d / sum).collect();
        cumulative.iter_mut().for_each(|f| *f /= sum);
        Ok(Self { df, constant, first: nodes[0].0, step, cumulative, slopes })
    }

    /// The S at `u`, and what a point there counts.
    pub fn at(&self, u: f64) -> (f64, f64) {
        let after = self.cumulative.partition_point(|&f| f <= u).clamp(1, self.cumulative.len() - 1);
        let m = after - 1;
        let (from, to) = (self.cumulative[m], self.cumulative[after]);
        let (rise, left, right) = (to - from, self.step * self.slopes[m], self.step * self.slopes[after]);
        // The cubic from + t (left + t (b + t c)), with the ends' values and slopes.
        let (b, c) = (3.0 * rise - 2.0 * left - right, left + right - 2.0 * rise);
        let value = |t: f64| t * (left + t * (b + t * c));
        let slope = |t: f64| left + t * (2.0 * b + 3.0 * t * c);
        let wanted = u - from;
        let mut t = (wanted / rise).clamp(0.0, 1.0);
        for _ in 0..8 {
            let change = (value(t) - wanted) / slope(t);
            t = (t - change).clamp(0.0, 1.0);
            if change.abs() < 1e-12 {
                break;
            }
        }
        let w = self.first + (m as f64 + t) * self.step;
        let density = self.constant * exp(log_density(w, self.df));
        (exp(w), density * self.step / slope(t))
    }
}
