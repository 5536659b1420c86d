//! Factors, levels, and what was randomised.

use super::reader::Reader;
use crate::plan::resolved::{DataPlan, Design, Factor, FactorKind, Randomised};
use crate::plan::syntax::tree::{Node, Value};
use crate::text::source::Span;
use crate::text::suggest::fold;
use std::collections::HashMap;

/// Larger designs are refused: no study has them, and matrices grow with their square.
const MOST_CELLS: usize = 1000;

pub(super) fn design(reader: &Reader<'_>, node: &Node) -> Option<Design> {
    let fields = reader.map(node, "`design`", &["between", "within", "randomised"], &["clusters"])?;
    let mut names: Vec<(String, Span)> = Vec::new();
    let between = fields.get("between").map_or(Some(Vec::new()), |node| factors(reader, node, false, &mut names));
    let within = fields.get("within").map_or(Some(Vec::new()), |node| factors(reader, node, true, &mut names));
    let (between, within) = (between?, within?);
    if between.is_empty() && within.is_empty() {
        reader.error(
            "missing-key",
            reader.first_line(fields.span),
            "the design has no factor",
            "no factor here",
            "name the arms under `between:`, the occasions under `within:`, or both",
        );
        return None;
    }
    let mut design = Design { between, within, randomised: None };
    for (count, what) in [(design.cells(), "between cells"), (design.occasions(), "occasions")] {
        if count > MOST_CELLS {
            reader.error(
                "design-too-large",
                reader.first_line(fields.span),
                format!("the design has {count} {what}; at most {MOST_CELLS} can be analysed"),
                "too many levels",
                "leave out factors or levels",
            );
            return None;
        }
    }
    design.randomised = fields.get("randomised").and_then(|node| randomised(reader, node, &design));
    Some(design)
}

fn factors(reader: &Reader<'_>, node: &Node, within: bool, names: &mut Vec<(String, Span)>) -> Option<Vec<Factor>> {
    let side = if within { "`within`" } else { "`between`" };
    let entries = reader.entries(node, side, "a map of factors to their levels")?;
    let mut factors = Vec::new();
    let mut sound = true;
    for entry in entries {
        if let Some((_, first)) = names.iter().find(|(name, _)| *name == entry.key) {
            reader.conflict(
                "duplicate-name",
                [(entry.key_span, "the second"), (*first, "the first")],
                format!("two factors are called `{}`", entry.key),
                "give each factor a name of its own",
            );
            sound = false;
            continue;
        }
        names.push((entry.key.clone(), entry.key_span));
        match factor(reader, &entry.key, &entry.node, within) {
            Some(factor) => factors.push(factor),
            None => sound = false,
        }
    }
    sound.then_some(factors)
}

fn factor(reader: &Reader<'_>, name: &str, node: &Node, within: bool) -> Option<Factor> {
    let (levels, kind) = match &node.value {
        Value::Map(_) if within => {
            let fields = reader.map(node, &format!("within factor `{name}`"), &["kind", "levels"], &[])?;
            let kind = match fields.get("kind") {
                None => FactorKind::Time,
                Some(kind) => reader
                    .word(kind, "`kind` of a within factor", &[("time", FactorKind::Time), ("condition", FactorKind::Condition)], &[])
                    // What was said of the kind need not keep the steps from being read.
                    .unwrap_or(FactorKind::Time),
            };
            (reader.required(&fields, "levels", &format!("within factor `{name}`"), "list the levels in their order")?, kind)
        }
        _ => (node, if within { FactorKind::Time } else { FactorKind::Between }),
    };
    let items = reader.list(levels, &format!("levels of `{name}`"))?;
    let found = reader.texts(levels, &format!("a level of `{name}`"));
    if found.len() != items.len() {
        return None;
    }
    if found.len() < 2 {
        reader.error(
            "too-few-levels",
            levels.span,
            format!("factor `{name}` has {} level{}", found.len(), if found.len() == 1 { "" } else { "s" }),
            "two or more are needed",
            "a factor compares levels; leave it out if there is nothing to compare",
        );
        return None;
    }
    let mut sound = true;
    let mut seen: HashMap<String, (&str, Span)> = HashMap::new();
    for (level, span) in &found {
        if level.chars().any(char::is_control) {
            reader.error(
                "wrong-level",
                *span,
                format!("a level of `{name}` holds a line end or another control character"),
                "here",
                "a level stands in one cell of one line; write its name on one line",
            );
            sound = false;
        }
        if let Some((other, first)) = seen.insert(fold(level), (level, *span)) {
            let differ = if *level == other { "twice" } else { "twice, but for case or space" };
            reader.conflict(
                "duplicate-level",
                [(*span, "the second"), (first, "the first")],
                format!("factor `{name}` has the level `{level}` {differ}"),
                "levels must be told apart in the data; rename or remove one",
            );
            sound = false;
        }
    }
    sound.then(|| Factor { name: name.to_owned(), levels: found.into_iter().map(|(level, _)| level.to_owned()).collect(), kind })
}

