//! Steps: screens and tests; estimates stand in their own file.

use super::conditions::{choice, condition};
use super::design::effect;
use super::estimates;
use super::hypotheses::{Breakdown, combine, df, missing_split, splits};
use super::reader::{Fields, Reader};
use super::references::{Kind, References};
use crate::plan::resolved::{
    Action, Choice, Correction, CorrectionRule, Design, ErrorTerm, Factor, FactorPart, Method, Outcome, Role, Screen, ScreenKind, Step,
    Test, TestKind, VarianceMethod, Weights,
};
use crate::plan::syntax::tree::{Node, Value};
use crate::text::source::Span;

/// What the steps are read against.
pub(super) struct Context<'p> {
    pub design: &'p Design,
    pub outcomes: &'p [Outcome],
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
const TEST_KEYS: &[&str] = &["test", "effect", "at", "split", "error", "correction", "method", "weights", "sides", "level"];
const ESTIMATE_KEYS: &[&str] =
    &["estimate", "split", "within each", "standardizer", "small-sample correction", "interval", "of", "kind", "measured factors"];
const LATER_KEYS: &[&str] = &[
    "among",
    "covariates",
    "contrast",
    "contrasts",
    "margin",
    "favours",
    "criterion",
    "deals",
    "spacing",
    "structure",
    "fallback",
    "weight",
];

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
    let better = outcome.and_then(|place| context.outcomes[place].better);
    let action = match *species {
        "screen" => screen(reader, &fields, &id, context, references).map(Action::Screen),
        "test" => test(reader, &fields, &id, context, references, better).map(Action::Test),
        _ => estimates::estimate(reader, &fields, &id, context, references).map(Action::Estimate),
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
        Action::Test(test) => references.define_hypotheses(reader, id, &test.hypotheses, number),
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

fn screen(reader: &Reader<'_>, fields: &Fields<'_>, id: &str, context: &Context<'_>, references: &References<'_>) -> Option<Screen> {
    let node = fields.get("screen")?;
    let words = [("sphericity", 0), ("equal covariance matrices", 1), ("equal variances", 2)];
    let later = ["normal residuals", "outlying values", "missingness"];
    let what = reader.word(node, "`screen`", &words, &later);
    let threshold = reader
        .required(
            fields,
            "threshold",
            "the screen",
            "say at which p it shows a departure, for instance `threshold: 0.05`; there is no default",
        )
        .and_then(|node| choice(reader, node, references, "`threshold`", &mut |node| probability(reader, node, "`threshold`")));
    let design = context.design;
    let (kind, names): (ScreenKind, Vec<String>) = match what? {
        0 => {
            misplaced(reader, fields, "method", "sphericity is looked at by Mauchly's test");
            (ScreenKind::Sphericity { of: sphericity_of(reader, fields, context)? }, vec![id.to_owned()])
        }
        1 => {
            misplaced(reader, fields, "method", "covariance matrices are compared by Box's M");
            misplaced(reader, fields, "of", "covariance matrices are compared over all occasions");
            needs_arms(reader, node, design, "compares arms")?;
            (ScreenKind::EqualCovarianceMatrices, vec![id.to_owned()])
        }
        _ => {
            misplaced(reader, fields, "of", "variances are compared at every occasion");
            needs_arms(reader, node, design, "compares arms")?;
            let method = reader.required(
                fields,
                "method",
                "the screen",
                "there are two: `levene` (deviations from means) and `brown-forsythe` (from medians)",
            )?;
            let words = [("levene", VarianceMethod::Levene), ("brown-forsythe", VarianceMethod::BrownForsythe)];
            let method =
                choice(reader, method, references, "`method`", &mut |node| reader.word(node, "`method` of equal variances", &words, &[]))?;
            let names = if design.occasions() == 1 {
                vec![id.to_owned()]
            } else {
                (0..design.occasions()).map(|occasion| format!("{id} / {}", design.occasion_levels(occasion).join("; "))).collect()
            };
            (ScreenKind::EqualVariances { method }, names)
        }
    };
    Some(Screen { kind, threshold: threshold?, references: names })
}

fn misplaced(reader: &Reader<'_>, fields: &Fields<'_>, key: &str, why: &str) {
    if let Some(entry) = fields.entry(key) {
        reader.error("misplaced-key", entry.key_span, format!("`{key}` has no use here"), "here", format!("{why}; remove it"));
    }
}

fn needs_arms(reader: &Reader<'_>, node: &Node, design: &Design, what: &str) -> Option<()> {
    if design.between.is_empty() {
        reader.error(
            "nothing-to-compare",
            node.span,
            format!("this screen {what}, and the design has none"),
            "no between factor",
            "remove the step, or name the arms under `design: between`",
        );
        return None;
    }
    Some(())
}

fn sphericity_of(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>) -> Option<Vec<String>> {
    let within = &context.design.within;
    let names: Vec<&str> = within.iter().map(|factor| factor.name.as_str()).collect();
    let chosen = match fields.get("of") {
        Some(node) => effect(reader, reader.text(node, "`of`")?, node.span, &names)?,
        None if within.len() == 1 => vec![0],
        None => {
            reader.required(
                fields,
                "of",
                "the screen",
                &format!(
                    "say of which within effect: {}",
                    if names.is_empty() { "the design has no within factor".to_owned() } else { names.join(", ") }
                ),
            );
            return None;
        }
    };
    let contrasts: usize = chosen.iter().map(|place| within[*place].levels.len() - 1).product();
    if contrasts < 2 {
        let place = fields.entry("of").map_or(reader.first_line(fields.span), |entry| entry.node.span);
        reader.error(
            "nothing-to-compare",
            place,
            "sphericity cannot be departed from with two occasions",
            "only one contrast",
            "remove the screen: with a single contrast there is nothing that could differ",
        );
        return None;
    }
    Some(chosen.into_iter().map(|place| within[place].name.clone()).collect())
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

fn test(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
    better: Option<crate::plan::resolved::Better>,
) -> Option<Test> {
    let node = fields.get("test")?;
    let words = [
        ("omnibus", TestKind::Omnibus),
        ("partial interactions", TestKind::PartialInteractions),
        ("simple effects", TestKind::SimpleEffects),
    ];
    let kind = reader.word(node, "`test`", &words, &["contrasts", "equivalence", "non-inferiority", "largest contrast"])?;
    let method = fields.get("method").map_or(Some(Method::Univariate), |node| {
        reader.word(
            node,
            "`method` of a test",
            &[("univariate", Method::Univariate)],
            &["multivariate", "welch-james", "randomisation", "mixed model"],
        )
    });
    if let Some(node) = fields.get("sides") {
        if node.text() == Some("one") {
            reader.not_yet(node.span, "`sides: one`");
        } else {
            reader.word(node, "`sides`", &[("two", ())], &[]);
        }
    }
    let weights = fields
        .get("weights")
        .map_or(Some(Weights::Equal), |node| reader.word(node, "`weights`", &[("equal", Weights::Equal)], &["observed"]));
    let level = fields.get("level").map_or(Some(context.alpha), |node| {
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
    });
    let names = context.factor_names();
    let chosen = reader
        .required(fields, "effect", "the test", "name the effect by its factors, such as `arm by visit`")
        .and_then(|node| Some((node, effect(reader, reader.text(node, "`effect`")?, node.span, &names)?)));
    let error = error_term(reader, fields, kind, references);
    let options = chosen.as_ref().and_then(|(node, chosen)| options(reader, fields, kind, context, chosen, node.span));
    let correction =
        fields.get("correction").map(|node| choice(reader, node, references, "`correction`", &mut |node| correction_rule(reader, node)));
    let (node, chosen) = chosen?;
    let effect_name = chosen.iter().map(|place| names[*place]).collect::<Vec<_>>().join(" by ");
    let options = options?;
    let correction = match correction {
        Some(found) => found?,
        None => {
            let within = &options[context.design.between.len()..];
            let contrasts: usize =
                context.design.within.iter().zip(within).map(|(factor, options)| df(factor, &options[0].part).max(1)).product();
            if contrasts > 1 {
                reader.error(
                    "missing-key",
                    node.span,
                    format!("the test of `{effect_name}` lacks `correction`"),
                    format!("keeps {contrasts} contrasts between occasions"),
                    "say `none`, `greenhouse-geisser`, `huynh-feldt`, `huynh-feldt 1976` or `lower bound`: it moves the answer, and there is no default",
                );
                return None;
            }
            Choice::Fixed(CorrectionRule::Always(Correction::None))
        }
    };
    Some(Test {
        kind,
        effect: chosen.iter().map(|place| names[*place].to_owned()).collect(),
        method: method?,
        error: error?,
        correction,
        weights: weights?,
        level: level?,
        hypotheses: combine(id, context.design, &options, &effect_name, better),
    })
}

fn error_term(reader: &Reader<'_>, fields: &Fields<'_>, kind: TestKind, references: &References<'_>) -> Option<Choice<ErrorTerm>> {
    let words = [("own", ErrorTerm::Own), ("own occasions", ErrorTerm::OwnOccasions), ("pooled", ErrorTerm::Pooled)];
    match fields.get("error") {
        Some(node) => choice(reader, node, references, "`error`", &mut |node| reader.word(node, "`error`", &words, &[])),
        None if kind == TestKind::Omnibus => Some(Choice::Fixed(ErrorTerm::Pooled)),
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

/// What is done with each factor of the design, in design order.
fn options(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    kind: TestKind,
    context: &Context<'_>,
    chosen: &[usize],
    effect_span: Span,
) -> Option<Vec<Vec<Breakdown>>> {
    let factors = context.factors();
    let mut options: Vec<Vec<Breakdown>> = factors
        .iter()
        .enumerate()
        .map(|(place, factor)| vec![if chosen.contains(&place) { Breakdown::whole(factor) } else { Breakdown::average() }])
        .collect();
    if kind != TestKind::SimpleEffects {
        misplaced(reader, fields, "at", "only simple effects are taken at a level");
    }
    match kind {
        TestKind::Omnibus => {
            misplaced(reader, fields, "split", "an omnibus test keeps its effect whole; `test: partial interactions` splits it")
        }
        TestKind::PartialInteractions => {
            if chosen.len() < 2 {
                reader.error(
                    "not-an-interaction",
                    effect_span,
                    "an interaction has two factors or more",
                    "one factor",
                    "name them joined by `by`, such as `arm by visit`; for one factor use `test: simple effects` or `omnibus`",
                );
                return None;
            }
            match fields.get("split") {
                Some(node) => splits(reader, node, &factors, chosen)?.into_iter().for_each(|(place, found)| options[place] = found),
                None => {
                    missing_split(reader, fields.span);
                    return None;
                }
            }
        }
        TestKind::SimpleEffects => {
            let node =
                reader.required(fields, "at", "the test", "say at the levels of which factor the effect is tested, such as `at: visit`")?;
            let names = context.factor_names();
            let at = effect(reader, reader.text(node, "`at`")?, node.span, &names)?;
            if let Some(both) = at.iter().find(|place| chosen.contains(place)) {
                reader.conflict(
                    "factor-in-both",
                    [(node.span, "held here"), (effect_span, "tested here")],
                    format!("the factor `{}` is both tested and held", names[*both]),
                    "name a factor in `effect` or in `at`, not in both",
                );
                return None;
            }
            for place in at {
                options[place] = factors[place].levels.iter().map(|level| Breakdown::hold(level)).collect();
            }
            if let Some(node) = fields.get("split") {
                splits(reader, node, &factors, chosen)?.into_iter().for_each(|(place, found)| options[place] = found);
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

fn correction_rule(reader: &Reader<'_>, node: &Node) -> Option<CorrectionRule> {
    let words = [
        ("none", Correction::None),
        ("greenhouse-geisser", Correction::GreenhouseGeisser),
        ("huynh-feldt", Correction::HuynhFeldt),
        ("huynh-feldt 1976", Correction::HuynhFeldt1976),
        ("lower bound", Correction::LowerBound),
    ];
    let word = |node: &Node| reader.word(node, "`correction`", &words, &[]);
    let Value::Map(entries) = &node.value else { return word(node).map(CorrectionRule::Always) };
    let (mut below, mut otherwise, mut sound) = (Vec::new(), None, true);
    for entry in entries {
        if entry.key == "otherwise" {
            otherwise = word(&entry.node);
            sound &= otherwise.is_some();
            continue;
        }
        let bound = entry
            .key
            .strip_prefix("below ")
            .and_then(|bound| bound.trim().parse::<f64>().ok())
            .filter(|bound| *bound > 0.0 && *bound <= 1.0);
        match bound {
            None => {
                reader.error(
                    "unknown-key",
                    entry.key_span,
                    format!("`{}` is not a bound of epsilon", entry.key),
                    "here",
                    "write `below 0.75: greenhouse-geisser` and `otherwise: ...`; epsilon lies between 0 and 1",
                );
                sound = false;
            }
            Some(bound) => match word(&entry.node) {
                Some(correction) => below.push((bound, correction)),
                None => sound = false,
            },
        }
    }
    if sound && otherwise.is_none() {
        reader.error(
            "case-without-otherwise",
            reader.first_line(node.span),
            "the correction by epsilon has no `otherwise`",
            "`otherwise` is missing",
            "add `otherwise: ...`",
        );
    }
    otherwise.filter(|_| sound).map(|otherwise| CorrectionRule::ByEpsilon { below, otherwise })
}
