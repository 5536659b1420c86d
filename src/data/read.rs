//! Reading a file against its plan.

use super::blocks::{Flaw, LONGEST_LINE};
use super::cells::{Cell, wrong_number_of_fields};
use super::content;
use super::further::{self, Texts};
use super::problems::{Problems, quoted};
use super::quick::Quick;
use super::rows::{Broken, Row, Rows, TakeRows, each_row};
use super::schema::{Needed, Role, Schema, text_of};
use super::table::{Checked, Gathered, Sorted, Table};
use crate::plan::resolved::ResolvedPlan;
use crate::text::diagnostic::Diagnostic;
use std::collections::HashSet;
use std::io::{self, Read};
use std::ops::ControlFlow;

/// Whether arms that stand in the data file may be looked at.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ReadArms {
    /// They are read.
    Yes,
    /// Their columns must be there, and no cell of them is looked at or shown.
    No,
}

/// Reads a data file, `name` being what messages call it. The file is read once, on a thread of its own; memory grows with
/// the subjects, not with the rows.
///
/// # Errors
/// All that keeps the file from agreeing with the plan, in the order of the file, up to 20 findings of a kind. Where the
/// header lacks a column nothing after it is read: it may be another file.
pub fn read_data(plan: &ResolvedPlan, name: &str, reader: impl Read + Send, arms: ReadArms) -> Result<Table, Vec<Diagnostic>> {
    let schema = Schema::of_data(plan, arms == ReadArms::Yes);
    let read_arms = schema.arms;
    let mut read = read(schema, name, reader)?;
    let texts = further::number_texts(&mut read.sorted, read.texts);
    let content = content::hash(plan, read_arms, &read.sorted, &texts);
    let (covariates, strata) = further::split(plan, &read.sorted);
    let Sorted { subjects, lines, values, cell, .. } = read.sorted;
    let checked = plan
        .data
        .columns
        .iter()
        .enumerate()
        .map(|(number, check)| {
            let (values, missing) = read.checked[number];
            let unseen = read.unseen.contains(&check.column.as_str());
            Checked { column: check.column.clone(), values: (!unseen).then_some(values), missing }
        })
        .collect();
    Ok(Table {
        name: name.to_owned(),
        subjects,
        lines,
        values,
        cell: read_arms.then_some(cell),
        covariates,
        strata,
        content,
        rows: read.rows,
        checked,
        notes: Vec::new(),
    })
}

/// What reading a file gives.
pub(super) struct Contents<'p> {
    pub sorted: Sorted,
    pub rows: usize,
    /// For each check of the plan: cells with a value, cells without.
    pub checked: Vec<(usize, usize)>,
    /// Columns that were not looked at.
    pub unseen: Vec<&'p str>,
    /// For each further column the texts that it holds; none where it holds numbers.
    pub texts: Vec<Texts>,
}

/// Reads a file of which `schema` says what it must be.
pub(super) fn read<'p>(schema: Schema<'p>, name: &str, reader: impl Read + Send) -> Result<Contents<'p>, Vec<Diagnostic>> {
    let separator = schema.separator;
    let blind = schema.needed.iter().any(|needed| matches!(needed.role, Role::Unseen { .. }));
    let mut reading = Reading::new(schema, name);
    let outcome = each_row(reader, separator, if blind { Rows::OneLine } else { Rows::Quoted }, &mut reading);
    reading.finish(outcome)
}

struct Reading<'p> {
    schema: Schema<'p>,
    problems: Problems,
    gathered: Gathered,
    /// Cells of the header; empty until it is read.
    header: Vec<Vec<u8>>,
    quick: Option<Quick<'p>>,
    rows: usize,
    checked: Vec<(usize, usize)>,
    /// Values of the row at hand: outcome, occasion where the column says it, value.
    values: Vec<(usize, Option<usize>, f64)>,
    /// What further columns of the row at hand say: number of the column, bits, field.
    further: Vec<(usize, u64, usize)>,
    texts: Vec<Texts>,
    /// Subjects of whom it was said that their arm changes.
    changed: HashSet<usize>,
}

