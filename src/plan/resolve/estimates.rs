//! Estimate steps.

use super::comparisons;
use super::conditions::choice;
use super::design::effect;
use super::hypotheses::splits;
use super::methods::{count, values};
use super::reader::{Fields, Reader};
use super::references::{Kind, References};
use super::spacing::Spacing;
use super::steps::{Context, probability};
use crate::plan::resolved::{
    CellMean, Change, ChangeInterval, ChangeIntervalMethod, Choice, Comparison, Estimate, FactorPart, LevelWeight, Measure, SmallSample,
    Standardizer, VarianceExplainedKind,
};
use crate::plan::syntax::tree::Node;

/// What an estimate reports.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Reports {
    CellMeans,
    Change,
    Explained,
    Differences,
    Comparison(Measure),
}

const KINDS: &[(&str, Reports)] = &[
    ("cell means", Reports::CellMeans),
    ("differences", Reports::Differences),
    ("standardized change", Reports::Change),
    ("standardized difference", Reports::Comparison(Measure::StandardizedDifference)),
    ("difference in standardized change", Reports::Comparison(Measure::DifferenceInStandardizedChange)),
    ("probability of superiority", Reports::Comparison(Measure::ProbabilityOfSuperiority)),
    ("robust standardized difference", Reports::Comparison(Measure::RobustStandardizedDifference)),
    ("responders", Reports::Comparison(Measure::Responders)),
    ("reliable change", Reports::Comparison(Measure::ReliableChange)),
    ("variance explained", Reports::Explained),
];

