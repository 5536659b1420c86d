//! The loop over deals: labels dealt, cell sums taken, statistics handed on.

use super::deals::{Scheme, Shuffle};
use super::random::Stream;
use super::randomisation::{Deals, DealtData};
use super::refusal::Refusal;
use super::statistic::{LANES, Lanes, Statistics};
use super::sums::Table;
use crate::stats::hypothesis::{ErrorTerm, Hypothesis};

/// Deals that share a stream; part of what a key means, never to be changed.
const BLOCK: u64 = 1024;

/// What is done with the statistics of the deals; counts only, so that the order of merging does not matter.
pub(super) trait Tally: Clone + Send + Sync {
    /// Takes in the first `used` of the deals side by side.
    fn take(&mut self, found: &mut [Lanes], used: usize);
    /// Adds the counts of another part of the deals.
    fn merge(&mut self, other: Self);
}

/// Deals done, and whether they were all there are.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Done {
    pub deals: u64,
    pub exact: bool,
}

/// Everything that stays the same from deal to deal.
#[derive(Clone)]
pub(super) struct Engine<'a> {
    table: Table,
    statistics: Statistics,
    scheme: Scheme,
    /// Cells by label, for each combination of the factors that are not dealt.
    cell_of: &'a [Vec<u32>],
    /// Of each eligible subject, its combination of the factors that are not dealt.
    rest: Vec<u32>,
    /// Sums and numbers of those who are not dealt, by cells.
    start: Vec<f64>,
    start_counts: Vec<f64>,
    /// With one such combination: [`start`](Self::start) with everybody of a stratum put down to its largest label.
    plain: Option<Vec<f64>>,
    room: usize,
}

/// A pick of everybody that the mask lets through.
fn keeps(mask: Option<&[bool]>, subject: usize) -> bool {
    mask.is_none_or(|mask| mask[subject])
}

