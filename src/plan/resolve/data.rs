//! Where the data stand, and what the outcomes are.

use super::reader::{Fields, Reader};
use crate::plan::resolved::{
    AllocationPlace, Better, ColumnCheck, ColumnKind, ColumnOf, DataPlan, Design, ExpectedSubjects, Factor, Layout, Outcome, WideValues,
};
use crate::plan::syntax::tree::{Entry, Node, Value};
use crate::text::source::Span;

const DATA_KEYS: &[&str] = &[
    "layout",
    "subject",
    "occasions",
    "values",
    "allocation",
    "arms",
    "missing values",
    "expected subjects",
    "columns",
    "separator",
    "decimal",
];

pub(super) fn data(reader: &Reader<'_>, node: &Node, design: &Design) -> Option<DataPlan> {
    if let Some(entry) = node.map().and_then(|entries| entries.iter().find(|entry| entry.key == "clusters")) {
        reader.error(
            "clustered-arms",
            entry.key_span,
            "this program cannot analyse arms that were dealt to clusters of subjects",
            "clusters",
            "subjects of one cluster are alike, so that tests on single subjects would claim more than the data hold; use a method for clusters",
        );
        return None;
    }
    let fields = reader.map(node, "`data`", DATA_KEYS, &["trials"])?;
    let what = "`data`";
    let layout = reader.required(
        &fields,
        "layout",
        what,
        "write `layout: long` (a row per subject and occasion) or `layout: wide` (a row per subject)",
    );
    let wide = layout.and_then(|node| reader.word(node, "`layout`", &[("long", false), ("wide", true)], &[]));
    let subject = reader
        .required(&fields, "subject", what, "name the column that identifies the subject")
        .and_then(|node| reader.text(node, "`subject`"));
    let values = reader.required(&fields, "values", what, "say in which column each outcome stands");
    let layout = match (wide, values) {
        (Some(true), Some(values)) => {
            if let Some(entry) = fields.entry("occasions") {
                reader.error(
                    "misplaced-key",
                    entry.key_span,
                    "a wide file has no column of occasions",
                    "only for `layout: long`",
                    "name the column of each occasion under `values`",
                );
            }
            wide_values(reader, values, design).map(|values| Layout::Wide { values })
        }
        (Some(false), Some(values)) => {
            let occasions = columns_of_factors(reader, &fields, "occasions", &design.within, "within factor");
            let values = long_values(reader, values);
            occasions.zip(values).map(|(occasions, values)| Layout::Long { occasions, values })
        }
        _ => None,
    };
    let arms = columns_of_factors(reader, &fields, "arms", &design.between, "between factor");
    let allocation = allocation(reader, &fields, design);
    let expected = fields.get("expected subjects").map_or(Some(Vec::new()), |node| expected_subjects(reader, node, design));
    let columns = fields.get("columns").map_or(Vec::new(), |node| column_checks(reader, node));
    let missing = fields.get("missing values").map_or(Some(Vec::new()), |node| missing_values(reader, node));
    let separator = one_character(reader, &fields, "separator", ',', &[',', ';', '\t', '|']);
    let decimal = one_character(reader, &fields, "decimal", '.', &['.', ',']);
    if separator == Some(',') && decimal == Some(',') {
        reader.error(
            "separator-is-decimal",
            fields.entry("decimal").map_or(fields.span, |entry| entry.node.span),
            "the separator of fields and the decimal mark are the same",
            "`,` too",
            "with `decimal: \",\"` the separator is usually `;`: write `separator: \";\"`",
        );
        return None;
    }
    Some(DataPlan {
        layout: layout?,
        subject: subject?.to_owned(),
        allocation: allocation?,
        arms: arms?,
        missing_values: missing?,
        expected_subjects: expected?,
        columns,
        separator: separator?,
        decimal: decimal?,
    })
}

fn one_character(reader: &Reader<'_>, fields: &Fields<'_>, key: &str, default: char, allowed: &[char]) -> Option<char> {
    let Some(node) = fields.get(key) else { return Some(default) };
    let text = node.text().unwrap_or("");
    let named = match text {
        "tab" | "\\t" => Some('\t'),
        _ => {
            let mut characters = text.chars();
            characters.next().filter(|_| characters.next().is_none())
        }
    };
    match named.filter(|character| allowed.contains(character)) {
        Some(character) => Some(character),
        None => {
            let list: Vec<String> = allowed.iter().map(|c| if *c == '\t' { "tab".to_owned() } else { format!("\"{c}\"") }).collect();
            reader.error(
                "unknown-word",
                node.span,
                format!("`{text}` cannot be the {key}"),
                "here",
                format!("it may be: {}", list.join(", ")),
            );
            None
        }
    }
}

