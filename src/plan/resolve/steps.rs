//! Steps: screens and tests; estimates stand in their own file.

use super::conditions::condition;
use super::reader::{Fields, Reader};
use super::references::{Kind, References};
use super::{estimates, screens, tests};
use crate::plan::resolved::{Action, ColumnCheck, Design, Factor, Outcome, Role, Step};
use crate::plan::syntax::tree::Node;

/// What the steps are read against.
pub(super) struct Context<'p> {
    pub design: &'p Design,
    pub outcomes: &'p [Outcome],
    /// Columns that the plan checks; a covariate is one of them.
    pub columns: &'p [ColumnCheck],
    pub alpha: f64,
}

impl Context<'_> {
    pub fn factors(&self) -> Vec<&Factor> {
        self.design.between.iter().chain(&self.design.within).collect()
    }

    pub fn factor_names(&self) -> Vec<&str> {
        self.factors().into_iter().map(|factor| factor.name.as_str()).collect()
    }
}

const COMMON: &[&str] = &["id", "outcome", "role", "when", "because"];
const SCREEN_KEYS: &[&str] = &["screen", "of", "threshold", "method"];
const TEST_KEYS: &[&str] = &[
    "test",
    "effect",
    "at",
    "split",
    "spacing",
    "contrast",
    "contrasts",
    "error",
    "correction",
    "method",
    "criterion",
    "deals",
    "covariates",
    "weights",
    "sides",
    "favours",
    "margin",
    "level",
];
const ESTIMATE_KEYS: &[&str] = &[
    "estimate",
    "split",
    "spacing",
    "within each",
    "error",
    "weights",
    "standardizer",
    "small-sample correction",
    "interval",
    "reaching",
    "reliability",
    "of",
    "kind",
    "measured factors",
];
const LATER_KEYS: &[&str] = &["among", "structure", "fallback", "df"];

/// Reads one step; what it defines is entered into `references` even where a part of it is in error.
pub(super) fn step(
    reader: &Reader<'_>,
    node: &Node,
    number: usize,
    context: &Context<'_>,
    references: &mut References<'_>,
) -> Option<Step> {
    let entries = reader.entries(node, "a step", "a map")?;
    let species: Vec<&str> = ["screen", "test", "estimate"].into_iter().filter(|key| node.get(key).is_some()).collect();
    let id = references.steps[number].0.clone();
    let [species] = species.as_slice() else {
        let place = reader.first_line(node.span);
        let message = if species.is_empty() {
            "the step does not say what it does".to_owned()
        } else {
            format!("the step is {} at once", species.join(" and "))
        };
        reader.error("step-without-species", place, message, "this step", "a step has exactly one of `screen:`, `test:` and `estimate:`");
        return None;
    };
    let own = match *species {
        "screen" => SCREEN_KEYS,
        "test" => TEST_KEYS,
        _ => ESTIMATE_KEYS,
    };
    for entry in entries {
        let key = entry.key.as_str();
        if own.contains(&key) || COMMON.contains(&key) {
            continue;
        }
        let elsewhere = [("a screen", SCREEN_KEYS), ("a test", TEST_KEYS), ("an estimate", ESTIMATE_KEYS)]
            .into_iter()
            .find(|(_, keys)| keys.contains(&key));
        if LATER_KEYS.contains(&key) {
            reader.not_yet(entry.key_span, &format!("`{key}` of a step"));
        } else if let Some((where_, _)) = elsewhere {
            reader.error(
                "misplaced-key",
                entry.key_span,
                format!("`{key}` does not belong to a {species} step"),
                "here",
                format!("it is a key of {where_}; remove it here"),
            );
        } else {
            let all: Vec<&str> = COMMON.iter().chain(own).copied().collect();
            reader.unknown_key(node, entry, &format!("a {species} step"), &all);
        }
    }
    let fields = reader.map(node, "a step", &entries.iter().map(|entry| entry.key.as_str()).collect::<Vec<_>>(), &[])?;
    let outcome = outcome(reader, &fields, context);
    let role = role(reader, &fields, species);
    let when = fields.get("when").map(|node| condition(reader, node, references));
    let because = reader.optional_text(&fields, "because");
    let action = match *species {
        "screen" => screens::screen(reader, &fields, &id, context, references).map(Action::Screen),
        "test" => tests::test(reader, &fields, &id, context, references, outcome, role).map(Action::Test),
        _ => estimates::estimate(reader, &fields, &id, context, references, outcome).map(Action::Estimate),
    };
    if let Some(action) = &action {
        define(reader, &id, number, action, references);
    }
    let when = match when {
        Some(found) => Some(found?),
        None => None,
    };
    Some(Step { id, action: action?, outcome: context.outcomes[outcome?].name.clone(), role: role?, when, because })
}

fn define(reader: &Reader<'_>, id: &str, number: usize, action: &Action, references: &mut References<'_>) {
    match action {
        Action::Screen(_) => references.define(reader, id.to_owned(), Kind::Screen, number),
        Action::Test(test) => references.define_tests(reader, id, test, number),
        Action::Estimate(estimate) => {
            for reference in estimates::references_of(estimate) {
                references.define(reader, reference.to_owned(), Kind::Estimate, number);
            }
            if references.get(id).is_none() {
                references.define(reader, id.to_owned(), Kind::Estimate, number);
            }
        }
    }
}

fn outcome(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>) -> Option<usize> {
    let names: Vec<&str> = context.outcomes.iter().map(|outcome| outcome.name.as_str()).collect();
    match fields.get("outcome") {
        Some(node) => reader.text(node, "`outcome`").and_then(|text| reader.name(text, node.span, "outcome", &names)),
        None if names.len() == 1 => Some(0),
        None => {
            reader.required(fields, "outcome", "the step", &format!("the plan has several outcomes; say which: {}", names.join(", ")));
            None
        }
    }
}

fn role(reader: &Reader<'_>, fields: &Fields<'_>, species: &str) -> Option<Role> {
    let words = [("confirmatory", Role::Confirmatory), ("supportive", Role::Supportive), ("exploratory", Role::Exploratory)];
    match fields.get("role") {
        None => Some(if species == "test" { Role::Confirmatory } else { Role::Supportive }),
        Some(node) => {
            let role = reader.word(node, "`role`", &words, &[])?;
            if role == Role::Confirmatory && species != "test" {
                reader.error(
                    "misplaced-role",
                    node.span,
                    format!(
                        "a step that {}s decides nothing, so it cannot be confirmatory",
                        if species == "screen" { "screen" } else { "estimate" }
                    ),
                    "here",
                    "write `supportive` or leave `role` out",
                );
                return None;
            }
            Some(role)
        }
    }
}

/// A number above 0 and below 1.
pub(super) fn probability(reader: &Reader<'_>, node: &Node, what: &str) -> Option<f64> {
    let value = reader.number(node, what)?;
    if value > 0.0 && value < 1.0 {
        return Some(value);
    }
    reader.error("wrong-range", node.span, format!("{what} must lie between 0 and 1"), "here", "write it as a decimal, such as 0.05");
    None
}

/// Says that a key has no use in its place, and why.
pub(super) fn misplaced(reader: &Reader<'_>, fields: &Fields<'_>, key: &str, why: &str) {
    if let Some(entry) = fields.entry(key) {
        reader.error("misplaced-key", entry.key_span, format!("`{key}` has no use here"), "here", format!("{why}; remove it"));
    }
}
