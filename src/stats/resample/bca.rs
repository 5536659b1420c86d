//! The BCa interval from an estimate, its resamples and its jackknife: formulas only.

use super::refusal::Refusal;
use crate::stats::dist::normal;

/// Share of degenerate resamples up to which an interval is given.
const DEGENERATE_SHARE: f64 = 0.01;

/// A bias-corrected and accelerated interval, with everything that it was made of.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BcaInterval {
    /// The statistic of the data as they are.
    pub estimate: f64,
    /// Lower limit.
    pub lower: f64,
    /// Upper limit.
    pub upper: f64,
    /// Confidence level asked for.
    pub level: f64,
    /// Bias correction.
    pub z0: f64,
    /// Acceleration.
    pub acceleration: f64,
    /// Share of the resamples' distribution below the lower limit.
    pub lower_level: f64,
    /// Share below the upper limit.
    pub upper_level: f64,
    /// Resamples drawn.
    pub resamples: u64,
    /// Those of them in which the statistic was not a finite number; they were left out.
    pub degenerate: u64,
}

/// What an interval is made of.
#[derive(Clone, Copy, Debug)]
pub struct Replicates<'a> {
    /// The statistic of the data as they are.
    pub estimate: f64,
    /// The statistic of each resample.
    pub resamples: &'a [f64],
    /// For each arm, the statistic without each of its subjects in turn.
    pub jackknife: &'a [Vec<f64>],
}

impl Replicates<'_> {
    /// The BCa interval at confidence `level`: Efron, B. (1987), Better bootstrap confidence intervals, Journal of the
    /// American Statistical Association 82, 171-185.
    ///
    /// z0 is the normal quantile of the share of resamples below the estimate, ties counted half. The acceleration is the
    /// jackknife's within arms, a = sum u^3 / (6 (sum u^2)^(3/2)) with u = (n_j - 1) (mean of arm j's - each) / n_j. The limit
    /// at level p is resample number floor((B + 1) p) from below for p up to 1/2, from above beyond (Efron & Tibshirani 1993,
    /// section 12.5), without interpolation.
    ///
    /// # Errors
    /// An estimate without a value, more than 1 % degenerate resamples, all resamples on one side of the estimate, no
    /// acceleration, or levels beyond the outermost resamples.
    ///
    /// # Panics
    /// Where `level` is not between 0 and 1: a slip of the caller.
    pub fn interval(&self, level: f64) -> Result<BcaInterval, Refusal> {
        assert!(level > 0.0 && level < 1.0, "a confidence level between 0 and 1");
        if !self.estimate.is_finite() {
            return Err(Refusal::NoEstimate);
        }
        let mut finite: Vec<f64> = self.resamples.iter().copied().filter(|value| value.is_finite()).collect();
        let drawn = self.resamples.len() as u64;
        let degenerate = drawn - finite.len() as u64;
        if drawn == 0 {
            return Err(Refusal::NoneAsked);
        }
        if degenerate as f64 > DEGENERATE_SHARE * drawn as f64 {
            return Err(Refusal::Degenerate { degenerate, resamples: drawn });
        }
        let z0 = self.bias(&finite)?;
        let acceleration = self.acceleration()?;
        let tail = normal_quantile((1.0 - level) / 2.0)?;
        let lower = Limit::at(z0, acceleration, tail)?;
        let upper = Limit::at(z0, acceleration, -tail)?;
        let (first, second) = (lower.place(finite.len())?, upper.place(finite.len())?);
        let (lower_value, upper_value) = ranked(&mut finite, first.min(second), second.max(first));
        Ok(BcaInterval {
            estimate: self.estimate,
            lower: lower_value,
            upper: upper_value,
            level,
            z0,
            acceleration,
            lower_level: lower.below,
            upper_level: upper.below,
            resamples: drawn,
            degenerate,
        })
    }

    fn bias(&self, finite: &[f64]) -> Result<f64, Refusal> {
        // A resample of everybody once adds up in another order: its last bits may differ from the estimate's.
        let tie = 1e-12 * self.estimate.abs();
        let (low, high) = (self.estimate - tie, self.estimate + tie);
        let (mut below, mut above) = (0_usize, 0_usize);
        for &value in finite {
            below += usize::from(value < low);
            above += usize::from(value > high);
        }
        let doubled = finite.len() + below - above;
        if doubled == 0 || doubled == 2 * finite.len() {
            return Err(Refusal::OneSide);
        }
        normal_quantile(doubled as f64 / (2 * finite.len()) as f64)
    }

    fn acceleration(&self) -> Result<f64, Refusal> {
        let (mut squares, mut cubes, mut size) = (0.0, 0.0, 0.0_f64);
        for arm in self.jackknife {
            let count = arm.len() as f64;
            let mean = arm.iter().sum::<f64>() / count;
            for &without in arm {
                let influence = (count - 1.0) * (mean - without) / count;
                squares += influence * influence;
                cubes += influence * influence * influence;
                size = size.max(without.abs());
            }
        }
        let subjects: usize = self.jackknife.iter().map(Vec::len).sum();
        let rounding = 4.0 * f64::EPSILON * size * subjects as f64;
        if !squares.is_finite() || squares <= rounding * rounding {
            return Err(Refusal::NoAcceleration);
        }
        Ok(cubes / (6.0 * squares * squares.sqrt()))
    }
}

