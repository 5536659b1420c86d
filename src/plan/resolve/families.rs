//! Families of tests, and conclusions.

use super::conditions::condition;
use super::reader::Reader;
use super::references::{Kind, References};
use crate::plan::resolved::{Action, Conclusion, Condition, Control, Family, Quoted, Role, SayPart, Step};
use crate::plan::syntax::tree::Node;
use crate::text::source::Span;
use std::collections::HashMap;

const CONTROLS: &[(&str, Control)] = &[
    ("none", Control::None),
    ("bonferroni", Control::Bonferroni),
    ("sidak", Control::Sidak),
    ("holm", Control::Holm),
    ("holm-sidak", Control::HolmSidak),
    ("hochberg", Control::Hochberg),
    ("hommel", Control::Hommel),
    ("benjamini-hochberg", Control::BenjaminiHochberg),
    ("benjamini-yekutieli", Control::BenjaminiYekutieli),
    ("fixed sequence", Control::FixedSequence),
];

const LATER_CONTROLS: &[&str] = &["shaffer", "fallback", "graph", "max-t", "westfall-young"];

/// Reads the families. Identifiers may repeat neither each other nor a step's.
pub(super) fn families(
    reader: &Reader<'_>,
    node: &Node,
    steps: &[Option<Step>],
    references: &References<'_>,
    alpha: f64,
) -> Option<Vec<Family>> {
    let items = reader.list(node, "`families`")?;
    let mut taken: HashMap<String, Span> = references.steps.iter().cloned().collect();
    let mut member_of: HashMap<String, Span> = HashMap::new();
    let found: Vec<Option<Family>> =
        items.iter().map(|item| family(reader, item, steps, references, alpha, &mut taken, &mut member_of)).collect();
    found.into_iter().collect()
}

fn family(
    reader: &Reader<'_>,
    node: &Node,
    steps: &[Option<Step>],
    references: &References<'_>,
    alpha: f64,
    taken: &mut HashMap<String, Span>,
    member_of: &mut HashMap<String, Span>,
) -> Option<Family> {
    let fields = reader.map(node, "a family", &["id", "tests", "control", "alpha"], &["weights", "transfer"])?;
    let id = reader
        .required(&fields, "id", "the family", "the report refers to it by its id")
        .and_then(|node| Some((reader.text(node, "`id`")?, node.span)));
    if let Some((id, span)) = id
        && let Some(first) = taken.insert(id.to_owned(), span)
    {
        reader.conflict(
            "duplicate-id",
            [(span, "the second"), (first, "the first")],
            format!("`{id}` is the id of two things"),
            "give each step and family an id of its own",
        );
    }
    let control_node = reader.required(
        &fields,
        "control",
        "the family",
        "say how the error over its tests is controlled, for instance `control: holm`; there is no default",
    );
    let control = control_node.and_then(|node| reader.word(node, "`control`", CONTROLS, LATER_CONTROLS));
    let own_alpha = fields.get("alpha").map_or(Some(alpha), |node| {
        let own = super::steps::probability(reader, node, "a family's `alpha`")?;
        if own > alpha {
            reader.error(
                "alpha-overspent",
                node.span,
                format!("the family's alpha is above the plan's alpha of {alpha}"),
                "here",
                "a family may be given less than alpha, never more",
            );
            return None;
        }
        Some(own)
    });
    let tests = reader.required(&fields, "tests", "the family", "list the steps or single tests that it controls")?;
    let mut members = Vec::new();
    let mut sound = true;
    for (reference, span) in reader.texts(tests, "a member of a family") {
        match member(reader, reference, span, references) {
            Some(found) => {
                let twice = found.iter().find_map(|name| member_of.get(name).map(|first| (name, *first)));
                if let Some((name, first)) = twice {
                    reader.conflict(
                        "test-in-two-families",
                        [(span, "here"), (first, "and here")],
                        format!("the test `{name}` would be judged twice"),
                        "a test is in one family at most; remove it from one",
                    );
                    sound = false;
                }
                member_of.extend(found.iter().map(|name| (name.clone(), span)));
                members.extend(found);
            }
            None => sound = false,
        }
    }
    let (control, (id, _)) = (control?, id?);
    if !sound {
        return None;
    }
    if members.is_empty() {
        reader.error("missing-key", tests.span, "the family has no member", "empty", "list the tests that it controls, or remove it");
        return None;
    }
    if matches!(control, Control::None | Control::BenjaminiHochberg | Control::BenjaminiYekutieli) {
        let confirmatory = members.iter().find(|member| {
            references.get(member).and_then(|known| steps[known.step].as_ref()).is_some_and(|step| step.role == Role::Confirmatory)
        });
        if let (Some(member), Some(node)) = (confirmatory, control_node) {
            reader.error(
                "control-too-weak",
                node.span,
                format!("the family `{id}` holds the confirmatory test `{member}`, and this does not control the chance of any false rejection"),
                "does not control it",
                "use `holm`, `hommel`, `bonferroni` or another control of the familywise error, or give its tests `role: supportive` or `exploratory`",
            );
            return None;
        }
    }
    Some(Family { id: id.to_owned(), members, control, alpha: own_alpha? })
}

