//! Contrasts with weights of their own: one weight per level, one map per factor, multiplied over the factors.

use super::hypotheses::{from_parts, level_weights, pair};
use super::reader::{Fields, Reader};
use super::steps::Context;
use crate::plan::resolved::{Better, Factor, FactorPart, Hypothesis, LevelWeight};
use crate::plan::syntax::tree::{Entry, Node};
use crate::text::source::Span;

/// Weights that sum to a whole this exactly, relative to their size.
const SUM_TOLERANCE: f64 = 1e-12;

/// The contrasts of a step: `contrast:` (one) or `contrasts:` (a list, each with a name).
pub(super) fn contrasts(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    better: Option<Better>,
) -> Option<Vec<Hypothesis>> {
    if let (Some(one), Some(several)) = (fields.entry("contrast"), fields.entry("contrasts")) {
        reader.conflict(
            "contrast-twice",
            [(several.key_span, "and here"), (one.key_span, "here")],
            "the step gives its contrasts twice",
            "use `contrast:` for one, or `contrasts:` for a list",
        );
        return None;
    }
    if let Some(node) = fields.get("contrast") {
        return Some(vec![contrast(reader, node, id, None, context, better)?]);
    }
    let node = fields.get("contrasts")?;
    let items = reader.list(node, "`contrasts`")?;
    if items.is_empty() {
        reader.error(
            "missing-key",
            node.span,
            "the list of contrasts is empty",
            "here",
            "list `{name: ..., FACTOR: {LEVEL: weight, ...}}`, or leave the step out",
        );
        return None;
    }
    let mut names: Vec<&str> = Vec::new();
    let found: Vec<Option<Hypothesis>> = items
        .iter()
        .map(|item| {
            reader.entries(item, "a contrast", "a map of `name` and factors")?;
            let Some(name) = item.get("name") else {
                reader.error(
                    "missing-key",
                    reader.first_line(item.span),
                    "the contrast lacks `name`",
                    "`name` is missing here",
                    "results are referred to by it",
                );
                return None;
            };
            let text = reader.text(name, "the contrast's name")?;
            if names.contains(&text) {
                reader.error(
                    "duplicate-name",
                    name.span,
                    format!("two contrasts of the step are called `{text}`"),
                    "the second",
                    "give each a name of its own",
                );
                return None;
            }
            names.push(text);
            let reference = if items.len() == 1 { id.to_owned() } else { format!("{id} / {text}") };
            contrast(reader, item, &reference, Some(text), context, better)
        })
        .collect();
    found.into_iter().collect()
}

fn contrast(
    reader: &Reader<'_>,
    node: &Node,
    reference: &str,
    name: Option<&str>,
    context: &Context<'_>,
    better: Option<Better>,
) -> Option<Hypothesis> {
    let entries = reader.entries(node, "a contrast", "a map of factors to weights, such as `{arm: {coached: 1, booklet: -1}}`")?;
    let factors = context.factors();
    let names = context.factor_names();
    let mut parts: Vec<FactorPart> = vec![FactorPart::Average; factors.len()];
    let mut sound = true;
    for entry in entries.iter().filter(|entry| name.is_none() || entry.key != "name") {
        let place = reader.name(&entry.key, entry.key_span, "factor", &names);
        match place.and_then(|place| Some((place, part(reader, entry, factors[place])?))) {
            Some((place, found)) => parts[place] = found,
            None => sound = false,
        }
    }
    if !sound {
        return None;
    }
    if !parts.iter().any(|part| matches!(part, FactorPart::Weights(_))) {
        reader.error(
            "not-a-contrast",
            reader.first_line(node.span),
            "the contrast compares nothing: no factor has weights that sum to zero",
            "here",
            "give the levels of a factor weights that sum to zero; weights that sum to one hold or average levels",
        );
        return None;
    }
    let label = name.map_or_else(|| in_words(&factors, &parts), str::to_owned);
    Some(from_parts(reference.to_owned(), label, context.design, parts, better))
}

/// Weights that sum to zero compare; weights that sum to one hold a level or average several.
fn part(reader: &Reader<'_>, entry: &Entry, factor: &Factor) -> Option<FactorPart> {
    let weights = level_weights(reader, &entry.node, factor)?;
    let sum: f64 = weights.iter().map(|weight| weight.weight).sum();
    let size: f64 = weights.iter().map(|weight| weight.weight.abs()).sum();
    if size > 0.0 && sum.abs() <= SUM_TOLERANCE * size {
        return Some(FactorPart::Weights(weights));
    }
    if (sum - 1.0).abs() <= SUM_TOLERANCE * size {
        return Some(match weights.iter().filter(|weight| weight.weight != 0.0).collect::<Vec<_>>().as_slice() {
            [one] => FactorPart::Hold(one.level.clone()),
            _ => FactorPart::Mean(weights),
        });
    }
    let what = if size == 0.0 { "are all zero".to_owned() } else { format!("sum to {}", (sum * 1e12).round() / 1e12) };
    reader.error(
        "weights-do-not-sum-to-zero",
        entry.node.span,
        format!("the weights of the factor `{}` {what}", factor.name),
        "these",
        "they must sum to zero to compare levels, or to one to hold or average them",
    );
    None
}

fn in_words(factors: &[&Factor], parts: &[FactorPart]) -> String {
    let (mut compared, mut held) = (Vec::new(), Vec::new());
    for (factor, part) in factors.iter().zip(parts) {
        match (pair(factor, part), part) {
            (Some((first, second)), _) => compared.push(format!("{second} minus {first}")),
            (None, FactorPart::Weights(weights)) => compared.push(sum_in_words(weights)),
            (None, FactorPart::Hold(level)) => held.push(level.clone()),
            (None, FactorPart::Mean(weights)) => held.push(sum_in_words(weights)),
            (None, _) => {}
        }
    }
    let at = if held.is_empty() { String::new() } else { format!(" at {}", held.join("; ")) };
    format!("{}{at}", compared.join(", "))
}

fn sum_in_words(weights: &[LevelWeight]) -> String {
    let terms = weights.iter().filter(|weight| weight.weight != 0.0).enumerate();
    terms
        .map(|(place, weight)| {
            let sign = match (place, weight.weight < 0.0) {
                (0, false) => "",
                (0, true) => "minus ",
                (_, false) => " plus ",
                (_, true) => " minus ",
            };
            let size = weight.weight.abs();
            if size == 1.0 { format!("{sign}{}", weight.level) } else { format!("{sign}{size} {}", weight.level) }
        })
        .collect()
}

/// Says where the weights of a contrast do not leave the outcome's unit as it is: in every factor that is compared the
/// positive weights must sum to one.
pub(super) fn in_the_outcomes_unit(reader: &Reader<'_>, span: Span, hypotheses: &[Hypothesis]) -> Option<()> {
    for hypothesis in hypotheses {
        for part in hypothesis.between.iter().chain(&hypothesis.within) {
            let FactorPart::Weights(weights) = part else { continue };
            let positive: f64 = weights.iter().map(|weight| weight.weight.max(0.0)).sum();
            if (positive - 1.0).abs() > SUM_TOLERANCE {
                reader.error(
                    "weights-not-in-unit",
                    span,
                    format!(
                        "the positive weights of `{}` sum to {}, so that it is not in the outcome's unit",
                        hypothesis.label,
                        (positive * 1e12).round() / 1e12
                    ),
                    "here",
                    "let the positive weights of each factor sum to 1, and the negative ones to -1; a margin is in the outcome's unit",
                );
                return None;
            }
        }
    }
    Some(())
}
