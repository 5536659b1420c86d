//! The bootstrap over subjects: whole subjects are drawn again with replacement, within arms.

use std::borrow::Cow;
use std::num::NonZero;

use super::bca::{BcaInterval, Replicates};
use super::engine::in_threads;
use super::random::Stream;
use super::refusal::Refusal;
use super::sums::Table;

/// Resamples that share a stream; part of what a key means, never to be changed.
const BLOCK: u64 = 256;

/// Fewest subjects of an arm: one left out must leave two, so that there is a variance.
const FEWEST: usize = 3;

/// How often to draw, and the level of the interval.
#[derive(Clone, Copy, Debug)]
pub struct Resamples {
    /// Resamples to draw.
    pub asked: u64,
    /// Confidence level, as .95.
    pub level: f64,
    /// What the draws hang on, with the numbers of subjects and nothing else.
    pub key: [u8; 32],
    /// Threads to share them; the result is the same for any number.
    pub threads: NonZero<usize>,
}

/// Means and cross-products of one arm in one resample.
#[derive(Clone, Debug, PartialEq)]
pub struct ArmMoments {
    /// Number of subjects.
    pub subjects: f64,
    /// Mean at each occasion.
    pub mean: Vec<f64>,
    /// Centred squares or cross-products, not divided by anything: one for each occasion, or the lower triangle by rows.
    products: Vec<f64>,
}

/// What is kept of the spread in each resample.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Spread {
    /// Variances only, which is faster.
    Variances,
    /// Covariances of all occasions too.
    Covariances,
}

/// Values of subjects in arms.
#[derive(Clone, Copy, Debug)]
pub struct ArmRows<'a> {
    /// One row of `occasions` values for each subject.
    pub values: &'a [f64],
    /// Number of occasions.
    pub occasions: usize,
    /// The arm of each subject, counted from 0.
    pub arm: &'a [u32],
    /// Number of arms.
    pub arms: usize,
    /// Who takes part; everybody where none.
    pub kept: Option<&'a [bool]>,
}

impl ArmMoments {
    /// Variance at an occasion, over n - 1.
    #[inline]
    pub fn variance(&self, occasion: usize) -> f64 {
        let place = if self.products.len() == self.mean.len() { occasion } else { occasion * (occasion + 3) / 2 };
        // Rounding may leave a variance of zero just below zero.
        self.products[place].max(0.0) / (self.subjects - 1.0)
    }

    /// Covariance of two occasions, over n - 1.
    ///
    /// # Panics
    /// Where [`Spread::Variances`] were asked for: a slip of the caller.
    #[inline]
    pub fn covariance(&self, first: usize, second: usize) -> f64 {
        assert!(self.products.len() > self.mean.len() || self.mean.len() == 1, "covariances were asked for");
        let (low, high) = if first < second { (first, second) } else { (second, first) };
        self.products[high * (high + 1) / 2 + low] / (self.subjects - 1.0)
    }

    /// Standard deviation at an occasion, over n - 1.
    #[inline]
    pub fn standard_deviation(&self, occasion: usize) -> f64 {
        self.variance(occasion).sqrt()
    }
}

/// Statistics of moments: writes one number for each statistic.
pub type OfMoments<'a> = dyn Fn(&[ArmMoments], &mut [f64]) + Sync + 'a;

/// Statistics of rows: gets the numbers of the rows drawn in each arm, writes one number for each statistic.
pub type OfRows<'a> = dyn Fn(&[Vec<u32>], &mut [f64]) + Sync + 'a;

