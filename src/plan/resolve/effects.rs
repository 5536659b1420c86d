//! An effect, split and held as a step says.

use super::design::effect;
use super::hypotheses::{Breakdown, missing_split, splits};
use super::reader::{Fields, Reader};
use super::spacing::Spacing;
use super::steps::{Context, misplaced};
use crate::plan::resolved::{FactorPart, TestKind};
use crate::text::source::Span;

/// What is done with each factor of the design, in design order.
pub(super) fn options(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    kind: TestKind,
    context: &Context<'_>,
    chosen: &[usize],
    effect_span: Span,
    spacing: &Spacing<'_>,
) -> Option<Vec<Vec<Breakdown>>> {
    let factors = context.factors();
    let mut options: Vec<Vec<Breakdown>> = factors
        .iter()
        .enumerate()
        .map(|(place, factor)| vec![if chosen.contains(&place) { Breakdown::whole(factor) } else { Breakdown::average() }])
        .collect();
    if !matches!(kind, TestKind::SimpleEffects | TestKind::Contrasts) {
        misplaced(reader, fields, "at", "only simple effects and contrasts are taken at a level");
    }
    match kind {
        TestKind::LargestContrast => {
            misplaced(reader, fields, "split", "the largest contrast is looked for in the whole effect");
            if chosen.len() < 2 {
                not_an_interaction(reader, effect_span, "for one factor look at its contrasts");
                return None;
            }
        }
        // Their hypotheses are contrasts written out.
        TestKind::Equivalence | TestKind::NonInferiority => return None,
        TestKind::Omnibus => {
            misplaced(reader, fields, "split", "an omnibus test keeps its effect whole; `test: partial interactions` splits it")
        }
        TestKind::PartialInteractions => {
            if chosen.len() < 2 {
                not_an_interaction(reader, effect_span, "for one factor use `test: simple effects`, `contrasts` or `omnibus`");
                return None;
            }
            match fields.get("split") {
                Some(node) => {
                    splits(reader, node, &factors, chosen, spacing)?.into_iter().for_each(|(place, found)| options[place] = found)
                }
                None => {
                    missing_split(reader, fields.span);
                    return None;
                }
            }
        }
        TestKind::SimpleEffects | TestKind::Contrasts => {
            let node = match kind {
                TestKind::SimpleEffects => Some(reader.required(
                    fields,
                    "at",
                    "the test",
                    "say at the levels of which factor the effect is tested, such as `at: visit`",
                )?),
                _ => fields.get("at"),
            };
            let names = context.factor_names();
            let at = match node {
                Some(node) => effect(reader, reader.text(node, "`at`")?, node.span, &names)?,
                None => Vec::new(),
            };
            if let Some(both) = at.iter().find(|place| chosen.contains(place)) {
                reader.conflict(
                    "factor-in-both",
                    [(node.map_or(effect_span, |node| node.span), "held here"), (effect_span, "tested here")],
                    format!("the factor `{}` is both tested and held", names[*both]),
                    "name a factor in `effect` or in `at`, not in both",
                );
                return None;
            }
            for place in at {
                options[place] = factors[place].levels.iter().map(|level| Breakdown::hold(level)).collect();
            }
            if let Some(node) = fields.get("split") {
                splits(reader, node, &factors, chosen, spacing)?.into_iter().for_each(|(place, found)| options[place] = found);
            } else if kind == TestKind::Contrasts {
                missing_split(reader, fields.span);
                return None;
            }
        }
    }
    let count: usize = options.iter().map(Vec::len).product();
    if count > 5000 {
        reader.error(
            "too-many-tests",
            effect_span,
            format!("this step makes {count} tests; at most 5000 can be judged together"),
            "here",
            "split fewer factors, or use `adjacent pairs` or `against LEVEL`",
        );
        return None;
    }
    debug_assert!(options.iter().flatten().all(|option| !matches!(&option.part, FactorPart::Hold(level) if level.is_empty())));
    Some(options)
}

fn not_an_interaction(reader: &Reader<'_>, span: Span, otherwise: &str) {
    reader.error(
        "not-an-interaction",
        span,
        "an interaction has two factors or more",
        "one factor",
        format!("name them joined by `by`, such as `arm by visit`; {otherwise}"),
    );
}