impl<'a> Engine<'a> {
    pub fn new(data: &DealtData<'a>, questions: &[(&Hypothesis, ErrorTerm)], cells: usize) -> Result<Engine<'a>, Refusal> {
        let kept: Vec<usize> = (0..data.label.len()).filter(|&subject| keeps(data.kept, subject)).collect();
        let (dealt, fixed): (Vec<usize>, Vec<usize>) = kept.iter().partition(|&&subject| keeps(data.eligible, subject));
        let pick = |from: &[u32]| -> Vec<u32> { dealt.iter().map(|&subject| from[subject]).collect() };
        let scheme = Scheme { label: pick(data.label), strata: data.strata.map(pick) };
        if scheme.distinct() == Some(1) {
            return Err(Refusal::NothingToDeal);
        }
        let mut labels = scheme.label.clone();
        labels.sort_unstable();
        labels.dedup();
        let rest = pick(data.rest);
        let mut reached = vec![false; cells];
        for &rest in &rest {
            for &label in &labels {
                reached[data.cell_of[label as usize][rest as usize] as usize] = true;
            }
        }
        let mut statistics = Statistics::new(questions, &reached);
        let columns = statistics.columns();
        let centre = data.means(&kept);
        let fill = |statistics: &Statistics, subject: usize, row: &mut [f64]| {
            let values = &data.values[subject * data.occasions..(subject + 1) * data.occasions];
            let centred: Vec<f64> = values.iter().zip(&centre).map(|(value, centre)| value - centre).collect();
            statistics.fill(&centred, row);
        };
        let rows: Vec<Vec<f64>> = kept
            .iter()
            .map(|&subject| {
                let mut row = vec![0.0; columns];
                fill(&statistics, subject, &mut row);
                row
            })
            .collect();
        statistics.take_squares(rows.iter().map(Vec::as_slice).zip(kept.iter().map(|&subject| data.cell(subject))));
        let table = Table::new(dealt.len(), columns, |number, row| fill(&statistics, dealt[number], row));
        let room = table.room().len();
        let mut start = vec![0.0; cells * room];
        let mut start_counts = vec![0.0; cells];
        let everybody_fixed = Table::new(fixed.len(), columns, |number, row| fill(&statistics, fixed[number], row));
        for (number, &subject) in fixed.iter().enumerate() {
            let cell = data.cell(subject);
            everybody_fixed.add_row(number, &mut start[cell * room..(cell + 1) * room]);
            start_counts[cell] += 1.0;
        }
        let mut engine = Engine { table, statistics, scheme, cell_of: data.cell_of, rest, start, start_counts, plain: None, room };
        engine.prepare_plain();
        Ok(engine)
    }

    fn prepare_plain(&mut self) {
        if self.rest.iter().any(|&rest| rest != self.rest[0]) {
            return;
        }
        let mut plain = self.start.clone();
        let mut counts = self.start_counts.clone();
        let mut sums = self.table.room();
        let shuffle = Shuffle::new(&self.scheme);
        for stratum in &shuffle.strata {
            self.table.sum(&shuffle.order[stratum.places.clone()], &mut sums);
            add(&mut plain[self.places(stratum.left.label)], &sums);
            for segment in stratum.dealt.iter().chain(std::iter::once(&stratum.left)) {
                counts[self.plain_cell(segment.label)] += segment.places.len() as f64;
            }
        }
        for lane in 0..LANES {
            self.statistics.take_counts(lane, &counts);
        }
        self.plain = Some(plain);
    }

    fn plain_cell(&self, label: u32) -> usize {
        self.cell_of[label as usize][self.rest[0] as usize] as usize
    }

    fn places(&self, label: u32) -> std::ops::Range<usize> {
        let first = self.plain_cell(label) * self.room;
        first..first + self.table.columns()
    }

    /// The statistics of the data as they are, computed the way that those of the deals are.
    pub fn observed(&self) -> Vec<f64> {
        let mut worker = Worker::new(self);
        worker.take_labels(&self.scheme.label, 0);
        worker.evaluate();
        worker.found.iter().map(|lanes| lanes[0]).collect()
    }

    /// All deals where there are no more than asked for, else as many random ones as asked for.
    pub fn run<T: Tally>(&self, deals: &Deals, tally: T) -> Result<(T, Done), Refusal> {
        if deals.asked == 0 {
            return Err(Refusal::NoneAsked);
        }
        match self.scheme.distinct().filter(|&distinct| distinct <= deals.asked) {
            Some(distinct) => Ok((self.list(tally), Done { deals: distinct, exact: true })),
            None => Ok((self.draw(deals, tally), Done { deals: deals.asked, exact: false })),
        }
    }

    fn list<T: Tally>(&self, mut tally: T) -> T {
        let mut worker = Worker::new(self);
        let mut listing = self.scheme.listed();
        let mut used = 0;
        while let Some(label) = listing.next_deal() {
            worker.take_labels(label, used);
            used += 1;
            if used == LANES {
                worker.hand_on(&mut tally, used);
                used = 0;
            }
        }
        worker.hand_on(&mut tally, used);
        tally
    }

    fn draw<T: Tally>(&self, deals: &Deals, tally: T) -> T {
        let blocks = deals.asked.div_ceil(BLOCK);
        let threads = (deals.threads.get() as u64).min(blocks);
        let part = |thread: u64| {
            let mut tally = tally.clone();
            let mut worker = Worker::new(self);
            for block in blocks * thread / threads..blocks * (thread + 1) / threads {
                worker.draw_block(deals.key, block, BLOCK.min(deals.asked - block * BLOCK), &mut tally);
            }
            tally
        };
        in_threads(threads, part)
            .into_iter()
            .reduce(|mut all, more| {
                all.merge(more);
                all
            })
            .unwrap_or(tally)
    }
}

/// `part` for each number below `threads`, each in its own thread, results in order.
pub(super) fn in_threads<T: Send>(threads: u64, part: impl Fn(u64) -> T + Sync) -> Vec<T> {
    let part = &part;
    std::thread::scope(|scope| {
        let later: Vec<_> = (1..threads).map(|thread| scope.spawn(move || part(thread))).collect();
        let mut results = vec![part(0)];
        for handle in later {
            match handle.join() {
                Ok(result) => results.push(result),
                Err(panic) => std::panic::resume_unwind(panic),
            }
        }
        results
    })
}

/// One thread's buffers: nothing is allocated from deal to deal.
struct Worker<'e, 'a> {
    engine: &'e Engine<'a>,
    statistics: Statistics,
    shuffle: Shuffle,
    label: Vec<u32>,
    cells: Vec<f64>,
    counts: Vec<f64>,
    segment: Vec<f64>,
    sums: Vec<Lanes>,
    found: Vec<Lanes>,
}

impl<'e, 'a> Worker<'e, 'a> {
    fn new(engine: &'e Engine<'a>) -> Worker<'e, 'a> {
        let cells = engine.start_counts.len();
        Worker {
            engine,
            statistics: engine.statistics.clone(),
            shuffle: Shuffle::new(&engine.scheme),
            label: engine.scheme.label.clone(),
            cells: engine.start.clone(),
            counts: engine.start_counts.clone(),
            segment: engine.table.room(),
            sums: vec![[0.0; LANES]; cells * engine.table.columns()],
            found: vec![[0.0; LANES]; engine.statistics.len()],
        }
    }