fn allocation(reader: &Reader<'_>, fields: &Fields<'_>, design: &Design) -> Option<AllocationPlace> {
    let entry = fields.entry("allocation");
    if design.between.is_empty() {
        if let Some(entry) = entry {
            reader.error(
                "misplaced-key",
                entry.key_span,
                "a design without between factors has no allocation",
                "not needed",
                "remove it, or name the arms under `design: between`",
            );
        }
        return Some(AllocationPlace::NoArms);
    }
    let node = reader.required(fields, "allocation", "`data`", "write `allocation: separate file` or `allocation: in the data`")?;
    reader.word(node, "`allocation`", &[("separate file", AllocationPlace::SeparateFile), ("in the data", AllocationPlace::InTheData)], &[])
}

/// The column of each factor of a side, in design order.
fn columns_of_factors(reader: &Reader<'_>, fields: &Fields<'_>, key: &str, factors: &[Factor], what: &str) -> Option<Vec<ColumnOf>> {
    let names: Vec<&str> = factors.iter().map(|factor| factor.name.as_str()).collect();
    let Some(node) = fields.get(key) else {
        if factors.is_empty() {
            return Some(Vec::new());
        }
        reader.required(fields, key, "`data`", &format!("say in which column each {what} stands, as in `{key}: {{{}: column}}`", names[0]));
        return None;
    };
    let entries = reader.entries(node, &format!("`{key}`"), "a map of factors to columns")?;
    let mut found: Vec<Option<String>> = vec![None; factors.len()];
    let mut sound = true;
    for entry in entries {
        let place = reader.name(&entry.key, entry.key_span, what, &names);
        let column = reader.text(&entry.node, &format!("the column of `{}`", entry.key));
        match place.zip(column) {
            Some((place, column)) => found[place] = Some(column.to_owned()),
            None => sound = false,
        }
    }
    let mut columns = Vec::new();
    for (name, column) in names.iter().zip(found) {
        match column {
            Some(column) => columns.push(ColumnOf { name: (*name).to_owned(), column }),
            None if sound => {
                reader.error(
                    "missing-key",
                    reader.first_line(node.span),
                    format!("`{key}` lacks the {what} `{name}`"),
                    "missing here",
                    "name its column",
                );
                sound = false;
            }
            None => {}
        }
    }
    sound.then_some(columns)
}

fn long_values(reader: &Reader<'_>, node: &Node) -> Option<Vec<ColumnOf>> {
    let entries = reader.entries(node, "`values`", "a map of outcomes to columns")?;
    let found: Vec<Option<ColumnOf>> = entries
        .iter()
        .map(|entry| {
            let column = reader.text(&entry.node, &format!("the column of `{}`", entry.key))?;
            Some(ColumnOf { name: entry.key.clone(), column: column.to_owned() })
        })
        .collect();
    some_outcome(reader, node, found.into_iter().collect::<Option<Vec<_>>>()?)
}

fn some_outcome<T>(reader: &Reader<'_>, node: &Node, outcomes: Vec<T>) -> Option<Vec<T>> {
    if outcomes.is_empty() {
        reader.error("missing-key", node.span, "`values` names no outcome", "empty", "name an outcome and its column");
        return None;
    }
    Some(outcomes)
}

fn wide_values(reader: &Reader<'_>, node: &Node, design: &Design) -> Option<Vec<WideValues>> {
    let entries = reader.entries(node, "`values`", "a map of outcomes to their columns by occasion")?;
    let found: Vec<Option<WideValues>> = entries
        .iter()
        .map(|entry| {
            if design.within.is_empty() {
                let column = reader.text(&entry.node, &format!("the column of `{}`", entry.key))?;
                return Some(WideValues { name: entry.key.clone(), columns: vec![column.to_owned()] });
            }
            let found =
                by_cell(reader, &entry.node, &design.within, "occasion", &mut |node| reader.text(node, "a column").map(str::to_owned))?;
            complete(reader, &entry.node, &design.within, found, "occasion").map(|columns| WideValues { name: entry.key.clone(), columns })
        })
        .collect();
    some_outcome(reader, node, found.into_iter().collect::<Option<Vec<_>>>()?)
}

