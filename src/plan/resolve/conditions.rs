//! Conditions and choices by cases, bound to the steps above them.

use super::reader::Reader;
use super::references::{Known, References};
use crate::plan::resolved::{Case, Choice, Condition};
use crate::plan::syntax::tree::{Node, Value};
use crate::text::source::Span;
use crate::text::suggest::nearest;

/// Words of a condition that are not references.
const EITHER: &str = "either";
const NOT: &str = "not";

/// A condition: a map, all of whose entries must hold.
pub(super) fn condition(reader: &Reader<'_>, node: &Node, references: &References<'_>) -> Option<Condition> {
    let entries = reader.entries(node, "a condition", "a map of references to verdicts, such as `{omnibus: significant}`")?;
    if entries.is_empty() {
        reader.error("missing-key", node.span, "the condition is empty", "here", "name a step and its verdict, or remove the condition");
        return None;
    }
    let parts: Vec<Option<Condition>> = entries
        .iter()
        .map(|entry| match entry.key.as_str() {
            EITHER => {
                let items = reader.list(&entry.node, "`either`")?;
                if items.len() < 2 {
                    reader.error(
                        "missing-key",
                        entry.node.span,
                        "`either` needs two alternatives or more",
                        "here",
                        "list the alternatives, or write the one without `either`",
                    );
                    return None;
                }
                let alternatives: Vec<Option<Condition>> = items.iter().map(|item| condition(reader, item, references)).collect();
                alternatives.into_iter().collect::<Option<Vec<_>>>().map(Condition::Either)
            }
            NOT => condition(reader, &entry.node, references).map(|inner| Condition::Not(Box::new(inner))),
            reference => {
                let known = references.look_up(reader, reference, entry.key_span)?;
                verdicts(reader, &entry.node, known).map(|verdicts| Condition::Is { reference: known.reference.clone(), verdicts })
            }
        })
        .collect();
    parts.into_iter().collect::<Option<Vec<_>>>().map(Condition::All)
}

fn verdicts(reader: &Reader<'_>, node: &Node, known: &Known) -> Option<Vec<String>> {
    let words = reader.texts(node, "a verdict");
    let allowed = known.verdicts();
    let found: Vec<Option<String>> = words
        .iter()
        .map(|(word, span)| {
            if allowed.iter().any(|allowed| allowed == word) {
                return Some((*word).to_owned());
            }
            wrong_verdict(reader, word, *span, known, &allowed);
            None
        })
        .collect();
    let found = found.into_iter().collect::<Option<Vec<_>>>()?;
    (!found.is_empty()).then_some(found)
}

fn wrong_verdict(reader: &Reader<'_>, word: &str, span: Span, known: &Known, allowed: &[String]) {
    let hint = if word.starts_with("favours ") && !allowed.iter().any(|word| word.starts_with("favours ")) {
        "`favours LEVEL` needs a comparison of two levels of one between factor, at one occasion or on a change over time, and an outcome with `better:`; \
         otherwise say `above zero` or `below zero`"
            .to_owned()
    } else {
        // `insignificant` is nearer to `significant` by letters, and the contrary by meaning.
        let negated = ["in", "non", "un", "not"].iter().any(|start| word.starts_with(start)) && word.contains("signif");
        match nearest(word, allowed.iter().map(String::as_str)) {
            _ if negated && allowed.iter().any(|word| word == "not significant") => "did you mean `not significant`?".to_owned(),
            Some(near) => format!("did you mean `{near}`?"),
            None => format!("it may be: {}", allowed.join(", ")),
        }
    };
    reader.error("unknown-verdict", span, format!("`{word}` is not a verdict of {}", known.in_words()), "not a verdict of it", hint);
}

/// A value, or cases with a compulsory `otherwise`.
pub(super) fn choice<T>(
    reader: &Reader<'_>,
    node: &Node,
    references: &References<'_>,
    what: &str,
    read: &mut impl FnMut(&Node) -> Option<T>,
) -> Option<Choice<T>> {
    let Value::List(items) = &node.value else { return read(node).map(Choice::Fixed) };
    let is_case = |item: &Node| item.get("when").is_some() || item.get("use").is_some() || item.get("otherwise").is_some();
    if !items.iter().any(is_case) {
        return read(node).map(Choice::Fixed);
    }
    let mut cases = Vec::new();
    let mut otherwise = None;
    let mut sound = true;
    for (place, item) in items.iter().enumerate() {
        let last = place + 1 == items.len();
        let Some(fields) = reader.map(item, &format!("a case of {what}"), &["when", "use", "otherwise"], &[]) else {
            sound = false;
            continue;
        };
        match (fields.get("otherwise"), fields.get("when"), fields.get("use")) {
            (Some(value), None, None) if last => otherwise = read(value),
            (Some(_), None, None) => {
                reader.error(
                    "case-unreachable",
                    item.span,
                    format!("cases of {what} after `otherwise` are never reached"),
                    "this catches everything",
                    "put `otherwise` last",
                );
                sound = false;
            }
            (None, Some(when), Some(value)) => match condition(reader, when, references).zip(read(value)) {
                Some((when, value)) => cases.push(Case { when, value }),
                None => sound = false,
            },
            _ => {
                reader.error(
                    "wrong-case",
                    reader.first_line(item.span),
                    format!("a case of {what} is `{{when: ..., use: ...}}`, and the last one `{{otherwise: ...}}`"),
                    "neither",
                    "write one of the two forms",
                );
                sound = false;
            }
        }
    }
    if sound && otherwise.is_none() && items.last().is_none_or(|item| item.get("otherwise").is_none()) {
        reader.error(
            "case-without-otherwise",
            reader.first_line(node.span),
            format!("the cases of {what} have no `otherwise`"),
            "`otherwise` is missing",
            "add a last case `{otherwise: ...}`: a verdict may come out that no case names, and a screen may be refused",
        );
        return None;
    }
    otherwise.filter(|_| sound).map(|otherwise| Choice::Cases { cases, otherwise })
}
