//! What is kept of a file: identifiers and values, not text.

use super::trial::Subjects;
use crate::canon::hash::Digest;
use crate::text::diagnostic::Diagnostic;
use serde::Serialize;

/// A data file that agrees with its plan.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// Name of the file, as the person typed it.
    pub name: String,
    /// The subjects, sorted by the bytes of their identifiers.
    pub subjects: Subjects,
    /// Line on which each subject first appears.
    pub lines: Vec<u32>,
    /// Per outcome in plan order: subjects x occasions, row by row; NaN where there is no value.
    pub values: Vec<Vec<f64>>,
    /// Between cell of each subject, where arms stand in the data and were asked for.
    pub cell: Option<Vec<u32>>,
    /// Per column that serves as a covariate: a value for each subject, NaN where it is missing.
    pub covariates: Vec<Vec<f64>>,
    /// Stratum of each subject, where arms are dealt again within strata; numbered by the texts in order.
    pub strata: Option<Vec<u32>>,
    /// Hash of the canonical table: equal where files differ only in form.
    pub content: Digest,
    /// Rows of data.
    pub rows: usize,
    /// What was found in each column that the plan has checked, in plan order.
    pub checked: Vec<Checked>,
    /// What is worth saying of sound data.
    pub notes: Vec<Diagnostic>,
}

/// What was found in a checked column.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Checked {
    /// The column.
    pub column: String,
    /// Cells with a value; every one passed. `None` where the column holds arms and was not looked at.
    pub values: Option<usize>,
    /// Cells with a missing value.
    pub missing: usize,
}

/// Cell of a subject whose arm is not known yet.
pub(super) const NO_CELL: u32 = u32::MAX;

/// Stands for a further column of a subject of which no row has been kept yet: a NaN that no number is.
pub(super) const UNSAID: u64 = u64::MAX;

/// What is known of the subjects so far, in the order in which they appear.
#[derive(Default)]
pub(super) struct Gathered {
    identifiers: Vec<u8>,
    ends: Vec<u32>,
    index: Index,
    pub lines: Vec<u32>,
    pub cell: Vec<u32>,
    pub values: Vec<Vec<f64>>,
    /// Per further column: what it says of each subject, as bits, or [`UNSAID`].
    pub further: Vec<Vec<u64>>,
    /// Line of each row by subject and occasion, zero where there is none; empty where a subject has one row.
    pub seen: Vec<u32>,
    occasions: usize,
    one_row: bool,
    arms: bool,
    /// Whether an identifier that comes after the last one in one of these orders must be new.
    ascending: [bool; ORDERS],
}

/// Orders in which files list their subjects: by bytes, or the shorter first (as numbers are).
const ORDERS: usize = 2;

fn is_after(one: &[u8], other: &[u8]) -> [bool; ORDERS] {
    let by_bytes = one > other;
    [by_bytes, one.len() > other.len() || (one.len() == other.len() && by_bytes)]
}

impl Gathered {
    /// For so many outcomes, occasions and further columns; `one_row`: a subject has one row.
    pub fn new(outcomes: usize, occasions: usize, further: usize, one_row: bool, arms: bool) -> Self {
        Gathered {
            values: vec![Vec::new(); outcomes],
            further: vec![Vec::new(); further],
            occasions,
            one_row,
            arms,
            ascending: [true; ORDERS],
            ..Gathered::default()
        }
    }

    /// How many subjects.
    pub fn len(&self) -> usize {
        self.ends.len()
    }

    /// The identifier of a subject.
    pub fn identifier(&self, subject: usize) -> &[u8] {
        let start = if subject == 0 { 0 } else { self.ends[subject - 1] as usize };
        &self.identifiers[start..self.ends[subject] as usize]
    }

    /// The number of a subject, who is taken up if new. `None` where identifiers fill more than four gigabytes.
    pub fn subject(&mut self, identifier: &[u8], line: u32) -> Option<usize> {
        match self.find(identifier, None) {
            Some(subject) => Some(subject),
            None => self.add(identifier, line),
        }
    }

    /// The number of a subject who is known; `guess` is looked at first. Only where subjects come in no order is there an
    /// index to be searched.
    pub fn find(&mut self, identifier: &[u8], guess: Option<usize>) -> Option<usize> {
        let last = self.len().checked_sub(1)?;
        if let Some(guess) = guess
            && guess <= last
            && self.identifier(guess) == identifier
        {
            return Some(guess);
        }
        if self.index.is_empty() {
            let after = is_after(identifier, self.identifier(last));
            if (0..ORDERS).any(|order| self.ascending[order] && after[order]) {
                return None;
            }
            for subject in 0..=last {
                let key = Key::of(self.identifier(subject));
                self.index.insert(key, subject as u32);
            }
        }
        let key = Key::of(identifier);
        self.index.find(key, |subject| self.identifier(subject) == identifier)
    }