/// Values by the cells of crossed factors: maps nested in design order, or one map with levels joined by `; `.
fn by_cell<T>(
    reader: &Reader<'_>,
    node: &Node,
    factors: &[Factor],
    what: &str,
    read: &mut impl FnMut(&Node) -> Option<T>,
) -> Option<Vec<Option<T>>> {
    let cells: usize = factors.iter().map(|factor| factor.levels.len()).product();
    let mut found: Vec<Option<T>> = (0..cells).map(|_| None).collect();
    let mut sound = true;
    let mut pending: Vec<(&[Entry], usize, usize)> = vec![(reader.entries(node, &format!("values by {what}"), "a map by level")?, 0, 0)];
    while let Some((entries, depth, start)) = pending.pop() {
        let rest: usize = factors[depth + 1..].iter().map(|factor| factor.levels.len()).product();
        let levels: Vec<&str> = factors[depth].levels.iter().map(String::as_str).collect();
        for entry in entries {
            let nested = matches!(entry.node.value, Value::Map(_)) && depth + 1 < factors.len();
            if nested {
                match reader.name(&entry.key, entry.key_span, &format!("level of `{}`", factors[depth].name), &levels) {
                    Some(level) => pending.push((entry.node.map().unwrap_or(&[]), depth + 1, start + level * rest)),
                    None => sound = false,
                }
                continue;
            }
            let parts: Vec<&str> = if depth + 1 == factors.len() { vec![entry.key.as_str()] } else { entry.key.split("; ").collect() };
            let place = cell_of(reader, &factors[depth..], &parts, entry.key_span);
            match place.zip(read(&entry.node)) {
                Some((place, value)) => found[start + place] = Some(value),
                None => sound = false,
            }
        }
    }
    sound.then_some(found)
}

fn cell_of(reader: &Reader<'_>, factors: &[Factor], parts: &[&str], span: Span) -> Option<usize> {
    if parts.len() != factors.len() {
        let names: Vec<&str> = factors.iter().map(|factor| factor.name.as_str()).collect();
        reader.error(
            "wrong-type",
            span,
            format!("`{}` names {} of {} levels", parts.join("; "), parts.len(), factors.len()),
            "incomplete",
            format!("name a level of each of {}, nested in that order or joined by `; `", names.join(", ")),
        );
        return None;
    }
    let mut place = 0;
    for (factor, part) in factors.iter().zip(parts) {
        let levels: Vec<&str> = factor.levels.iter().map(String::as_str).collect();
        place = place * levels.len() + reader.name(part, span, &format!("level of `{}`", factor.name), &levels)?;
    }
    Some(place)
}

fn complete<T>(reader: &Reader<'_>, node: &Node, factors: &[Factor], found: Vec<Option<T>>, what: &str) -> Option<Vec<T>> {
    let design = Design { between: Vec::new(), within: factors.to_vec(), randomised: None };
    if let Some(absent) = found.iter().position(Option::is_none) {
        reader.error(
            "missing-key",
            reader.first_line(node.span),
            format!("the {what} `{}` is missing", design.occasion_levels(absent).join("; ")),
            "missing here",
            format!("every {what} of the design needs an entry"),
        );
        return None;
    }
    found.into_iter().collect()
}

fn expected_subjects(reader: &Reader<'_>, node: &Node, design: &Design) -> Option<Vec<ExpectedSubjects>> {
    let mut count = |node: &Node| {
        let number = reader.number(node, "a number of subjects")?;
        if number < 0.0 || libm::trunc(number) != number || number > 1e9 {
            reader.error(
                "wrong-type",
                node.span,
                "a number of subjects must be a whole number",
                "here",
                "write a whole number, zero or more",
            );
            return None;
        }
        Some(number as u64)
    };
    if design.between.is_empty() {
        return Some(vec![ExpectedSubjects { levels: Vec::new(), subjects: count(node)? }]);
    }
    let found = by_cell(reader, node, &design.between, "arm", &mut count)?;
    Some(
        found
            .into_iter()
            .enumerate()
            .filter_map(|(cell, subjects)| {
                Some(ExpectedSubjects { levels: design.cell_levels(cell).into_iter().map(str::to_owned).collect(), subjects: subjects? })
            })
            .collect(),
    )
}

fn missing_values(reader: &Reader<'_>, node: &Node) -> Option<Vec<String>> {
    let mut texts = Vec::new();
    let items = match &node.value {
        Value::List(items) => items.as_slice(),
        _ => std::slice::from_ref(node),
    };
    for item in items {
        match &item.value {
            Value::Null => texts.push(String::new()),
            Value::List(_) | Value::Map(_) => {
                reader.wrong_type(item, "a missing value", "text");
                return None;
            }
            _ => texts.push(item.text().unwrap_or("").trim().to_owned()),
        }
    }
    Some(texts)
}

