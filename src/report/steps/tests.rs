//! Tables of tests.

use super::{name, reasons, state};
use crate::report::escape::markdown;
use crate::report::tables::{self, Table, percent};
use crate::results::{Detail, Entry, StepResult, numbers};

fn size(entry: &Entry, wanted: &str) -> String {
    entry.sizes.iter().find(|size| size.name == wanted).map_or_else(String::new, |size| {
        let value = size.value.map(|value| numbers::significant(value.get(), 3)).unwrap_or_default();
        match size.interval {
            Some([lower, upper]) => {
                let level = size.level.map(percent).unwrap_or_default();
                format!("{value} ({level} % {} to {})", numbers::significant(lower.get(), 3), numbers::significant(upper.get(), 3))
            }
            None => value,
        }
    })
}

/// Univariate tests of whole effects.
pub(super) fn omnibus(step: &StepResult) -> Table {
    let mut table = Table::new(&[
        "Effect",
        "Verdict",
        "#SS",
        "#df",
        "#error SS",
        "#error df",
        "#F",
        "#epsilon",
        "#p uncorrected",
        "#p",
        "#partial eta squared",
    ]);
    for entry in &step.results {
        let epsilons = match entry.details.get("epsilon") {
            Some(Detail::Named(named)) => Some(named),
            _ => None,
        };
        let df1 = entry.statistic.as_ref().and_then(|statistic| statistic.df.first().copied());
        table.row([
            name(entry),
            markdown(entry.verdict.as_deref().unwrap_or("")),
            tables::number(entry.detail("sum_of_squares")),
            df1.map(|df| tables::df(&[df])).unwrap_or_default(),
            tables::number(entry.detail("error_sum_of_squares")),
            entry.detail("df_error").map(|df| tables::df(&[df])).unwrap_or_default(),
            entry.statistic.as_ref().map_or_else(|| state(entry).to_owned(), |statistic| numbers::significant(statistic.value.get(), 4)),
            epsilons.map(|named| tables::number(named.get("greenhouse-geisser").copied())).unwrap_or_default(),
            tables::p(entry.detail("p_uncorrected"), false),
            tables::p(entry.p, entry.p_bound),
            size(entry, "partial eta squared"),
        ]);
        if let Some(named) = epsilons {
            let all: Vec<String> = named.iter().map(|(name, value)| format!("{name} {}", numbers::significant(value.get(), 4))).collect();
            let correction = match entry.details.get("correction") {
                Some(Detail::Text(correction)) => correction.as_str(),
                _ => "none",
            };
            table.notes.push(format!(
                "{}: epsilons {}; correction used: {correction}; p on {} df.",
                name(entry),
                all.join(", "),
                corrected_df(entry)
            ));
        }
    }
    test_level(step, &mut table);
    reasons(step, &mut table);
    table
}

/// The level that the tests of a step were judged at, which they share.
fn test_level(step: &StepResult, table: &mut Table) {
    if let Some(level) = step.results.iter().find_map(|entry| entry.level) {
        table.notes.push(format!("Judged at the level {}.", level.get()));
    }
}

fn corrected_df(entry: &Entry) -> String {
    match entry.details.get("df_corrected") {
        Some(Detail::Numbers(df)) => tables::df(df),
        _ => String::new(),
    }
}

/// Any tests but the univariate ones of whole effects.
pub(super) fn tests(step: &StepResult, unit: &str) -> Table {
    let in_unit = |what: &str| if unit.is_empty() { format!("#{what}") } else { format!("#{what} ({})", markdown(unit)) };
    let mut table = Table::new(&[
        "Hypothesis",
        "Verdict",
        &in_unit("estimate"),
        "#interval",
        "#simultaneous interval",
        "#statistic",
        "#df",
        "#p",
        "#adjusted p",
        "#partial eta squared",
    ]);
    for entry in &step.results {
        let error = entry.standard_error_of();
        let together = match entry.details.get("simultaneous_interval") {
            Some(Detail::Numbers(limits)) => limits.as_slice().try_into().ok(),
            _ => None,
        };
        table.row([
            name(entry),
            markdown(entry.verdict.as_deref().unwrap_or("")),
            tables::estimate(entry.estimate_of(), error),
            tables::interval(entry.interval_of(), error),
            tables::interval(together, error),
            statistic(entry),
            df(entry),
            tables::p(entry.p, entry.p_bound),
            tables::p(entry.p_adjusted, false),
            size(entry, "partial eta squared"),
        ]);
    }
    table.drop_empty_columns(2);
    test_level(step, &mut table);
    if let Some(level) = step.results.iter().find_map(|entry| entry.detail("interval_level")) {
        table.notes.push(format!("Intervals have a level of {} %.", percent(level)));
    }
    intervals_in_families(step, &mut table);
    for entry in &step.results {
        of_method(entry, &mut table);
    }
    reasons(step, &mut table);
    table
}

