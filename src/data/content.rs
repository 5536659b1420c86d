//! The content hash: SHA-256 of the canonical table, whatever the file looked like.

use super::table::Sorted;
use crate::canon::hash::{Digest, Hasher};
use crate::plan::resolved::ResolvedPlan;

/// Stands for a missing value: the quiet NaN without payload.
const MISSING: u64 = 0x7FF8_0000_0000_0000;

/// Bytes handed to the hasher at a time.
const PIECE: usize = 1 << 16;

/// The hash of the canonical table. It is equal where files differ only in layout, in the order of rows or columns, in names
/// of columns, in columns that the analysis does not use, in quotation marks, line ends or the way numbers are written, and
/// in whether a missing value is an empty cell or a row left out.
///
/// The bytes hashed are, with `u32` and `u64` in big-endian order and a text as the `u32` of its length and its UTF-8:
///
/// 1. `aforesaid content 1\n`;
/// 2. the `u32` number of between factors whose arms were read (none where they were not), and for each its name, the
///    `u32` number of its levels, and these; the same for the within factors;
/// 3. the `u32` number of outcomes, and their names;
/// 4. the `u64` number of subjects;
/// 5. for each subject, in the order of the bytes of their identifiers: the identifier; where arms were read the `u32`
///    number of its between cell; and for each outcome and each occasion in design order the value as the `u64` of its IEEE
///    754 bits, zero without a sign, a missing value as `7FF8000000000000`.
///
/// Where the plan keeps further columns (covariates, strata of the randomisation), there follow the `u32` number of them
/// and, for each, its name and the value of every subject: a covariate as the bits of its number, a stratum as its text.
pub(super) fn hash(plan: &ResolvedPlan, arms: bool, table: &Sorted, texts: &[Vec<Vec<u8>>]) -> Digest {
    let (design, outcomes) = (&plan.design, &plan.outcomes);
    let mut bytes = Pieces { hasher: Hasher::new(), buffer: Vec::with_capacity(PIECE + 4096) };
    bytes.raw(b"aforesaid content 1\n");
    for factors in [if arms { design.between.as_slice() } else { &[] }, design.within.as_slice()] {
        bytes.count(factors.len());
        for factor in factors {
            bytes.text(factor.name.as_bytes());
            bytes.count(factor.levels.len());
            factor.levels.iter().for_each(|level| bytes.text(level.as_bytes()));
        }
    }
    bytes.count(outcomes.len());
    outcomes.iter().for_each(|outcome| bytes.text(outcome.name.as_bytes()));
    bytes.raw(&(table.subjects.len() as u64).to_be_bytes());
    let occasions = design.occasions();
    for subject in 0..table.subjects.len() {
        bytes.text(table.subjects.bytes(subject));
        if arms {
            bytes.raw(&table.cell[subject].to_be_bytes());
        }
        for values in &table.values {
            for value in &values[subject * occasions..][..occasions] {
                let bits = if value.is_nan() { MISSING } else { (value + 0.0).to_bits() };
                bytes.raw(&bits.to_be_bytes());
            }
        }
        bytes.flush();
    }
    if !table.further.is_empty() {
        let names: Vec<&str> = plan.covariate_columns().into_iter().chain(plan.strata_columns()).collect();
        bytes.count(names.len());
        for ((name, column), texts) in names.iter().zip(&table.further).zip(texts) {
            bytes.text(name.as_bytes());
            for value in column {
                match texts.get(*value as usize) {
                    Some(text) if !texts.is_empty() => bytes.text(text),
                    _ => bytes.raw(&(if f64::from_bits(*value).is_nan() { MISSING } else { *value }).to_be_bytes()),
                }
                bytes.flush();
            }
        }
    }
    bytes.hasher.update(&bytes.buffer);
    bytes.hasher.finish()
}

struct Pieces {
    hasher: Hasher,
    buffer: Vec<u8>,
}

impl Pieces {
    fn raw(&mut self, bytes: &[u8]) {
        self.buffer.extend_from_slice(bytes);
    }

    fn count(&mut self, count: usize) {
        self.raw(&(count as u32).to_be_bytes());
    }

    fn text(&mut self, text: &[u8]) {
        self.count(text.len());
        self.raw(text);
    }

    fn flush(&mut self) {
        if self.buffer.len() >= PIECE {
            self.hasher.update(&self.buffer);
            self.buffer.clear();
        }
    }
}
