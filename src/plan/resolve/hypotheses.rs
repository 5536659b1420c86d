//! Enumerates the hypotheses of a test step in the order of the plan's factors and levels.

use super::reader::Reader;
use super::spacing::Spacing;
use crate::plan::resolved::{Better, Design, Factor, FactorKind, FactorPart, Favours, Hypothesis, LevelWeight};
use crate::plan::syntax::tree::{Node, Value};
use crate::text::source::Span;

const AGAINST_LATER: &str = "each level against the mean of the later ones";

/// One way of breaking a factor down.
#[derive(Debug, Clone)]
pub(super) struct Breakdown {
    /// In references, such as `cast off vs week 6`; `None` for a part that is not named.
    pub name: Option<String>,
    /// In words, such as `week 6 minus cast off`.
    pub words: Option<String>,
    /// Whether a level is held.
    pub held: bool,
    pub part: FactorPart,
}

impl Breakdown {
    pub fn average() -> Self {
        Breakdown { name: None, words: None, held: false, part: FactorPart::Average }
    }

    pub fn whole(factor: &Factor) -> Self {
        let words = match factor.levels.as_slice() {
            [first, second] => format!("{second} minus {first}"),
            _ => factor.name.clone(),
        };
        Breakdown { name: None, words: Some(words), held: false, part: FactorPart::Whole }
    }

    pub fn hold(level: &str) -> Self {
        Breakdown { name: Some(level.to_owned()), words: Some(level.to_owned()), held: true, part: FactorPart::Hold(level.to_owned()) }
    }

    fn pair(first: &str, second: &str) -> Self {
        let weight = |level: &str, weight| LevelWeight { level: level.to_owned(), weight };
        Breakdown {
            name: Some(format!("{first} vs {second}")),
            words: Some(format!("{second} minus {first}")),
            held: false,
            part: FactorPart::Weights(vec![weight(first, -1.0), weight(second, 1.0)]),
        }
    }
}

/// `trend` of a degree in words.
fn trend(degree: usize) -> String {
    match degree {
        1 => "linear trend".to_owned(),
        2 => "quadratic trend".to_owned(),
        3 => "cubic trend".to_owned(),
        _ => format!("trend of degree {degree}"),
    }
}

/// How `split:` breaks a factor down.
pub(super) fn split(reader: &Reader<'_>, node: &Node, factor: &Factor, spacing: &Spacing<'_>) -> Option<Vec<Breakdown>> {
    let levels: Vec<&str> = factor.levels.iter().map(String::as_str).collect();
    if let Value::List(items) = &node.value {
        let found: Vec<Option<Breakdown>> = items.iter().map(|item| weights(reader, item, factor)).collect();
        if items.is_empty() {
            reader.error(
                "missing-key",
                node.span,
                "the list of contrasts is empty",
                "here",
                "list `{name: ..., weights: {...}}`, or write `all pairs`",
            );
            return None;
        }
        let found = found.into_iter().collect::<Option<Vec<_>>>()?;
        for (place, option) in found.iter().enumerate() {
            if found[..place].iter().any(|other| other.name == option.name) {
                let name = option.name.as_deref().unwrap_or("");
                reader.error(
                    "duplicate-name",
                    items[place].span,
                    format!("two contrasts of `{}` are called `{name}`", factor.name),
                    "the second",
                    "give each a name of its own",
                );
                return None;
            }
        }
        return Some(found);
    }
    let text = reader.text(node, &format!("the split of `{}`", factor.name))?;
    let pairs =
        |pairs: Vec<(usize, usize)>| pairs.into_iter().map(|(first, second)| Breakdown::pair(levels[first], levels[second])).collect();
    match text {
        "all pairs" => {
            Some(pairs((0..levels.len()).flat_map(|first| (first + 1..levels.len()).map(move |second| (first, second))).collect()))
        }
        "adjacent pairs" => Some(pairs((1..levels.len()).map(|second| (second - 1, second)).collect())),
        "trends" => {
            let spacing = spacing.of(reader, factor, node.span)?;
            Some(
                (1..levels.len())
                    .map(|degree| Breakdown {
                        name: Some(trend(degree)),
                        words: Some(format!("{} of {}", trend(degree), factor.name)),
                        held: false,
                        part: FactorPart::Trend { degree, spacing: spacing.clone() },
                    })
                    .collect(),
            )
        }
        AGAINST_LATER => Some(
            (0..levels.len() - 1)
                .map(|place| match levels[place + 1..] {
                    [last] => Breakdown::pair(levels[place], last),
                    _ => Breakdown {
                        name: Some(format!("{} vs later", levels[place])),
                        words: Some(format!("mean of the later ones minus {}", levels[place])),
                        held: false,
                        part: FactorPart::AgainstLater(levels[place].to_owned()),
                    },
                })
                .collect(),
        ),
        _ => match text.strip_prefix("against ") {
            Some(level) => {
                let reference = reader.name(level, node.span, &format!("level of `{}`", factor.name), &levels)?;
                Some(pairs((0..levels.len()).filter(|other| *other != reference).map(|other| (reference, other)).collect()))
            }
            None => {
                let words = ["all pairs", "adjacent pairs", "trends", AGAINST_LATER];
                let near = crate::text::suggest::nearest(text, words);
                let hint = near.map_or_else(
                    || {
                        format!("it may be: all pairs, adjacent pairs, against LEVEL, trends, {AGAINST_LATER}, or a list of `{{name: ..., weights: {{...}}}}`")
                    },
                    |near| format!("did you mean `{near}`?"),
                );
                reader.error("unknown-word", node.span, format!("`{text}` is not a way to split a factor"), "unknown", hint);
                None
            }
        },
    }
}

