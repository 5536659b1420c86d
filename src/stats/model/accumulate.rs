//! Sums over subjects: two passes, compensated, with the same bits whatever the number of threads.
//!
//! The first pass finds the cell means from differences to one value per occasion; the second accumulates products of
//! deviations from the rounded means. Differences and products are kept with their rounding errors (as Dot2 of
//! Ogita, Rump & Oishi 2005), and rows are cut into fixed blocks and parts that are merged in order.

use super::refusal::Refusal;
use crate::stats::linear::{DoubleDouble, Split, two_difference, two_product_split, two_sum};

/// Subjects after which compensated sums are folded into double-double totals.
const BLOCK: usize = 4096;
/// Pieces into which the blocks are dealt; fixed, so that the order of additions does not depend on threads.
const PARTS: usize = 8;
/// Values below which threads cost more than they save.
const THREADED_FROM: usize = 1 << 17;
/// Magnitudes whose squares of squares stay within a double's range with room for their errors.
const LARGEST: f64 = 1e70;
const SMALLEST: f64 = 1e-60;

/// The values as they came, with the cell of each subject.
#[derive(Clone, Copy)]
pub(super) struct Rows<'a> {
    pub values: &'a [f64],
    pub occasions: usize,
    pub cell: &'a [u32],
    pub cells: usize,
    pub kept: Option<&'a [bool]>,
    /// Whether two threads share the parts; the result is the same.
    pub threaded: bool,
}

/// Whether two threads are worth starting for so many values.
pub(super) fn worth_threads(values: usize) -> bool {
    // Asking for the number of processors costs more than small data do, so the size comes first.
    values >= THREADED_FROM && std::thread::available_parallelism().is_ok_and(|processors| processors.get() > 1)
}

/// Counts, sums and largest magnitudes of the first pass, all cell by cell.
pub(super) struct Centres {
    pub count: Vec<usize>,
    pub centre: Vec<f64>,
    pub largest: Vec<f64>,
}

/// Sums of deviations from the centres, and of their products (lower triangle by rows), all cell by cell.
pub(super) struct Deviations {
    pub sum: Vec<DoubleDouble>,
    pub product: Vec<DoubleDouble>,
}

/// Running sums with their errors, folded into totals at the end of each block.
struct Compensated {
    high: Vec<f64>,
    low: Vec<f64>,
    total: Vec<DoubleDouble>,
}

impl Compensated {
    fn new(length: usize) -> Compensated {
        Compensated { high: vec![0.0; length], low: vec![0.0; length], total: vec![DoubleDouble::ZERO; length] }
    }

    fn fold(&mut self) {
        for ((total, high), low) in self.total.iter_mut().zip(&mut self.high).zip(&mut self.low) {
            *total += DoubleDouble::new(*high, *low);
            *high = 0.0;
            *low = 0.0;
        }
    }

    fn merge(&mut self, later: &Compensated) {
        for (total, &more) in self.total.iter_mut().zip(&later.total) {
            *total += more;
        }
    }
}

struct FirstPart {
    count: Vec<usize>,
    sum: Compensated,
    largest: Vec<f64>,
    not_finite: Option<usize>,
}