    fn draw_block<T: Tally>(&mut self, key: [u8; 32], block: u64, deals: u64, tally: &mut T) {
        let mut stream = Stream::new(key, block);
        self.shuffle.restart();
        let mut left = deals as usize;
        while left > 0 {
            let used = left.min(LANES);
            for lane in 0..used {
                self.shuffle.deal(&mut stream);
                match &self.engine.plain {
                    Some(plain) => self.take_order(plain, lane),
                    None => {
                        let mut label = std::mem::take(&mut self.label);
                        self.shuffle.labels(&mut label);
                        self.take_labels(&label, lane);
                        self.label = label;
                    }
                }
            }
            self.hand_on(tally, used);
            left -= used;
        }
    }

    /// Cell sums of the shuffle's deal, where labels alone make the cells.
    fn take_order(&mut self, plain: &[f64], lane: usize) {
        let engine = self.engine;
        self.cells.copy_from_slice(plain);
        for stratum in &self.shuffle.strata {
            let left = engine.places(stratum.left.label);
            for segment in &stratum.dealt {
                engine.table.sum(&self.shuffle.order[segment.places.clone()], &mut self.segment);
                add(&mut self.cells[engine.places(segment.label)], &self.segment);
                for (sum, taken) in self.cells[left.clone()].iter_mut().zip(&self.segment) {
                    *sum -= taken;
                }
            }
        }
        self.lay_out(lane);
    }

    /// Cell sums and numbers of any deal.
    fn take_labels(&mut self, label: &[u32], lane: usize) {
        let engine = self.engine;
        self.cells.copy_from_slice(&engine.start);
        self.counts.copy_from_slice(&engine.start_counts);
        for (subject, (&label, &rest)) in label.iter().zip(&engine.rest).enumerate() {
            let cell = engine.cell_of[label as usize][rest as usize] as usize;
            engine.table.add_row(subject, &mut self.cells[cell * engine.room..(cell + 1) * engine.room]);
            self.counts[cell] += 1.0;
        }
        if engine.plain.is_none() {
            self.statistics.take_counts(lane, &self.counts);
        }
        self.lay_out(lane);
    }

    fn lay_out(&mut self, lane: usize) {
        let columns = self.engine.table.columns();
        for (sums, cell) in self.sums.chunks_exact_mut(columns).zip(self.cells.chunks_exact(self.engine.room)) {
            for (lanes, sum) in sums.iter_mut().zip(cell) {
                lanes[lane] = *sum;
            }
        }
    }

    fn evaluate(&mut self) {
        self.statistics.evaluate(&self.sums, &mut self.found);
    }

    fn hand_on<T: Tally>(&mut self, tally: &mut T, used: usize) {
        if used > 0 {
            self.evaluate();
            tally.take(&mut self.found, used);
        }
    }
}

fn add(sums: &mut [f64], more: &[f64]) {
    for (sum, more) in sums.iter_mut().zip(more) {
        *sum += more;
    }
}