/// BCa intervals of `count` statistics that depend on the arms' means, variances and covariances.
///
/// The result does not depend on the number of threads, but on the order of the subjects.
///
/// ```
/// use aforesaid::stats::resample::{ArmMoments, ArmRows, Resamples, Spread, bca_of_moments};
/// let values = [3.0, 5.0, 4.0, 7.0, 6.0, 6.5, 2.0, 4.5, 5.0, 9.0, 4.0, 5.5]; // invented
/// let rows = ArmRows { values: &values, occasions: 2, arm: &[0; 6], arms: 1, kept: None };
/// let options = Resamples { asked: 2_000, level: 0.95, key: [0; 32], threads: 1.try_into().unwrap() };
/// let change = |arms: &[ArmMoments], out: &mut [f64]| out[0] = arms[0].mean[1] - arms[0].mean[0];
/// let intervals = bca_of_moments(&rows, Spread::Variances, 1, &change, &options).unwrap();
/// let interval = intervals[0].as_ref().unwrap();
/// assert!(interval.lower < interval.estimate && interval.estimate < interval.upper);
/// ```
///
/// # Errors
/// Of the whole: no resamples asked for, an arm of fewer than three subjects. Of a statistic: those of
/// [`Replicates::interval`].
///
/// # Panics
/// Where lengths do not agree or an arm is out of range: slips of the caller.
pub fn bca_of_moments(
    rows: &ArmRows<'_>,
    spread: Spread,
    count: usize,
    statistics: &OfMoments<'_>,
    options: &Resamples,
) -> Result<Vec<Result<BcaInterval, Refusal>>, Refusal> {
    assert_eq!(rows.values.len(), rows.arm.len() * rows.occasions, "one row of values for each subject");
    let mut subjects = vec![Vec::new(); rows.arms];
    for (subject, &arm) in rows.arm.iter().enumerate().filter(|(subject, _)| rows.kept.is_none_or(|kept| kept[*subject])) {
        subjects[arm as usize].push(subject);
    }
    let sizes: Vec<usize> = subjects.iter().map(Vec::len).collect();
    let arms = subjects.iter().map(|subjects| ArmSums::new(rows, spread, subjects)).collect();
    intervals(&sizes, count, options, &|| MomentSampler::new(&arms, statistics))
}

/// BCa intervals of `count` statistics that need the rows themselves, as trimmed means or ranks do: `sizes` gives the
/// number of subjects of each arm, and `statistics` gets, for each arm, the numbers (from 0, below its size) of those drawn.
///
/// # Errors
/// As for [`bca_of_moments`].
pub fn bca_of_rows(
    sizes: &[usize],
    count: usize,
    statistics: &OfRows<'_>,
    options: &Resamples,
) -> Result<Vec<Result<BcaInterval, Refusal>>, Refusal> {
    intervals(sizes, count, options, &|| RowSampler::new(sizes, statistics))
}

/// One thread's way to the statistics.
trait Sampler {
    /// Of everybody once.
    fn everybody(&mut self, out: &mut [f64]);
    /// Without one subject of one arm.
    fn without(&mut self, arm: usize, subject: usize, out: &mut [f64]);
    /// Of the subjects drawn in each arm.
    fn drawn(&mut self, picks: &mut [Vec<u32>], out: &mut [f64]);
}

fn intervals<S: Sampler>(
    sizes: &[usize],
    count: usize,
    options: &Resamples,
    sampler: &(dyn Fn() -> S + Sync),
) -> Result<Vec<Result<BcaInterval, Refusal>>, Refusal> {
    if options.asked == 0 {
        return Err(Refusal::NoneAsked);
    }
    if let Some(arm) = sizes.iter().position(|&size| size < FEWEST) {
        return Err(Refusal::FewSubjects { arm, subjects: sizes[arm] });
    }
    let mut estimates = vec![0.0; count];
    let mut first = sampler();
    first.everybody(&mut estimates);
    let mut jackknife = vec![Vec::with_capacity(sizes.len()); count];
    let mut out = vec![0.0; count];
    for (arm, &size) in sizes.iter().enumerate() {
        jackknife.iter_mut().for_each(|of_statistic| of_statistic.push(Vec::with_capacity(size)));
        for subject in 0..size {
            first.without(arm, subject, &mut out);
            for (of_statistic, &value) in jackknife.iter_mut().zip(&out) {
                of_statistic[arm].push(value);
            }
        }
    }
    let blocks = options.asked.div_ceil(BLOCK);
    let threads = (options.threads.get() as u64).min(blocks);
    let part = |thread: u64| {
        let (from, to) = (blocks * thread / threads, blocks * (thread + 1) / threads);
        draw(sizes, count, options, from..to, &mut sampler())
    };
    let parts = in_threads(threads, part);
    let share = |statistic: usize| {
        let resamples: Cow<'_, [f64]> = match &parts[..] {
            [only] => Cow::Borrowed(&only[statistic]),
            several => Cow::Owned(several.iter().map(|part| &part[statistic][..]).collect::<Vec<_>>().concat()),
        };
        Replicates { estimate: estimates[statistic], resamples: &resamples, jackknife: &jackknife[statistic] }.interval(options.level)
    };
    let groups = in_threads(threads, |thread| {
        let edge = |thread: u64| count * thread as usize / threads as usize;
        (edge(thread)..edge(thread + 1)).map(share).collect::<Vec<_>>()
    });
    Ok(groups.into_iter().flatten().collect())
}