fn member(reader: &Reader<'_>, reference: &str, span: Span, references: &References<'_>) -> Option<Vec<String>> {
    let Some(known) = references.get(reference) else {
        references.unknown(reader, reference, span);
        return None;
    };
    match known.kind {
        Kind::One { .. } => Some(vec![known.reference.clone()]),
        Kind::Several => Some(
            references
                .all()
                .iter()
                .filter(|other| other.step == known.step && matches!(other.kind, Kind::One { .. }))
                .map(|other| other.reference.clone())
                .collect(),
        ),
        Kind::Screen | Kind::Estimate => {
            reader.error(
                "not-a-test",
                span,
                format!("{} takes no decision whose error a family could control", known.in_words()),
                "not a test",
                "a family holds tests only",
            );
            None
        }
    }
}

/// A condition may read a test of a family only where the family has been judged by then.
pub(super) fn families_judged_in_time(reader: &Reader<'_>, families: &[Family], references: &References<'_>) {
    for used in references.uses.borrow().iter() {
        let Some(by) = used.by else { continue };
        let Some(known) = references.get(&used.reference) else { continue };
        let reads = |family: &&Family| {
            family.members.iter().any(|member| {
                *member == used.reference
                    || (known.kind == Kind::Several && references.get(member).is_some_and(|one| one.step == known.step))
            })
        };
        for family in families.iter().filter(reads).filter(|family| family.control != Control::FixedSequence) {
            let last = family.members.iter().filter_map(|member| references.get(member)).max_by_key(|member| member.step);
            if let Some(last) = last.filter(|last| last.step >= by) {
                let (id, place) = &references.steps[last.step];
                reader.conflict(
                    "family-not-judged-yet",
                    [(used.span, "read here"), (*place, "the family's last member")],
                    format!("`{}` is judged with its family `{}`, which is complete only after the step `{id}`", used.reference, family.id),
                    "a family is judged once, after its last member has been computed: move this step below it, take one of them out of the family, or use `control: fixed sequence`",
                );
            }
        }
    }
}

/// Reads the conclusions.
pub(super) fn conclusions(reader: &Reader<'_>, node: &Node, references: &References<'_>) -> Option<Vec<Conclusion>> {
    let items = reader.list(node, "`conclusions`")?;
    let mut found = Vec::new();
    let mut otherwise: Option<Span> = None;
    for item in items {
        if let Some(first) = otherwise {
            reader.conflict(
                "conclusion-unreachable",
                [(reader.first_line(item.span), "never reached"), (first, "this catches everything")],
                "a conclusion after `otherwise` can never be drawn",
                "put `otherwise` last",
            );
        }
        let Some(fields) = reader.map(item, "a conclusion", &["when", "say", "otherwise"], &[]) else {
            found.push(None);
            continue;
        };
        found.push(match (fields.entry("otherwise"), fields.get("when"), fields.get("say")) {
            (Some(entry), None, None) => {
                otherwise = Some(entry.key_span);
                said(reader, &entry.node, references).map(|say| Conclusion { when: None, say })
            }
            (None, Some(when), Some(say)) => {
                let when: Option<Condition> = condition(reader, when, references);
                let say = said(reader, say, references);
                when.zip(say).map(|(when, say)| Conclusion { when: Some(when), say })
            }
            _ => {
                reader.error(
                    "wrong-case",
                    reader.first_line(item.span),
                    "a conclusion is `{when: ..., say: ...}`, and the last one `{otherwise: ...}`",
                    "neither",
                    "write one of the two forms",
                );
                None
            }
        });
    }
    found.into_iter().collect()
}

