//! Rectangles of jointly normal or t variables, brought to their least form.

use super::super::normal;

/// Variables whose correlation is this near to 1 or -1 are one variable.
const ONE_VARIABLE: f64 = 1e-13;

/// The bounds of one variable, infinite where it has none.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Interval {
    pub lower: f64,
    pub upper: f64,
}

impl Interval {
    pub fn symmetric(self) -> bool {
        self.lower == -self.upper
    }

    pub fn flipped(self) -> Self {
        Self { lower: -self.upper, upper: -self.lower }
    }

    /// The interval with a shift taken off after stretching.
    pub fn stretched(self, factor: f64, shift: f64) -> Self {
        Self { lower: factor * self.lower - shift, upper: factor * self.upper - shift }
    }

    pub fn meet(self, other: Self) -> Self {
        Self { lower: self.lower.max(other.lower), upper: self.upper.min(other.upper) }
    }

    /// The normal probabilities below, inside and above, each without cancellation.
    pub fn split(self) -> Split {
        let (below, above) = (normal::tail(-self.lower), normal::tail(self.upper));
        let inside = if self.lower >= self.upper {
            0.0
        } else if self.lower > 0.0 {
            normal::tail(self.lower) - above
        } else if self.upper < 0.0 {
            normal::tail(-self.upper) - below
        } else {
            1.0 - below - above
        };
        Split { below, inside, above }
    }

    /// How far 0 lies from the complement: below that many standard deviations nothing is outside.
    pub fn room(self) -> f64 {
        self.upper.min(-self.lower).max(0.0)
    }

    /// How far 0 lies from the interval.
    pub fn distance(self) -> f64 {
        self.lower.max(-self.upper).max(0.0)
    }
}

/// See [`Interval::split`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Split {
    pub below: f64,
    pub inside: f64,
    pub above: f64,
}

impl Split {
    pub fn outside(self) -> f64 {
        if self.inside > 0.0 { self.below + self.above } else { 1.0 }
    }
}

/// The bounds of correlated variables.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Region {
    pub bounds: Vec<Interval>,
    pub correlation: Vec<Vec<f64>>,
}

impl Region {
    /// Leaves out variables without bounds and joins those that are the same up to their sign.
    pub fn new(bounds: &[Interval], correlation: &[Vec<f64>]) -> Self {
        let mut kept: Vec<(usize, Interval)> = Vec::new();
        for (i, &own) in bounds.iter().enumerate() {
            if own.lower == f64::NEG_INFINITY && own.upper == f64::INFINITY {
                continue;
            }
            let twin = kept.iter_mut().find(|(j, _)| 1.0 - correlation[i][*j].abs() <= ONE_VARIABLE);
            match twin {
                Some((j, theirs)) => *theirs = theirs.meet(if correlation[i][*j] > 0.0 { own } else { own.flipped() }),
                None => kept.push((i, own)),
            }
        }
        let correlation = kept.iter().map(|(i, _)| kept.iter().map(|(j, _)| correlation[*i][*j]).collect()).collect();
        Self { bounds: kept.into_iter().map(|(_, interval)| interval).collect(), correlation }
    }

    /// The same region with its variables in another order.
    pub fn arranged(&self, sequence: &[usize]) -> Self {
        let correlation = sequence.iter().map(|&i| sequence.iter().map(|&j| self.correlation[i][j]).collect()).collect();
        Self { bounds: sequence.iter().map(|&i| self.bounds[i]).collect(), correlation }
    }

    pub fn variables(&self) -> usize {
        self.bounds.len()
    }

    /// Whether nothing can lie inside.
    pub fn empty(&self) -> bool {
        self.bounds.iter().any(|interval| interval.lower >= interval.upper)
    }

    /// The c where every bound is -c to c.
    pub fn common_symmetric(&self) -> Option<f64> {
        let first = self.bounds.first()?;
        self.bounds.iter().all(|interval| interval.symmetric() && interval.upper == first.upper).then_some(first.upper)
    }

    /// The largest distance of any variable.
    pub fn distance(&self) -> f64 {
        self.bounds.iter().map(|interval| interval.distance()).fold(0.0, f64::max)
    }
}