    /// Takes up a subject who is not known yet. `None` where identifiers fill more than four gigabytes.
    pub fn add(&mut self, identifier: &[u8], line: u32) -> Option<usize> {
        let subject = self.len();
        let end = u32::try_from(self.identifiers.len() + identifier.len()).ok()?;
        if let Some(last) = subject.checked_sub(1) {
            let after = is_after(identifier, self.identifier(last));
            (0..ORDERS).for_each(|order| self.ascending[order] &= after[order]);
        }
        self.identifiers.extend_from_slice(identifier);
        self.ends.push(end);
        if !self.index.is_empty() {
            self.index.insert(Key::of(identifier), subject as u32);
        }
        self.lines.push(line);
        if self.arms {
            self.cell.push(NO_CELL);
        }
        self.further.iter_mut().for_each(|column| column.push(UNSAID));
        let occasions = self.occasions;
        self.values.iter_mut().for_each(|values| values.resize(values.len() + occasions, f64::NAN));
        if !self.one_row {
            self.seen.resize(self.seen.len() + occasions, 0);
        }
        Some(subject)
    }

    /// Sets the between cell of a subject; whether it agrees with what was known.
    pub fn set_cell(&mut self, subject: usize, cell: u32) -> bool {
        let known = &mut self.cell[subject];
        if *known == NO_CELL {
            *known = cell;
        }
        *known == cell
    }

    /// Sets what a further column says of a subject; whether it agrees with what was known.
    pub fn set_further(&mut self, subject: usize, column: usize, bits: u64) -> bool {
        let known = &mut self.further[column][subject];
        if *known == UNSAID {
            *known = bits;
        }
        *known == bits
    }

    /// Everything in the order of the identifiers' bytes.
    pub fn sorted(mut self) -> Sorted {
        self.index = Index::default();
        self.seen = Vec::new();
        let Some(order) = self.order() else {
            let subjects = Subjects::from_parts(self.identifiers, self.ends);
            return Sorted { subjects, lines: self.lines, values: self.values, cell: self.cell, further: self.further };
        };
        let mut subjects = Subjects::with_capacity(self.len(), self.identifiers.len());
        order.iter().for_each(|subject| subjects.push(self.identifier(*subject as usize)));
        self.identifiers = Vec::new();
        self.ends = Vec::new();
        reorder(&mut self.lines, &order, 1);
        if self.arms {
            reorder(&mut self.cell, &order, 1);
        }
        for values in &mut self.values {
            reorder(values, &order, self.occasions);
        }
        for column in &mut self.further {
            reorder(column, &order, 1);
        }
        Sorted { subjects, lines: self.lines, values: self.values, cell: self.cell, further: self.further }
    }

    /// Numbers of the subjects in order; `None` where they are in order already.
    fn order(&self) -> Option<Vec<u32>> {
        let count = self.len();
        if (1..count).all(|subject| self.identifier(subject - 1) < self.identifier(subject)) {
            return None;
        }
        // Most comparisons are decided by the eight bytes after what all identifiers begin with.
        let first = self.identifier(0);
        let shared = (1..count).fold(first.len(), |shared, subject| {
            let identifier = self.identifier(subject);
            if identifier.starts_with(&first[..shared]) { shared } else { first.iter().zip(identifier).take_while(|(a, b)| a == b).count() }
        });
        let mut keyed: Vec<(u64, u32)> = (0..count).map(|subject| (key(&self.identifier(subject)[shared..]), subject as u32)).collect();
        keyed.sort_unstable();
        // Runs of equal keys, which hold identifiers that differ later or only in length.
        let mut start = 0;
        for run in keyed.chunk_by_mut(|one, other| one.0 == other.0) {
            if run.len() > 1 {
                run.sort_unstable_by(|one, other| self.identifier(one.1 as usize).cmp(self.identifier(other.1 as usize)));
            }
            start += run.len();
        }
        debug_assert_eq!(start, count);
        Some(keyed.into_iter().map(|(_, subject)| subject).collect())
    }
}

/// The first eight bytes, so that numbers order as the bytes do.
fn key(bytes: &[u8]) -> u64 {
    let mut first = [0; 8];
    let count = bytes.len().min(8);
    first[..count].copy_from_slice(&bytes[..count]);
    u64::from_be_bytes(first)
}

/// What was gathered, sorted.
pub(super) struct Sorted {
    pub subjects: Subjects,
    pub lines: Vec<u32>,
    pub values: Vec<Vec<f64>>,
    pub cell: Vec<u32>,
    pub further: Vec<Vec<u64>>,
}

