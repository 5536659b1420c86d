//! Randomisation tests: the labels that chance dealt are dealt again, the values stay.
//!
//! Fisher 1935; Pitman 1937; Edgington & Onghena 2007. With random deals p = (1 + count) / (1 + deals) (Phipson & Smyth
//! 2010); where all deals are listed the data as they are stand among them and p = count / deals.

use std::num::NonZero;

use super::engine::{Done, Engine, Tally};
use super::refusal::Refusal;
use super::statistic::{LANES, Lanes};
use crate::stats::hypothesis::{ErrorTerm, Hypothesis, UnivariateTest, test_univariate};
use crate::stats::model::Moments;

/// The values, and what was dealt to whom. Slices have one entry for each subject.
#[derive(Clone, Copy, Debug)]
pub struct DealtData<'a> {
    /// One row of `occasions` values for each subject.
    pub values: &'a [f64],
    /// Number of occasions, b.
    pub occasions: usize,
    /// Who takes part; everybody where none.
    pub kept: Option<&'a [bool]>,
    /// The label that each subject was dealt: its combination of the randomised factors.
    pub label: &'a [u32],
    /// Its combination of the other between factors; all zero where there is none.
    pub rest: &'a [u32],
    /// The between cell of each label (outer) with each combination of the others (inner).
    pub cell_of: &'a [Vec<u32>],
    /// The stratum within which each subject was dealt its label; one stratum where none.
    pub strata: Option<&'a [u32]>,
    /// Who is dealt to again: for a piece of two arms the subjects of those two. The others keep their label. Everybody
    /// where none.
    pub eligible: Option<&'a [bool]>,
}

impl DealtData<'_> {
    /// The between cell of a subject as it was dealt.
    pub(super) fn cell(&self, subject: usize) -> usize {
        self.cell_of[self.label[subject] as usize][self.rest[subject] as usize] as usize
    }

    /// Mean of these subjects at each occasion.
    pub(super) fn means(&self, subjects: &[usize]) -> Vec<f64> {
        let value = |subject: usize, occasion: usize| self.values[subject * self.occasions + occasion];
        let mean = |occasion: usize| {
            let count = subjects.len() as f64;
            let first = subjects.iter().map(|&subject| value(subject, occasion) / count).sum::<f64>();
            first + subjects.iter().map(|&subject| value(subject, occasion) - first).sum::<f64>() / count
        };
        (0..self.occasions).map(mean).collect()
    }

    pub(super) fn moments(&self, cells: usize) -> Result<Moments, Refusal> {
        let cell: Vec<u32> = (0..self.label.len()).map(|subject| self.cell(subject) as u32).collect();
        Ok(Moments::new(self.values, self.occasions, &cell, cells, self.kept)?)
    }
}

/// Which deals speak against the hypothesis.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    /// Those with a statistic at least as far from zero.
    Both,
    /// Those with an estimate at least as high.
    Upper,
    /// Those with an estimate at least as low.
    Lower,
}

/// A hypothesis to be tested by dealing again.
#[derive(Clone, Copy, Debug)]
pub struct Question<'a> {
    /// L and M.
    pub hypothesis: &'a Hypothesis,
    /// The error of its F.
    pub error: ErrorTerm,
    /// The side, [`Side::Both`] unless it is one contrast.
    pub side: Side,
}

/// How often to deal.
#[derive(Clone, Copy, Debug)]
pub struct Deals {
    /// Deals asked for; where no more exist, all are listed instead.
    pub asked: u64,
    /// What the random deals hang on, with their number and nothing else.
    pub key: [u8; 32],
    /// Threads to share them; the result is the same for any number.
    pub threads: NonZero<usize>,
}

/// A statistic of the data as they are.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Statistic {
    /// t of a single contrast, with the sign of its estimate.
    T(f64),
    /// F of several, without epsilon.
    F(f64),
}

