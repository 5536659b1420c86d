//! Sides of a test, and the margins of a claim.

use super::reader::{Fields, Reader};
use super::steps::misplaced;
use crate::plan::resolved::{Better, Hypothesis, Margin, MarginStandardizer, Outcome, Sides, TestKind};
use crate::plan::syntax::tree::Node;

const WORTHWHILE: &str = "smallest worthwhile difference";

/// `sides` and `favours`.
pub(super) fn sides(reader: &Reader<'_>, fields: &Fields<'_>, kind: TestKind, hypotheses: &[Hypothesis]) -> Option<Sides> {
    if matches!(kind, TestKind::Equivalence | TestKind::NonInferiority | TestKind::LargestContrast) {
        misplaced(reader, fields, "sides", "the kind of the test settles it");
        misplaced(reader, fields, "favours", "the kind of the test settles it");
        return Some(Sides::Two);
    }
    let one = match fields.get("sides") {
        None => false,
        Some(node) => reader.word(node, "`sides`", &[("two", false), ("one", true)], &[])?,
    };
    if !one {
        misplaced(reader, fields, "favours", "only a one-sided test (`sides: one`) names the direction that counts");
        return Some(Sides::Two);
    }
    let node = reader.required(
        fields,
        "favours",
        "the one-sided test",
        "say which direction counts: `favours: LEVEL`, or `favours: above zero` or `below zero` where no arm is favoured",
    )?;
    let text = reader.text(node, "`favours`")?;
    for hypothesis in hypotheses {
        if !hypothesis.comparison {
            reader.error(
                "no-direction",
                node.span,
                format!("`{}` is not one comparison, so that it has no direction", hypothesis.reference),
                "no direction",
                "only tests of one comparison can be one-sided; split the effect, or test it two-sided",
            );
            return None;
        }
        let favours = hypothesis.favours.as_ref();
        let known = matches!(text, "above zero" | "below zero") || favours.is_some_and(|one| one.above == text || one.below == text);
        if !known {
            let hint = match favours {
                Some(favours) => format!("it may favour `{}` or `{}`, or be `above zero` or `below zero`", favours.above, favours.below),
                None => "it compares no two arms at an occasion or on a change over time, or the outcome has no `better:`; write `above zero` or `below zero`".to_owned(),
            };
            reader.error("no-direction", node.span, format!("`{}` cannot favour `{text}`", hypothesis.reference), "here", hint);
            return None;
        }
    }
    Some(Sides::One { favours: text.to_owned() })
}

/// `margin` of an equivalence or non-inferiority test; of other tests nothing.
pub(super) fn margin(reader: &Reader<'_>, fields: &Fields<'_>, kind: TestKind, outcome: Option<&Outcome>) -> Option<Option<Margin>> {
    let claim = matches!(kind, TestKind::Equivalence | TestKind::NonInferiority);
    if !claim {
        misplaced(reader, fields, "margin", "only equivalence and non-inferiority are tested against margins");
        return Some(None);
    }
    let two = kind == TestKind::Equivalence;
    let form = if two { "`margin: {lower: -5, upper: 5}`" } else { "`margin: {worse by: 5}`" };
    let node = reader.required(
        fields,
        "margin",
        "the test",
        &format!("say how large a difference still counts as too small to matter, such as {form}; there is no default"),
    )?;
    let outcome = outcome?;
    let better = outcome.better;
    if !two && better.is_none() {
        reader.error(
            "missing-key",
            node.span,
            format!("nothing says in which direction `{}` is worse", outcome.name),
            "a margin of being worse",
            format!("give the outcome a `better: lower` or `better: higher` under `outcomes: {}`", outcome.name),
        );
        return None;
    }
    let worse_by = |by: f64, standardizer| match better {
        Some(Better::Lower) => Margin { lower: None, upper: Some(by), standardizer },
        _ => Margin { lower: Some(-by), upper: None, standardizer },
    };
    if node.text() == Some(WORTHWHILE) {
        let Some(by) = outcome.smallest_worthwhile_difference else {
            reader.error(
                "missing-key",
                node.span,
                format!("the outcome `{}` has no `{WORTHWHILE}`", outcome.name),
                "asked for here",
                "give it one under `outcomes`, or write the margin out",
            );
            return None;
        };
        return Some(Some(if two { Margin { lower: Some(-by), upper: Some(by), standardizer: None } } else { worse_by(by, None) }));
    }
    if node.map().is_none() {
        reader.wrong_type(node, "`margin`", &format!("a map such as {form}, or `{WORTHWHILE}`"));
        return None;
    }
    let keys: &[&str] = if two { &["lower", "upper", "standardized by"] } else { &["worse by", "standardized by"] };
    let margin = reader.map(node, "`margin`", keys, &[])?;
    let standardizer = margin.get("standardized by").map(|node| {
        let words = [
            ("baseline sd", MarginStandardizer::BaselineSd),
            ("root mean square sd", MarginStandardizer::RootMeanSquareSd),
            ("change sd", MarginStandardizer::ChangeSd),
        ];
        reader.word(node, "`standardized by`", &words, &[])
    });
    let standardizer = match standardizer {
        Some(found) => Some(found?),
        None => None,
    };
    let number = |key: &str| -> Option<(&Node, f64)> {
        let node = reader.required(&margin, key, "`margin`", &format!("write {form}"))?;
        Some((node, reader.number(node, &format!("`{key}`"))?))
    };
    if !two {
        let (node, by) = number("worse by")?;
        if by <= 0.0 {
            reader.error(
                "wrong-margin",
                node.span,
                format!("a margin of {by} is on the wrong side: non-inferiority allows for being worse by something"),
                "not above zero",
                "write it as a positive number; its direction comes from `better:`",
            );
            return None;
        }
        return Some(Some(worse_by(by, standardizer)));
    }
    let (lower, upper) = (number("lower"), number("upper"));
    let ((lower_node, lower), (upper_node, upper)) = (lower?, upper?);
    for (node, value, side, wrong) in [(lower_node, lower, "lower", lower >= 0.0), (upper_node, upper, "upper", upper <= 0.0)] {
        if wrong {
            reader.error(
                "wrong-margin",
                node.span,
                format!("a {side} margin of {value} is on the wrong side of zero"),
                "wrong side",
                "equivalence holds zero between its margins: the lower one is below zero, the upper one above",
            );
            return None;
        }
    }
    Some(Some(Margin { lower: Some(lower), upper: Some(upper), standardizer }))
}
