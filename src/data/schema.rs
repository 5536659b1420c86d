//! What a plan says of the columns of a file, and where a file has them.

use super::problems::{Problems, listed, quoted};
use super::rows::Row;
use crate::plan::resolved::{AllocationPlace, ColumnKind, DataPlan, Factor, Layout, Outcome, ResolvedPlan};
use crate::text::diagnostic::Diagnostic;
use crate::text::suggest::{nearest, same_but_for_case_or_space};

/// Separators that are tried on a header that lacks columns.
const SEPARATORS: [u8; 4] = [b',', b';', b'\t', b'|'];

/// What the cells of a column are.
#[derive(Clone, Copy)]
pub(super) enum Role<'p> {
    /// Identifier of the subject.
    Subject,
    /// Level of a within factor; one step in it is `stride` occasions.
    Within { factor: &'p Factor, stride: usize },
    /// Level of a between factor; one step in it is `stride` cells.
    Between { factor: &'p Factor, stride: usize },
    /// Level of a between factor that must not be looked at.
    Unseen { factor: Option<&'p Factor> },
    /// Value of an outcome; at one occasion, or at that which the row names.
    Value { outcome: usize, of: &'p Outcome, occasion: Option<usize> },
    /// A number of the subject, checked and kept as a further column.
    Number { further: usize, number: usize, kind: &'p ColumnKind },
    /// A text of the subject, kept as a further column.
    Text { further: usize },
    /// Checked, and not kept.
    Check { number: usize, kind: &'p ColumnKind },
}

/// A column that the plan names.
pub(super) struct Needed<'p> {
    /// Its name in the header.
    pub column: &'p str,
    /// What it holds.
    pub role: Role<'p>,
    /// Number of the field; known once the header is read.
    pub field: usize,
}

/// What a plan says of one file.
pub(super) struct Schema<'p> {
    /// Where the file came from, in words: `data` or `allocation`.
    pub what: &'static str,
    /// Every column that the plan names: the subject first, then what places a row, then what it holds.
    pub needed: Vec<Needed<'p>>,
    /// Number of occasions that the file has values for.
    pub occasions: usize,
    /// Number of outcomes that the file has values for.
    pub outcomes: usize,
    /// Number of checks in the plan.
    pub checks: usize,
    /// Number of further columns that are kept, one value for each subject.
    pub further: usize,
    /// Whether a subject may have only one row.
    pub one_row: bool,
    /// Whether arms are read.
    pub arms: bool,
    /// Texts that mean "missing".
    pub missing: Vec<&'p str>,
    /// Separator of fields.
    pub separator: u8,
    /// Decimal mark.
    pub decimal: u8,
}

impl<'p> Schema<'p> {
    /// What the plan says of the data file.
    pub fn of_data(plan: &'p ResolvedPlan, read_arms: bool) -> Self {
        let data = &plan.data;
        let in_the_data = data.allocation == AllocationPlace::InTheData;
        let mut schema = Schema::empty("data", data);
        schema.occasions = plan.design.occasions();
        schema.outcomes = plan.outcomes.len();
        schema.checks = data.columns.len();
        schema.arms = in_the_data && read_arms;
        match &data.layout {
            Layout::Long { occasions, values } => {
                for (at, (column, factor)) in occasions.iter().zip(&plan.design.within).enumerate() {
                    schema.needs(&column.column, Role::Within { factor, stride: stride(&plan.design.within, at) });
                }
                schema.one_row = occasions.is_empty();
                for (outcome, (column, of)) in values.iter().zip(&plan.outcomes).enumerate() {
                    schema.needs(&column.column, Role::Value { outcome, of, occasion: occasions.is_empty().then_some(0) });
                }
            }
            Layout::Wide { values } => {
                for (outcome, (columns, of)) in values.iter().zip(&plan.outcomes).enumerate() {
                    for (occasion, column) in columns.columns.iter().enumerate() {
                        schema.needs(column, Role::Value { outcome, of, occasion: Some(occasion) });
                    }
                }
            }
        }
        if in_the_data {
            schema.needs_arms(plan);
        }
        let covariates = plan.covariate_columns();
        let strata = plan.strata_columns();
        schema.further = covariates.len() + strata.len();
        for (number, check) in data.columns.iter().enumerate() {
            let unseen = in_the_data && !read_arms && data.arms.iter().any(|arm| arm.column == check.column);
            let covariate = covariates.iter().position(|column| *column == check.column);
            let role = match covariate {
                _ if unseen => Role::Unseen { factor: None },
                Some(further) => Role::Number { further, number, kind: &check.kind },
                None => Role::Check { number, kind: &check.kind },
            };
            schema.needs(&check.column, role);
        }
        for (place, column) in strata.into_iter().enumerate() {
            schema.needs(column, Role::Text { further: covariates.len() + place });
        }
        schema
    }

    /// What the plan says of the allocation file.
    pub fn of_allocation(plan: &'p ResolvedPlan, read_arms: bool) -> Self {
        let mut schema = Schema::empty("allocation", &plan.data);
        schema.arms = read_arms;
        schema.needs_arms(plan);
        schema
    }

    fn empty(what: &'static str, data: &'p DataPlan) -> Self {
        let mut schema = Schema {
            what,
            needed: Vec::new(),
            occasions: 0,
            outcomes: 0,
            checks: 0,
            further: 0,
            one_row: true,
            arms: false,
            missing: data.missing_values.iter().map(|text| text.trim()).collect(),
            separator: u8::try_from(data.separator).unwrap_or(b','),
            decimal: u8::try_from(data.decimal).unwrap_or(b'.'),
        };
        schema.needs(&data.subject, Role::Subject);
        schema
    }

    fn needs(&mut self, column: &'p str, role: Role<'p>) {
        self.needed.push(Needed { column, role, field: 0 });
    }

    fn needs_arms(&mut self, plan: &'p ResolvedPlan) {
        for (at, (column, factor)) in plan.data.arms.iter().zip(&plan.design.between).enumerate() {
            let role = if self.arms {
                Role::Between { factor, stride: stride(&plan.design.between, at) }
            } else {
                Role::Unseen { factor: Some(factor) }
            };
            self.needs(&column.column, role);
        }
    }

    /// Fields that must not be looked at.
    pub fn unseen(&self) -> Vec<usize> {
        self.needed.iter().filter(|needed| matches!(needed.role, Role::Unseen { .. })).map(|needed| needed.field).collect()
    }

    /// Whether a trimmed text means "missing".
    pub fn is_missing(&self, text: &str) -> bool {
        self.missing.contains(&text)
    }

    /// Finds the columns in a header; what is wrong with it goes to `problems`.
    pub fn find_columns(&mut self, header: &Row<'_>, problems: &mut Problems) {
        let names: Vec<&str> = (0..header.len()).map(|field| text_of(header.cell(field))).collect();
        let all_there = self.needed.iter().all(|needed| names.contains(&needed.column));
        if !all_there && self.is_data(header) {
            problems.add("no-header", |problems| {
                Diagnostic::error("no-header", format!("the {} file has no header: its first line holds data", self.what))
                    .at(problems.line(header.line, "the first line"))
                    .hint("put a line of column names before it, as the plan's `data` names them")
            });
            return;
        }
        if let Some(other) = self.other_separator(header, &names) {
            problems.add("wrong-separator", |problems| self.wrong_separator(other, problems.cells_from(header, 0, "the header")));
            return;
        }
        let mut told: Vec<&str> = Vec::new();
        for at in 0..self.needed.len() {
            let column = self.needed[at].column;
            let mut fields = (0..names.len()).filter(|field| names[*field] == column);
            match (fields.next(), fields.next()) {
                (Some(field), None) => self.needed[at].field = field,
                _ if told.contains(&column) => {}
                (Some(first), Some(second)) => problems.add("duplicate-column", |problems| {
                    Diagnostic::error("duplicate-column", format!("two columns are called {}", quoted(column)))
                        .at(problems.cell(header, second, "again here"))
                        .at(problems.cell(header, first, "first here"))
                        .hint("the plan uses this column, and cannot say which of them; rename or remove one")
                }),
                (None, _) => problems.add("missing-column", |problems| self.missing_column(column, header, &names, problems)),
            }
            told.push(column);
        }
    }

    /// Whether what should be the header names a level of a factor. Such a line is not shown: it may say who had which arm.
    fn is_data(&self, header: &Row<'_>) -> bool {
        let cells: Vec<&str> =
            text_of(header.raw).split(|c: char| SEPARATORS.iter().any(|other| *other as char == c) || c == '"').collect();
        self.needed.iter().any(|needed| match needed.role {
            Role::Within { factor, .. } | Role::Between { factor, .. } | Role::Unseen { factor: Some(factor) } => {
                let is_level = |cell: &&str| factor.levels.iter().any(|level| level == cell || same_but_for_case_or_space(level, cell));
                cells.iter().any(is_level)
            }
            _ => false,
        })
    }

    /// A separator by which the header has more of the columns that the plan names.
    fn other_separator(&self, header: &Row<'_>, names: &[&str]) -> Option<u8> {
        let count = |names: &[&str]| self.needed.iter().filter(|needed| names.contains(&needed.column)).count();
        let now = count(names);
        if now == self.needed.len() {
            return None;
        }
        let raw = text_of(header.raw);
        SEPARATORS.into_iter().filter(|other| *other != self.separator).find(|other| {
            let cells: Vec<&str> = raw.split(*other as char).map(|cell| cell.trim().trim_matches('"')).collect();
            cells.len() > names.len() && (count(&cells) > now || names.len() == 1)
        })
    }

    fn wrong_separator(&self, other: u8, label: crate::text::diagnostic::Label) -> Diagnostic {
        let (written, announced) = (separator_in_words(other), separator_in_words(self.separator));
        let mut hint = match other {
            b',' => "leave `separator:` out of the plan's `data`, or save the file anew".to_owned(),
            b'\t' => "write `separator: tab` under the plan's `data`, or save the file anew".to_owned(),
            other => format!("write `separator: \"{}\"` under the plan's `data`, or save the file anew", other as char),
        };
        if other == b';' && self.decimal == b'.' {
            hint.push_str("; files separated so often have decimal commas too, which need `decimal: \",\"`");
        }
        Diagnostic::error(
            "wrong-separator",
            format!("the {} file seems to be separated by {written}, but the plan announces {announced}", self.what),
        )
        .at(label)
        .hint(hint)
    }

    fn missing_column(&self, column: &str, header: &Row<'_>, names: &[&str], problems: &Problems) -> Diagnostic {
        let taken = |name: &str| self.needed.iter().any(|needed| needed.column == name);
        let meant = nearest(column, names.iter().copied().filter(|name| !taken(name)));
        let label = match meant.and_then(|meant| names.iter().position(|name| *name == meant)) {
            Some(field) => problems.cell(header, field, "is this it?"),
            None => problems.cells_from(header, 0, "the header"),
        };
        let hint = match meant {
            Some(meant) => format!("the file has a column {}: names must agree letter by letter", quoted(meant)),
            None => {
                let few: Vec<&str> = names.iter().copied().take(20).collect();
                let more = if names.len() > few.len() { ", ..." } else { "" };
                format!("the file has these columns: {}{more}", listed(few))
            }
        };
        Diagnostic::error("missing-column", format!("the {} file has no column {}, which the plan names", self.what, quoted(column)))
            .at(label)
            .hint(hint)
    }
}

/// How many cells further on the next level of a factor is, with the last factor fastest.
fn stride(factors: &[Factor], at: usize) -> usize {
    factors[at + 1..].iter().map(|factor| factor.levels.len()).product()
}

fn separator_in_words(separator: u8) -> &'static str {
    match separator {
        b',' => "commas",
        b';' => "semicolons",
        b'\t' => "tabs",
        _ => "vertical bars",
    }
}

/// Bytes that were found to be UTF-8 when their block was read.
pub(super) fn text_of(bytes: &[u8]) -> &str {
    std::str::from_utf8(bytes).unwrap_or("")
}
