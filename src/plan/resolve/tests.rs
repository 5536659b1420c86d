//! Tests: their hypotheses, and how each is tested.

use super::conditions::choice;
use super::contrasts::{contrasts, in_the_outcomes_unit};
use super::corrections::correction_rule;
use super::design::effect;
use super::effects::options;
use super::hypotheses::{combine, df};
use super::margins::{margin, sides};
use super::methods::{self, Methods};
use super::reader::{Fields, Reader};
use super::references::References;
use super::spacing::Spacing;
use super::steps::{Context, misplaced, probability};
use crate::plan::resolved::{Choice, Correction, CorrectionRule, ErrorTerm, Hypothesis, Role, Test, TestKind, Weights};
use crate::text::source::Span;

const KINDS: &[(&str, TestKind)] = &[
    ("omnibus", TestKind::Omnibus),
    ("partial interactions", TestKind::PartialInteractions),
    ("simple effects", TestKind::SimpleEffects),
    ("contrasts", TestKind::Contrasts),
    ("equivalence", TestKind::Equivalence),
    ("non-inferiority", TestKind::NonInferiority),
    ("largest contrast", TestKind::LargestContrast),
];

pub(super) fn test(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
    outcome: Option<usize>,
    role: Option<Role>,
) -> Option<Test> {
    let node = fields.get("test")?;
    let kind = reader.word(node, "`test`", KINDS, &[])?;
    let outcome = outcome.map(|place| &context.outcomes[place]);
    let claim = matches!(kind, TestKind::Equivalence | TestKind::NonInferiority);
    let methods = methods::read(reader, fields, kind, context, references);
    let weights = self::weights(reader, fields);
    let level = level(reader, fields, context);
    let margin = margin(reader, fields, kind, outcome);
    if kind == TestKind::LargestContrast && role == Some(Role::Confirmatory) {
        let place = fields.get("role").map_or(node.span, |role| role.span);
        reader.error(
            "largest-contrast-not-confirmatory",
            place,
            "the largest contrast is picked by the data, so that it can support a conclusion and not carry one",
            "confirmatory",
            "give the step `role: supportive` or `role: exploratory`",
        );
    }
    let found = hypotheses(reader, fields, id, kind, context, outcome.and_then(|outcome| outcome.better))?;
    if claim {
        in_the_outcomes_unit(reader, found.span, &found.hypotheses)?;
    }
    let sides = sides(reader, fields, kind, &found.hypotheses);
    if (claim || sides.as_ref().is_some_and(|sides| !sides.are_two())) && fields.get("level").is_none() {
        reader.required(
            fields,
            "level",
            "the test",
            "a test of one side or of a claim must give its own level: 0.025 and 0.05 are both in use, and there is no default",
        );
        return None;
    }
    let methods = methods?;
    let error = error_term(reader, fields, kind, &methods, references);
    let correction = correction(reader, fields, context, references, &methods, &found);
    methods.check(reader, fields, context, outcome?, &found.hypotheses, level?)?;
    Some(Test {
        kind,
        effect: found.effect,
        method: methods.method,
        criterion: methods.criterion,
        deals: methods.deals,
        covariates: methods.covariates,
        sides: sides?,
        margin: margin?,
        error: error?,
        correction: correction?,
        weights: weights?,
        level: level?,
        hypotheses: found.hypotheses,
    })
}

/// `weights:` between cells.
pub(super) fn weights(reader: &Reader<'_>, fields: &Fields<'_>) -> Option<Weights> {
    let words = [("equal", Weights::Equal), ("observed", Weights::Observed)];
    fields.get("weights").map_or(Some(Weights::Equal), |node| reader.word(node, "`weights`", &words, &[]))
}

fn level(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>) -> Option<f64> {
    let Some(node) = fields.get("level") else { return Some(context.alpha) };
    let level = probability(reader, node, "`level`")?;
    if level > context.alpha {
        reader.error(
            "alpha-overspent",
            node.span,
            format!("this level is above the plan's alpha of {}", context.alpha),
            "here",
            "a test may be given less than alpha, never more",
        );
        return None;
    }
    Some(level)
}

/// The hypotheses of a step, and where they came from.
struct Found {
    /// Factors of the effect, between ones first.
    effect: Vec<String>,
    hypotheses: Vec<Hypothesis>,
    span: Span,
}

