//! Families of tests.

use super::graphs;
use super::methods::{count, values};
use super::reader::{Fields, Reader};
use super::references::{Kind, References};
use super::steps::Context;
use crate::plan::resolved::{Action, Control, Design, ErrorTerm, Factor, FactorPart, Family, Hypothesis, Method, Role, Step, Test};
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
    ("shaffer", Control::Shaffer),
    ("fallback", Control::Fallback),
    ("graph", Control::Graph),
    ("max-t", Control::MaxT),
    ("westfall-young", Control::WestfallYoung),
];

/// Reads the families. Identifiers may repeat neither each other nor a step's.
pub(super) fn families(
    reader: &Reader<'_>,
    node: &Node,
    steps: &[Option<Step>],
    references: &References<'_>,
    context: &Context<'_>,
) -> Option<Vec<Family>> {
    let items = reader.list(node, "`families`")?;
    let mut taken: HashMap<String, Span> = references.steps.iter().cloned().collect();
    let mut member_of: HashMap<String, Span> = HashMap::new();
    let found: Vec<Option<Family>> =
        items.iter().map(|item| family(reader, item, steps, references, context, &mut taken, &mut member_of)).collect();
    found.into_iter().collect()
}

fn family(
    reader: &Reader<'_>,
    node: &Node,
    steps: &[Option<Step>],
    references: &References<'_>,
    context: &Context<'_>,
    taken: &mut HashMap<String, Span>,
    member_of: &mut HashMap<String, Span>,
) -> Option<Family> {
    let fields = reader.map(node, "a family", &["id", "tests", "control", "alpha", "weights", "transfer", "deals"], &[])?;
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
    let control = control_node.and_then(|node| reader.word(node, "`control`", CONTROLS, &[]));
    let alpha = context.alpha;
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
    let shares = graphs::shares(reader, &fields, control, &members)?;
    let deals = deals(reader, &fields, control, own_alpha?)?;
    if let Some(node) = control_node {
        let members: Vec<(&Step, &Test, &Hypothesis)> = members.iter().filter_map(|member| test_of(member, steps, references)).collect();
        fits(reader, node, control, context.design, &members)?;
    }
    Some(Family { id: id.to_owned(), members, control, alpha: own_alpha?, weights: shares.weights, transfer: shares.transfer, deals })
}

/// The step and hypothesis that a member refers to.
fn test_of<'s>(member: &str, steps: &'s [Option<Step>], references: &References<'_>) -> Option<(&'s Step, &'s Test, &'s Hypothesis)> {
    let step = steps[references.get(member)?.step].as_ref()?;
    let Action::Test(test) = &step.action else { return None };
    test.hypotheses.iter().find(|one| one.reference == member).map(|hypothesis| (step, test, hypothesis))
}

fn deals(reader: &Reader<'_>, fields: &Fields<'_>, control: Control, alpha: f64) -> Option<Option<u64>> {
    if control != Control::WestfallYoung {
        super::steps::misplaced(reader, fields, "deals", "only `westfall-young` deals arms again");
        return Some(None);
    }
    let node = reader.required(
        fields,
        "deals",
        "the family",
        "say how often the arms are dealt again, such as `deals: 9999`; all deals are listed where there are no more than that",
    )?;
    let deals = count(reader, node, "`deals`")?;
    if 1.0 / (deals as f64 + 1.0) > alpha {
        reader.error(
            "too-few-deals",
            node.span,
            format!("with {deals} deals no p-value can be below {}, which is above the alpha of {alpha}", 1.0 / (deals as f64 + 1.0)),
            "too few",
            "ask for more deals, 9999 for instance",
        );
        return None;
    }
    Some(Some(deals))
}

/// Whether the members are what the control is made for.
fn fits(reader: &Reader<'_>, node: &Node, control: Control, design: &Design, members: &[(&Step, &Test, &Hypothesis)]) -> Option<()> {
    let refuse = |message: String, hint: &str| {
        reader.error("control-does-not-fit", node.span, message, "does not fit", hint);
        None
    };
    match control {
        Control::Shaffer if !all_pairs(design, members) => refuse(
            "Shaffer's divisors are those of all pairs of levels of one factor, and the family is not that".to_owned(),
            "let the family hold one step that splits one factor into `all pairs`, or use `holm`",
        ),
        Control::MaxT | Control::WestfallYoung => {
            let word = if control == Control::MaxT { "max-t" } else { "westfall-young" };
            if let Some((_, _, other)) = members.iter().find(|(step, test, one)| {
                !one.comparison || step.outcome != members[0].0.outcome || test.margin.is_some() || test.sides != members[0].1.sides
            }) {
                return refuse(
                    format!(
                        "`{word}` compares statistics of single contrasts of one outcome, all one-sided or all two-sided, and `{}` is not of that kind",
                        other.reference
                    ),
                    "split effects into single comparisons, or use `holm`",
                );
            }
            if let Some((_, test, _)) = members.iter().find(|(_, test, _)| values(&test.method).any(|method| *method != Method::Univariate))
            {
                return refuse(
                    format!("`{word}` needs the t of univariate tests; the test of `{}` uses another method", test.effect.join(" by ")),
                    "leave `method` out of these tests",
                );
            }
            if members.iter().any(|(_, test, _)| test.covariates != members[0].1.covariates) {
                return refuse(format!("`{word}` needs tests with the same covariates"), "give all its tests the same covariates");
            }
            if control == Control::WestfallYoung && !members[0].1.covariates.is_empty() {
                return refuse(
                    "`westfall-young` deals arms, and takes no covariates".to_owned(),
                    "leave `covariates` out of its tests, or use `max-t` or `holm`",
                );
            }
            if control == Control::MaxT { Some(()) } else { dealt(design, members, &refuse) }
        }
        _ => Some(()),
    }
}