/// Puts rows of `width` items into an order. One copy at a time: by now the index is gone, and makes room for it.
fn reorder<T: Copy>(items: &mut Vec<T>, order: &[u32], width: usize) {
    let mut ordered = Vec::with_capacity(items.len());
    for from in order {
        ordered.extend_from_slice(&items[*from as usize * width..][..width]);
    }
    *items = ordered;
}

/// An identifier in a nutshell: itself where it has eight bytes at most, else a hash.
#[derive(Clone, Copy)]
struct Key {
    bytes: u64,
    /// Length, or [`HASHED`].
    length: u32,
}

/// Length of a key that is a hash.
const HASHED: u32 = 9;

impl Key {
    fn of(identifier: &[u8]) -> Self {
        if identifier.len() < HASHED as usize {
            return Key { bytes: key(identifier), length: identifier.len() as u32 };
        }
        let words = identifier.chunks(8).map(key);
        Key { bytes: words.fold(identifier.len() as u64, mix), length: HASHED }
    }

    fn place(self, mask: usize) -> usize {
        mix(self.bytes, u64::from(self.length)) as usize & mask
    }
}

/// For finding, not for proving: a folded product.
fn mix(one: u64, other: u64) -> u64 {
    let product = u128::from(one ^ 0xD6E8_FEB8_6659_FD93) * u128::from(other ^ 0x9E37_79B9_7F4A_7C15);
    (product >> 64) as u64 ^ product as u64
}

/// Numbers of subjects by their identifiers: open addressing, half full at most.
#[derive(Default)]
struct Index {
    slots: Vec<Slot>,
    count: usize,
}

/// An entry of the index: a [`Key`] and the subject's number plus one, in sixteen bytes.
#[derive(Clone, Copy, Default)]
struct Slot {
    bytes: u64,
    length: u32,
    subject: u32,
}

impl Index {
    fn is_empty(&self) -> bool {
        self.count == 0
    }

    fn find(&self, key: Key, is_it: impl Fn(usize) -> bool) -> Option<usize> {
        let mask = self.slots.len().checked_sub(1)?;
        let mut at = key.place(mask);
        loop {
            let slot = self.slots[at];
            let subject = (slot.subject as usize).checked_sub(1)?;
            if slot.bytes == key.bytes && slot.length == key.length && (key.length < HASHED || is_it(subject)) {
                return Some(subject);
            }
            at = (at + 1) & mask;
        }
    }

    fn insert(&mut self, key: Key, subject: u32) {
        if self.count * 2 >= self.slots.len() {
            let wider = vec![Slot::default(); (self.slots.len() * 2).max(64)];
            let slots = std::mem::replace(&mut self.slots, wider);
            slots.into_iter().filter(|slot| slot.subject != 0).for_each(|slot| self.place(slot));
        }
        self.place(Slot { bytes: key.bytes, length: key.length, subject: subject + 1 });
        self.count += 1;
    }

    fn place(&mut self, slot: Slot) {
        let mask = self.slots.len() - 1;
        let mut at = Key { bytes: slot.bytes, length: slot.length }.place(mask);
        while self.slots[at].subject != 0 {
            at = (at + 1) & mask;
        }
        self.slots[at] = slot;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn sorts_by_bytes(identifiers in proptest::collection::vec("(AB-00)?[a-c]{0,3}(12345678)?[a-b\u{e9}]{1,3}", 1..60)) {
            let mut gathered = Gathered::new(1, 2, 0, false, true);
            for (line, identifier) in identifiers.iter().enumerate() {
                let known = gathered.len();
                let subject = gathered.subject(identifier.as_bytes(), line as u32 + 2).unwrap();
                let new = !identifiers[..line].contains(identifier);
                prop_assert_eq!(subject == known, new);
                if new {
                    gathered.cell[subject] = line as u32;
                    gathered.values[0][subject * 2] = line as f64;
                    gathered.values[0][subject * 2 + 1] = -(line as f64);
                }
            }
            let sorted = gathered.sorted();
            let mut expected = identifiers.clone();
            expected.sort();
            expected.dedup();
            prop_assert_eq!(sorted.subjects.len(), expected.len());
            for (subject, identifier) in expected.iter().enumerate() {
                let first = identifiers.iter().position(|one| one == identifier).unwrap();
                prop_assert_eq!(sorted.subjects.get(subject), identifier);
                prop_assert_eq!(sorted.lines[subject] as usize, first + 2);
                prop_assert_eq!(sorted.cell[subject] as usize, first);
                prop_assert_eq!(&sorted.values[0][subject * 2..][..2], &[first as f64, -(first as f64)]);
            }
        }
    }
}
