//! Rows that are in order in every respect, taken quickly.
//!
//! A row is looked at once, from left to right. Where a text can be foreseen (the subject of the row before, the next
//! occasion, the same arm) it is compared, not searched for. Whatever is not exactly as it should be, and
//! every quotation mark but a pair around a whole cell, is left for the reader that explains faults; nothing is kept of such a
//! row.

use super::blocks::LONGEST_LINE;
use super::number::{self, LARGEST, SMALLEST, is_written_zero, parse};
use super::schema::{Role, Schema, text_of};
use super::table::Gathered;
use crate::plan::resolved::{ColumnKind, Factor};
use std::ops::Range;

/// Takes rows without a fault; anything else is left for others to look at.
pub(super) struct Quick<'p> {
    fields: Vec<Field<'p>>,
    separator: u8,
    decimal: u8,
    missing: Vec<&'p str>,
    /// Whether a number may mean "missing".
    number_may_be_missing: bool,
    occasions: usize,
    one_row: bool,
    arms: bool,
    subject_column: Vec<u8>,
    /// Subject of the row before.
    last: Option<usize>,
    /// Whether subjects come in the order in which they came before, as in a file sorted by occasion.
    in_turn: bool,
    batch: Vec<Taken>,
    /// Outcome and value of each cell of the batch, rows one after the other.
    values: Vec<(usize, Option<usize>, f64)>,
    /// Checks passed, and whether there was a value.
    checks: Vec<(usize, bool)>,
}

/// Rows that are looked at before any is kept: the memory of one subject is fetched while others wait for theirs.
const BATCH: usize = 64;

/// A row of a batch.
struct Taken {
    /// One past its line end.
    end: usize,
    /// Where the identifier stands.
    identifier: (usize, usize),
    /// Whether it is that of the row before.
    as_before: bool,
    subject: usize,
    occasion: usize,
    cell: u32,
    /// One past its values, and its checks.
    values: usize,
    checks: usize,
}

