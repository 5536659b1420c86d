//! By which method a hypothesis is tested, and what goes with it: criterion, deals, covariates.

use super::conditions::choice;
use super::hypotheses::df;
use super::reader::{Fields, Reader};
use super::references::References;
use super::steps::{Context, misplaced};
use crate::plan::resolved::{Choice, ColumnKind, Covariate, Criterion, Hypothesis, Method, Outcome, TestKind};
use crate::plan::syntax::tree::{Node, Value};
use crate::text::source::Span;

/// More deals than any study needs; a slip of the pen more likely.
const MOST_DEALS: f64 = 10_000_000.0;

/// The method of a test, and what goes with it.
pub(super) struct Methods {
    pub method: Choice<Method>,
    pub criterion: Option<Choice<Criterion>>,
    pub deals: Option<u64>,
    pub covariates: Vec<Covariate>,
}

/// Every value that a choice may come to.
pub(super) fn values<T>(choice: &Choice<T>) -> impl Iterator<Item = &T> {
    let (cases, last) = match choice {
        Choice::Fixed(value) => (&[][..], value),
        Choice::Cases { cases, otherwise } => (cases.as_slice(), otherwise),
    };
    cases.iter().map(|case| &case.value).chain(std::iter::once(last))
}

impl Methods {
    fn may_be(&self, method: Method) -> bool {
        values(&self.method).any(|one| *one == method)
    }

    fn only(&self, method: Method) -> bool {
        values(&self.method).all(|one| *one == method)
    }

    pub fn may_be_univariate(&self) -> bool {
        self.may_be(Method::Univariate)
    }

    pub fn only_multivariate(&self) -> bool {
        self.only(Method::Multivariate)
    }

    pub fn only_own_covariances(&self) -> bool {
        self.only(Method::WelchJames)
    }
}

/// Reads `method`, `criterion`, `deals` and `covariates`.
pub(super) fn read(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    kind: TestKind,
    context: &Context<'_>,
    references: &References<'_>,
) -> Option<Methods> {
    let method = method(reader, fields, kind, references);
    let criterion = fields.get("criterion").map(|node| {
        let words = [
            ("pillai", Criterion::Pillai),
            ("wilks", Criterion::Wilks),
            ("hotelling-lawley", Criterion::HotellingLawley),
            ("roy", Criterion::Roy),
        ];
        choice(reader, node, references, "`criterion`", &mut |node| reader.word(node, "`criterion`", &words, &[]))
    });
    let deals = fields.get("deals").map(|node| count(reader, node, "`deals`"));
    let covariates = covariates(reader, fields, context);
    let methods = Methods { method: method?, criterion: criterion.unwrap_or(None), deals: deals.unwrap_or(None), covariates: covariates? };
    if methods.may_be(Method::Multivariate) {
        reader.required(
            fields,
            "criterion",
            "the multivariate test",
            "say which decides: `pillai`, `wilks`, `hotelling-lawley` or `roy`; they can disagree, and there is no default",
        )?;
        methods.criterion.as_ref()?;
    } else {
        misplaced(reader, fields, "criterion", "only a multivariate test has a criterion");
    }
    if methods.may_be(Method::Randomisation) {
        reader.required(
            fields,
            "deals",
            "the randomisation test",
            "say how often the arms are dealt again, such as `deals: 9999`; all deals are listed where there are no more than that",
        )?;
        methods.deals?;
    } else {
        misplaced(reader, fields, "deals", "only a randomisation test deals arms again");
    }
    Some(methods)
}