fn randomised(reader: &Reader<'_>, node: &Node, design: &Design) -> Option<Randomised> {
    let fields = reader.map(node, "`randomised`", &["factors", "scheme", "strata"], &[])?;
    let defined: Vec<&str> = design.between.iter().map(|factor| factor.name.as_str()).collect();
    let node = reader.required(&fields, "factors", "`randomised`", "name the between factors whose levels were dealt at random")?;
    let mut factors = Vec::new();
    for (name, span) in reader.texts(node, "a randomised factor") {
        reader.name(name, span, "between factor", &defined)?;
        factors.push(name.to_owned());
    }
    let strata = fields.get("strata").map_or(Vec::new(), |node| {
        if node.list().is_some_and(<[Node]>::is_empty) { Vec::new() } else { reader.texts(node, "a stratum's column") }
    });
    Some(Randomised {
        factors,
        scheme: reader.optional_text(&fields, "scheme"),
        strata: strata.into_iter().map(|(column, _)| column.to_owned()).collect(),
    })
}

/// Says where a stratum is the subject's identifier or an arm: within it there would be nothing to deal.
pub(super) fn strata_are_columns_of_their_own(reader: &Reader<'_>, node: &Node, design: &Design, data: &DataPlan) {
    let Some(randomised) = &design.randomised else { return };
    let Some(place) = node.get("randomised").and_then(|node| node.get("strata")) else { return };
    for column in &randomised.strata {
        let what = if *column == data.subject {
            "the identifier of the subject"
        } else if data.arms.iter().any(|arm| arm.column == *column) {
            "an arm"
        } else {
            continue;
        };
        reader.error(
            "wrong-stratum",
            place.span,
            format!("the stratum `{column}` is {what}, so that nothing could be dealt again within it"),
            "here",
            "name the columns that stratified the randomisation, such as a site or a block; leave `strata` out if there were none",
        );
    }
}

/// The factors of an effect, from text such as `arm by visit`; names may themselves hold ` by `.
pub(super) fn effect(reader: &Reader<'_>, text: &str, span: Span, factors: &[&str]) -> Option<Vec<usize>> {
    let pieces: Vec<&str> = text.split(" by ").collect();
    let mut found = Vec::new();
    let mut start = 0;
    while start < pieces.len() {
        // The longest run of pieces that is a factor's name.
        let end = (start + 1..=pieces.len()).rev().find(|end| factors.contains(&pieces[start..*end].join(" by ").as_str()));
        let Some(end) = end else {
            reader.name(pieces[start], span, "factor", factors);
            return None;
        };
        let name = pieces[start..end].join(" by ");
        let place = factors.iter().position(|factor| *factor == name)?;
        if found.contains(&place) {
            reader.error("duplicate-name", span, format!("the factor `{name}` stands twice in `{text}`"), "here", "name each factor once");
            return None;
        }
        found.push(place);
        start = end;
    }
    found.sort_unstable();
    Some(found)
}