/// What one field of the file holds.
enum Field<'p> {
    Skipped,
    Subject,
    Within { levels: Levels<'p>, stride: usize },
    Between { levels: Levels<'p>, stride: usize },
    Value { outcome: usize, occasion: Option<usize>, range: [f64; 2] },
    Check { number: usize, kind: &'p ColumnKind },
}

/// The levels of a factor, and the number of that which is looked for first.
struct Levels<'p> {
    texts: Vec<&'p [u8]>,
    /// [`word_of`] each.
    words: Vec<u64>,
    foreseen: usize,
}

impl<'p> Quick<'p> {
    /// `None` where a column has several uses, or a level could be taken for two cells.
    pub fn new(schema: &Schema<'p>, width: usize) -> Option<Self> {
        let mut fields: Vec<Field<'p>> = (0..width).map(|_| Field::Skipped).collect();
        let special = |byte: &u8| *byte == schema.separator || matches!(byte, b'"' | b'\r' | b'\n');
        let levels = |factor: &'p Factor| {
            let texts: Vec<&[u8]> = factor.levels.iter().map(|level| level.as_bytes()).collect();
            let plain = !texts.iter().any(|text| text.iter().any(special));
            let words = texts.iter().map(|text| word_of(text)).collect();
            plain.then_some(Levels { texts, words, foreseen: 0 })
        };
        for needed in &schema.needed {
            let field = match needed.role {
                Role::Subject => Field::Subject,
                Role::Within { factor, stride } => Field::Within { levels: levels(factor)?, stride },
                Role::Between { factor, stride } => Field::Between { levels: levels(factor)?, stride },
                Role::Unseen { .. } => continue,
                Role::Value { outcome, of, occasion } => {
                    Field::Value { outcome, occasion, range: of.range.unwrap_or([f64::NEG_INFINITY, f64::INFINITY]) }
                }
                Role::Check { number, kind } => Field::Check { number, kind },
                // Values that must agree over a subject's rows are left to the reader that can say where they do not.
                Role::Number { .. } | Role::Text { .. } => return None,
            };
            if !matches!(fields[needed.field], Field::Skipped) {
                return None;
            }
            fields[needed.field] = field;
        }
        Some(Quick {
            fields,
            separator: schema.separator,
            decimal: schema.decimal,
            number_may_be_missing: schema.missing.iter().any(|text| parse(text.as_bytes(), schema.decimal).is_some()),
            missing: schema.missing.clone(),
            occasions: schema.occasions,
            one_row: schema.one_row,
            arms: schema.arms,
            subject_column: schema.needed[0].column.as_bytes().to_vec(),
            last: None,
            in_turn: true,
            batch: Vec::with_capacity(BATCH),
            values: Vec::new(),
            checks: Vec::new(),
        })
    }

    /// Takes rows from the start of `bytes`, whose first line is `line`, up to the first that is not in order; how many bytes
    /// and rows were taken.
    pub fn take(&mut self, bytes: &[u8], line: usize, gathered: &mut Gathered, checked: &mut [(usize, usize)]) -> (usize, usize) {
        let (mut at, mut rows) = (0, 0);
        loop {
            self.batch.clear();
            self.values.clear();
            self.checks.clear();
            let mut end = at;
            while self.batch.len() < BATCH
                && let Some(taken) = self.look(bytes, end, gathered)
            {
                end = taken.end;
                self.batch.push(taken);
            }
            let found = self.find_subjects(bytes, line + rows, gathered);
            let kept = self.keep(found, line + rows, gathered);
            rows += kept;
            let Some(last) = kept.checked_sub(1).map(|last| &self.batch[last]) else { return (at, rows) };
            at = last.end;
            for (number, value) in &self.checks[..last.checks] {
                let (values, missing) = &mut checked[*number];
                *if *value { values } else { missing } += 1;
            }
            if kept < BATCH {
                return (at, rows);
            }
        }
    }

    /// Looks at the row that starts at `start`, and keeps nothing but in the batch.
    fn look(&mut self, bytes: &[u8], start: usize, gathered: &Gathered) -> Option<Taken> {
        let (mut identifier, mut as_before, mut occasion, mut cell) = ((0, 0), false, 0, 0);
        let mut at = start;
        let last_field = self.fields.len() - 1;
        let ends = Ends { bytes, separator: self.separator };
        for (number, field) in self.fields.iter_mut().enumerate() {
            let end = match field {
                Field::Skipped => ends.cell(at)?.1,
                Field::Subject => {
                    let (before, word) = match self.batch.last() {
                        Some(row) => {
                            let before = &bytes[row.identifier.0..row.identifier.1];
                            (before, word_at(bytes, row.identifier.0).map_or(0, |word| to_the_top(word, before.len())))
                        }
                        None => {
                            let before = self.last.map_or(&[][..], |last| gathered.identifier(last));
                            (before, word_of(before))
                        }
                    };
                    if !before.is_empty() && ends.is_cell(at, before, word) {
                        as_before = true;
                        identifier = (at, at + before.len());
                        identifier.1
                    } else {
                        let (cell, end) = ends.cell(at)?;
                        as_before = !before.is_empty() && bytes[cell.clone()] == *before;
                        identifier = (cell.start, cell.end);
                        end
                    }
                }
                Field::Within { levels, stride } => {
                    let (level, end) = levels.find(&ends, at)?;
                    levels.foreseen = if level + 1 == levels.texts.len() { 0 } else { level + 1 };
                    occasion += level * *stride;
                    end
                }
                Field::Between { levels, stride } => {
                    let (level, end) = levels.find(&ends, at)?;
                    levels.foreseen = level;
                    cell += level * *stride;
                    end
                }
                Field::Value { outcome, occasion, range } => {
                    let plain = if self.number_may_be_missing { None } else { number::plain_prefix(&bytes[at..], self.decimal) };
                    let (value, end) = match plain.filter(|(_, length)| ends.is_end(at + length)) {
                        Some((value, length)) => (Some(value), at + length),
                        None => {
                            let (cell, end) = ends.cell(at)?;
                            (number_of(&bytes[cell], self.decimal, &self.missing)?, end)
                        }
                    };
                    let value = match value {
                        Some(value) => Some(value).filter(|value| value.abs() <= LARGEST && (*value == 0.0 || value.abs() >= SMALLEST))?,
                        None => f64::NAN,
                    };
                    if value < range[0] || value > range[1] {
                        return None;
                    }
                    self.values.push((*outcome, *occasion, value + 0.0));
                    end
                }
                Field::Check { number, kind } => {
                    let (cell, end) = ends.cell(at)?;
                    self.checks.push((*number, passes(kind, &bytes[cell], self.decimal, &self.missing)?));
                    end
                }
            };
            at = match bytes.get(end)? {
                byte if number < last_field => (*byte == self.separator).then_some(end + 1)?,
                b'\n' => end + 1,
                b'\r' if bytes.get(end + 1) == Some(&b'\n') => end + 2,
                _ => return None,
            };
        }
        let (values, checks) = (self.values.len(), self.checks.len());
        (at - start <= LONGEST_LINE).then_some(Taken {
            end: at,
            identifier,
            as_before,
            subject: 0,
            occasion,
            cell: cell as u32,
            values,
            checks,
        })
    }

    /// Finds or takes up the subjects of the batch; how many rows have one.
    fn find_subjects(&mut self, bytes: &[u8], line: usize, gathered: &mut Gathered) -> usize {
        for number in 0..self.batch.len() {
            let row = &self.batch[number];
            let identifier = &bytes[row.identifier.0..row.identifier.1];
            let before = if number > 0 { Some(self.batch[number - 1].subject) } else { self.last };
            let next = before.map(|before| before + 1);
            let found = if row.as_before { before } else { gathered.find(identifier, next.filter(|_| self.in_turn)) };
            self.in_turn = row.as_before || found.is_none() || found == next;
            let Some(subject) = found.or_else(|| self.new_subject(identifier, line + number, gathered)) else { return number };
            self.batch[number].subject = subject;
        }
        self.batch.len()
    }

    fn new_subject(&self, identifier: &[u8], line: usize, gathered: &mut Gathered) -> Option<usize> {
        let line = u32::try_from(line).ok()?;
        let text = text_of(identifier);
        let sound =
            !text.is_empty() && text.trim().len() == text.len() && !self.missing.contains(&text) && identifier != self.subject_column;
        sound.then(|| gathered.add(identifier, line)).flatten()
    }

    /// Keeps what the first `found` rows of the batch say, up to one whose subject has such a row already or was in another
    /// arm; how many were kept. Subjects of later rows may have been taken up by then: they stand in the file all the same.
    fn keep(&mut self, found: usize, line: usize, gathered: &mut Gathered) -> usize {
        let mut values = 0;
        for (number, row) in self.batch[..found].iter().enumerate() {
            let Ok(line) = u32::try_from(line + number) else { return number };
            let place = row.subject * self.occasions + row.occasion;
            let taken = if self.one_row { gathered.lines[row.subject] != line } else { gathered.seen[place] != 0 };
            if taken || (self.arms && !gathered.set_cell(row.subject, row.cell)) {
                return number;
            }
            if !self.one_row {
                gathered.seen[place] = line;
            }
            for (outcome, fixed, value) in &self.values[values..row.values] {
                gathered.values[*outcome][fixed.map_or(place, |fixed| row.subject * self.occasions + fixed)] = *value;
            }
            values = row.values;
            self.last = Some(row.subject);
        }
        found
    }
}

