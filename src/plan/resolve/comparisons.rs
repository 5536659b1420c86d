//! Estimates that compare two cells, two occasions, or both; and differences in the outcome's unit.

use super::conditions::choice;
use super::design::effect;
use super::estimates::{complement, interval_level, resamples, small_sample_correction};
use super::hypotheses::{Breakdown, combine, pair, splits};
use super::methods::values;
use super::reader::{Fields, Reader};
use super::references::References;
use super::spacing::Spacing;
use super::steps::Context;
use super::tests::weights;
use crate::plan::resolved::{
    Choice, Comparison, DifferenceStandardizer, ErrorTerm, Estimate, FactorPart, Hypothesis, IntervalMethod, Measure,
};
use crate::plan::syntax::tree::Node;

/// Keys that a measure has a use for.
pub(super) fn keys(measure: Measure) -> &'static [&'static str] {
    match measure {
        Measure::StandardizedDifference => &["split", "within each", "standardizer", "small-sample correction", "interval"],
        Measure::DifferenceInStandardizedChange | Measure::ProbabilityOfSuperiority | Measure::RobustStandardizedDifference => {
            &["split", "within each", "interval"]
        }
        Measure::Responders => &["split", "within each", "interval", "reaching"],
        Measure::ReliableChange => &["split", "within each", "reliability"],
    }
}

/// How many cells and occasions a measure compares: least and most of each.
fn shape(measure: Measure) -> ([usize; 2], [usize; 2]) {
    match measure {
        Measure::StandardizedDifference => ([2, 2], [1, 1]),
        Measure::DifferenceInStandardizedChange => ([2, 2], [2, 2]),
        Measure::ProbabilityOfSuperiority | Measure::RobustStandardizedDifference => ([1, 2], [1, 2]),
        Measure::Responders => ([1, 2], [2, 2]),
        Measure::ReliableChange => ([1, 1], [2, 2]),
    }
}

/// Differences of means in the outcome's unit.
pub(super) fn differences(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
    outcome: Option<usize>,
) -> Option<Estimate> {
    let level = interval_level(reader, fields, &["level"], complement(context.alpha));
    let words = [("own", ErrorTerm::Own), ("own occasions", ErrorTerm::OwnOccasions), ("pooled", ErrorTerm::Pooled)];
    let error = reader
        .required(
            fields,
            "error",
            "the estimate",
            "say whose variation the interval rests on: `own`, `own occasions` or `pooled`; there is no default",
        )
        .and_then(|node| choice(reader, node, references, "`error`", &mut |node| reader.word(node, "`error`", &words, &[])));
    let weights = weights(reader, fields);
    let spacing = Spacing::of_step(fields);
    let hypotheses = items(reader, fields, id, context, outcome, &spacing)?;
    spacing.has_a_use(reader);
    let place = fields.get("split").map_or(fields.span, |node| node.span);
    super::contrasts::in_the_outcomes_unit(reader, place, &hypotheses)?;
    Some(Estimate::Differences { error: error?, weights: weights?, level: level?, hypotheses })
}

/// One measure over the pairs that `split` makes.
pub(super) fn comparison(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
    outcome: Option<usize>,
    measure: Measure,
) -> Option<Comparison> {
    let standardizer = (measure == Measure::StandardizedDifference).then(|| standardizer(reader, fields, references));
    let small_sample = (measure == Measure::StandardizedDifference).then(|| small_sample_correction(reader, fields, references));
    let level = interval_level(reader, fields, &["level", "method", "resamples"], complement(context.alpha));
    let reaching = (measure == Measure::Responders).then(|| reaching(reader, fields, context, outcome));
    let reliability = (measure == Measure::ReliableChange).then(|| reliability(reader, fields));
    let items = items(reader, fields, id, context, outcome, &Spacing::of_step(fields));
    let standardizer = transpose(standardizer)?;
    let method = method(reader, fields, references, measure, standardizer.as_ref())?;
    let resamples = resamples(reader, fields, values(&method).any(|method| *method == IntervalMethod::Bca))?;
    let items = items?;
    fits(reader, fields, context, measure, &items)?;
    Some(Comparison {
        measure,
        standardizer,
        small_sample_correction: transpose(small_sample)?,
        level: level?,
        method,
        resamples,
        reaching: transpose(reaching)?,
        reliability: transpose(reliability)?,
        items,
    })
}

