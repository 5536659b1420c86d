//! Critical values of the largest statistic.

use libm::log;

use super::super::{DistributionError, normal, student};
use super::method::{LatticePlan, Method};
use super::product::Wanted;
use super::region::Region;
use super::{DOMAIN, MultivariateT, Probability, Sides};

/// The point that the largest statistic exceeds with a given probability.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CriticalValue {
    /// The point.
    pub value: f64,
    /// A bound of its error.
    pub error_bound: f64,
    /// True where quadrature gave it.
    pub exact: bool,
    /// False where the lattice rule reached its most points before the probability was as accurate as asked.
    pub reached: bool,
    /// How it was computed.
    pub method: Method,
}

/// The search stops at steps of this size, relative or absolute.
const EXACT_STEP: f64 = 1e-12;

/// The lattice rule's own errors are far above this.
const LATTICE_STEP: f64 = 1e-8;

/// The first lattice of a search.
const FIRST_SIZE: usize = 2;

impl MultivariateT {
    /// The c with P(max |T_i| > c) = `p`: the factor of simultaneous two-sided intervals at confidence 1 - `p`.
    ///
    /// Where the lattice rule serves, the same points are used for every c of the search, so that the probability is a
    /// smooth function of c, and the error bound of c is that of the probability over its slope.
    ///
    /// # Errors
    /// `p` not inside 0 to 1; correlations with a negative eigenvalue; a value out of reach.
    pub fn critical_value_two_sided(&self, p: f64) -> Result<CriticalValue, DistributionError> {
        self.critical(p, Sides::Two)
    }

    /// The c with P(max T_i > c) = `p`, the one-sided companion of
    /// [`critical_value_two_sided`](Self::critical_value_two_sided).
    ///
    /// # Errors
    /// As there.
    pub fn critical_value_one_sided(&self, p: f64) -> Result<CriticalValue, DistributionError> {
        self.critical(p, Sides::One)
    }

    fn critical(&self, p: f64, sides: Sides) -> Result<CriticalValue, DistributionError> {
        DOMAIN.probability("the tail", p)?;
        let quantile = |tail: f64| {
            if self.df.is_infinite() { normal::quantile_upper(tail) } else { student::quantile_upper(tail, self.df) }
        };
        let each = if sides == Sides::Two { 0.5 * p } else { p };
        // One statistic alone, and Bonferroni's bound.
        let bracket = (quantile(each)?, quantile(each / self.variables() as f64)?);
        let bounds = |c: f64| sides.bounds(self.variables(), c);
        let method = self.route(&bounds(bracket.1)).method();
        match method {
            Method::OneVariable => Ok(exact(bracket.0, method)),
            Method::LatticeRule { .. } => self.by_lattice(p, sides, bracket, method),
            _ => {
                let excess = |c: f64| {
                    let Probability { p: here, .. } = self.route(&bounds(c)).probability(self.df, Wanted::Outside, &self.accuracy)?;
                    Ok(log(here / p))
                };
                let (value, _) = root(excess, bracket, EXACT_STEP)?;
                Ok(exact(value, method))
            }
        }
    }

    fn by_lattice(&self, p: f64, sides: Sides, whole: (f64, f64), method: Method) -> Result<CriticalValue, DistributionError> {
        let region = |c: f64| Region::new(&sides.bounds(self.variables(), c), &self.correlation);
        let plan = LatticePlan::outside(&region(whole.1))?;
        let asked = self.accuracy.wanted(p);
        let mut size = FIRST_SIZE;
        let mut bracket = whole;
        loop {
            let mut last = None;
            let excess = |c: f64| {
                let parts = plan.bind(&region(c), self.df)?;
                let estimate = parts.estimate(size);
                let next = parts.next_size(size, asked / estimate.bound, self.accuracy.most_points);
                last = Some((estimate.bound, next));
                Ok(log(estimate.value / p))
            };
            let (value, slope) = root(excess, bracket, LATTICE_STEP)?;
            let Some((bound, next)) = last else { return Err(unsettled()) };
            let error_bound = bound / (p * slope.abs());
            let reached = bound <= asked;
            match next {
                Some(next) if !reached => size = next,
                _ => return Ok(CriticalValue { value, error_bound, exact: false, reached, method }),
            }
            bracket = (value - 2.0 * error_bound, value + 2.0 * error_bound);
        }
    }
}

fn exact(value: f64, method: Method) -> CriticalValue {
    CriticalValue { value, error_bound: 1e-10 * value.abs().max(1.0), exact: true, reached: true, method }
}

fn unsettled() -> DistributionError {
    DOMAIN.out_of_reach("the search for the critical value did not settle")
}

/// The root of a falling function with its slope there: the secant method inside a bracket (the Illinois algorithm). The
/// bracket is widened where it does not hold the root.
fn root(mut f: impl FnMut(f64) -> Result<f64, DistributionError>, bracket: (f64, f64), step: f64) -> Result<(f64, f64), DistributionError> {
    let (mut left, mut right) = bracket;
    let (mut at_left, mut at_right) = (f(left)?, f(right)?);
    let mut widening = (right - left).max(1e-3);
    for _ in 0..60 {
        if at_left < 0.0 {
            (right, at_right) = (left, at_left);
            left -= widening;
            at_left = f(left)?;
        } else if at_right > 0.0 {
            (left, at_left) = (right, at_right);
            right += widening;
            at_right = f(right)?;
        } else {
            break;
        }
        widening *= 2.0;
    }
    if at_left < 0.0 || at_right > 0.0 || left >= right {
        return Err(unsettled());
    }
    let mut slope = (at_right - at_left) / (right - left);
    let mut before = (left, at_left);
    let mut kept_left = None;
    for _ in 0..200 {
        let next = left - at_left * (right - left) / (at_right - at_left);
        let next = if next > left && next < right { next } else { 0.5 * (left + right) };
        let value = f(next)?;
        if next != before.0 && value != before.1 {
            slope = (value - before.1) / (next - before.0);
        }
        // What a secant step from here would still change.
        let change = value / slope;
        if value == 0.0 || change.abs() <= step * next.abs().max(1.0) || right - left <= step * next.abs().max(1.0) {
            return Ok((if value == 0.0 { next } else { (next - change).clamp(left, right) }, slope));
        }
        before = (next, value);
        if value > 0.0 {
            (left, at_left) = (next, value);
            if kept_left == Some(false) {
                at_right *= 0.5;
            }
            kept_left = Some(false);
        } else {
            (right, at_right) = (next, value);
            if kept_left == Some(true) {
                at_left *= 0.5;
            }
            kept_left = Some(true);
        }
    }
    Err(unsettled())
}