fn method(reader: &Reader<'_>, fields: &Fields<'_>, kind: TestKind, references: &References<'_>) -> Option<Choice<Method>> {
    let Some(node) = fields.get("method") else { return Some(Choice::Fixed(Method::Univariate)) };
    let words = [
        ("univariate", Method::Univariate),
        ("multivariate", Method::Multivariate),
        ("welch-james", Method::WelchJames),
        ("randomisation", Method::Randomisation),
    ];
    let claim = matches!(kind, TestKind::Equivalence | TestKind::NonInferiority);
    choice(reader, node, references, "`method`", &mut |node| {
        let method = reader.word(node, "`method` of a test", &words, &["mixed model"])?;
        let needs_t = claim && matches!(method, Method::Multivariate | Method::Randomisation);
        if needs_t || (kind == TestKind::LargestContrast && method != Method::Univariate) {
            let what = if claim { "a margin is tested by t, which" } else { "the bound of the largest contrast comes from F, which" };
            reader.error(
                "method-does-not-fit",
                node.span,
                format!("{what} this method does not give"),
                "here",
                if claim { "use `univariate` or `welch-james`" } else { "use `univariate`" },
            );
            return None;
        }
        Some(method)
    })
}

/// A whole number of deals or resamples.
pub(super) fn count(reader: &Reader<'_>, node: &Node, what: &str) -> Option<u64> {
    let value = reader.number(node, what)?;
    if libm::trunc(value) == value && (99.0..=MOST_DEALS).contains(&value) {
        return Some(value as u64);
    }
    reader.error(
        "wrong-range",
        node.span,
        format!("{what} must be a whole number from 99 to {MOST_DEALS}"),
        "here",
        "9999 is common; fewer leave the result to chance",
    );
    None
}

fn covariates(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>) -> Option<Vec<Covariate>> {
    let Some(node) = fields.get("covariates") else { return Some(Vec::new()) };
    let items = match &node.value {
        Value::List(items) => items.as_slice(),
        _ => std::slice::from_ref(node),
    };
    let mut found: Vec<Covariate> = Vec::new();
    let mut sound = true;
    for item in items {
        match covariate(reader, item, context) {
            Some(covariate) if found.contains(&covariate) => {
                reader.error("duplicate-name", item.span, "this covariate is listed twice", "the second", "list it once");
                sound = false;
            }
            Some(covariate) => found.push(covariate),
            None => sound = false,
        }
    }
    sound.then_some(found)
}

fn covariate(reader: &Reader<'_>, node: &Node, context: &Context<'_>) -> Option<Covariate> {
    if node.map().is_some() {
        let fields = reader.map(node, "a covariate", &["occasion", "outcome"], &[])?;
        let names: Vec<&str> = context.outcomes.iter().map(|outcome| outcome.name.as_str()).collect();
        let outcome = match fields.get("outcome") {
            Some(node) => reader.name(reader.text(node, "`outcome`")?, node.span, "outcome", &names)?,
            None if names.len() == 1 => 0,
            None => {
                reader.required(
                    &fields,
                    "outcome",
                    "the covariate",
                    &format!("the plan has several outcomes; say which: {}", names.join(", ")),
                );
                return None;
            }
        };
        let node = reader.required(&fields, "occasion", "the covariate", "say at which occasion, such as `{occasion: baseline}`")?;
        let text = reader.text(node, "`occasion`")?;
        let all: Vec<String> =
            (0..context.design.occasions()).map(|occasion| context.design.occasion_levels(occasion).join("; ")).collect();
        let all: Vec<&str> = all.iter().map(String::as_str).collect();
        let place = reader.name(text, node.span, "occasion", &all)?;
        let levels = context.design.occasion_levels(place).into_iter().map(str::to_owned).collect();
        return Some(Covariate::Occasion { outcome: context.outcomes[outcome].name.clone(), levels });
    }
    let column = reader.text(node, "a covariate")?;
    let known = context.columns.iter().find(|check| check.column == column);
    match known.map(|check| &check.kind) {
        Some(ColumnKind::Number { .. }) => Some(Covariate::Column(column.to_owned())),
        Some(ColumnKind::Text { .. }) => {
            reader.error(
                "wrong-covariate",
                node.span,
                format!("the column `{column}` holds text; a covariate is a number"),
                "text",
                "groups belong to the design as between factors",
            );
            None
        }
        None => {
            let numbers: Vec<&str> = context.columns.iter().map(|check| check.column.as_str()).collect();
            let hint = match crate::text::suggest::nearest(column, numbers.iter().copied()) {
                Some(near) => format!("did you mean `{near}`?"),
                None => format!(
                    "declare it under `data`, as in `columns: {{{column}: {{type: number}}}}`; an occasion is written `{{occasion: LEVEL}}`"
                ),
            };
            reader.error("unknown-name", node.span, format!("`data` checks no column `{column}`"), "unknown", hint);
            None
        }
    }
}