/// Nothing asked for, or what was asked for and is sound.
fn transpose<T>(asked: Option<Option<T>>) -> Option<Option<T>> {
    match asked {
        None => Some(None),
        Some(found) => found.map(Some),
    }
}

fn standardizer(reader: &Reader<'_>, fields: &Fields<'_>, references: &References<'_>) -> Option<Choice<DifferenceStandardizer>> {
    let words = [
        ("pooled sd", DifferenceStandardizer::PooledSd),
        ("reference sd", DifferenceStandardizer::ReferenceSd),
        ("root mean square sd", DifferenceStandardizer::RootMeanSquareSd),
    ];
    let node = reader.required(
        fields,
        "standardizer",
        "the estimate",
        "say what divides the difference: `pooled sd`, `reference sd` (that of the first arm) or `root mean square sd`; there is no default",
    )?;
    choice(reader, node, references, "`standardizer`", &mut |node| reader.word(node, "`standardizer`", &words, &[]))
}

fn method(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    references: &References<'_>,
    measure: Measure,
    standardizer: Option<&Choice<DifferenceStandardizer>>,
) -> Option<Choice<IntervalMethod>> {
    let words: &[(&str, IntervalMethod)] = match measure {
        Measure::StandardizedDifference => &[
            ("noncentral t", IntervalMethod::NoncentralT),
            ("bonett", IntervalMethod::Bonett),
            ("bca", IntervalMethod::Bca),
            ("none", IntervalMethod::None),
        ],
        Measure::DifferenceInStandardizedChange => {
            &[("morris", IntervalMethod::Morris), ("bca", IntervalMethod::Bca), ("none", IntervalMethod::None)]
        }
        Measure::ProbabilityOfSuperiority => {
            &[("logit", IntervalMethod::Logit), ("bca", IntervalMethod::Bca), ("none", IntervalMethod::None)]
        }
        Measure::RobustStandardizedDifference => &[("bca", IntervalMethod::Bca), ("none", IntervalMethod::None)],
        Measure::Responders => &[("newcombe", IntervalMethod::Newcombe), ("none", IntervalMethod::None)],
        Measure::ReliableChange => return Some(Choice::Fixed(IntervalMethod::None)),
    };
    if let Some(node) = fields.get("interval").and_then(|node| node.get("method")) {
        return choice(reader, node, references, "`method` of the interval", &mut |node| {
            reader.word(node, "`method` of the interval", words, &[])
        });
    }
    let exact = standardizer.is_some_and(|choice| values(choice).all(|one| *one == DifferenceStandardizer::PooledSd));
    Some(Choice::Fixed(match measure {
        Measure::StandardizedDifference if !exact => IntervalMethod::Bonett,
        Measure::RobustStandardizedDifference => IntervalMethod::None,
        _ => words[0].1,
    }))
}

fn reaching(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>, outcome: Option<usize>) -> Option<f64> {
    let node = reader.required(
        fields,
        "reaching",
        "the estimate",
        "say which change counts as a response, in the outcome's unit and as a positive number, such as `reaching: 8`; there is no default",
    )?;
    let outcome = &context.outcomes[outcome?];
    if outcome.better.is_none() {
        reader.error(
            "missing-key",
            node.span,
            format!("nothing says in which direction `{}` gets better", outcome.name),
            "a change of this size",
            format!("give the outcome a `better: lower` or `better: higher` under `outcomes: {}`", outcome.name),
        );
        return None;
    }
    let value = if node.text() == Some("smallest worthwhile difference") {
        let found = outcome.smallest_worthwhile_difference;
        if found.is_none() {
            reader.error(
                "missing-key",
                node.span,
                format!("the outcome `{}` has no `smallest worthwhile difference`", outcome.name),
                "asked for here",
                "give it one under `outcomes`, or write the change out",
            );
        }
        found?
    } else {
        reader.number(node, "`reaching`")?
    };
    if value <= 0.0 {
        reader.error(
            "wrong-range",
            node.span,
            "a change that counts as a response must be above zero",
            "here",
            "its direction comes from the outcome's `better:`",
        );
        return None;
    }
    Some(value)
}