fn column_checks(reader: &Reader<'_>, node: &Node) -> Vec<ColumnCheck> {
    let entries = reader.entries(node, "`columns`", "a map of columns to checks").unwrap_or(&[]);
    entries
        .iter()
        .filter_map(|entry| Some(ColumnCheck { column: entry.key.clone(), kind: column_kind(reader, &entry.node, &entry.key)? }))
        .collect()
}

fn column_kind(reader: &Reader<'_>, node: &Node, column: &str) -> Option<ColumnKind> {
    let what = format!("the check of column `{column}`");
    let fields = reader.map(node, &what, &["type", "allowed", "range"], &[])?;
    let kind = reader.required(&fields, "type", &what, "write `type: text` or `type: number`")?;
    let number = reader.word(kind, "`type` of a column", &[("text", false), ("number", true)], &[])?;
    let misplaced = if number { "allowed" } else { "range" };
    if let Some(entry) = fields.entry(misplaced) {
        let hint = if number { "a number has a `range: [least, greatest]`" } else { "text has `allowed: [...]`" };
        reader.error("misplaced-key", entry.key_span, format!("`{misplaced}` does not go with this type"), "here", hint);
        return None;
    }
    Some(if number {
        ColumnKind::Number { range: fields.get("range").map_or(Some(None), |node| range(reader, node).map(Some))? }
    } else {
        let allowed = fields.get("allowed").map(|node| reader.texts(node, "an allowed text"));
        ColumnKind::Text { allowed: allowed.map(|texts| texts.into_iter().map(|(text, _)| text.to_owned()).collect()) }
    })
}

/// `[least, greatest]`.
fn range(reader: &Reader<'_>, node: &Node) -> Option<[f64; 2]> {
    let items = reader.list(node, "a range")?;
    let numbers: Option<Vec<f64>> = items.iter().map(|item| reader.number(item, "a bound of a range")).collect();
    match numbers?.as_slice() {
        [least, greatest] if least < greatest => Some([*least, *greatest]),
        _ => {
            reader.error("wrong-range", node.span, "a range is two numbers, the smaller first", "here", "write `[least, greatest]`");
            None
        }
    }
}

/// The outcomes that have values in the data, in their order there; they are known even where the rest of `data` is in error.
pub(super) fn outcomes(reader: &Reader<'_>, node: Option<&Node>, data: &Node) -> Option<Vec<Outcome>> {
    let names: Vec<&str> = data.get("values")?.map()?.iter().map(|entry| entry.key.as_str()).collect();
    if names.is_empty() {
        return None;
    }
    let mut outcomes: Vec<Outcome> = names
        .iter()
        .map(|name| Outcome {
            name: (*name).to_owned(),
            label: (*name).to_owned(),
            unit: None,
            range: None,
            better: None,
            smallest_worthwhile_difference: None,
        })
        .collect();
    let Some(node) = node else { return Some(outcomes) };
    for entry in reader.entries(node, "`outcomes`", "a map of outcomes").unwrap_or(&[]) {
        let found = reader.name(&entry.key, entry.key_span, "outcome with values in `data`", &names);
        if let Some((place, outcome)) = found.and_then(|place| Some((place, outcome(reader, entry)?))) {
            outcomes[place] = outcome;
        }
    }
    Some(outcomes)
}

fn outcome(reader: &Reader<'_>, entry: &Entry) -> Option<Outcome> {
    let what = format!("outcome `{}`", entry.key);
    let keys = ["label", "unit", "range", "better", "smallest worthwhile difference"];
    if entry.node.value == Value::Null {
        return Some(Outcome {
            name: entry.key.clone(),
            label: entry.key.clone(),
            unit: None,
            range: None,
            better: None,
            smallest_worthwhile_difference: None,
        });
    }
    let fields = reader.map(&entry.node, &what, &keys, &[])?;
    let better = fields
        .get("better")
        .map_or(Some(None), |node| reader.word(node, "`better`", &[("lower", Better::Lower), ("higher", Better::Higher)], &[]).map(Some));
    let range = fields.get("range").map_or(Some(None), |node| range(reader, node).map(Some));
    let worthwhile = fields.get("smallest worthwhile difference").map_or(Some(None), |node| {
        let value = reader.number(node, "`smallest worthwhile difference`")?;
        if value <= 0.0 {
            reader.error(
                "wrong-range",
                node.span,
                "a smallest worthwhile difference must be above zero",
                "here",
                "its direction comes from `better:`",
            );
            return None;
        }
        Some(Some(value))
    });
    Some(Outcome {
        name: entry.key.clone(),
        label: reader.optional_text(&fields, "label").unwrap_or_else(|| entry.key.clone()),
        unit: reader.optional_text(&fields, "unit"),
        range: range?,
        better: better?,
        smallest_worthwhile_difference: worthwhile?,
    })
}