/// A randomisation test.
#[derive(Clone, Debug, PartialEq)]
pub struct RandomisationTest {
    /// The statistic of the data as they are.
    pub statistic: Statistic,
    /// The p-value.
    pub p: f64,
    /// Deals whose statistic is at least as large, ties within a relative 1e-9 included; where all deals are listed the
    /// data as they are count too.
    pub at_least_as_large: u64,
    /// Deals done.
    pub deals: u64,
    /// Whether they were all that there are.
    pub exact: bool,
    /// Standard error that p has because deals were drawn at random, sqrt(p (1 - p) / deals); zero where all were listed.
    pub monte_carlo_error: f64,
    /// Deals in which the statistic has no value (no error variance, or a cell without subjects). They are among those
    /// counted as at least as large, so that they can only raise p.
    pub without_value: u64,
}

/// Tests each hypothesis by itself, all on the same deals.
///
/// The statistic is the univariate F without epsilon, or the signed t of a single contrast, computed on each deal as
/// [`test_univariate`] does on the data; whole subjects are dealt to, so that the correlation between occasions stays.
/// Random deals come in blocks of 1,024, block i from stream i of the key.
///
/// ```
/// use aforesaid::stats::hypothesis::{ErrorTerm, FactorPart, Hypothesis, Part, Weighting};
/// use aforesaid::stats::resample::{DealtData, Deals, Question, Side, randomisation};
/// let arms = [FactorPart::new(2, Part::Whole)];
/// let hypothesis = Hypothesis::new(&arms, &[FactorPart::new(1, Part::Whole)], Weighting::Equal);
/// # let hypothesis = Hypothesis::new(&arms, &[FactorPart::new(1, Part::Hold(0))], Weighting::Equal);
/// let hypothesis = hypothesis.unwrap();
/// let data = DealtData {
///     values: &[1.0, 2.0, 3.0, 7.0, 8.0, 9.0], // invented
///     occasions: 1,
///     kept: None,
///     label: &[0, 0, 0, 1, 1, 1],
///     rest: &[0; 6],
///     cell_of: &[vec![0], vec![1]],
///     strata: None,
///     eligible: None,
/// };
/// let question = Question { hypothesis: &hypothesis, error: ErrorTerm::Own, side: Side::Both };
/// let deals = Deals { asked: 1_000, key: [0; 32], threads: 1.try_into().unwrap() };
/// let tests = randomisation(&data, &[question], &deals).unwrap();
/// let test = tests[0].as_ref().unwrap();
/// // Of the 20 deals, the one at hand and its mirror image are furthest from zero.
/// assert_eq!((test.p, test.deals, test.exact), (0.1, 20, true));
/// ```
///
/// # Errors
/// Of the whole: nothing to deal, no deals asked for, values that [`Moments::new`] refuses. Of a hypothesis: it does not
/// compare the labels dealt, a side for several contrasts, or a statistic without a value on the data as they are.
///
/// # Panics
/// Where lengths do not agree or a label or cell is out of range: slips of the caller.
pub fn randomisation(
    data: &DealtData<'_>,
    questions: &[Question<'_>],
    deals: &Deals,
) -> Result<Vec<Result<RandomisationTest, Refusal>>, Refusal> {
    let mut family = Family::new(data, questions)?;
    let Some(engine) = family.engine(data)? else {
        return Ok(family.observed.into_iter().map(|observed| Err(observed.err().unwrap_or(Refusal::NotOfTheDealtFactor))).collect());
    };
    let (counts, done) = engine.run(deals, Counts::new(family.thresholds(&engine)))?;
    let observed = std::mem::take(&mut family.observed);
    let results = observed.into_iter().enumerate().map(|(index, observed)| {
        let test = observed?;
        let place = family.place(index);
        Ok(counts.test(place, &test, done))
    });
    Ok(results.collect())
}

/// The questions that can be put to the deals, with what the data as they are answer.
pub(super) struct Family<'a> {
    questions: Vec<Question<'a>>,
    cells: usize,
    /// For each question.
    pub observed: Vec<Result<UnivariateTest, Refusal>>,
    /// The questions whose statistics are computed on the deals.
    pub running: Vec<usize>,
}

