//! Genz's separation of variables: a multivariate normal or t probability as an integral over a cube.
//!
//! With the correlation C C' and C lower triangular, the variables are taken one after the other, each conditional on
//! those before it, in the order of Gibson, Glasbey & Elston (1994): the least probable first (Genz & Bretz 2009,
//! *Computation of Multivariate Normal and t Probabilities*, sections 4.1 and 4.3). Where the correlation is singular
//! the dependent variables add their bounds to those of the last variable that they hang on (section 4.1.4).

use super::super::normal;
use super::region::Interval;
use super::sampler::ScaleSampler;

/// A variable with no more conditional variance than this is a combination of those before it.
const DEPENDENT: f64 = 1e-12;

/// A conditional variance below this cannot come from rounding: the matrix is not a correlation matrix.
const IMPOSSIBLE: f64 = -1e-8;

/// A factor's entry below this is rounding.
const NOTHING: f64 = 1e-7;

/// A conditional variance below zero was met.
#[derive(Clone, Copy, Debug)]
pub(super) struct NotACorrelation(pub f64);

/// One variable's bounds on the variable of its stage.
#[derive(Clone, Debug)]
struct Link {
    variable: usize,
    /// The stage variable's coefficient, other than zero.
    coefficient: f64,
    /// The coefficients of the stages before, divided by it.
    before: Vec<f64>,
}

/// The variables in order of integration: each stage has one independent variable and the dependent ones that end there.
#[derive(Clone, Debug)]
pub(super) struct Order {
    stages: Vec<Vec<Link>>,
}

impl Order {
    /// Orders the variables for `bounds`; `first`, where given, comes first whatever its probability.
    pub fn new(correlation: &[Vec<f64>], bounds: &[Interval], first: Option<usize>) -> Result<Self, NotACorrelation> {
        let k = bounds.len();
        let mut factor = vec![Vec::<f64>::new(); k];
        let mut waiting: Vec<usize> = (0..k).collect();
        let mut means: Vec<f64> = Vec::new();
        let mut chosen: Vec<usize> = Vec::new();
        let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| x * y).sum::<f64>();
        loop {
            let mut best: Option<(f64, usize, f64, Interval)> = None;
            for &i in &waiting {
                let variance = correlation[i][i] - dot(&factor[i], &factor[i]);
                if variance < IMPOSSIBLE {
                    return Err(NotACorrelation(variance));
                }
                if variance <= DEPENDENT {
                    continue;
                }
                let sd = variance.sqrt();
                let given = bounds[i].stretched(1.0 / sd, dot(&factor[i], &means) / sd);
                let inside = if chosen.is_empty() && first == Some(i) { -1.0 } else { given.split().inside };
                if best.is_none_or(|b| inside < b.0) {
                    best = Some((inside, i, sd, given));
                }
            }
            let Some((_, pivot, sd, given)) = best else { break };
            let row = factor[pivot].clone();
            for &i in &waiting {
                let entry = if i == pivot { sd } else { (correlation[i][pivot] - dot(&factor[i], &row)) / sd };
                factor[i].push(entry);
            }
            means.push(mean_inside(given));
            waiting.retain(|&i| i != pivot);
            chosen.push(pivot);
        }
        let link = |variable: usize, stage: usize| {
            let coefficient = factor[variable][stage];
            Link { variable, coefficient, before: factor[variable][..stage].iter().map(|x| x / coefficient).collect() }
        };
        let mut stages: Vec<Vec<Link>> = chosen.iter().enumerate().map(|(stage, &variable)| vec![link(variable, stage)]).collect();
        for variable in waiting {
            let last = factor[variable].iter().rposition(|x| x.abs() > NOTHING).unwrap_or(0);
            stages[last].push(link(variable, last));
        }
        Ok(Self { stages })
    }

    /// The order with the bounds that now hold.
    pub fn bind(&self, bounds: &[Interval]) -> Vec<Vec<Bound>> {
        let bind = |link: &Link| {
            let own = bounds[link.variable];
            let own = if link.coefficient < 0.0 { own.flipped() } else { own };
            Bound { interval: own.stretched(1.0 / link.coefficient.abs(), 0.0), before: link.before.clone() }
        };
        self.stages.iter().map(|stage| stage.iter().map(bind).collect()).collect()
    }
}

/// E(Z | Z in the interval), roughly where that is improbable.
fn mean_inside(interval: Interval) -> f64 {
    let inside = interval.split().inside;
    if inside > 1e-200 {
        (normal::density(interval.lower) - normal::density(interval.upper)) / inside
    } else if interval.lower > 0.0 {
        interval.lower
    } else {
        interval.upper
    }
}

/// A link with its bounds in the stage variable's unit.
#[derive(Clone, Debug)]
pub(super) struct Bound {
    interval: Interval,
    before: Vec<f64>,
}

/// An integral over the cube.
pub(super) struct Integrand {
    pub stages: Vec<Vec<Bound>>,
    /// None for normal variables.
    pub sampler: Option<ScaleSampler>,
    /// How often the integral counts.
    pub times: f64,
}

impl Integrand {
    /// The dimensions of the cube: the last variable's integral is known.
    pub fn dimensions(&self) -> usize {
        self.stages.len() - 1 + usize::from(self.sampler.is_some())
    }

    /// The integrand at a point of the cube; `drawn` is scratch space.
    pub fn at(&self, point: &[f64], drawn: &mut Vec<f64>) -> f64 {
        let (scale, counts, point) = match &self.sampler {
            Some(sampler) => {
                let (scale, counts) = sampler.at(point[0]);
                (scale, counts, &point[1..])
            }
            None => (1.0, 1.0, point),
        };
        drawn.clear();
        let mut inside = 1.0;
        let last = self.stages.len() - 1;
        for (index, stage) in self.stages.iter().enumerate() {
            let mut interval = Interval { lower: f64::NEG_INFINITY, upper: f64::INFINITY };
            for bound in stage {
                let shift: f64 = bound.before.iter().zip(drawn.iter()).map(|(c, y)| c * y).sum();
                interval = interval.meet(bound.interval.stretched(scale, shift));
            }
            let split = interval.split();
            inside *= split.inside;
            if inside <= 0.0 {
                break;
            }
            if index < last {
                let u = point[index];
                drawn.push(if interval.lower > 0.0 {
                    normal::quick_quantile_upper(split.above + (1.0 - u) * split.inside)
                } else {
                    -normal::quick_quantile_upper(split.below + u * split.inside)
                });
            }
        }
        counts * inside
    }
}