/// `F = 5.12`: which statistic it is hangs on the method.
fn statistic(entry: &Entry) -> String {
    let Some(statistic) = &entry.statistic else { return state(entry).to_owned() };
    let value = numbers::significant(statistic.value.get(), 4);
    match (entry.details.get("criterion"), entry.detail("criterion_value")) {
        (Some(Detail::Text(criterion)), Some(found)) => {
            format!("{criterion} {}, {} = {value}", numbers::significant(found.get(), 4), statistic.name)
        }
        _ => format!("{} = {value}", statistic.name),
    }
}

fn df(entry: &Entry) -> String {
    let of_statistic = entry.statistic.as_ref().map(|statistic| statistic.df.as_slice()).unwrap_or_default();
    match entry.details.get("df_corrected") {
        Some(Detail::Numbers(df)) if of_statistic.len() == 2 => tables::df(df),
        _ => tables::df(of_statistic),
    }
}

fn intervals_in_families(step: &StepResult, table: &mut Table) {
    if !step.results.iter().any(|entry| entry.p_adjusted.is_some() && entry.interval_of().is_some()) {
        return;
    }
    let together = step.results.iter().find_map(|entry| entry.detail("simultaneous_interval_level"));
    table.notes.push(match together {
        Some(level) => format!(
            "Intervals are for each comparison by itself; the simultaneous ones cover all comparisons of the family together with {} % and agree with its verdicts.",
            percent(level)
        ),
        None => "Intervals are for each comparison by itself; the verdicts follow the adjusted p, so that the two need not agree, and no simultaneous intervals go with this control.".to_owned(),
    });
}

/// What a method has to say of one result.
fn of_method(entry: &Entry, table: &mut Table) {
    let text = |key: &str| match entry.details.get(key) {
        Some(Detail::Text(text)) => Some(text.as_str()),
        _ => None,
    };
    let number = |key: &str| entry.detail(key).map(|value| numbers::significant(value.get(), 4));
    let whole = |key: &str| entry.detail(key).map(|value| format!("{:.0}", value.get()));
    let mut said: Vec<String> = Vec::new();
    if let Some(kind) = text("f_is").filter(|kind| *kind != "exact") {
        said.push(format!("its F is {}", if kind == "approximate" { "an approximation" } else { "an upper bound" }));
    }
    if let (Some(count), Some(deals)) = (whole("at_least_as_large"), whole("deals")) {
        let error = number("monte_carlo_error").filter(|_| entry.detail("monte_carlo_error").is_some_and(|error| error.get() > 0.0));
        let error = error.map(|error| format!(", Monte Carlo error {error}")).unwrap_or_default();
        said.push(format!("{count} of {deals} deals were at least as large{error} ({})", text("p_is").unwrap_or("by deals")));
    } else if let Some(kind) = text("p_is") {
        said.push(format!("p is {kind}"));
    }
    said.extend(text("near_level").map(str::to_owned));
    said.extend(text("interval_note").map(str::to_owned));
    for (side, words) in [("lower", "above the lower margin"), ("upper", "below the upper margin")] {
        if let (Some(margin), Some(p)) = (number(&format!("margin_{side}")), entry.detail(&format!("p_{side}"))) {
            said.push(format!("{words} of {margin}: {}", tables::p_in_words(p, false)));
        }
    }
    said.extend(number("margin_standardizer").map(|unit| format!("margins are multiples of {unit}, taken as known")));
    for (key, words) in [("weights_of_cells", "weights of arms"), ("weights_of_occasions", "weights of occasions")] {
        if let Some(Detail::Named(weights)) = entry.details.get(key) {
            let each: Vec<String> =
                weights.iter().map(|(name, weight)| format!("{} {}", markdown(name), numbers::significant(weight.get(), 3))).collect();
            said.push(format!("{words}: {}", each.join(", ")));
        }
    }
    said.extend(number("share_of_effect").map(|share| format!("it holds {share} of the effect's sum of squares")));
    if !said.is_empty() {
        table.notes.push(format!("{}: {}.", name(entry), said.join("; ")));
    }
}
