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

/// What is known of the subjects so far, in the order in which they appear.
#[derive(Default)]
pub(super) struct Gathered {
    identifiers: Vec<u8>,
    ends: Vec<u32>,
    index: Index,
    pub lines: Vec<u32>,
    pub cell: Vec<u32>,
    pub values: Vec<Vec<f64>>,
    /// Line of each row by subject and occasion, zero where there is none; empty where a subject has one row.
    pub seen: Vec<u32>,
    occasions: usize,
    arms: bool,
}

impl Gathered {
    /// For so many outcomes and occasions; `one_row`: a subject has one row.
    pub fn new(outcomes: usize, occasions: usize, one_row: bool, arms: bool) -> Self {
        Gathered { values: vec![Vec::new(); outcomes], occasions: if one_row && outcomes == 0 { 0 } else { occasions }, arms, ..Gathered::default() }
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

    /// The number of a subject, and whether it is new. `None` where identifiers fill more than four gigabytes.
    pub fn subject(&mut self, identifier: &[u8], line: usize, one_row: bool) -> Option<(usize, bool)> {
        let hash = hash_of(identifier);
        if let Some(subject) = self.index.find(hash, |subject| self.identifier(subject) == identifier) {
            return Some((subject, false));
        }
        let subject = self.len();
        let end = u32::try_from(self.identifiers.len() + identifier.len()).ok()?;
        self.identifiers.extend_from_slice(identifier);
        self.ends.push(end);
        self.index.insert(hash, subject as u32);
        self.lines.push(line.min(u32::MAX as usize) as u32);
        if self.arms {
            self.cell.push(NO_CELL);
        }
        let occasions = self.occasions;
        self.values.iter_mut().for_each(|values| values.resize(values.len() + occasions, f64::NAN));
        if !one_row {
            self.seen.resize(self.seen.len() + occasions, 0);
        }
        Some((subject, true))
    }

    /// Everything in the order of the identifiers' bytes.
    pub fn sorted(mut self) -> Sorted {
        self.index = Index::default();
        self.seen = Vec::new();
        let Some(order) = self.order() else {
            let subjects = Subjects::from_parts(self.identifiers, self.ends);
            return Sorted { subjects, lines: self.lines, values: self.values, cell: self.cell };
        };
        let mut subjects = Subjects::with_capacity(self.len(), self.identifiers.len());
        order.iter().for_each(|subject| subjects.push(self.identifier(*subject as usize)));
        self.identifiers = Vec::new();
        self.ends = Vec::new();
        let mut walk = Walk::new(order);
        walk.apply(&mut self.lines, 1);
        if self.arms {
            walk.apply(&mut self.cell, 1);
        }
        for values in &mut self.values {
            walk.apply(values, self.occasions);
        }
        Sorted { subjects, lines: self.lines, values: self.values, cell: self.cell }
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
}

/// A permutation applied in place, by its cycles.
struct Walk {
    /// For each place, where its content comes from.
    from: Vec<u32>,
}

impl Walk {
    fn new(from: Vec<u32>) -> Self {
        Walk { from }
    }

    /// Moves rows of `width` items. The highest bit of an entry marks what was moved, and is cleared again.
    fn apply<T: Copy>(&mut self, items: &mut [T], width: usize) {
        const MOVED: u32 = 1 << 31;
        if width == 0 || items.is_empty() {
            return;
        }
        let mut held: Vec<T> = Vec::with_capacity(width);
        for start in 0..self.from.len() {
            if self.from[start] & MOVED != 0 {
                continue;
            }
            held.clear();
            held.extend_from_slice(&items[start * width..][..width]);
            let mut at = start;
            loop {
                let from = self.from[at] as usize;
                self.from[at] |= MOVED;
                if from == start {
                    items[at * width..][..width].copy_from_slice(&held);
                    break;
                }
                items.copy_within(from * width..(from + 1) * width, at * width);
                at = from;
            }
        }
        self.from.iter_mut().for_each(|from| *from &= !MOVED);
    }
}

/// Numbers of subjects by the hash of their identifiers: open addressing, half full at most.
#[derive(Default)]
struct Index {
    /// Upper half: the hash; lower half: number of the subject, plus one.
    slots: Vec<u64>,
    count: usize,
}

impl Index {
    fn find(&self, hash: u32, is_it: impl Fn(usize) -> bool) -> Option<usize> {
        let mask = self.slots.len().checked_sub(1)?;
        let mut at = hash as usize & mask;
        loop {
            let slot = self.slots[at];
            if slot == 0 {
                return None;
            }
            if (slot >> 32) as u32 == hash && is_it(slot as u32 as usize - 1) {
                return Some(slot as u32 as usize - 1);
            }
            at = (at + 1) & mask;
        }
    }

    fn insert(&mut self, hash: u32, subject: u32) {
        if self.count * 2 >= self.slots.len() {
            let wider = vec![0; (self.slots.len() * 2).max(64)];
            let slots = std::mem::replace(&mut self.slots, wider);
            slots.into_iter().filter(|slot| *slot != 0).for_each(|slot| self.place(slot));
        }
        self.place(u64::from(hash) << 32 | u64::from(subject + 1));
        self.count += 1;
    }

    fn place(&mut self, slot: u64) {
        let mask = self.slots.len() - 1;
        let mut at = (slot >> 32) as usize & mask;
        while self.slots[at] != 0 {
            at = (at + 1) & mask;
        }
        self.slots[at] = slot;
    }
}

/// A hash for finding, not for proving: eight bytes at a time, mixed by a folded product.
fn hash_of(bytes: &[u8]) -> u32 {
    const ODD: u64 = 0x9E37_79B9_7F4A_7C15;
    let mix = |hash: u64, word: u64| {
        let product = u128::from(hash ^ word) * u128::from(ODD | 1);
        (product >> 64) as u64 ^ product as u64
    };
    let mut words = bytes.chunks_exact(8);
    let mut hash = bytes.len() as u64 ^ 0xD6E8_FEB8_6659_FD93;
    for word in &mut words {
        hash = mix(hash, key(word));
    }
    let hash = mix(mix(hash, key(words.remainder())), ODD.rotate_left(23));
    (hash >> 32) as u32 ^ hash as u32
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn sorts_by_bytes(identifiers in proptest::collection::vec("(AB-00)?[a-c]{0,3}(12345678)?[a-b\u{e9}]{1,3}", 1..60)) {
            let mut gathered = Gathered::new(1, 2, false, true);
            for (line, identifier) in identifiers.iter().enumerate() {
                let (subject, new) = gathered.subject(identifier.as_bytes(), line + 2, false).unwrap();
                prop_assert_eq!(new, !identifiers[..line].contains(identifier));
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
