//! The choice of a route, and the way along it.

use std::f64::consts::SQRT_2;
use std::fmt;

use super::super::{DistributionError, normal, student, studentized_range};
use super::lattice::{self, Estimate};
use super::product::{Product, Wanted};
use super::region::{Interval, Region};
use super::sampler::ScaleSampler;
use super::separation::{Integrand, NotACorrelation, Order};
use super::structure::{means_compared, product_loadings};
use super::{Accuracy, DOMAIN, Probability};

/// How a probability is computed, with the reason in its words.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum Method {
    /// Nothing to compute: the region is everything, or nothing.
    Certain,
    /// One variable is left once copies are taken out: Student's t or the normal distribution.
    OneVariable,
    /// Every correlation is a product of two loadings: double quadrature (Dunnett & Sobel 1955).
    ProductCorrelation {
        /// The variables that differ.
        variables: usize,
    },
    /// All pairwise differences of means with one standard error: the studentized range.
    StudentizedRange {
        /// The means.
        means: usize,
    },
    /// Correlations of no such form: a randomised lattice rule (Genz & Bretz 2009).
    LatticeRule {
        /// The variables that differ.
        variables: usize,
    },
}

impl fmt::Display for Method {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Method::Certain => write!(out, "certain, since the bounds leave everything or nothing"),
            Method::OneVariable => write!(out, "the distribution of a single statistic, since all of them are copies of one"),
            Method::ProductCorrelation { variables } => {
                write!(
                    out,
                    "double quadrature, since the correlations of the {variables} statistics are products of loadings (Dunnett & Sobel 1955)"
                )
            }
            Method::StudentizedRange { means } => {
                write!(
                    out,
                    "the studentized range, since the statistics are all pairwise differences of {means} means with one standard error"
                )
            }
            Method::LatticeRule { variables } => write!(
                out,
                "a randomised lattice rule (Genz & Bretz 2009), since the correlations of the {variables} statistics have no form with an exact route"
            ),
        }
    }
}

/// The first lattice.
const FIRST_SIZE: usize = 1;

/// Relative error of the quadratures, with room: measured errors are below 1e-12.
const QUADRATURE_ERROR: f64 = 1e-10;

/// What a probability inside may be off by where it is a difference of others.
const INSIDE_ERROR: f64 = 1e-12;

const SCALE_TOO_WIDE: &str = "with so few degrees of freedom the quadrature would need too many points";

fn univariate_upper(x: f64, df: f64) -> Result<f64, DistributionError> {
    if x.is_infinite() {
        return Ok(if x > 0.0 { 0.0 } else { 1.0 });
    }
    if df.is_infinite() { normal::upper_tail(x) } else { student::upper_tail(x, df) }
}

fn univariate_outside(interval: Interval, df: f64) -> Result<f64, DistributionError> {
    Ok(univariate_upper(-interval.lower, df)? + univariate_upper(interval.upper, df)?)
}

/// P(lower < T < upper) of one variable, from the tails on the side of 0 where they are small.
fn univariate_inside(interval: Interval, df: f64) -> Result<f64, DistributionError> {
    let interval = if interval.upper < 0.0 { interval.flipped() } else { interval };
    if interval.lower > 0.0 {
        return Ok(univariate_upper(interval.lower, df)? - univariate_upper(interval.upper, df)?);
    }
    Ok(1.0 - univariate_outside(interval, df)?)
}

/// A region with the route that its correlations allow.
pub(super) struct Route {
    region: Region,
    kind: Kind,
}

enum Kind {
    Certain,
    OneVariable,
    Product(Product),
    Range { means: usize, c: f64 },
    Lattice,
}

impl Route {
    pub fn choose(region: Region) -> Self {
        let product = |region: &Region| Product::new(region, &product_loadings(&region.correlation)?);
        let kind = if region.variables() == 0 || region.empty() {
            Kind::Certain
        } else if region.variables() == 1 {
            Kind::OneVariable
        } else if let Some(product) = product(&region) {
            Kind::Product(product)
        } else if let (Some(c), Some(means)) = (region.common_symmetric(), means_compared(&region.correlation)) {
            Kind::Range { means, c }
        } else {
            Kind::Lattice
        };
        Self { region, kind }
    }