fn weights(reader: &Reader<'_>, node: &Node, factor: &Factor) -> Option<Breakdown> {
    let fields = reader.map(node, "a contrast", &["name", "weights"], &[])?;
    let name = reader.required(&fields, "name", "the contrast", "results are referred to by it");
    let name = name.and_then(|node| reader.text(node, "the contrast's name"));
    let given = reader.required(&fields, "weights", "the contrast", "give a weight to each level that takes part")?;
    let found = level_weights(reader, given, factor);
    let (name, found) = (name?, found?);
    let sum: f64 = found.iter().map(|weight| weight.weight).sum();
    let size: f64 = found.iter().map(|weight| weight.weight.abs()).sum();
    if size == 0.0 || sum.abs() > 1e-12 * size {
        let what = if size == 0.0 { "are all zero".to_owned() } else { format!("sum to {}", (sum * 1e12).round() / 1e12) };
        reader.error(
            "weights-do-not-sum-to-zero",
            given.span,
            format!("the weights of the contrast `{name}` {what}, not to zero"),
            "these",
            "a contrast compares: what is added to some levels must be taken from others",
        );
        return None;
    }
    Some(Breakdown { name: Some(name.to_owned()), words: Some(name.to_owned()), held: false, part: FactorPart::Weights(found) })
}

/// The weights that a map gives to levels of a factor, in the order of the levels.
pub(super) fn level_weights(reader: &Reader<'_>, node: &Node, factor: &Factor) -> Option<Vec<LevelWeight>> {
    let levels: Vec<&str> = factor.levels.iter().map(String::as_str).collect();
    let mut found: Vec<LevelWeight> = Vec::new();
    let mut sound = true;
    for entry in reader.entries(node, "weights", "a map of levels to weights")? {
        let place = reader.name(&entry.key, entry.key_span, &format!("level of `{}`", factor.name), &levels);
        match place.zip(reader.number(&entry.node, "a weight")) {
            Some((place, weight)) => found.push(LevelWeight { level: levels[place].to_owned(), weight }),
            None => sound = false,
        }
    }
    found.sort_by_key(|weight| levels.iter().position(|level| *level == weight.level));
    sound.then_some(found)
}

/// Every combination of the factors' options, the first factor slowest.
pub(super) fn combine(id: &str, design: &Design, options: &[Vec<Breakdown>], effect: &str, better: Option<Better>) -> Vec<Hypothesis> {
    let count: usize = options.iter().map(Vec::len).product();
    (0..count)
        .map(|number| {
            let mut rest = number;
            let mut chosen: Vec<&Breakdown> = options
                .iter()
                .rev()
                .map(|options| {
                    let option = &options[rest % options.len()];
                    rest /= options.len();
                    option
                })
                .collect();
            chosen.reverse();
            hypothesis(id, design, &chosen, effect, count, better)
        })
        .collect()
}

fn hypothesis(id: &str, design: &Design, chosen: &[&Breakdown], effect: &str, count: usize, better: Option<Better>) -> Hypothesis {
    let join = |held: bool, of: fn(&Breakdown) -> Option<&String>| {
        chosen.iter().filter(|option| option.held == held).filter_map(|option| of(option)).map(String::as_str).collect::<Vec<_>>()
    };
    let (names, held) = (join(false, |option| option.name.as_ref()), join(true, |option| option.name.as_ref()));
    let words = join(false, |option| option.words.as_ref()).join(", ");
    let at = if held.is_empty() { String::new() } else { format!(" at {}", held.join("; ")) };
    let piece = if names.is_empty() { effect.to_owned() } else { names.join("; ") };
    let reference = if count == 1 { id.to_owned() } else { format!("{id} / {piece}{at}") };
    let label = if names.is_empty() { format!("{effect}{at}") } else { format!("{words}{at}") };
    let parts = chosen.iter().map(|option| option.part.clone()).collect();
    from_parts(reference, label, design, parts, better)
}