/// Keys of an estimate that not every one has.
const OWN_KEYS: &[&str] = &[
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

/// One less a number, as decimals: 0.95 for 0.05.
pub(super) fn complement(level: f64) -> f64 {
    ((1.0 - level) * 1e12).round() / 1e12
}

pub(super) fn estimate(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
    outcome: Option<usize>,
) -> Option<Estimate> {
    let node = fields.get("estimate")?;
    let what = reader.word(node, "`estimate`", KINDS, &[])?;
    let allowed: &[&str] = match what {
        Reports::CellMeans => &["interval"],
        Reports::Change => &["split", "within each", "standardizer", "small-sample correction", "interval"],
        Reports::Explained => &["of", "kind", "measured factors", "interval"],
        Reports::Differences => &["split", "spacing", "within each", "error", "weights", "interval"],
        Reports::Comparison(measure) => comparisons::keys(measure),
    };
    for key in OWN_KEYS {
        if let Some(entry) = fields.entry(key).filter(|_| !allowed.contains(key)) {
            let name = node.text().unwrap_or("");
            reader.error("misplaced-key", entry.key_span, format!("`{key}` has no use for `{name}`"), "here", "remove it");
        }
    }
    match what {
        Reports::CellMeans => cell_means(reader, fields, id, context),
        Reports::Change => standardized_change(reader, fields, id, context, references),
        Reports::Explained => variance_explained(reader, fields, id, context, references),
        Reports::Differences => comparisons::differences(reader, fields, id, context, references, outcome),
        Reports::Comparison(measure) => {
            comparisons::comparison(reader, fields, id, context, references, outcome, measure).map(Estimate::Comparison)
        }
    }
}

/// References of an estimate's results.
pub(super) fn references_of(estimate: &Estimate) -> Vec<&str> {
    match estimate {
        Estimate::CellMeans { items, .. } => items.iter().map(|item| item.reference.as_str()).collect(),
        Estimate::StandardizedChange { items, .. } => items.iter().map(|item| item.reference.as_str()).collect(),
        Estimate::VarianceExplained { references, .. } => references.iter().map(String::as_str).collect(),
        Estimate::Differences { hypotheses: items, .. } | Estimate::Comparison(Comparison { items, .. }) => {
            items.iter().map(|item| item.reference.as_str()).collect()
        }
    }
}

/// `interval: {level, ...}`: the level, or its default.
pub(super) fn interval_level(reader: &Reader<'_>, fields: &Fields<'_>, keys: &[&str], default: f64) -> Option<f64> {
    let Some(node) = fields.get("interval") else { return Some(default) };
    let interval = reader.map(node, "`interval`", keys, &[])?;
    let Some(node) = interval.get("level") else { return Some(default) };
    let level = probability(reader, node, "the level of an interval")?;
    if level < 0.5 {
        reader.error(
            "wrong-range",
            node.span,
            format!("{level} is a low level of confidence for an interval"),
            "here",
            format!("a level is the coverage, such as {default}, not the error"),
        );
        return None;
    }
    Some(level)
}

fn cell_means(reader: &Reader<'_>, fields: &Fields<'_>, id: &str, context: &Context<'_>) -> Option<Estimate> {
    let level = interval_level(reader, fields, &["level"], complement(context.alpha))?;
    let design = context.design;
    let mut items = Vec::new();
    for cell in 0..design.cells() {
        for occasion in 0..design.occasions() {
            let (arm, visit) = (design.cell_levels(cell).join("; "), design.occasion_levels(occasion).join("; "));
            let name = match (arm.is_empty(), visit.is_empty()) {
                (false, false) => format!("{arm} at {visit}"),
                (false, true) => arm,
                (true, _) => visit,
            };
            items.push(CellMean { reference: format!("{id} / {name}"), label: format!("mean of {name}"), cell, occasion });
        }
    }
    Some(Estimate::CellMeans { level, items })
}

fn standardized_change(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
) -> Option<Estimate> {
    let words = [
        ("average sd", Standardizer::AverageSd),
        ("root mean square sd", Standardizer::RootMeanSquareSd),
        ("baseline sd", Standardizer::BaselineSd),
        ("change sd", Standardizer::ChangeSd),
        ("change sd, correlation removed", Standardizer::ChangeSdCorrelationRemoved),
    ];
    let standardizer = reader
        .required(
            fields,
            "standardizer",
            "the estimate",
            "say what divides the change: the choice moves the answer, and there is no default",
        )
        .and_then(|node| choice(reader, node, references, "`standardizer`", &mut |node| reader.word(node, "`standardizer`", &words, &[])));
    let small_sample_correction = small_sample_correction(reader, fields, references);
    let level = interval_level(reader, fields, &["level", "method", "resamples"], complement(context.alpha));
    let method = fields.get("interval").and_then(|node| node.get("method")).map(|node| {
        let words = [
            ("bonett", ChangeIntervalMethod::Bonett),
            ("noncentral t", ChangeIntervalMethod::NoncentralT),
            ("noncentral-t", ChangeIntervalMethod::NoncentralT),
            ("bca", ChangeIntervalMethod::Bca),
            ("none", ChangeIntervalMethod::None),
        ];
        choice(reader, node, references, "`method` of the interval", &mut |node| reader.word(node, "`method` of the interval", &words, &[]))
    });
    let items = changes(reader, fields, id, context);
    let standardizer = standardizer?;
    let method = match method {
        Some(found) => found?,
        None => Choice::Fixed(default_method(&standardizer)),
    };
    let bootstraps = values(&method).any(|method| *method == ChangeIntervalMethod::Bca);
    let resamples = resamples(reader, fields, bootstraps)?;
    Some(Estimate::StandardizedChange {
        standardizer,
        small_sample_correction: small_sample_correction?,
        interval: ChangeInterval { level: level?, method, resamples },
        items: items?,
    })
}

/// `small-sample correction`.
pub(super) fn small_sample_correction(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    references: &References<'_>,
) -> Option<Choice<SmallSample>> {
    let words =
        [("no", SmallSample::No), ("yes", SmallSample::Yes), ("approximate", SmallSample::Approximate), ("both", SmallSample::Both)];
    fields.get("small-sample correction").map_or(Some(Choice::Fixed(SmallSample::No)), |node| {
        choice(reader, node, references, "`small-sample correction`", &mut |node| {
            reader.word(node, "`small-sample correction`", &words, &[])
        })
    })
}

/// `resamples` of an interval, which a bootstrap needs and nothing else has a use for.
pub(super) fn resamples(reader: &Reader<'_>, fields: &Fields<'_>, bootstraps: bool) -> Option<Option<u64>> {
    let interval = fields.get("interval").and_then(|node| reader.map(node, "`interval`", &["level", "method", "resamples"], &[]));
    match (bootstraps, interval.and_then(|interval| interval.get("resamples").map(|node| (interval, node)))) {
        (true, Some((_, node))) => count(reader, node, "`resamples`").map(Some),
        (true, None) => {
            let place = interval.map_or(reader.first_line(fields.span), |interval| reader.first_line(interval.span));
            reader.error(
                "missing-key",
                place,
                "the bootstrap lacks `resamples`",
                "`resamples` is missing here",
                "say how often subjects are drawn again, such as `resamples: 9999`; there is no default",
            );
            None
        }
        (false, Some((interval, node))) => {
            let place = interval.entry("resamples").map_or(node.span, |entry| entry.key_span);
            reader.error(
                "misplaced-key",
                place,
                "`resamples` has no use here",
                "here",
                "only `method: bca` draws subjects again; remove it",
            );
            None
        }
        (false, None) => Some(None),
    }
}

/// The interval that goes with a standardizer; none where only resampling would give one.
fn default_method(standardizer: &Choice<Standardizer>) -> ChangeIntervalMethod {
    let of = |standardizer: &Standardizer| match standardizer {
        Standardizer::RootMeanSquareSd | Standardizer::BaselineSd => ChangeIntervalMethod::Bonett,
        Standardizer::ChangeSd => ChangeIntervalMethod::NoncentralT,
        Standardizer::AverageSd | Standardizer::ChangeSdCorrelationRemoved => ChangeIntervalMethod::None,
    };
    match standardizer {
        Choice::Fixed(standardizer) => of(standardizer),
        Choice::Cases { cases, otherwise } => {
            let first = of(otherwise);
            if cases.iter().all(|case| of(&case.value) == first) { first } else { ChangeIntervalMethod::None }
        }
    }
}

fn changes(reader: &Reader<'_>, fields: &Fields<'_>, id: &str, context: &Context<'_>) -> Option<Vec<Change>> {
    let design = context.design;
    let within: Vec<_> = design.within.iter().collect();
    let node = reader.required(fields, "split", "the estimate", "say between which occasions, for instance `split: {visit: all pairs}`");
    let split = node.and_then(|node| splits(reader, node, &within, &(0..within.len()).collect::<Vec<_>>(), &Spacing::of_step(fields)));
    let groups = within_each(reader, fields, context);
    let (split, node) = (split?, node?);
    groups?;
    let [(place, pairs)] = split.as_slice() else {
        reader.error(
            "wrong-type",
            node.span,
            "a change runs over one within factor",
            "several here",
            "split one factor; the others are averaged over",
        );
        return None;
    };
    let mut items = Vec::new();
    for pair in pairs {
        let FactorPart::Weights(weights) = &pair.part else { continue };
        let Some((first, second)) = pair_of(weights) else {
            reader.error(
                "wrong-type",
                node.span,
                "a standardized change compares two occasions",
                "a contrast of several here",
                "use `all pairs`, `adjacent pairs` or `against LEVEL`",
            );
            return None;
        };
        let score = |level: &str| -> Vec<FactorPart> {
            (0..within.len()).map(|other| if other == *place { FactorPart::Hold(level.to_owned()) } else { FactorPart::Average }).collect()
        };
        for cell in 0..design.cells() {
            let arm = design.cell_levels(cell).join("; ");
            let at = if arm.is_empty() { String::new() } else { format!(" at {arm}") };
            let name = pair.name.as_deref().unwrap_or("");
            items.push(Change {
                reference: format!("{id} / {name}{at}"),
                label: format!("{}{at}", pair.words.as_deref().unwrap_or("")),
                cell,
                first: score(first),
                second: score(second),
            });
        }
    }
    Some(items)
}

fn pair_of(weights: &[LevelWeight]) -> Option<(&str, &str)> {
    let nonzero: Vec<&LevelWeight> = weights.iter().filter(|weight| weight.weight != 0.0).collect();
    match nonzero.as_slice() {
        [one, other] if one.weight == -1.0 && other.weight == 1.0 => Some((&one.level, &other.level)),
        [one, other] if one.weight == 1.0 && other.weight == -1.0 => Some((&other.level, &one.level)),
        _ => None,
    }
}

/// `within each` names every between factor; it is absent where there is none.
fn within_each(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>) -> Option<()> {
    let between = &context.design.between;
    let names: Vec<&str> = between.iter().map(|factor| factor.name.as_str()).collect();
    let Some(node) = fields.get("within each") else {
        if between.is_empty() {
            return Some(());
        }
        reader.required(
            fields,
            "within each",
            "the estimate",
            &format!("a change is standardized within each arm: write `within each: {}`", names.join(" by ")),
        );
        return None;
    };
    let chosen = effect(reader, reader.text(node, "`within each`")?, node.span, &names)?;
    if chosen.len() != between.len() {
        reader.error(
            "wrong-type",
            node.span,
            "standard deviations are taken within each cell of the between factors",
            "not all of them",
            format!("write `within each: {}`", names.join(" by ")),
        );
        return None;
    }
    Some(())
}

fn variance_explained(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
) -> Option<Estimate> {
    let level = interval_level(reader, fields, &["level"], complement(2.0 * context.alpha));
    let kinds = kinds(reader, fields);
    let names = context.factor_names();
    let mut sound = true;
    let mut measured_factors = Vec::new();
    if let Some(node) = fields.get("measured factors").filter(|node| node.list().is_none_or(|items| !items.is_empty())) {
        for (name, span) in reader.texts(node, "a measured factor") {
            sound &= reader.name(name, span, "factor", &names).is_some();
            measured_factors.push(name.to_owned());
        }
    }
    let node =
        reader.required(fields, "of", "the estimate", "list the tests whose share of variance is wanted, such as `of: [omnibus]`")?;
    let mut of = Vec::new();
    for (reference, span) in reader.texts(node, "a reference") {
        match references.look_up(reader, reference, span) {
            None => sound = false,
            Some(known) => match known.kind {
                Kind::One { .. } => of.push(known.reference.clone()),
                Kind::Several { claims: false } => of.extend(
                    references
                        .all()
                        .iter()
                        .filter(|other| other.step == known.step && matches!(other.kind, Kind::One { .. }))
                        .map(|other| other.reference.clone()),
                ),
                Kind::Screen | Kind::Estimate | Kind::Claim | Kind::Several { claims: true } => {
                    reader.error("wrong-type", span, format!("{} explains no variance", known.in_words()), "not a test", "name a test");
                    sound = false;
                }
            },
        }
    }
    let references = of.iter().map(|of| format!("{id} / {of}")).collect();
    let (kinds, level) = (kinds?, level?);
    sound.then_some(Estimate::VarianceExplained { of, kinds, measured_factors, level, references })
}

fn kinds(reader: &Reader<'_>, fields: &Fields<'_>) -> Option<Vec<VarianceExplainedKind>> {
    let node: &Node = reader.required(
        fields,
        "kind",
        "the estimate",
        "write `kind: [partial eta squared]`, or `generalized eta squared`, or `omega squared`, or several of them",
    )?;
    let words = [
        ("partial eta squared", VarianceExplainedKind::PartialEtaSquared),
        ("generalized eta squared", VarianceExplainedKind::GeneralizedEtaSquared),
        ("omega squared", VarianceExplainedKind::OmegaSquared),
    ];
    let items = match node.list() {
        Some(items) => items,
        None => std::slice::from_ref(node),
    };
    if items.is_empty() {
        reader.error("missing-key", node.span, "`kind` is empty", "here", "name a form");
        return None;
    }
    items.iter().map(|item| reader.word(item, "`kind` of variance explained", &words, &[])).collect()
}
