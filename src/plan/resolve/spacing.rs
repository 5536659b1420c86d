//! Where the levels of a factor stand on the axis of a trend.

use super::reader::{Fields, Reader};
use crate::plan::resolved::Factor;
use crate::plan::syntax::tree::{Entry, Node, Value};
use crate::text::source::Span;
use std::cell::Cell;

/// `spacing:` of a step, and whether a trend has asked for it.
pub(super) struct Spacing<'n> {
    entry: Option<&'n Entry>,
    used: Cell<bool>,
}

impl<'n> Spacing<'n> {
    pub fn of_step(fields: &Fields<'n>) -> Self {
        Spacing { entry: fields.entry("spacing"), used: Cell::new(false) }
    }

    /// The position of each level of a factor.
    pub fn of(&self, reader: &Reader<'_>, factor: &Factor, asked: Span) -> Option<Vec<f64>> {
        self.used.set(true);
        let name = &factor.name;
        let Some(entry) = self.entry else {
            reader.error(
                "missing-key",
                asked,
                format!("trends over `{name}` need `spacing`"),
                "needs spacing",
                format!("say where the levels stand, such as `spacing: {{{name}: [0, 6, 26]}}`, or `spacing: {{{name}: even}}`: it moves the weights"),
            );
            return None;
        };
        let node = match &entry.node.value {
            Value::Map(entries) => match entries.iter().find(|entry| entry.key == *name) {
                Some(found) => &found.node,
                None => {
                    reader.error(
                        "missing-key",
                        reader.first_line(entry.node.span),
                        format!("`spacing` lacks the factor `{name}`"),
                        "missing here",
                        "give a position for each of its levels",
                    );
                    return None;
                }
            },
            _ => &entry.node,
        };
        positions(reader, node, factor)
    }

    /// Says where `spacing` is given and no trend uses it.
    pub fn has_a_use(&self, reader: &Reader<'_>) {
        if let Some(entry) = self.entry.filter(|_| !self.used.get()) {
            reader.error(
                "misplaced-key",
                entry.key_span,
                "`spacing` has no use here",
                "here",
                "only the split `trends` needs it; remove it",
            );
        }
    }
}

fn positions(reader: &Reader<'_>, node: &Node, factor: &Factor) -> Option<Vec<f64>> {
    let count = factor.levels.len();
    if node.text() == Some("even") {
        return Some((0..count).map(|place| place as f64).collect());
    }
    let what = format!("the spacing of `{}`", factor.name);
    if node.list().is_none() {
        reader.wrong_type(node, &what, "a list of positions, or `even`");
        return None;
    }
    let items = node.list()?;
    if items.len() != count {
        reader.error(
            "wrong-spacing",
            node.span,
            format!("{what} has {} position{}, the factor {count} levels", items.len(), if items.len() == 1 { "" } else { "s" }),
            "here",
            format!("give one for each of {}, in that order", factor.levels.join(", ")),
        );
        return None;
    }
    let found: Option<Vec<f64>> = items.iter().map(|item| reader.number(item, "a position")).collect();
    let found = found?;
    if let Some(place) = (1..count).find(|place| found[*place] <= found[*place - 1]) {
        reader.error(
            "wrong-spacing",
            items[place].span,
            format!("`{}` does not stand after `{}`", factor.levels[place], factor.levels[place - 1]),
            "not larger than the one before",
            "positions rise with the levels, such as weeks since the start; reorder the levels if they do not",
        );
        return None;
    }
    Some(found)
}