impl Levels<'_> {
    /// The level that the cell at `at` names, and where the cell ends.
    fn find(&self, ends: &Ends<'_>, at: usize) -> Option<(usize, usize)> {
        let in_turn = (self.foreseen..self.texts.len()).chain(0..self.foreseen);
        if ends.bytes.get(at) == Some(&b'"') {
            let (cell, end) = ends.cell(at)?;
            return in_turn.into_iter().find(|level| *self.texts[*level] == ends.bytes[cell.clone()]).map(|level| (level, end));
        }
        in_turn
            .into_iter()
            .find(|level| ends.is_cell(at, self.texts[*level], self.words[*level]))
            .map(|level| (level, at + self.texts[level].len()))
    }
}

struct Ends<'b> {
    bytes: &'b [u8],
    separator: u8,
}

impl Ends<'_> {
    /// Whether the cell that starts at `at` reads `text`, whose [`word_of`] is `word`, and ends there.
    fn is_cell(&self, at: usize, text: &[u8], word: u64) -> bool {
        // Eight bytes are compared at once where there are so many.
        let same = match word_at(self.bytes, at) {
            Some(here) if (1..=8).contains(&text.len()) => to_the_top(here, text.len()) == word,
            _ => self.bytes[at..].starts_with(text),
        };
        same && self.is_end(at + text.len())
    }

    fn is_end(&self, at: usize) -> bool {
        self.bytes.get(at).is_some_and(|byte| *byte == self.separator || *byte == b'\n' || *byte == b'\r')
    }

    /// The text of the cell that starts at `at`, and where the cell ends: up to the next separator or line end, or between
    /// two quotation marks with none of these, nor a third, within. `None` for all else.
    fn cell(&self, at: usize) -> Option<(Range<usize>, usize)> {
        let special = |byte: &u8| *byte == self.separator || matches!(byte, b'\n' | b'\r' | b'"');
        if self.bytes.get(at) == Some(&b'"') {
            let close = at + 1 + self.bytes[at + 1..].iter().position(special)?;
            return (self.bytes[close] == b'"' && self.is_end(close + 1)).then_some((at + 1..close, close + 1));
        }
        let end = at + self.bytes.get(at..)?.iter().position(special)?;
        (self.bytes[end] != b'"').then_some((at..end, end))
    }
}