/// The resamples of these blocks, statistic by statistic.
fn draw(sizes: &[usize], count: usize, options: &Resamples, blocks: std::ops::Range<u64>, sampler: &mut impl Sampler) -> Vec<Vec<f64>> {
    let mut picks: Vec<Vec<u32>> = sizes.iter().map(|&size| vec![0; size]).collect();
    let mut out = vec![0.0; count];
    let mut found = vec![Vec::with_capacity(((blocks.end - blocks.start) * BLOCK) as usize); count];
    for block in blocks {
        let mut stream = Stream::new(options.key, block);
        for _ in 0..BLOCK.min(options.asked - block * BLOCK) {
            for picks in &mut picks {
                draw_again(picks, &mut stream);
            }
            sampler.drawn(&mut picks, &mut out);
            for (found, &value) in found.iter_mut().zip(&out) {
                found.push(value);
            }
        }
    }
    found
}

/// As many of an arm's subjects as it has, with replacement.
fn draw_again(picks: &mut [u32], stream: &mut Stream) {
    match picks.len() {
        ..=32 => fill::<11>(picks, stream),
        33..=128 => fill::<8>(picks, stream),
        129..=256 => fill::<7>(picks, stream),
        257..=2_048 => fill::<5>(picks, stream),
        2_049..=16_384 => fill::<4>(picks, stream),
        16_385..=0x1000_0000 => fill::<2>(picks, stream),
        _ => fill::<1>(picks, stream),
    }
}

#[inline(always)]
fn fill<const K: usize>(picks: &mut [u32], stream: &mut Stream) {
    let bound = picks.len() as u32;
    let (together, single) = picks.as_chunks_mut::<K>();
    for picks in together {
        *picks = stream.below_each([bound; K]);
    }
    // One word for those over as well: what is drawn beyond them is left.
    let over = single.len();
    if over > 0 {
        single.copy_from_slice(&stream.below_each([bound; K])[..over]);
    }
}

/// One arm's rows of centred values and their products, and the sums of all.
struct ArmSums {
    occasions: usize,
    subjects: usize,
    centre: Vec<f64>,
    table: Table,
    everybody: Vec<f64>,
}

impl ArmSums {
    fn new(rows: &ArmRows<'_>, spread: Spread, subjects: &[usize]) -> ArmSums {
        let occasions = rows.occasions;
        let count = subjects.len() as f64;
        let value = |subject: usize, occasion: usize| rows.values[subject * occasions + occasion];
        let centre: Vec<f64> =
            (0..occasions).map(|occasion| subjects.iter().map(|&subject| value(subject, occasion) / count).sum()).collect();
        let columns = occasions
            + match spread {
                Spread::Variances => occasions,
                Spread::Covariances => occasions * (occasions + 1) / 2,
            };
        let table = Table::new(subjects.len(), columns, |number, row| {
            let (centred, products) = row.split_at_mut(occasions);
            for (occasion, centred) in centred.iter_mut().enumerate() {
                *centred = value(subjects[number], occasion) - centre[occasion];
            }
            let pairs = (0..occasions).flat_map(|high| (0..=high).map(move |low| (high, low)));
            let wanted = pairs.filter(|(high, low)| spread == Spread::Covariances || high == low);
            for (product, (high, low)) in products.iter_mut().zip(wanted) {
                *product = centred[high] * centred[low];
            }
        });
        let mut everybody = table.room();
        for row in 0..subjects.len() {
            table.add_row(row, &mut everybody);
        }
        ArmSums { occasions, subjects: subjects.len(), centre, table, everybody }
    }

