//! One adjustment for a family from the joint distribution of its statistics over the same deals.
//!
//! Westfall, P. H. & Young, S. S. (1993), Resampling-based multiple testing, Wiley; the step-down counts as in Ge, Y.,
//! Dudoit, S. & Speed, T. P. (2003), Test 12, 1-77.

use super::engine::{Done, Tally};
use super::randomisation::{Counts, Deals, DealtData, Family, Question, RandomisationTest, Side, add, count, probability};
use super::refusal::Refusal;
use super::statistic::{LANES, Lanes};
use crate::stats::dist::{DistributionError, fisher, student};
use crate::stats::hypothesis::UnivariateTest;

/// What the statistics of different members are compared by.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scale {
    /// The statistics themselves, as all members have the same degrees of freedom: the largest t (|t| for two-sided
    /// members, t in the direction asked for one-sided ones) or F.
    Statistic,
    /// The tail areas of their F or t distributions, as the degrees of freedom (or the numbers of sides) differ: the
    /// smallest p. The tail areas only make the members comparable; the deals alone make the adjusted p.
    TailArea,
}

/// A member of a family.
#[derive(Clone, Debug, PartialEq)]
pub struct JointTest {
    /// Its test by itself.
    pub test: RandomisationTest,
    /// Adjusted p of the step-down procedure (Westfall & Young's algorithms 4.1 and 2.8), not below that of a member with
    /// a more extreme statistic.
    pub step_down: f64,
    /// Adjusted p of the single step: against the most extreme of all members.
    pub single_step: f64,
}

/// A family.
#[derive(Clone, Debug, PartialEq)]
pub struct WestfallYoung {
    /// The members in the order asked.
    pub members: Vec<Result<JointTest, Refusal>>,
    /// What they were compared by.
    pub scale: Scale,
}

/// The tests of [`randomisation`](super::randomisation()) with p adjusted for the family.
///
/// A member whose error variance is zero on the data as they are has no p, but its statistics in the other deals still
/// compete, as those of the least extreme member: it never helps the others. A member whose hypothesis can be tested on no
/// deal at all has no statistics that could compete.
///
/// # Errors
/// As for [`randomisation`](super::randomisation()).
pub fn westfall_young(data: &DealtData<'_>, questions: &[Question<'_>], deals: &Deals) -> Result<WestfallYoung, Refusal> {
    let mut family = Family::new(data, questions)?;
    let Some(engine) = family.engine(data)? else {
        let refused = family.observed.into_iter().map(|observed| Err(observed.err().unwrap_or(Refusal::NotOfTheDealtFactor)));
        return Ok(WestfallYoung { members: refused.collect(), scale: Scale::Statistic });
    };
    let counts = Counts::new(family.thresholds(&engine));
    let members: Vec<Option<Member>> = family
        .running
        .iter()
        .zip(&counts.thresholds)
        .map(|(&index, threshold)| {
            family.observed[index].as_ref().ok().map(|test| Member::new(test, threshold.side, threshold.observed)).transpose()
        })
        .collect::<Result<_, _>>()
        .map_err(|error| Refusal::Observed(crate::stats::model::Refusal::Probability { reason: error.to_string() }))?;
    let (ladder, scale) = Ladder::new(&members, &counts);
    let (joint, done) = engine.run(deals, Joint::new(counts, ladder))?;
    let adjusted = joint.adjusted(done);
    let observed = std::mem::take(&mut family.observed);
    let results = observed.into_iter().enumerate().map(|(index, observed)| {
        let test = observed?;
        let place = family.place(index);
        let (step_down, single_step) = adjusted[place];
        Ok(JointTest { test: joint.counts.test(place, &test, done), step_down, single_step })
    });
    Ok(WestfallYoung { members: results.collect(), scale })
}

/// What tail areas of a member need.
#[derive(Clone, Copy, Debug)]
struct Member {
    df1: f64,
    df2: f64,
    side: Side,
    /// Tail area of the observed statistic.
    p: f64,
}

impl Member {
    fn new(test: &UnivariateTest, side: Side, observed: f64) -> Result<Member, DistributionError> {
        let (df1, df2) = (test.df1, test.df2);
        let p = if observed.is_infinite() {
            0.0
        } else if side == Side::Both {
            fisher::upper_tail(observed, df1, df2)?
        } else {
            student::upper_tail(root(observed), df2)?
        };
        Ok(Member { df1, df2, side, p })
    }

    /// The oriented F whose tail area is `p`. What lies beyond the reach of the quantiles is reached by statistics without
    /// a value only, or by all.
    fn statistic(&self, p: f64) -> f64 {
        if p >= 1.0 {
            return f64::MIN;
        }
        let found = if self.side == Side::Both {
            fisher::quantile_upper(p, self.df1, self.df2)
        } else {
            student::quantile_upper(p, self.df2).map(|t| t * t.abs())
        };
        found.map_or(f64::INFINITY, |value| value - 1e-9 * value.abs())
    }

    fn same_law(&self, other: &Member) -> bool {
        (self.df1, self.df2, self.side == Side::Both) == (other.df1, other.df2, other.side == Side::Both)
    }
}