fn reliability(reader: &Reader<'_>, fields: &Fields<'_>) -> Option<f64> {
    let node = reader.required(
        fields,
        "reliability",
        "the estimate",
        "give the reliability of the outcome from outside this study, such as `reliability: 0.8`; there is no default",
    )?;
    super::steps::probability(reader, node, "`reliability`")
}

/// What `split` and `within each` make, in the order of the plan's factors and levels.
fn items(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    outcome: Option<usize>,
    spacing: &Spacing<'_>,
) -> Option<Vec<Hypothesis>> {
    let factors = context.factors();
    let names = context.factor_names();
    let node = reader.required(
        fields,
        "split",
        "the estimate",
        &format!("say what is compared, for instance `split: {{{}: all pairs}}`", names.first().copied().unwrap_or("arm")),
    );
    let all: Vec<usize> = (0..factors.len()).collect();
    let split = node.and_then(|node| splits(reader, node, &factors, &all, spacing));
    let held = match fields.get("within each") {
        Some(node) => effect(reader, reader.text(node, "`within each`")?, node.span, &names)?,
        None => Vec::new(),
    };
    let split = split?;
    let mut options: Vec<Vec<Breakdown>> = factors.iter().map(|_| vec![Breakdown::average()]).collect();
    for place in &held {
        options[*place] = factors[*place].levels.iter().map(|level| Breakdown::hold(level)).collect();
    }
    for (place, found) in split {
        if held.contains(&place) {
            let span = fields.get("within each").map_or(fields.span, |node| node.span);
            reader.error(
                "factor-in-both",
                span,
                format!("the factor `{}` is both compared and held", names[place]),
                "held here",
                "name a factor in `split` or in `within each`, not in both",
            );
            return None;
        }
        options[place] = found;
    }
    let count: usize = options.iter().map(Vec::len).product();
    if count > 5000 {
        let span = node.map_or(fields.span, |node: &Node| node.span);
        reader.error(
            "too-many-tests",
            span,
            format!("this step makes {count} results; at most 5000 can be reported"),
            "here",
            "split fewer factors",
        );
        return None;
    }
    let better = outcome.and_then(|place| context.outcomes[place].better);
    Some(combine(id, context.design, &options, "difference", better))
}

/// Whether the items have the shape that the measure compares, each side one cell of the design.
fn fits(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>, measure: Measure, items: &[Hypothesis]) -> Option<()> {
    let place = fields.get("split").map_or(fields.span, |node| node.span);
    let design = context.design;
    let (cells, occasions) = shape(measure);
    for item in items {
        let pairs = |factors: &[crate::plan::resolved::Factor], parts: &[FactorPart]| -> Option<usize> {
            let mut pairs = 0;
            for (factor, part) in factors.iter().zip(parts) {
                match part {
                    FactorPart::Average | FactorPart::Hold(_) => {}
                    _ if pair(factor, part).is_some() => pairs += 1,
                    _ => return None,
                }
            }
            Some(pairs)
        };
        let averaged = design.between.iter().zip(&item.between).find(|(_, part)| **part == FactorPart::Average).map(|(factor, _)| factor);
        let found = pairs(&design.between, &item.between).zip(pairs(&design.within, &item.within));
        let hint = match (averaged, found) {
            (Some(factor), _) => {
                format!("standard deviations and shares are taken within cells: name `{}` in `split` or in `within each`", factor.name)
            }
            (None, Some((arms, visits)))
                if (cells[0]..=cells[1]).contains(&(arms + 1))
                    && (occasions[0]..=occasions[1]).contains(&(visits + 1))
                    && arms + visits > 0 =>
            {
                continue;
            }
            _ => format!(
                "{}; split into pairs (`all pairs`, `adjacent pairs`, `against LEVEL`) and hold the rest by `within each`",
                match measure {
                    Measure::StandardizedDifference => "it compares two arms at an occasion",
                    Measure::DifferenceInStandardizedChange => "it compares two arms in their change between two occasions",
                    Measure::ProbabilityOfSuperiority | Measure::RobustStandardizedDifference =>
                        "it compares two arms, two occasions, or two arms in their change",
                    Measure::Responders => "it looks at a change between two occasions, in an arm or in two",
                    Measure::ReliableChange => "it looks at a change between two occasions in an arm",
                }
            ),
        };
        reader.error("size-does-not-fit", place, format!("`{}` is not what this size compares", item.label), "here", hint);
        return None;
    }
    Some(())
}