    #[inline]
    fn moments(&self, subjects: usize, sums: &[f64], moments: &mut ArmMoments) {
        let count = subjects as f64;
        moments.subjects = count;
        let inverse = 1.0 / count;
        let (sum, products) = sums.split_at(self.occasions);
        for ((mean, centre), sum) in moments.mean.iter_mut().zip(&self.centre).zip(sum) {
            *mean = centre + sum * inverse;
        }
        if moments.products.len() == self.occasions {
            for ((out, product), sum) in moments.products.iter_mut().zip(products).zip(sum) {
                *out = product - sum * inverse * sum;
            }
            return;
        }
        let mut place = 0;
        for (high, scaled) in sum.iter().map(|sum| sum * inverse).enumerate() {
            let until = place + high + 1;
            for ((out, product), low) in moments.products[place..until].iter_mut().zip(&products[place..until]).zip(sum) {
                *out = product - scaled * low;
            }
            place = until;
        }
    }
}

struct MomentSampler<'a> {
    arms: &'a Vec<ArmSums>,
    statistics: &'a OfMoments<'a>,
    sums: Vec<f64>,
    moments: Vec<ArmMoments>,
}

impl<'a> MomentSampler<'a> {
    fn new(arms: &'a Vec<ArmSums>, statistics: &'a OfMoments<'a>) -> MomentSampler<'a> {
        let mut moments = Vec::with_capacity(arms.len());
        for arm in arms {
            let products = vec![0.0; arm.table.columns() - arm.occasions];
            let mut of_arm = ArmMoments { subjects: 0.0, mean: vec![0.0; arm.occasions], products };
            arm.moments(arm.subjects, &arm.everybody, &mut of_arm);
            moments.push(of_arm);
        }
        let sums = arms.first().map_or(Vec::new(), |arm| arm.table.room());
        MomentSampler { arms, statistics, sums, moments }
    }
}

impl Sampler for MomentSampler<'_> {
    fn everybody(&mut self, out: &mut [f64]) {
        (self.statistics)(&self.moments, out);
    }

    fn without(&mut self, arm: usize, subject: usize, out: &mut [f64]) {
        let of_arm = &self.arms[arm];
        for (column, (sum, everybody)) in self.sums.iter_mut().zip(&of_arm.everybody).enumerate().take(of_arm.table.columns()) {
            *sum = everybody - of_arm.table.entry(subject, column);
        }
        of_arm.moments(of_arm.subjects - 1, &self.sums, &mut self.moments[arm]);
        (self.statistics)(&self.moments, out);
        of_arm.moments(of_arm.subjects, &of_arm.everybody, &mut self.moments[arm]);
    }

    fn drawn(&mut self, picks: &mut [Vec<u32>], out: &mut [f64]) {
        for ((arm, picks), moments) in self.arms.iter().zip(picks).zip(&mut self.moments) {
            arm.table.sum(picks, &mut self.sums);
            arm.moments(arm.subjects, &self.sums, moments);
        }
        (self.statistics)(&self.moments, out);
    }
}

struct RowSampler<'a> {
    statistics: &'a OfRows<'a>,
    everybody: Vec<Vec<u32>>,
}

impl<'a> RowSampler<'a> {
    fn new(sizes: &[usize], statistics: &'a OfRows<'a>) -> RowSampler<'a> {
        RowSampler { statistics, everybody: sizes.iter().map(|&size| (0..size as u32).collect()).collect() }
    }
}

impl Sampler for RowSampler<'_> {
    fn everybody(&mut self, out: &mut [f64]) {
        (self.statistics)(&self.everybody, out);
    }

    fn without(&mut self, arm: usize, subject: usize, out: &mut [f64]) {
        let row = self.everybody[arm].remove(subject);
        (self.statistics)(&self.everybody, out);
        self.everybody[arm].insert(subject, row);
    }

    fn drawn(&mut self, picks: &mut [Vec<u32>], out: &mut [f64]) {
        (self.statistics)(picks, out);
    }
}