    pub fn method(&self) -> Method {
        let variables = self.region.variables();
        match self.kind {
            Kind::Certain => Method::Certain,
            Kind::OneVariable => Method::OneVariable,
            Kind::Product(_) => Method::ProductCorrelation { variables },
            Kind::Range { means, .. } => Method::StudentizedRange { means },
            Kind::Lattice => Method::LatticeRule { variables },
        }
    }

    pub fn probability(&self, df: f64, wanted: Wanted, accuracy: &Accuracy) -> Result<Probability, DistributionError> {
        let outside_only = |outside: f64| if wanted == Wanted::Outside { outside } else { 1.0 - outside };
        let p = match &self.kind {
            Kind::Certain => outside_only(if self.region.empty() { 1.0 } else { 0.0 }),
            Kind::OneVariable => match wanted {
                Wanted::Outside => univariate_outside(self.region.bounds[0], df)?,
                Wanted::Inside => univariate_inside(self.region.bounds[0], df)?,
            },
            Kind::Product(product) => product.probability(df, wanted).map_err(|_| DOMAIN.out_of_reach(SCALE_TOO_WIDE))?,
            Kind::Range { means, c } => outside_only(studentized_range::upper_tail(SQRT_2 * c, *means, df)?),
            Kind::Lattice => return self.by_lattice(df, wanted, accuracy),
        };
        let error_bound = QUADRATURE_ERROR * p + if wanted == Wanted::Inside { INSIDE_ERROR } else { 0.0 };
        Ok(Probability { p, error_bound, exact: true, reached: true, method: self.method() })
    }

    fn by_lattice(&self, df: f64, wanted: Wanted, accuracy: &Accuracy) -> Result<Probability, DistributionError> {
        let tails = self.region.bounds.iter().map(|&interval| univariate_outside(interval, df)).sum::<Result<f64, _>>()?;
        let complement = wanted == Wanted::Inside && tails < 1.0;
        let plan =
            if wanted == Wanted::Outside || complement { LatticePlan::outside(&self.region) } else { LatticePlan::inside(&self.region) }?;
        let parts = plan.bind(&self.region, df)?;
        let mut size = FIRST_SIZE;
        loop {
            let Estimate { value, bound } = parts.estimate(size);
            let p = if complement { 1.0 - value } else { value }.clamp(0.0, 1.0);
            let asked = accuracy.wanted(p);
            let reached = bound <= asked;
            match parts.next_size(size, asked / bound, accuracy.most_points) {
                Some(next) if !reached => size = next,
                _ => return Ok(Probability { p, error_bound: bound, exact: false, reached, method: self.method() }),
            }
        }
    }
}

/// Which integrals are taken, in which order of variables: fixed while a critical value is looked for.
///
/// The probability outside is summed over which variable is the first to lie outside, given that the others come later:
/// P(A_1) + P(A_2 and not A_1) + ... Drawing that variable from its own tail keeps the relative accuracy of small
/// probabilities, and the integrands are far smoother than that of the rectangle, large probabilities included.
pub(super) struct LatticePlan {
    /// The variables in the order of the sum.
    sequence: Vec<usize>,
    terms: Vec<Term>,
    /// The variable of that order whose tails are added as they are.
    alone: Option<usize>,
}

/// One integral of a sum.
struct Term {
    order: Order,
    event: Event,
    times: f64,
}

#[derive(Clone, Copy)]
enum Event {
    /// All variables inside.
    Inside,
    /// This variable above its upper bound, those before it inside.
    FirstAbove(usize),
    /// This variable below its lower bound, those before it inside.
    FirstBelow(usize),
}

impl Event {
    fn bounds(self, region: &Region) -> Vec<Interval> {
        match self {
            Event::Inside => region.bounds.clone(),
            Event::FirstAbove(i) => {
                let mut bounds = region.bounds[..=i].to_vec();
                bounds[i] = Interval { lower: bounds[i].upper, upper: f64::INFINITY };
                bounds
            }
            Event::FirstBelow(i) => {
                let mut bounds = region.bounds[..=i].to_vec();
                bounds[i] = Interval { lower: f64::NEG_INFINITY, upper: bounds[i].lower };
                bounds
            }
        }
    }

    fn term(self, region: &Region, times: f64) -> Result<Term, DistributionError> {
        let first = match self {
            Event::Inside => None,
            Event::FirstAbove(i) | Event::FirstBelow(i) => Some(i),
        };
        let order = Order::new(&region.correlation, &self.bounds(region), first).map_err(not_a_correlation)?;
        Ok(Term { order, event: self, times })
    }
}