impl Rows<'_> {
    fn subjects(&self) -> usize {
        self.cell.len()
    }

    fn keeps(&self, subject: usize) -> bool {
        self.kept.is_none_or(|kept| kept[subject])
    }

    fn part(&self, part: usize) -> std::ops::Range<usize> {
        let blocks = self.subjects().div_ceil(BLOCK);
        let edge = |part: usize| (blocks * part / PARTS * BLOCK).min(self.subjects());
        edge(part)..edge(part + 1)
    }

    /// `work` for each part that has rows, in order.
    fn in_parts<T: Send>(&self, work: impl Fn(std::ops::Range<usize>) -> T + Sync) -> Vec<T> {
        let run = |parts: std::ops::Range<usize>| -> Vec<T> {
            parts.map(|part| self.part(part)).filter(|rows| !rows.is_empty()).map(&work).collect()
        };
        if !self.threaded {
            return run(0..PARTS);
        }
        std::thread::scope(|scope| {
            let later = scope.spawn(|| run(PARTS / 2..PARTS));
            let mut results = run(0..PARTS / 2);
            match later.join() {
                Ok(more) => results.extend(more),
                Err(panic) => std::panic::resume_unwind(panic),
            }
            results
        })
    }

    /// The first pass.
    pub fn centres(&self) -> Result<Centres, Refusal> {
        let width = self.occasions;
        let first = (0..self.subjects()).find(|&subject| self.keeps(subject)).ok_or(Refusal::NoSubjects)?;
        let shift = &self.values[first * width..(first + 1) * width];
        if let Some(occasion) = shift.iter().position(|value| !value.is_finite()) {
            return Err(Refusal::NotFinite { subject: first, occasion });
        }
        let mut parts = self.in_parts(|rows| self.first_part(rows, shift)).into_iter();
        let mut all = parts.next().ok_or(Refusal::NoSubjects)?;
        let mut not_finite = all.not_finite;
        for part in parts {
            all.sum.merge(&part.sum);
            for (count, more) in all.count.iter_mut().zip(part.count) {
                *count += more;
            }
            for (largest, other) in all.largest.iter_mut().zip(part.largest) {
                *largest = largest.max(other);
            }
            not_finite = not_finite.or(part.not_finite);
        }
        if let Some(place) = not_finite {
            return Err(Refusal::NotFinite { subject: place / width, occasion: place % width });
        }
        for occasion in 0..width {
            let largest = (0..self.cells).map(|cell| all.largest[cell * width + occasion]).fold(0.0, f64::max);
            if largest > LARGEST || (largest > 0.0 && largest < SMALLEST) {
                return Err(Refusal::OutOfRange { occasion });
            }
        }
        let mut centre = vec![0.0; self.cells * width];
        for (place, centre) in centre.iter_mut().enumerate() {
            let count = all.count[place / width];
            if count > 0 {
                let mean = DoubleDouble::from(shift[place % width]) + all.sum.total[place] / DoubleDouble::from(count);
                *centre = mean.value();
            }
        }
        Ok(Centres { count: all.count, centre, largest: all.largest })
    }

    fn first_part(&self, rows: std::ops::Range<usize>, shift: &[f64]) -> FirstPart {
        let width = self.occasions;
        let mut part = FirstPart {
            count: vec![0; self.cells],
            sum: Compensated::new(self.cells * width),
            largest: vec![0.0; self.cells * width],
            not_finite: None,
        };
        for range in blocks(rows) {
            for subject in range.clone() {
                if !self.keeps(subject) {
                    continue;
                }
                let cell = self.cell[subject] as usize;
                part.count[cell] += 1;
                let places = cell * width..(cell + 1) * width;
                let high = &mut part.sum.high[places.clone()];
                let low = &mut part.sum.low[places.clone()];
                let largest = &mut part.largest[places];
                let values = &self.values[subject * width..(subject + 1) * width];
                for occasion in 0..width {
                    let value = values[occasion];
                    let magnitude = value.abs();
                    if magnitude > largest[occasion] {
                        largest[occasion] = magnitude;
                    }
                    let (difference, rest) = two_difference(value, shift[occasion]);
                    let (sum, error) = two_sum(high[occasion], difference);
                    high[occasion] = sum;
                    low[occasion] += error + rest;
                }
            }
            // A NaN or an infinity stays in its sum, so that one look at the end of a block finds it.
            if part.not_finite.is_none() && part.sum.high.iter().any(|sum| !sum.is_finite()) {
                part.not_finite = range
                    .filter(|&subject| self.keeps(subject))
                    .flat_map(|subject| subject * width..(subject + 1) * width)
                    .find(|&place| !self.values[place].is_finite());
            }
            part.sum.fold();
        }
        part
    }

    /// The second pass.
    pub fn deviations(&self, centre: &[f64]) -> Deviations {
        let work = |rows: std::ops::Range<usize>| match self.occasions {
            1 => self.second_part::<1>(rows, centre),
            2 => self.second_part::<2>(rows, centre),
            3 => self.second_part::<3>(rows, centre),
            4 => self.second_part::<4>(rows, centre),
            5 => self.second_part::<5>(rows, centre),
            6 => self.second_part::<6>(rows, centre),
            _ => self.second_part::<0>(rows, centre),
        };
        let width = self.occasions;
        let mut all = (Compensated::new(self.cells * width), Compensated::new(self.cells * width * (width + 1) / 2));
        for (sum, product) in self.in_parts(work) {
            all.0.merge(&sum);
            all.1.merge(&product);
        }
        Deviations { sum: all.0.total, product: all.1.total }
    }

    /// `FIXED` is the number of occasions where it is known when compiling, otherwise 0.
    fn second_part<const FIXED: usize>(&self, rows: std::ops::Range<usize>, centre: &[f64]) -> (Compensated, Compensated) {
        let width = if FIXED == 0 { self.occasions } else { FIXED };
        let pairs = width * (width + 1) / 2;
        let mut sum = Compensated::new(self.cells * width);
        let mut product = Compensated::new(self.cells * pairs);
        let mut deviation = vec![(Split::default(), 0.0, 0.0); width];
        for block in blocks(rows) {
            for subject in block {
                if !self.keeps(subject) {
                    continue;
                }
                let cell = self.cell[subject] as usize;
                let values = &self.values[subject * width..(subject + 1) * width];
                let centre = &centre[cell * width..(cell + 1) * width];
                let high = &mut sum.high[cell * width..(cell + 1) * width];
                let low = &mut sum.low[cell * width..(cell + 1) * width];
                for occasion in 0..width {
                    let (difference, rest) = two_difference(values[occasion], centre[occasion]);
                    deviation[occasion] = (Split::new(difference), difference, rest);
                    let (total, error) = two_sum(high[occasion], difference);
                    high[occasion] = total;
                    low[occasion] += error + rest;
                }
                let high = &mut product.high[cell * pairs..(cell + 1) * pairs];
                let low = &mut product.low[cell * pairs..(cell + 1) * pairs];
                let mut pair = 0;
                for first in 0..width {
                    let (split, value, rest) = deviation[first];
                    for &(other_split, other_value, other_rest) in &deviation[..=first] {
                        let (term, error) = two_product_split(split, other_split);
                        let error = error + (value * other_rest + rest * other_value);
                        let (total, lost) = two_sum(high[pair], term);
                        high[pair] = total;
                        low[pair] += lost + error;
                        pair += 1;
                    }
                }
            }
            sum.fold();
            product.fold();
        }
        (sum, product)
    }
}