impl<'p> Reading<'p> {
    fn new(schema: Schema<'p>, name: &str) -> Self {
        Reading {
            problems: Problems::new(name, schema.separator),
            gathered: Gathered::new(schema.outcomes, schema.occasions, schema.further, schema.one_row, schema.arms),
            header: Vec::new(),
            quick: None,
            rows: 0,
            checked: vec![(0, 0); schema.checks],
            values: Vec::new(),
            further: Vec::new(),
            texts: vec![Texts::new(); schema.further],
            changed: HashSet::new(),
            schema,
        }
    }

    fn read_header(&mut self, row: &Row<'_>) -> ControlFlow<()> {
        self.schema.find_columns(row, &mut self.problems);
        self.header = (0..row.len()).map(|field| row.cell(field).to_vec()).collect();
        if !self.problems.is_empty() {
            return ControlFlow::Break(());
        }
        self.problems.set_header(self.schema.unseen(), row.len());
        self.quick = Quick::new(&self.schema, row.len());
        ControlFlow::Continue(())
    }

    fn is_header_again(&self, row: &Row<'_>) -> bool {
        let unseen =
            |field: usize| self.schema.needed.iter().any(|needed| needed.field == field && matches!(needed.role, Role::Unseen { .. }));
        row.len() == self.header.len()
            && (0..row.len()).all(|field| {
                let cell = row.cell(field);
                // A file appended to another may bring its byte order mark along.
                let cell = if field == 0 { cell.strip_prefix(b"\xef\xbb\xbf").unwrap_or(cell) } else { cell };
                unseen(field) || cell == self.header[field]
            })
    }

    fn data_row(&mut self, row: &Row<'_>) {
        let width = self.header.len();
        if row.raw.len() > LONGEST_LINE {
            return self.problems.add("line-too-long", |problems| long_line().at(problems.line(row.line, "this line")));
        }
        if self.is_header_again(row) {
            return self.problems.add("repeated-header", |problems| {
                Diagnostic::error("repeated-header", "the header stands here again")
                    .at(problems.cells_from(row, 0, "like the first line"))
                    .hint("two files may have been joined; remove this line, and see that no rows stand twice")
            });
        }
        if row.len() != width {
            return wrong_number_of_fields(row, width, &self.schema, &mut self.problems);
        }
        self.rows += 1;
        self.values.clear();
        self.further.clear();
        let (mut subject, mut occasion, mut cell) = (None, Some(0), Some(0));
        for needed in &self.schema.needed {
            let at = Cell { schema: &self.schema, row, column: needed.column, field: needed.field };
            let problems = &mut self.problems;
            match needed.role {
                Role::Subject => subject = at.subject(problems),
                Role::Within { factor, stride } => occasion = add(occasion, at.level(factor, problems), stride),
                Role::Between { factor, stride } => cell = add(cell, at.level(factor, problems), stride),
                Role::Unseen { .. } => {}
                Role::Value { outcome, of, occasion } => {
                    let value = at.value(of, problems);
                    self.values.extend(value.map(|value| (outcome, occasion, value)));
                }
                Role::Number { further, number, kind } => {
                    if let Some(there) = at.check(kind, problems) {
                        let (values, missing) = &mut self.checked[number];
                        *if there { values } else { missing } += 1;
                        self.further.extend(at.covariate(problems).map(|value| (further, value.to_bits(), needed.field)));
                    }
                }
                Role::Text { further } => {
                    if let Some(text) = at.stratum(problems) {
                        let id = further::id_of(&mut self.texts[further], text);
                        self.further.push((further, id, needed.field));
                    }
                }
                Role::Check { number, kind } => match at.check(kind, problems) {
                    Some(true) => self.checked[number].0 += 1,
                    Some(false) => self.checked[number].1 += 1,
                    None => {}
                },
            }
        }
        if let Some(identifier) = subject {
            self.store(row, identifier, occasion, cell);
        }
    }