fn word_at(bytes: &[u8], at: usize) -> Option<u64> {
    bytes.get(at..at + 8).and_then(|word| word.try_into().ok()).map(u64::from_le_bytes)
}

/// A text of one to eight bytes as a number, its last byte highest; zero for others.
fn word_of(text: &[u8]) -> u64 {
    if text.is_empty() || text.len() > 8 {
        return 0;
    }
    text.iter().rev().fold(0, |word, byte| word << 8 | u64::from(*byte)) << (64 - 8 * text.len())
}

/// The first `length` bytes of a word, moved to its top; zero for lengths that no word has.
fn to_the_top(word: u64, length: usize) -> u64 {
    if (1..=8).contains(&length) { word << (64 - 8 * length) } else { 0 }
}

/// A number, `Some(None)` where it is missing.
fn number_of(cell: &[u8], decimal: u8, missing: &[&str]) -> Option<Option<f64>> {
    let text = text_of(cell).trim();
    if missing.contains(&text) {
        return Some(None);
    }
    let value = parse(text.as_bytes(), decimal)?;
    (value.is_finite() && (value != 0.0 || is_written_zero(text.as_bytes()))).then_some(Some(value))
}

/// Whether a checked cell has a value, where it passes.
fn passes(kind: &ColumnKind, cell: &[u8], decimal: u8, missing: &[&str]) -> Option<bool> {
    match kind {
        ColumnKind::Number { range } => match number_of(cell, decimal, missing)? {
            Some(value) if range.is_none_or(|[least, greatest]| (least..=greatest).contains(&value)) => Some(true),
            Some(_) => None,
            None => Some(false),
        },
        ColumnKind::Text { allowed } => {
            let text = text_of(cell);
            if allowed.as_ref().is_some_and(|allowed| allowed.iter().any(|one| one == text)) {
                return Some(true);
            }
            let missing = missing.contains(&text.trim());
            (missing || allowed.is_none()).then_some(!missing)
        }
    }
}