impl<'a> Family<'a> {
    pub fn new(data: &DealtData<'_>, questions: &[Question<'a>]) -> Result<Family<'a>, Refusal> {
        let subjects = data.label.len();
        assert_eq!(data.values.len(), subjects * data.occasions, "one row of values for each subject");
        assert_eq!(data.rest.len(), subjects, "one combination of the other factors for each subject");
        let cells = questions.first().map_or(0, |question| question.hypothesis.between().columns());
        let moments = data.moments(cells.max(1))?;
        let (mut observed, mut running) = (Vec::new(), Vec::new());
        for (index, question) in questions.iter().enumerate() {
            let asked = check(data, question);
            let test = asked.clone().and_then(|()| Ok(test_univariate(&moments, question.hypothesis, question.error)?));
            // One without error variance as observed may have some in other deals: it stays in the family.
            if matches!(&test, Ok(_) | Err(Refusal::Observed(crate::stats::model::Refusal::NoErrorVariance))) {
                running.push(index);
            }
            observed.push(test);
        }
        Ok(Family { questions: questions.to_vec(), cells, observed, running })
    }

    /// The engine for those running; none where none is.
    pub fn engine<'d>(&self, data: &DealtData<'d>) -> Result<Option<Engine<'d>>, Refusal> {
        if self.running.is_empty() {
            return Ok(None);
        }
        let questions: Vec<_> = self.running().map(|question| (question.hypothesis, question.error)).collect();
        Engine::new(data, &questions, self.cells).map(Some)
    }

    fn running(&self) -> impl Iterator<Item = &Question<'a>> {
        self.running.iter().map(|&index| &self.questions[index])
    }

    /// Where a question stands among those running.
    pub fn place(&self, index: usize) -> usize {
        self.running.partition_point(|&other| other < index)
    }

    /// What a deal's statistic must reach to count, for those running.
    pub fn thresholds(&self, engine: &Engine<'_>) -> Vec<Threshold> {
        let observed = engine.observed();
        self.running().zip(observed).map(|(question, observed)| Threshold::new(question, observed)).collect()
    }
}

/// Whether dealing can answer the question at all.
fn check(data: &DealtData<'_>, question: &Question<'_>) -> Result<(), Refusal> {
    let hypothesis = question.hypothesis;
    let df = hypothesis.rank() * hypothesis.contrasts();
    if question.side != Side::Both && df > 1 {
        return Err(Refusal::DirectionOfSeveral { df });
    }
    let dealt: Vec<usize> = (0..data.label.len())
        .filter(|&subject| data.kept.is_none_or(|kept| kept[subject]) && data.eligible.is_none_or(|eligible| eligible[subject]))
        .collect();
    let mut labels: Vec<u32> = dealt.iter().map(|&subject| data.label[subject]).collect();
    labels.sort_unstable();
    labels.dedup();
    let between = hypothesis.between();
    // Rows of L have length 1; a weight below this is what is left of an exact zero.
    const NEGLIGIBLE: f64 = 1e-12;
    let mut compares = false;
    for row in 0..hypothesis.rank() {
        let weights: Vec<f64> = between.row(row).iter().map(|weight| weight.value()).collect();
        if weights.iter().sum::<f64>().abs() > NEGLIGIBLE {
            return Err(Refusal::NotOfTheDealtFactor);
        }
        for &subject in &dealt {
            let weight = |label: u32| weights[data.cell_of[label as usize][data.rest[subject] as usize] as usize];
            compares |= labels.iter().any(|&label| (weight(label) - weight(labels[0])).abs() > NEGLIGIBLE);
        }
    }
    if compares { Ok(()) } else { Err(Refusal::NotOfTheDealtFactor) }
}

/// What a deal's statistic must reach to count as at least as large.
#[derive(Clone, Copy, Debug)]
pub(super) struct Threshold {
    pub side: Side,
    /// The observed F, negative where it speaks for the hypothesis.
    pub observed: f64,
    /// The same less the tolerance for ties.
    pub least: f64,
}

