//! What one cell must be, and what is said where it is not.

use super::number::{LARGEST, NotANumber, SMALLEST, is_written_zero, parse, why_not};
use super::problems::{Problems, grouped, listed, quoted};
use super::rows::Row;
use super::schema::{Schema, text_of};
use crate::plan::resolved::{ColumnKind, Factor, Outcome};
use crate::text::diagnostic::Diagnostic;
use crate::text::suggest::{nearest, same_but_for_case_or_space};

/// A cell that is to be read, and where what is wrong with it goes.
pub(super) struct Cell<'s, 'p, 'r> {
    pub schema: &'s Schema<'p>,
    pub row: &'s Row<'r>,
    pub column: &'s str,
    pub field: usize,
}

impl<'r> Cell<'_, '_, 'r> {
    fn bytes(&self) -> &'r [u8] {
        self.row.cell(self.field)
    }

    fn text(&self) -> &'r str {
        text_of(self.bytes())
    }

    fn finding(&self, problems: &mut Problems, rule: &'static str, label: &str, message: impl FnOnce() -> (String, String)) {
        problems.add(rule, |problems| {
            let (message, hint) = message();
            Diagnostic::error(rule, message).at(problems.cell(self.row, self.field, label)).hint(hint)
        });
    }

    /// The identifier of a subject.
    pub fn subject(&self, problems: &mut Problems) -> Option<&'r [u8]> {
        let text = self.text();
        let trimmed = text.trim();
        if trimmed.is_empty() || self.schema.is_missing(trimmed) {
            self.finding(problems, "missing-identifier", "no identifier", || {
                (
                    format!(
                        "this row does not say whose it is: its `{}` is {}",
                        self.column,
                        if trimmed.is_empty() { "empty".to_owned() } else { quoted(trimmed) }
                    ),
                    "every row needs the identifier of its subject".to_owned(),
                )
            });
            return None;
        }
        if trimmed.len() != text.len() {
            self.finding(problems, "space-around-identifier", "has space around it", || {
                (
                    format!("the identifier {} begins or ends with a space", quoted(text)),
                    format!("one subject could be taken for two; write {} everywhere", quoted(trimmed)),
                )
            });
            return None;
        }
        Some(self.bytes())
    }

    /// The number of a level of a factor.
    pub fn level(&self, factor: &Factor, problems: &mut Problems) -> Option<usize> {
        let text = self.text();
        let found = factor.levels.iter().position(|level| level == text);
        if found.is_none() {
            let levels = || listed(factor.levels.iter().map(String::as_str));
            if text.trim().is_empty() {
                self.finding(problems, "missing-level", "empty", || {
                    (
                        format!("this row does not say which {} it is of: its `{}` is empty", factor.name, self.column),
                        format!("it may be: {}", levels()),
                    )
                });
            } else if let Some(level) = factor.levels.iter().find(|level| same_but_for_case_or_space(level, text)) {
                self.finding(problems, "unknown-level", &format!("the plan writes {}", quoted(level)), || {
                    (
                        format!("{} differs from the level {} of `{}` by case or space", quoted(text), quoted(level), factor.name),
                        "levels must agree letter by letter, so that none is taken for another; mend the data, or the plan before it is sealed".to_owned(),
                    )
                });
            } else {
                self.finding(problems, "unknown-level", "unknown", || {
                    let hint = match nearest(text, factor.levels.iter().map(String::as_str)) {
                        Some(level) => format!("did you mean {}? the levels are: {}", quoted(level), levels()),
                        None => format!("the levels are: {}", levels()),
                    };
                    (format!("{} is not a level of `{}`", quoted(text), factor.name), hint)
                });
            }
        }
        found
    }

    /// A value of an outcome; NaN where it is missing.
    pub fn value(&self, outcome: &Outcome, problems: &mut Problems) -> Option<f64> {
        let value = self.number(problems)?;
        let Some(value) = value else { return Some(f64::NAN) };
        let value = self.in_bounds(value, problems)?;
        if let Some([least, greatest]) = outcome.range
            && !(least..=greatest).contains(&value)
        {
            self.outside(least, greatest, &format!("the range of `{}`", outcome.name), problems);
            return None;
        }
        Some(value)
    }

    /// A number whose square can be held.
    fn in_bounds(&self, value: f64, problems: &mut Problems) -> Option<f64> {
        if value.abs() > LARGEST || (value != 0.0 && value.abs() < SMALLEST) {
            self.finding(problems, "number-out-of-bounds", "cannot be computed with", || {
                let large = value.abs() > LARGEST;
                (
                    format!("{} is too {} to be computed with", quoted(self.text().trim()), if large { "large" } else { "small" }),
                    format!(
                        "variances need its square, which {}; give values between {SMALLEST:e} and {LARGEST:e} in size, in another unit perhaps",
                        if large { "no double can hold" } else { "a double cannot tell from zero" }
                    ),
                )
            });
            return None;
        }
        // Zero has one form, so that equal data have equal hashes.
        Some(value + 0.0)
    }

    /// A covariate that has passed its check; NaN where it is missing.
    pub fn covariate(&self, problems: &mut Problems) -> Option<f64> {
        let Some(value) = self.number(problems)? else { return Some(f64::NAN) };
        self.in_bounds(value, problems)
    }

    /// A text that says which stratum the subject belongs to.
    pub fn stratum(&self, problems: &mut Problems) -> Option<&'r [u8]> {
        let text = self.text();
        if text.trim().is_empty() || self.schema.is_missing(text.trim()) {
            self.finding(problems, "missing-stratum", "no stratum", || {
                (
                    format!("this row does not say which stratum its subject was randomised in: its `{}` is missing", self.column),
                    "the plan deals arms again within it; look it up in the records of the randomisation".to_owned(),
                )
            });
            return None;
        }
        Some(self.bytes())
    }

    /// Holds a cell to a check of the plan; whether there is a value.
    pub fn check(&self, kind: &ColumnKind, problems: &mut Problems) -> Option<bool> {
        match kind {
            ColumnKind::Number { range } => {
                let Some(value) = self.number(problems)? else { return Some(false) };
                if let Some([least, greatest]) = *range
                    && !(least..=greatest).contains(&value)
                {
                    self.outside(least, greatest, &format!("what the plan allows in `{}`", self.column), problems);
                    return None;
                }
                Some(true)
            }
            ColumnKind::Text { allowed } => {
                let text = self.text();
                let Some(allowed) = allowed else { return Some(!self.schema.is_missing(text.trim())) };
                if allowed.iter().any(|one| one == text) {
                    return Some(true);
                }
                if self.schema.is_missing(text.trim()) {
                    return Some(false);
                }
                self.finding(problems, "text-not-allowed", "not allowed", || {
                    let meant = nearest(text, allowed.iter().map(String::as_str));
                    let hint = match meant {
                        Some(meant) if same_but_for_case_or_space(meant, text) => {
                            format!("the plan writes {}; the two differ by case or space", quoted(meant))
                        }
                        Some(meant) => format!("did you mean {}?", quoted(meant)),
                        None => format!("it may be: {}", listed(allowed.iter().take(20).map(String::as_str))),
                    };
                    (format!("{} is not among the texts that the plan allows in `{}`", quoted(text), self.column), hint)
                });
                None
            }
        }
    }

    fn outside(&self, least: f64, greatest: f64, what: &str, problems: &mut Problems) {
        self.finding(problems, "out-of-range", "out of range", || {
            (
                format!("{} is outside {what}, {least} to {greatest}", quoted(self.text().trim())),
                "look it up in the source; a value that is not known must be written as a missing value".to_owned(),
            )
        });
    }

    /// A number; `Some(None)` where it is missing.
    fn number(&self, problems: &mut Problems) -> Option<Option<f64>> {
        let text = self.text().trim();
        if self.schema.is_missing(text) {
            return Some(None);
        }
        match parse(text.as_bytes(), self.schema.decimal) {
            Some(value) if value.is_infinite() => {
                self.finding(problems, "number-out-of-bounds", "too large", || {
                    (format!("{} is larger than any double", quoted(text)), "look it up in the source".to_owned())
                });
                None
            }
            Some(0.0) if !is_written_zero(text.as_bytes()) => {
                self.finding(problems, "number-out-of-bounds", "too small", || {
                    (format!("{} is smaller than any double", quoted(text)), "write 0 if it is meant to be zero".to_owned())
                });
                None
            }
            Some(value) => Some(Some(value)),
            None => {
                self.not_a_number(text, problems);
                None
            }
        }
    }

    fn not_a_number(&self, text: &str, problems: &mut Problems) {
        if text.is_empty() {
            let hint = match self.schema.missing.as_slice() {
                [] => "the plan announces no missing values; add `missing values: [\"\"]` to its `data`, or fill in the cell".to_owned(),
                texts => format!(
                    "the plan's missing values are {}, and an empty cell is not among them; add `\"\"`, or fill in the cell",
                    listed(texts.iter().copied())
                ),
            };
            return self.finding(problems, "empty-cell", "empty", || (format!("`{}` is empty here", self.column), hint));
        }
        let what = quoted(text);
        let [mark, other] = if self.schema.decimal == b'.' { ["point", "comma"] } else { ["comma", "point"] };
        match why_not(text, self.schema.decimal) {
            NotANumber::NotFinite => self.finding(problems, "not-finite", "not a finite number", || {
                (
                    format!("{what} stands where a number is due in `{}`", self.column),
                    "nothing can be computed from it; if it means that the value is missing, list it under the plan's `missing values`"
                        .to_owned(),
                )
            }),
            NotANumber::OtherDecimalMark => self.finding(problems, "decimal-mark", &format!("a decimal {other}?"), || {
                let announce = if other == "comma" {
                    "write `decimal: \",\"` under the plan's `data`"
                } else {
                    "leave `decimal:` out of the plan's `data`"
                };
                (
                    format!("{what} has a decimal {other}, but the plan announces a decimal {mark}"),
                    format!("{announce}, or save the file with decimal {mark}s; if the {other} sets thousands apart, remove it"),
                )
            }),
            NotANumber::Grouped => self.finding(problems, "thousands-set-apart", "digits in groups", || {
                (format!("{what} has its thousands set apart"), "write the digits without anything between them, as in 12345.6".to_owned())
            }),
            NotANumber::MinusSign => self.finding(problems, "not-a-number", "a typographic minus", || {
                (
                    format!("{what} begins with a typographic minus sign"),
                    "write the plain hyphen of the keyboard before the digits".to_owned(),
                )
            }),
            NotANumber::WithUnit => self.finding(problems, "not-a-number", "a number and more", || {
                (
                    format!("{what} is a number followed by something else, in `{}`", self.column),
                    "write the number alone; the unit belongs in the plan".to_owned(),
                )
            }),
            NotANumber::Text => self.finding(problems, "not-a-number", "text", || {
                (
                    format!("{what} is text where a number is due in `{}`", self.column),
                    "if it means that the value is missing, list it under the plan's `missing values`".to_owned(),
                )
            }),
        }
    }
}