impl LatticePlan {
    /// For the probability inside `region`.
    pub fn inside(region: &Region) -> Result<Self, DistributionError> {
        let sequence = (0..region.variables()).collect();
        Ok(Self { sequence, terms: vec![Event::Inside.term(region, 1.0)?], alone: None })
    }

    /// For the probability outside `region`.
    pub fn outside(region: &Region) -> Result<Self, DistributionError> {
        let sequence = apart(&region.correlation);
        let region = &region.arranged(&sequence);
        let mut terms = Vec::new();
        for (i, interval) in region.bounds.iter().enumerate().skip(1) {
            if region.bounds[..=i].iter().all(|b| b.symmetric()) {
                terms.push(Event::FirstAbove(i).term(region, 2.0)?);
                continue;
            }
            if interval.upper < f64::INFINITY {
                terms.push(Event::FirstAbove(i).term(region, 1.0)?);
            }
            if interval.lower > f64::NEG_INFINITY {
                terms.push(Event::FirstBelow(i).term(region, 1.0)?);
            }
        }
        Ok(Self { sequence, terms, alone: Some(0) })
    }

    /// The integrals with the bounds of `region`.
    pub fn bind(&self, region: &Region, df: f64) -> Result<Parts, DistributionError> {
        let region = &region.arranged(&self.sequence);
        let alone = self.alone.map_or(Ok(0.0), |i| univariate_outside(region.bounds[i], df))?;
        let integrands = self
            .terms
            .iter()
            .map(|term| {
                let bounds = term.event.bounds(region);
                let sampler = if df.is_infinite() { None } else { Some(sampler(term.event, region, &bounds, df)?) };
                Ok(Integrand { stages: term.order.bind(&bounds), sampler, times: term.times })
            })
            .collect::<Result<Vec<_>, DistributionError>>()?;
        Ok(Parts { alone, integrands })
    }
}

/// The variables in an order where each is as little correlated as can be with those before it, which makes the
/// integrands smoother: bounds up to twelve times smaller were measured, and none much larger.
fn apart(correlation: &[Vec<f64>]) -> Vec<usize> {
    let mut closest: Vec<f64> = vec![0.0; correlation.len()];
    let mut waiting: Vec<usize> = (0..correlation.len()).collect();
    let mut sequence = Vec::with_capacity(correlation.len());
    while let Some(&next) = waiting.iter().min_by(|&&a, &&b| closest[a].total_cmp(&closest[b])) {
        sequence.push(next);
        waiting.retain(|&i| i != next);
        for &i in &waiting {
            closest[i] = closest[i].max(correlation[i][next].abs());
        }
    }
    sequence
}

fn not_a_correlation(NotACorrelation(variance): NotACorrelation) -> DistributionError {
    DistributionError::OutOfDomain {
        distribution: DOMAIN.0,
        argument: "a conditional variance under these correlations",
        value: variance,
        expected: "not below 0: no statistics have such correlations",
    }
}

/// The scale drawn in proportion to what is known of the event's probability at each scale.
fn sampler(event: Event, region: &Region, bounds: &[Interval], df: f64) -> Result<ScaleSampler, DistributionError> {
    let sampler = match event {
        Event::Inside => ScaleSampler::new(df, region.distance(), |s| {
            bounds.iter().map(|interval| interval.stretched(s, 0.0).split().inside).fold(1.0, f64::min)
        }),
        Event::FirstAbove(i) | Event::FirstBelow(i) => {
            let own = bounds[i];
            ScaleSampler::new(df, own.distance(), |s| own.stretched(s, 0.0).split().inside)
        }
    };
    sampler.map_err(|_| DOMAIN.out_of_reach(SCALE_TOO_WIDE))
}

/// A probability as a sum of integrals.
pub(super) struct Parts {
    alone: f64,
    integrands: Vec<Integrand>,
}

impl Parts {
    pub fn estimate(&self, size: usize) -> Estimate {
        let sum = lattice::estimate(&self.integrands, size);
        Estimate { value: self.alone + sum.value, ..sum }
    }

    /// The lattice that should bring the error down to `less` of that of `size`, or the largest one that is allowed;
    /// none where `size` is that.
    pub fn next_size(&self, size: usize, less: f64, most_points: usize) -> Option<usize> {
        let fits = |size: &usize| self.integrands.len() * lattice::points(*size) <= most_points;
        (size + 1..=lattice::size_for(size, less)).rev().find(fits)
    }
}