impl Threshold {
    fn new(question: &Question<'_>, found: f64) -> Threshold {
        const RELATIVE: f64 = 1e-9;
        // A t of zero has no size that a tolerance could be relative to.
        const ABSOLUTE: f64 = 1e-12;
        let observed = orient(question.side, found);
        let single = question.hypothesis.rank() * question.hypothesis.contrasts() == 1;
        let root = if observed < 0.0 { -(-observed).sqrt() } else { observed.sqrt() };
        // For one contrast the tolerance is relative to t, else to F.
        let relative = if single { RELATIVE } else { RELATIVE / 2.0 };
        let mut least = if root.is_infinite() { root } else { root - relative * root.abs() - ABSOLUTE };
        if question.side == Side::Both {
            least = least.max(0.0);
        }
        Threshold { side: question.side, observed, least: least * least.abs() }
    }
}

/// F so that larger always speaks more against the hypothesis; infinity, which stands for "no value", stays.
#[inline(always)]
fn orient(side: Side, found: f64) -> f64 {
    match side {
        Side::Both => found.abs(),
        Side::Upper => found,
        Side::Lower if found == f64::INFINITY => found,
        Side::Lower => -found,
    }
}

/// Counts for each hypothesis by itself.
#[derive(Clone)]
pub(super) struct Counts {
    pub thresholds: Vec<Threshold>,
    at_least_as_large: Vec<u64>,
    without_value: Vec<u64>,
}

impl Counts {
    pub fn new(thresholds: Vec<Threshold>) -> Counts {
        let zeros = vec![0; thresholds.len()];
        Counts { thresholds, at_least_as_large: zeros.clone(), without_value: zeros }
    }

    /// The result of the hypothesis at a place.
    pub fn test(&self, place: usize, test: &UnivariateTest, done: Done) -> RandomisationTest {
        let count = self.at_least_as_large[place];
        let p = probability(count, done);
        RandomisationTest {
            statistic: test.estimate.map_or(Statistic::F(test.f), |estimate| Statistic::T(estimate.t)),
            p,
            at_least_as_large: count,
            deals: done.deals,
            exact: done.exact,
            monte_carlo_error: if done.exact { 0.0 } else { (p * (1.0 - p) / done.deals as f64).sqrt() },
            without_value: self.without_value[place],
        }
    }
}

/// p from a count of deals.
pub(super) fn probability(count: u64, done: Done) -> f64 {
    if done.exact { count as f64 / done.deals as f64 } else { (1.0 + count as f64) / (1.0 + done.deals as f64) }
}

impl Tally for Counts {
    /// Also turns the statistics so that larger speaks against the hypothesis, and those of unused lanes to minus infinity.
    fn take(&mut self, found: &mut [Lanes], used: usize) {
        for (index, lanes) in found.iter_mut().enumerate() {
            let threshold = self.thresholds[index];
            match threshold.side {
                Side::Both => lanes.iter_mut().for_each(|value| *value = value.abs()),
                side => lanes.iter_mut().for_each(|value| *value = orient(side, *value)),
            }
            lanes[used..].fill(f64::NEG_INFINITY);
            self.at_least_as_large[index] += count(lanes, threshold.least);
            self.without_value[index] += count(lanes, f64::INFINITY);
        }
    }

    fn merge(&mut self, other: Counts) {
        add(&mut self.at_least_as_large, &other.at_least_as_large);
        add(&mut self.without_value, &other.without_value);
    }
}

/// How many reach `least`.
#[inline(always)]
pub(super) fn count(lanes: &[f64; LANES], least: f64) -> u64 {
    lanes.iter().map(|&value| u64::from(value >= least)).sum()
}

pub(super) fn add(counts: &mut [u64], more: &[u64]) {
    for (count, more) in counts.iter_mut().zip(more) {
        *count += more;
    }
}