fn blocks(rows: std::ops::Range<usize>) -> impl Iterator<Item = std::ops::Range<usize>> {
    let end = rows.end;
    rows.step_by(BLOCK).map(move |start| start..(start + BLOCK).min(end))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn two_threads_give_the_bits_of_one() {
        let (subjects, occasions) = (3 * PARTS * BLOCK / 2 + 17, 3);
        let mut state = 1_u64;
        let mut next = || {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 / 1e10
        };
        let values: Vec<f64> = (0..subjects * occasions).map(|_| next()).collect();
        let cell: Vec<u32> = (0..subjects).map(|subject| (subject % 5 / 2) as u32).collect();
        let rows = |threaded| Rows { values: &values, occasions, cell: &cell, cells: 3, kept: None, threaded };
        let (one, two) = (rows(false), rows(true));
        let centres = [one.centres(), two.centres()].map(|centres| centres.expect("finite values"));
        assert_eq!(centres[0].centre, centres[1].centre);
        assert_eq!(centres[0].largest, centres[1].largest);
        assert_eq!(centres[0].count, centres[1].count);
        let deviations = [one.deviations(&centres[0].centre), two.deviations(&centres[0].centre)];
        assert_eq!(deviations[0].sum, deviations[1].sum);
        assert_eq!(deviations[0].product, deviations[1].product);
    }
}