/// A row whose number of cells is not that of the header.
pub(super) fn wrong_number_of_fields(row: &Row<'_>, width: usize, schema: &Schema<'_>, problems: &mut Problems) {
    problems.add("wrong-number-of-fields", |problems| {
        let many = row.len() > width;
        let label = if many { problems.cells_from(row, width, "too many") } else { problems.cells_from(row, row.len() - 1, "the row ends here") };
        let lines = super::rows::count_lines(row.raw);
        let digits = |field: usize| {
            let cell = row.cell(field);
            !cell.is_empty() && cell.iter().all(u8::is_ascii_digit)
        };
        let hint = if lines > 0 {
            format!("the row ends {} further down: is a quotation mark missing?", if lines == 1 { "one line".to_owned() } else { format!("{} lines", grouped(lines)) })
        } else if many && schema.separator == b',' && (1..row.len()).any(|field| digits(field - 1) && digits(field)) {
            "if its numbers have decimal commas, separate the fields by semicolons, and write `separator: \";\"` and `decimal: \",\"` in the plan".to_owned()
        } else if many {
            "a cell that holds the separator itself must stand between quotation marks".to_owned()
        } else {
            "an empty cell still needs its separator".to_owned()
        };
        let cells = if row.len() == 1 { "cell" } else { "cells" };
        Diagnostic::error("wrong-number-of-fields", format!("this row has {} {cells}, but the header has {width}", row.len())).at(label).hint(hint)
    });
}