/// The hypothesis with these parts of the design's factors, between ones first.
pub(super) fn from_parts(reference: String, label: String, design: &Design, parts: Vec<FactorPart>, better: Option<Better>) -> Hypothesis {
    let mut between = parts;
    let within = between.split_off(design.between.len());
    let factors = || design.between.iter().chain(&design.within).zip(between.iter().chain(&within));
    let comparison = factors().all(|(factor, part)| df(factor, part) <= 1) && factors().any(|(factor, part)| df(factor, part) == 1);
    let favours = better.filter(|_| comparison).and_then(|better| favours(design, &between, &within, better));
    Hypothesis { reference, label, between, within, comparison, favours }
}

/// Contrasts that a part keeps of a factor; none where it is averaged over or held.
pub(super) fn df(factor: &Factor, part: &FactorPart) -> usize {
    match part {
        FactorPart::Average | FactorPart::Hold(_) | FactorPart::Mean(_) => 0,
        FactorPart::Whole => factor.levels.len() - 1,
        FactorPart::Weights(_) | FactorPart::AgainstLater(_) | FactorPart::Trend { .. } => 1,
    }
}

/// The two levels of a plain pair, first the one that is taken away.
pub(super) fn pair<'a>(factor: &'a Factor, part: &'a FactorPart) -> Option<(&'a str, &'a str)> {
    match part {
        FactorPart::Whole if factor.levels.len() == 2 => Some((&factor.levels[0], &factor.levels[1])),
        FactorPart::Weights(weights) => {
            let nonzero: Vec<&LevelWeight> = weights.iter().filter(|weight| weight.weight != 0.0).collect();
            match nonzero.as_slice() {
                [one, other] if one.weight == -other.weight => {
                    Some(if one.weight < 0.0 { (&one.level, &other.level) } else { (&other.level, &one.level) })
                }
                _ => None,
            }
        }
        _ => None,
    }
}

/// Which level each direction favours: only for two levels of one between factor, at one occasion or on a change over time.
fn favours(design: &Design, between: &[FactorPart], within: &[FactorPart], better: Better) -> Option<Favours> {
    let compared: Vec<(&Factor, &FactorPart)> = design.between.iter().zip(between).filter(|(factor, part)| df(factor, part) > 0).collect();
    let [(factor, part)] = compared.as_slice() else { return None };
    let (taken_away, remaining) = pair(factor, part)?;
    if within.iter().any(|part| matches!(part, FactorPart::Average | FactorPart::Mean(_))) {
        return None;
    }
    let changing: Vec<(&Factor, &FactorPart)> = design.within.iter().zip(within).filter(|(factor, part)| df(factor, part) > 0).collect();
    match changing.as_slice() {
        [] => {}
        [(factor, part)] if factor.kind == FactorKind::Time => {
            let place = |level: &str| factor.levels.iter().position(|other| other == level);
            let (earlier, later) = pair(factor, part)?;
            if place(earlier) >= place(later) {
                return None;
            }
        }
        _ => return None,
    }
    let (above, below) = match better {
        Better::Higher => (remaining, taken_away),
        Better::Lower => (taken_away, remaining),
    };
    Some(Favours { above: above.to_owned(), below: below.to_owned() })
}

/// The options of a step's `split`, by factor; factors that it does not name are left to the caller.
pub(super) fn splits(
    reader: &Reader<'_>,
    node: &Node,
    factors: &[&Factor],
    allowed: &[usize],
    spacing: &Spacing<'_>,
) -> Option<Vec<(usize, Vec<Breakdown>)>> {
    let names: Vec<&str> = allowed.iter().map(|place| factors[*place].name.as_str()).collect();
    let entries = reader.entries(node, "`split`", "a map of factors to splits, such as `{visit: all pairs}`")?;
    let mut found = Vec::new();
    let mut sound = true;
    for entry in entries {
        let place: Option<usize> = reader.name(&entry.key, entry.key_span, "factor of the effect", &names).map(|place| allowed[place]);
        match place.and_then(|place| Some((place, split(reader, &entry.node, factors[place], spacing)?))) {
            Some(split) => found.push(split),
            None => sound = false,
        }
    }
    if entries.is_empty() {
        missing_split(reader, node.span);
        return None;
    }
    sound.then_some(found)
}

pub(super) fn missing_split(reader: &Reader<'_>, span: Span) {
    reader.error(
        "missing-key",
        reader.first_line(span),
        "nothing says how the effect is split",
        "`split` is missing",
        "write for instance `split: {FACTOR: all pairs}`",
    );
}