const QUOTES: &[(&str, Quoted)] = &[
    ("p", Quoted::P),
    ("adjusted p", Quoted::AdjustedP),
    ("estimate", Quoted::Estimate),
    ("interval", Quoted::Interval),
    ("standard error", Quoted::StandardError),
    ("statistic", Quoted::Statistic),
    ("df", Quoted::Df),
    ("n", Quoted::N),
];

/// Words with quotes of results in braces.
fn said(reader: &Reader<'_>, node: &Node, references: &References<'_>) -> Option<Vec<SayPart>> {
    let text = reader.text(node, "what a conclusion says")?.trim();
    let mut parts = Vec::new();
    let mut rest = text;
    let mut sound = true;
    while let Some(open) = rest.find('{') {
        if open > 0 {
            parts.push(SayPart::Text(rest[..open].to_owned()));
        }
        let Some(length) = rest[open..].find('}') else {
            reader.error(
                "quote-not-closed",
                node.span,
                "a brace opens a quote and is not closed",
                "in this text",
                "write `{REFERENCE: estimate}`, or leave the brace out",
            );
            return None;
        };
        let quote = &rest[open + 1..open + length];
        match quoted(reader, node, quote, references) {
            Some(part) => parts.push(part),
            None => sound = false,
        }
        rest = &rest[open + length + 1..];
    }
    if !rest.is_empty() {
        parts.push(SayPart::Text(rest.to_owned()));
    }
    sound.then_some(parts)
}

fn quoted(reader: &Reader<'_>, node: &Node, quote: &str, references: &References<'_>) -> Option<SayPart> {
    // The place of the quote where it stands on one line of the source, else that of the whole text.
    let written = &reader.source.text()[node.span.start..node.span.end];
    let span = written.find(quote).map_or(node.span, |at| Span::new(node.span.start + at, node.span.start + at + quote.len()));
    let Some((reference, what)) = quote.rsplit_once(": ") else {
        reader.error(
            "unknown-quote",
            span,
            format!("`{{{quote}}}` does not say which number is quoted"),
            "here",
            "write `{REFERENCE: WHAT}`; WHAT is p, adjusted p, estimate, interval, standard error, statistic, df or n",
        );
        return None;
    };
    let what = what.trim();
    let Some((_, number)) = QUOTES.iter().find(|(word, _)| *word == what) else {
        let words: Vec<&str> = QUOTES.iter().map(|(word, _)| *word).collect();
        let hint = crate::text::suggest::nearest(what, words.iter().copied())
            .map_or_else(|| format!("it may be: {}", words.join(", ")), |near| format!("did you mean `{near}`?"));
        reader.error("unknown-quote", span, format!("`{what}` is not a number that can be quoted"), "here", hint);
        return None;
    };
    match references.get(reference.trim()) {
        Some(known) if known.kind == Kind::Several || known.kind == Kind::Screen && *number != Quoted::P => {
            reader.error(
                "unknown-quote",
                span,
                format!("{} has no `{what}` of its own", known.in_words()),
                "here",
                "quote one of its results",
            );
            None
        }
        Some(known) => Some(SayPart::Quote { reference: known.reference.clone(), what: *number }),
        None => {
            references.unknown(reader, reference.trim(), span);
            None
        }
    }
}

/// Every step and hypothesis with its label, for `check --tests`.
pub(super) fn list(steps: &[Step]) -> Vec<(String, String)> {
    steps
        .iter()
        .flat_map(|step| match &step.action {
            Action::Test(test) => {
                let mut of_step: Vec<(String, String)> =
                    test.hypotheses.iter().map(|one| (one.reference.clone(), one.label.clone())).collect();
                if of_step.len() > 1 {
                    of_step.insert(0, (step.id.clone(), format!("{} tests", of_step.len())));
                }
                of_step
            }
            Action::Screen(_) => vec![(step.id.clone(), "screen".to_owned())],
            Action::Estimate(estimate) => {
                super::estimates::references_of(estimate).into_iter().map(|name| (name.to_owned(), "estimate".to_owned())).collect()
            }
        })
        .collect()
}