    fn store(&mut self, row: &Row<'_>, identifier: &[u8], occasion: Option<usize>, cell: Option<usize>) {
        let line = row.line.min(u32::MAX as usize) as u32;
        let Some(subject) = self.gathered.subject(identifier, line) else {
            return self.problems.add("too-many-subjects", |problems| {
                Diagnostic::error("too-many-subjects", "the identifiers of the subjects fill more than four gigabytes")
                    .at(problems.line(row.line, "here"))
                    .hint("is this column really the identifier of a subject?")
            });
        };
        if self.schema.arms
            && let Some(cell) = cell
        {
            self.store_cell(row, subject, cell as u32);
        }
        if self.schema.one_row {
            let first = self.gathered.lines[subject];
            if first != line {
                self.duplicate(row, identifier, first as usize, None);
                return;
            }
        } else if let Some(occasion) = occasion {
            let seen = &mut self.gathered.seen[subject * self.schema.occasions + occasion];
            if *seen != 0 {
                let first = *seen as usize;
                self.duplicate(row, identifier, first, Some(occasion));
                return;
            }
            *seen = line;
        }
        for (column, bits, field) in std::mem::take(&mut self.further) {
            if !self.gathered.set_further(subject, column, bits) {
                let first = self.gathered.lines[subject] as usize;
                self.problems.add("column-changes", |problems| {
                    Diagnostic::error(
                        "column-changes",
                        format!("subject {} has another value here than on line {first}", quoted(text_of(identifier))),
                    )
                    .at(problems.cell(row, field, "another value"))
                    .at(problems.line(first, "first here"))
                    .hint("a covariate or stratum is a trait of the subject, the same in all its rows; mend the data")
                });
            }
        }
        for (outcome, fixed, value) in &self.values {
            if let Some(occasion) = fixed.or(occasion) {
                self.gathered.values[*outcome][subject * self.schema.occasions + occasion] = *value;
            }
        }
    }

    fn store_cell(&mut self, row: &Row<'_>, subject: usize, cell: u32) {
        if !self.gathered.set_cell(subject, cell) && self.changed.insert(subject) && !self.schema.one_row {
            let (identifier, first) = (self.gathered.identifier(subject), self.gathered.lines[subject] as usize);
            let arms = self.schema.needed.iter().filter(|needed| matches!(needed.role, Role::Between { .. }));
            let field = arms.clone().next().map_or(0, |needed| needed.field);
            let written: Vec<&str> = arms.map(|needed| text_of(row.cell(needed.field))).collect();
            self.problems.add("arm-changes", |problems| {
                Diagnostic::error("arm-changes", format!("subject {} is in another arm than on line {first}", quoted(text_of(identifier))))
                    .at(problems.cell(row, field, format!("{} here", quoted(&written.join("; ")))))
                    .at(problems.line(first, "another arm here"))
                    .hint("a subject stays in the arm it was allocated to, whatever it received later")
            });
        }
    }

    fn duplicate(&mut self, row: &Row<'_>, identifier: &[u8], first: usize, occasion: Option<usize>) {
        let within: Vec<&Needed<'_>> = self.schema.needed.iter().filter(|needed| matches!(needed.role, Role::Within { .. })).collect();
        self.problems.add("duplicate-row", |problems| {
            let at = match occasion {
                Some(_) => {
                    let levels: Vec<&str> = within.iter().map(|needed| text_of(row.cell(needed.field))).collect();
                    format!(" at {}", quoted(&levels.join("; ")))
                }
                None => String::new(),
            };
            let subject = self.schema.needed[0].field;
            Diagnostic::error(
                "duplicate-row",
                format!("subject {} has a second row{at}; the first is on line {first}", quoted(text_of(identifier))),
            )
            .at(problems.cell(row, subject, "again here"))
            .at(problems.line(first, "first here"))
            .hint("the plan cannot say which row counts; keep one")
        });
    }