fn dealt(design: &Design, members: &[(&Step, &Test, &Hypothesis)], refuse: &dyn Fn(String, &str) -> Option<()>) -> Option<()> {
    let Some(randomised) = &design.randomised else {
        return refuse(
            "nothing says what was randomised, so that nothing can be dealt again".to_owned(),
            "say it under `design`, as in `randomised: {factors: [arm], scheme: blocks, strata: [site]}`",
        );
    };
    let named = |factor: &Factor| randomised.factors.contains(&factor.name);
    for (_, _, hypothesis) in members {
        let moves =
            design.between.iter().zip(&hypothesis.between).any(|(factor, part)| super::hypotheses::df(factor, part) > 0 && named(factor));
        if !moves {
            return refuse(
                format!("`{}` compares no arms that were randomised: dealing them again cannot move it", hypothesis.reference),
                "keep tests of other kinds out of the family",
            );
        }
    }
    let arms: usize = design.between.iter().filter(|factor| named(factor)).map(|factor| factor.levels.len()).product();
    if arms <= 2 {
        return Some(());
    }
    if let Some((step, _, _)) = members.iter().find(|(step, _, _)| step.role == Role::Confirmatory) {
        return refuse(
            format!(
                "with {arms} arms `westfall-young` controls the error only where no arm differs from another, so that `{}` cannot be confirmatory",
                step.id
            ),
            "use `holm` or `max-t`, or give its tests `role: supportive`",
        );
    }
    if let Some((step, _, _)) = members.iter().find(|(_, test, _)| values(&test.error).any(|error| *error == ErrorTerm::Own)) {
        return refuse(
            format!("with {arms} arms `westfall-young` cannot use the own error of `{}`, which changes with the arms dealt to it", step.id),
            "use `error: own occasions` or `pooled`",
        );
    }
    Some(())
}

/// Whether the members are all pairs of levels of one factor, each once, and nothing else.
fn all_pairs(design: &Design, members: &[(&Step, &Test, &Hypothesis)]) -> bool {
    let factors: Vec<&Factor> = design.between.iter().chain(&design.within).collect();
    let parts = |one: &Hypothesis| -> Vec<FactorPart> { one.between.iter().chain(&one.within).cloned().collect() };
    let Some(first) = members.first().map(|(_, _, one)| parts(one)) else { return false };
    let varies = |place: usize| members.iter().any(|(_, _, one)| parts(one)[place] != first[place]);
    let varying: Vec<usize> = (0..factors.len()).filter(|place| varies(*place)).collect();
    let place = match varying.as_slice() {
        [one] => *one,
        _ => return false,
    };
    let levels = &factors[place].levels;
    let mut seen: Vec<(usize, usize)> = Vec::new();
    for (_, _, one) in members {
        let part = &parts(one)[place];
        let Some((first, second)) = super::hypotheses::pair(factors[place], part) else { return false };
        let number = |level: &str| levels.iter().position(|other| other == level).unwrap_or(0);
        let pair = (number(first).min(number(second)), number(first).max(number(second)));
        if seen.contains(&pair) {
            return false;
        }
        seen.push(pair);
    }
    seen.len() == levels.len() * (levels.len() - 1) / 2
}

fn member(reader: &Reader<'_>, reference: &str, span: Span, references: &References<'_>) -> Option<Vec<String>> {
    let Some(known) = references.get(reference) else {
        references.unknown(reader, reference, span);
        return None;
    };
    match known.kind {
        Kind::One { .. } | Kind::Claim => Some(vec![known.reference.clone()]),
        Kind::Several { .. } => Some(
            references
                .all()
                .iter()
                .filter(|other| other.step == known.step && matches!(other.kind, Kind::One { .. } | Kind::Claim))
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
                    || (matches!(known.kind, Kind::Several { .. }) && references.get(member).is_some_and(|one| one.step == known.step))
            })
        };
        for family in families.iter().filter(reads).filter(|family| !family.control.judges_in_turn()) {
            let last = family.members.iter().filter_map(|member| references.get(member)).max_by_key(|member| member.step);
            if let Some(last) = last.filter(|last| last.step >= by) {
                let (id, place) = &references.steps[last.step];
                reader.conflict(
                    "family-not-judged-yet",
                    [(used.span, "read here"), (*place, "the family's last member")],
                    format!("`{}` is judged with its family `{}`, which is complete only after the step `{id}`", used.reference, family.id),
                    "a family is judged once, after its last member has been computed: move this step below it, take one of them out of the family, or use a control that judges in turn: `fixed sequence`, `fallback` or `graph`",
                );
            }
        }
    }
}