/// The square root with the sign kept.
fn root(signed_square: f64) -> f64 {
    if signed_square < 0.0 { -(-signed_square).sqrt() } else { signed_square.sqrt() }
}

/// From the most extreme member to the least, and what a competitor must reach at each rung.
#[derive(Clone)]
struct Ladder {
    /// Places of the members.
    order: Vec<usize>,
    /// Rungs that belong to members with an observed statistic; those after them only compete.
    ranked: usize,
    /// On one scale: what is to be reached at each rung. Else for each rung the thresholds of all places.
    least: Vec<f64>,
    common: bool,
}

impl Ladder {
    fn new(members: &[Option<Member>], counts: &Counts) -> (Ladder, Scale) {
        let known: Vec<usize> = (0..members.len()).filter(|&place| members[place].is_some()).collect();
        let unknown = (0..members.len()).filter(|&place| members[place].is_none());
        let member = |place: usize| members[place].as_ref();
        // Without an observed test the df are not known, so that only the statistic can be compared.
        let common = known.windows(2).all(|pair| member(pair[0]).zip(member(pair[1])).is_some_and(|(a, b)| a.same_law(b)));
        let mut order = known.clone();
        let observed = |place: usize| counts.thresholds[place].observed;
        let p = |place: usize| member(place).map_or(1.0, |member| member.p);
        if common {
            order.sort_by(|&a, &b| observed(b).total_cmp(&observed(a)));
        } else {
            order.sort_by(|&a, &b| p(a).total_cmp(&p(b)).then(observed(b).total_cmp(&observed(a))));
        }
        let ranked = order.len();
        order.extend(unknown);
        let least = if common {
            order[..ranked].iter().map(|&place| counts.thresholds[place].least).collect()
        } else {
            let rung = |&of: &usize| {
                let reach = move |place: usize| {
                    if place == of { counts.thresholds[of].least } else { member(place).map_or(f64::INFINITY, |m| m.statistic(p(of))) }
                };
                (0..members.len()).map(reach)
            };
            order[..ranked].iter().flat_map(rung).collect()
        };
        (Ladder { order, ranked, least, common }, if common { Scale::Statistic } else { Scale::TailArea })
    }
}

/// Counts for each hypothesis by itself and in the family.
#[derive(Clone)]
struct Joint {
    counts: Counts,
    ladder: Ladder,
    step_down: Vec<u64>,
    single_step: Vec<u64>,
}

impl Joint {
    fn new(counts: Counts, ladder: Ladder) -> Joint {
        let zeros = vec![0; ladder.ranked];
        Joint { counts, ladder, step_down: zeros.clone(), single_step: zeros }
    }

    /// Step-down and single-step p by place.
    fn adjusted(&self, done: Done) -> Vec<(f64, f64)> {
        let mut adjusted = vec![(1.0, 1.0); self.ladder.order.len()];
        let (mut down, mut single) = (0.0_f64, 0.0_f64);
        for (rung, &place) in self.ladder.order[..self.ladder.ranked].iter().enumerate() {
            down = down.max(probability(self.step_down[rung], done));
            single = single.max(probability(self.single_step[rung], done));
            adjusted[place] = (down, single);
        }
        adjusted
    }

    fn on_one_scale(&mut self, found: &[Lanes]) {
        let mut largest = [f64::NEG_INFINITY; LANES];
        for rung in (0..self.ladder.order.len()).rev() {
            for (largest, &value) in largest.iter_mut().zip(&found[self.ladder.order[rung]]) {
                *largest = if value > *largest { value } else { *largest };
            }
            if rung < self.ladder.ranked {
                self.step_down[rung] += count(&largest, self.ladder.least[rung]);
            }
        }
        for (total, &least) in self.single_step.iter_mut().zip(&self.ladder.least) {
            *total += count(&largest, least);
        }
    }

    fn by_tail_areas(&mut self, found: &[Lanes]) {
        let members = self.ladder.order.len();
        for (rung, least) in self.ladder.least.chunks_exact(members).enumerate() {
            let (mut later, mut anyone) = ([0.0; LANES], [0.0; LANES]);
            for (step, &place) in self.ladder.order.iter().enumerate() {
                let from = if step < rung { &mut anyone } else { &mut later };
                for (reached, &value) in from.iter_mut().zip(&found[place]) {
                    *reached = if value >= least[place] { 1.0 } else { *reached };
                }
            }
            self.step_down[rung] += count(&later, 1.0);
            for (anyone, later) in anyone.iter_mut().zip(&later) {
                *anyone += later;
            }
            self.single_step[rung] += count(&anyone, 1.0);
        }
    }
}

impl Tally for Joint {
    fn take(&mut self, found: &mut [Lanes], used: usize) {
        self.counts.take(found, used);
        if self.ladder.common { self.on_one_scale(found) } else { self.by_tail_areas(found) }
    }

    fn merge(&mut self, other: Joint) {
        self.counts.merge(other.counts);
        add(&mut self.step_down, &other.step_down);
        add(&mut self.single_step, &other.single_step);
    }
}