fn hypotheses(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    kind: TestKind,
    context: &Context<'_>,
    better: Option<crate::plan::resolved::Better>,
) -> Option<Found> {
    let spacing = Spacing::of_step(fields);
    let names = context.factor_names();
    let written = fields.entry("contrast").or(fields.entry("contrasts"));
    let claim = matches!(kind, TestKind::Equivalence | TestKind::NonInferiority);
    if !claim && kind != TestKind::Contrasts {
        for key in ["contrast", "contrasts"] {
            misplaced(reader, fields, key, "this test takes an `effect`; `test: contrasts` takes weights");
        }
    }
    if claim || (kind == TestKind::Contrasts && written.is_some()) {
        for key in ["effect", "split", "at", "spacing"] {
            misplaced(reader, fields, key, "the contrasts are written out");
        }
        let Some(written) = written else {
            reader.required(
                fields,
                "contrast",
                "the test",
                "say what is compared by weights, such as `contrast: {arm: {new: 1, usual: -1}, visit: {week 6: 1}}`",
            );
            return None;
        };
        let hypotheses = contrasts(reader, fields, id, context, better)?;
        let compared = |place: usize| {
            hypotheses.iter().any(|one| {
                let part = one.between.iter().chain(&one.within).nth(place);
                part.is_some_and(|part| df(context.factors()[place], part) > 0)
            })
        };
        let effect = (0..names.len()).filter(|place| compared(*place)).map(|place| names[place].to_owned()).collect();
        return Some(Found { effect, hypotheses, span: written.key_span });
    }
    let why = if kind == TestKind::Contrasts {
        "give weights (`contrast:` or `contrasts:`), or an effect with its `split`, such as `effect: visit` and `split: {visit: trends}`"
    } else {
        "name the effect by its factors, such as `arm by visit`"
    };
    let node = reader.required(fields, "effect", "the test", why)?;
    let chosen = effect(reader, reader.text(node, "`effect`")?, node.span, &names)?;
    let options = options(reader, fields, kind, context, &chosen, node.span, &spacing)?;
    spacing.has_a_use(reader);
    let effect_name = chosen.iter().map(|place| names[*place]).collect::<Vec<_>>().join(" by ");
    Some(Found {
        effect: chosen.iter().map(|place| names[*place].to_owned()).collect(),
        hypotheses: combine(id, context.design, &options, &effect_name, better),
        span: node.span,
    })
}

fn error_term(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    kind: TestKind,
    methods: &Methods,
    references: &References<'_>,
) -> Option<Choice<ErrorTerm>> {
    let words = [("own", ErrorTerm::Own), ("own occasions", ErrorTerm::OwnOccasions), ("pooled", ErrorTerm::Pooled)];
    let whole = matches!(kind, TestKind::Omnibus | TestKind::LargestContrast);
    match fields.get("error") {
        Some(node) if methods.only_own_covariances() => {
            let own = node.text() == Some("own");
            if !own {
                misplaced(reader, fields, "error", "`welch-james` judges by each cell's own covariance matrix");
            }
            own.then_some(Choice::Fixed(ErrorTerm::Own))
        }
        Some(node) => choice(reader, node, references, "`error`", &mut |node| {
            let error = reader.word(node, "`error`", &words, &[])?;
            if error == ErrorTerm::Pooled && !whole && methods.only_multivariate() {
                reader.error(
                    "misplaced-key",
                    node.span,
                    "a multivariate test of a piece has no pooled error: it does not pool contrasts between occasions",
                    "here",
                    "write `own` (the arms it concerns) or `own occasions` (all arms)",
                );
                return None;
            }
            Some(error)
        }),
        None if whole => Some(Choice::Fixed(ErrorTerm::Pooled)),
        None if methods.only_own_covariances() => Some(Choice::Fixed(ErrorTerm::Own)),
        None => {
            reader.required(
                fields,
                "error",
                "the test",
                "say whose variation judges it: `own` (the arms and occasions it concerns), `own occasions` (all arms) or `pooled` (the whole design's error); there is no default",
            );
            None
        }
    }
}

fn correction(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    context: &Context<'_>,
    references: &References<'_>,
    methods: &Methods,
    found: &Found,
) -> Option<Choice<CorrectionRule>> {
    let none = || Some(Choice::Fixed(CorrectionRule::Always(Correction::None)));
    if !methods.may_be_univariate() {
        misplaced(reader, fields, "correction", "only the univariate test rests on sphericity");
        return none();
    }
    if let Some(node) = fields.get("correction") {
        return choice(reader, node, references, "`correction`", &mut |node| correction_rule(reader, node));
    }
    let contrasts = |hypothesis: &Hypothesis| -> usize {
        context.design.within.iter().zip(&hypothesis.within).map(|(factor, part)| df(factor, part).max(1)).product()
    };
    let most = found.hypotheses.iter().map(contrasts).max().unwrap_or(1);
    if most > 1 {
        reader.error(
            "missing-key",
            found.span,
            format!("the test of `{}` lacks `correction`", found.effect.join(" by ")),
            format!("keeps {most} contrasts between occasions"),
            "say `none`, `greenhouse-geisser`, `huynh-feldt`, `huynh-feldt 1976` or `lower bound`: it moves the answer, and there is no default",
        );
        return None;
    }
    none()
}