impl Methods {
    /// What can only be judged with the hypotheses at hand.
    pub fn check(
        &self,
        reader: &Reader<'_>,
        fields: &Fields<'_>,
        context: &Context<'_>,
        outcome: &Outcome,
        hypotheses: &[Hypothesis],
        level: f64,
    ) -> Option<()> {
        let place = |key: &str| fields.entry(key).map_or(reader.first_line(fields.span), |entry| entry.node.span);
        if !self.covariates.is_empty() && self.may_be(Method::WelchJames) {
            reader.error(
                "method-does-not-fit",
                place("covariates"),
                "`welch-james` takes no covariates",
                "here",
                "leave them out, or use another method",
            );
            return None;
        }
        self.covariates_outside_contrasts(reader, place("covariates"), context, outcome, hypotheses)?;
        if !self.may_be(Method::Randomisation) {
            return Some(());
        }
        let Some(randomised) = &context.design.randomised else {
            reader.error(
                "not-randomised",
                place("method"),
                "nothing says what was randomised, so that nothing can be dealt again",
                "here",
                "say it under `design`, as in `randomised: {factors: [arm], scheme: blocks, strata: [site]}`",
            );
            return None;
        };
        for hypothesis in hypotheses {
            let moves = context
                .design
                .between
                .iter()
                .zip(&hypothesis.between)
                .any(|(factor, part)| df(factor, part) > 0 && randomised.factors.contains(&factor.name));
            if !moves {
                reader.error(
                    "nothing-to-deal",
                    place("method"),
                    format!("`{}` compares no arms that were randomised: dealing them again cannot move it", hypothesis.reference),
                    "here",
                    "a randomisation test needs a contrast between levels of a randomised factor; use another method for the rest",
                );
                return None;
            }
        }
        let deals = self.deals? as f64;
        if 1.0 / (deals + 1.0) > level {
            reader.error(
                "too-few-deals",
                place("deals"),
                format!("with {deals} deals no p-value can be below {}, which is above the level of {level}", 1.0 / (deals + 1.0)),
                "too few",
                "ask for more deals, 9999 for instance",
            );
            return None;
        }
        Some(())
    }

    /// A baseline occasion that serves as a covariate may not appear in M.
    fn covariates_outside_contrasts(
        &self,
        reader: &Reader<'_>,
        span: Span,
        context: &Context<'_>,
        outcome: &Outcome,
        hypotheses: &[Hypothesis],
    ) -> Option<()> {
        for covariate in &self.covariates {
            let Covariate::Occasion { outcome: of, levels } = covariate else { continue };
            let within = &context.design.within;
            let uses =
                |one: &Hypothesis| within.iter().zip(&one.within).zip(levels).all(|((factor, part), level)| part.weighs(factor, level));
            let used = hypotheses.iter().find(|one| *of == outcome.name && uses(one));
            if let Some(used) = used {
                reader.error(
                    "covariate-in-contrast",
                    span,
                    format!("`{}` uses the occasion `{}`, which cannot also be its covariate", used.reference, levels.join("; ")),
                    "used twice",
                    "compare occasions other than the covariate's; it would explain part of itself",
                );
                return None;
            }
        }
        Some(())
    }
}