/// Values from which on a sample is taken to find where ranks may lie.
const SAMPLED_FROM: usize = 2_000;

/// Size of that sample, and how many of its places are left as room for its error.
const SAMPLE: usize = 256;
const ROOM: usize = 16;

/// The values at two ranks, counted from 0, `first` not above `second`. Reorders `values`.
fn ranked(values: &mut [f64], first: usize, second: usize) -> (f64, f64) {
    if let Some(found) = in_the_tails(values, first, second) {
        return found;
    }
    let (_, lower, above) = values.select_nth_unstable_by(first, f64::total_cmp);
    let lower = *lower;
    let upper = if second == first { lower } else { *above.select_nth_unstable_by(second - first - 1, f64::total_cmp).1 };
    (lower, upper)
}

/// As [`ranked`], looking only at the values below one cut and above another, which a sample suggests; nothing where the
/// ranks do not lie beyond them.
fn in_the_tails(values: &[f64], first: usize, second: usize) -> Option<(f64, f64)> {
    let count = values.len();
    if count < SAMPLED_FROM {
        return None;
    }
    let mut sample: Vec<f64> = values.iter().copied().step_by(count / SAMPLE).collect();
    sample.sort_unstable_by(f64::total_cmp);
    let place = |rank: usize| rank * sample.len() / count;
    let low = *sample.get(place(first) + ROOM)?;
    let high = *sample.get(place(second).checked_sub(ROOM)?)?;
    if low >= high {
        return None;
    }
    let mut below: Vec<f64> = values.iter().copied().filter(|value| *value <= low).collect();
    let mut above: Vec<f64> = values.iter().copied().filter(|value| *value >= high).collect();
    let from_high = (second + above.len()).checked_sub(count)?;
    if first >= below.len() {
        return None;
    }
    let lower = *below.select_nth_unstable_by(first, f64::total_cmp).1;
    Some((lower, *above.select_nth_unstable_by(from_high, f64::total_cmp).1))
}

/// A level as both of its tails: the shares below and above.
struct Limit {
    below: f64,
    above: f64,
}

impl Limit {
    fn at(z0: f64, acceleration: f64, z: f64) -> Result<Limit, Refusal> {
        let shifted = z0 + z;
        let scale = 1.0 - acceleration * shifted;
        if scale <= 0.0 {
            return Err(Refusal::NoAcceleration);
        }
        let corrected = z0 + shifted / scale;
        Ok(Limit { below: normal_tail(-corrected)?, above: normal_tail(corrected)? })
    }

    /// Place among the ordered resamples, counted from 0.
    fn place(&self, resamples: usize) -> Result<usize, Refusal> {
        // A whole number must not be missed by the last bit of the level.
        const ROUNDING: f64 = 1e-9;
        let from_end = |share: f64| ((resamples + 1) as f64 * share + ROUNDING).floor() as usize;
        let from_below = self.below <= self.above;
        match from_end(self.below.min(self.above)) {
            0 => Err(Refusal::LevelOutOfReach { resamples: resamples as u64 }),
            rank if from_below => Ok(rank - 1),
            rank => Ok(resamples - rank),
        }
    }
}

fn normal_quantile(p: f64) -> Result<f64, Refusal> {
    normal::quantile(p).map_err(probability)
}

fn normal_tail(z: f64) -> Result<f64, Refusal> {
    normal::upper_tail(z).map_err(probability)
}

fn probability(error: impl std::fmt::Display) -> Refusal {
    Refusal::Observed(crate::stats::model::Refusal::Probability { reason: error.to_string() })
}

#[cfg(test)]
mod tests {
    proptest::proptest! {
        /// Ranks found in the tails are those of the sorted values, ties included.
        #[test]
        fn ranks_are_those_of_the_sorted_values(
            values in proptest::collection::vec(-4_000_i32..4_000, 1..6_000), one in 0.0_f64..1.0, other in 0.0_f64..1.0, wide in proptest::bool::ANY,
        ) {
            let values: Vec<f64> = values.into_iter().map(|value| f64::from(if wide { value } else { value / 100 })).collect();
            let mut sorted = values.clone();
            sorted.sort_by(f64::total_cmp);
            let rank = |share: f64| (share * values.len() as f64) as usize;
            let (first, second) = (rank(one.min(other)), rank(one.max(other)));
            proptest::prop_assert_eq!(super::ranked(&mut values.clone(), first, second), (sorted[first], sorted[second]));
        }
    }
}
