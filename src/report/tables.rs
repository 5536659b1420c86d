//! Tables and numbers of the view.

use crate::canon::number::Finite;
use crate::results::numbers;
use serde::{Serialize, Serializer};

/// A table of the report. Cells are Markdown already; templates get the whole table as Markdown, its notes below it.
#[derive(Debug, Clone)]
pub(super) struct Table {
    /// Heads of the columns; those of numbers are set right.
    pub columns: Vec<Column>,
    pub rows: Vec<Vec<String>>,
    pub notes: Vec<String>,
}

#[derive(Debug, Clone)]
pub(super) struct Column {
    pub head: String,
    pub number: bool,
}

impl Serialize for Table {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_str(&self.to_markdown())
    }
}

impl Table {
    /// Heads that start with `#` are of numbers.
    pub fn new(heads: &[&str]) -> Self {
        let columns = heads
            .iter()
            .map(|head| match head.strip_prefix('#') {
                Some(head) => Column { head: head.to_owned(), number: true },
                None => Column { head: (*head).to_owned(), number: false },
            })
            .collect();
        Table { columns, rows: Vec::new(), notes: Vec::new() }
    }

    fn to_markdown(&self) -> String {
        let line = |cells: &mut dyn Iterator<Item = &str>| format!("| {} |\n", cells.collect::<Vec<_>>().join(" | "));
        let mut text = line(&mut self.columns.iter().map(|column| column.head.as_str()));
        text.push_str(&line(&mut self.columns.iter().map(|column| if column.number { "---:" } else { "---" })));
        for row in &self.rows {
            text.push_str(&line(&mut row.iter().map(String::as_str)));
        }
        if !self.notes.is_empty() {
            text.push_str(&format!("\n{}\n", self.notes.join(" ")));
        }
        text
    }

    /// Takes out the columns that say nothing, but for the first ones.
    pub fn drop_empty_columns(&mut self, keep: usize) {
        let says = |place: usize| place < keep || self.rows.iter().any(|row| row[place] != "-");
        let kept: Vec<usize> = (0..self.columns.len()).filter(|place| says(*place)).collect();
        self.columns = kept.iter().map(|place| self.columns[*place].clone()).collect();
        for row in &mut self.rows {
            *row = kept.iter().map(|place| std::mem::take(&mut row[*place])).collect();
        }
    }

    pub fn row(&mut self, cells: impl IntoIterator<Item = String>) {
        self.rows.push(cells.into_iter().map(|cell| if cell.is_empty() { "-".to_owned() } else { cell }).collect());
    }
}

/// A number with four significant digits, or nothing.
pub(super) fn number(value: Option<Finite>) -> String {
    value.map(|value| numbers::significant(value.get(), 4)).unwrap_or_default()
}

pub(super) fn p(value: Option<Finite>, bound: bool) -> String {
    value.map(|value| numbers::p_value(value.get(), bound)).unwrap_or_default()
}

/// `p = 0.012`, or `p below 1e-300`.
pub(super) fn p_in_words(value: Finite, bound: bool) -> String {
    let text = numbers::p_value(value.get(), bound);
    if text.starts_with(|c: char| c.is_ascii_digit()) { format!("p = {text}") } else { format!("p {text}") }
}

pub(super) fn df(values: &[Finite]) -> String {
    values.iter().map(|df| numbers::degrees_of_freedom(df.get())).collect::<Vec<_>>().join(", ")
}

pub(super) fn estimate(value: Option<Finite>, error: Option<Finite>) -> String {
    value.map(|value| numbers::estimate(value.get(), error.map(Finite::get))).unwrap_or_default()
}

pub(super) fn interval(value: Option<[Finite; 2]>, error: Option<Finite>) -> String {
    value.map(|[lower, upper]| format!("{} to {}", estimate(Some(lower), error), estimate(Some(upper), error))).unwrap_or_default()
}

/// A level of confidence as a percentage.
pub(super) fn percent(level: Finite) -> String {
    // 0.95 as 95, not 95.00000000000001.
    let text = format!("{:.6}", level.get() * 100.0);
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// `1 subject`, `2 subjects`.
pub(super) fn counted(count: usize, one: &str, many: &str) -> String {
    format!("{count} {}", if count == 1 { one } else { many })
}