    fn finish(mut self, outcome: io::Result<Option<Broken>>) -> Result<Contents<'p>, Vec<Diagnostic>> {
        let what = self.schema.what;
        match outcome {
            Err(error) => self.problems.add("unreadable", |problems| {
                Diagnostic::error("unreadable", format!("the {what} file cannot be read: {error}"))
                    .at(problems.line(1, ""))
                    .hint("see that it is a file, and that you may read it")
            }),
            Ok(Some(broken)) => self.broken(&broken),
            Ok(None) => {}
        }
        if self.problems.is_empty() && self.rows == 0 {
            let header = !self.header.is_empty();
            let rule = if header { "no-rows" } else { "empty-file" };
            self.problems.add(rule, |problems| {
                let message =
                    if header { format!("the {what} file has a header and no row of data") } else { format!("the {what} file is empty") };
                Diagnostic::error(rule, message).at(problems.line(1, "")).hint("is it the right file, and was it saved whole?")
            });
        }
        if !self.problems.is_empty() {
            return Err(self.problems.finish());
        }
        let unseen =
            self.schema.needed.iter().filter(|needed| matches!(needed.role, Role::Unseen { .. })).map(|needed| needed.column).collect();
        Ok(Contents { sorted: self.gathered.sorted(), rows: self.rows, checked: self.checked, unseen, texts: self.texts })
    }

    fn broken(&mut self, broken: &Broken) {
        match broken {
            Broken::Bytes(Flaw::NotUtf8, line, before) => self.problems.add("not-utf8", |problems| {
                let utf16 = *line == 1 && before.is_empty();
                Diagnostic::error("not-utf8", "the file is not UTF-8 text from here on")
                    .at(problems.after(*line, before, "not UTF-8"))
                    .hint(if utf16 { "save it as UTF-8; it may be UTF-16, or no text at all" } else { "save it as UTF-8; it may be in an older encoding such as Latin-1 or Windows-1252" })
            }),
            Broken::Bytes(Flaw::ZeroByte, line, before) => self.problems.add("zero-byte", |problems| {
                Diagnostic::error("zero-byte", "the file holds a zero byte, which no text has")
                    .at(problems.after(*line, before, "a zero byte"))
                    .hint("it may be UTF-16, a spreadsheet, or damaged; save it as CSV in UTF-8")
            }),
            Broken::Bytes(Flaw::LongLine, line, _) => self.problems.add("line-too-long", |problems| long_line().at(problems.line(*line, "this line"))),
            Broken::OpenQuote(line, before) => self.problems.add("unclosed-quote", |problems| {
                Diagnostic::error("unclosed-quote", "a quotation mark opens here and is never closed")
                    .at(problems.after(*line, before, "opened here"))
                    .hint("everything after it was taken for one cell and not checked; close it, or write it twice where it is meant as a character")
            }),
        }
    }
}

fn long_line() -> Diagnostic {
    Diagnostic::error("line-too-long", "this line is longer than a million bytes")
        .hint("a row of data is never as long; is it the right file, and has it line ends?")
}

fn add(sum: Option<usize>, level: Option<usize>, stride: usize) -> Option<usize> {
    Some(sum? + level? * stride)
}

impl TakeRows for Reading<'_> {
    fn quick(&mut self, bytes: &[u8], line: usize) -> (usize, usize) {
        match &mut self.quick {
            Some(quick) => {
                let (taken, rows) = quick.take(bytes, line, &mut self.gathered, &mut self.checked);
                self.rows += rows;
                (taken, rows)
            }
            None => (0, 0),
        }
    }

    fn row(&mut self, row: &Row<'_>) -> ControlFlow<()> {
        if self.header.is_empty() {
            return self.read_header(row);
        }
        self.data_row(row);
        ControlFlow::Continue(())
    }

    fn unclear(&mut self, line: usize) -> ControlFlow<()> {
        let message =
            format!("line {line}: its quotation marks do not pair up cell by cell, so that the arms in it could be shown by mistake");
        self.problems.add("row-not-on-one-line", |problems| {
            Diagnostic::error("row-not-on-one-line", message).at(problems.line(line, "this line")).hint(
                "where arms must not be seen, each row stands on one line and each quotation mark around a whole cell, a mark inside being doubled; \
                 mend the line (it is not shown here)",
            )
        });
        // Without a header the next line would be taken for one, and shown.
        if self.header.is_empty() { ControlFlow::Break(()) } else { ControlFlow::Continue(()) }
    }
}
