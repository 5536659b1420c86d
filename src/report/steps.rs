//! One section per step: what it did, its table, and sentences for its comparisons.

use super::decisions::short;
use super::escape::markdown;
use super::tables::{self, Table, counted, percent};
use crate::canon::number::Finite;
use crate::plan::resolved::{Better, Outcome};
use crate::results::{Detail, Entry, State, StepResult, numbers};
use serde::Serialize;

/// Rows of one table; more stand in results.json.
const MOST_ROWS: usize = 200;

/// A step of the report.
#[derive(Debug, Clone, Serialize)]
pub(super) struct Section {
    pub heading: String,
    pub role: String,
    pub species: String,
    /// What was set, as `error: own`.
    pub settings: Vec<String>,
    /// Why the plan chose so.
    pub reason: String,
    /// Why it was not run or refused.
    pub because: String,
    pub table: Option<Table>,
    pub sentences: Vec<String>,
    pub decision: String,
}

pub(super) fn section(step: &StepResult, outcome: Option<&Outcome>, reason: Option<&str>, several_outcomes: bool) -> Section {
    let unit = outcome.and_then(|outcome| outcome.unit.as_deref()).unwrap_or("");
    let mut heading = format!("{}: {}", markdown(&step.id), step.kind);
    if several_outcomes {
        heading.push_str(&format!(" of {}", markdown(&step.outcome)));
    }
    let because = match step.state {
        State::Done => String::new(),
        State::NotRun => format!("Not run: {}.", markdown(step.because.as_deref().unwrap_or("its condition did not hold"))),
        State::Refused => format!("Refused: {}.", markdown(step.because.as_deref().unwrap_or("it cannot be computed for these data"))),
    };
    let mut table = (step.state != State::NotRun).then(|| match (step.species.as_str(), step.kind.as_str()) {
        ("screen", _) => screens(step),
        ("test", "omnibus") => omnibus(step),
        ("test", _) => tests(step, unit),
        (_, "cell means") => means(step, unit),
        (_, "variance explained") => explained(step),
        _ => changes(step),
    });
    if let Some(table) = table.as_mut().filter(|table| table.rows.len() > MOST_ROWS) {
        table.notes.push(format!("{} more rows stand in results.json.", table.rows.len() - MOST_ROWS));
        table.rows.truncate(MOST_ROWS);
    }
    Section {
        heading,
        role: step.role.clone(),
        species: step.species.clone(),
        settings: step.settings.iter().map(|(key, value)| format!("{key}: {}", markdown(value))).collect(),
        reason: reason.map(markdown).unwrap_or_default(),
        because,
        table,
        sentences: if step.species == "test" {
            step.results.iter().take(MOST_ROWS).filter_map(|entry| sentence(entry, outcome)).collect()
        } else {
            Vec::new()
        },
        decision: step.decision.as_deref().map(short).unwrap_or_default(),
    }
}

fn name(entry: &Entry) -> String {
    markdown(if entry.label.is_empty() { &entry.reference } else { &entry.label })
}

/// What stands in a table where there is no number: the state.
fn state(entry: &Entry) -> &'static str {
    match entry.state {
        State::Done => "",
        State::NotRun => "not run",
        State::Refused => "refused",
    }
}

/// Why entries have no number, or only part of one, each reason once.
fn reasons(step: &StepResult, table: &mut Table) {
    for entry in &step.results {
        if let (Some(because), State::Done | State::Refused) = (&entry.because, step.state) {
            table.notes.push(format!("{}: {}.", name(entry), markdown(because)));
        }
        for size in &entry.sizes {
            if let Some(because) = size.because.as_deref().filter(|because| !because.starts_with("no interval is published")) {
                table.notes.push(format!("{}, {}: {}.", name(entry), size.name, markdown(because)));
            }
        }
        if let Some(Detail::Text(why)) = entry.details.get("epsilon_refused") {
            table.notes.push(format!("{}: {}.", name(entry), markdown(why)));
        }
    }
    table.notes.dedup();
}

fn screens(step: &StepResult) -> Table {
    let mut table = Table::new(&["Looked at", "Statistic", "#df", "#p", "#adjusted p", "#threshold", "Seen"]);
    for entry in &step.results {
        let (statistic, df) = match &entry.statistic {
            Some(statistic) => {
                let value = numbers::significant(statistic.value.get(), 4);
                let df = if statistic.df.is_empty() { detail_df(entry) } else { tables::df(&statistic.df) };
                let f = entry.detail("F").map(|f| format!(", F = {}", numbers::significant(f.get(), 4))).unwrap_or_default();
                (format!("{} = {value}{f}", statistic.name), df)
            }
            None => (state(entry).to_owned(), String::new()),
        };
        table.row([
            name(entry),
            statistic,
            df,
            tables::p(entry.p, entry.p_bound),
            tables::p(entry.p_adjusted, false),
            entry.level.map(|level| level.get().to_string()).unwrap_or_default(),
            markdown(entry.verdict.as_deref().unwrap_or(state(entry))),
        ]);
    }
    table.notes.push("A screen that shows no departure has not shown that there is none.".to_owned());
    reasons(step, &mut table);
    table
}

fn detail_df(entry: &Entry) -> String {
    match entry.details.get("df") {
        Some(Detail::Numbers(df)) => tables::df(df),
        Some(Detail::Number(df)) => tables::df(&[*df]),
        _ => String::new(),
    }
}

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

fn omnibus(step: &StepResult) -> Table {
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

fn tests(step: &StepResult, unit: &str) -> Table {
    let estimate = if unit.is_empty() { "#estimate".to_owned() } else { format!("#estimate ({})", markdown(unit)) };
    let mut table =
        Table::new(&["Hypothesis", "Verdict", &estimate, "#interval", "#F", "#df", "#p", "#adjusted p", "#partial eta squared"]);
    for entry in &step.results {
        let error = entry.standard_error_of();
        let interval = tables::interval(entry.interval_of(), error);
        table.row([
            name(entry),
            markdown(entry.verdict.as_deref().unwrap_or("")),
            tables::estimate(entry.estimate_of(), error),
            interval,
            entry.statistic.as_ref().map_or_else(|| state(entry).to_owned(), |statistic| numbers::significant(statistic.value.get(), 4)),
            corrected_df(entry),
            tables::p(entry.p, entry.p_bound),
            tables::p(entry.p_adjusted, false),
            size(entry, "partial eta squared"),
        ]);
    }
    test_level(step, &mut table);
    if let Some(level) = step.results.iter().find_map(|entry| entry.detail("interval_level")) {
        table.notes.push(format!("Intervals have a level of {} %.", percent(level)));
    }
    if step.results.iter().any(|entry| entry.p_adjusted.is_some() && entry.interval_of().is_some()) {
        table.notes.push(
            "Intervals are for each comparison by itself; the verdicts follow the adjusted p, so that the two need not agree.".to_owned(),
        );
    }
    reasons(step, &mut table);
    table
}

fn means(step: &StepResult, unit: &str) -> Table {
    let head = if unit.is_empty() { "#mean".to_owned() } else { format!("#mean ({})", markdown(unit)) };
    let mut table = Table::new(&["Cell", "#n", &head, "#SD", "#interval"]);
    for entry in &step.results {
        let error = entry.standard_error_of();
        table.row([
            name(entry),
            entry.n.map(|n| n.to_string()).unwrap_or_default(),
            tables::estimate(entry.estimate_of(), error),
            tables::number(entry.detail("sd")),
            tables::interval(entry.interval_of(), error),
        ]);
    }
    level_note(step, &mut table);
    reasons(step, &mut table);
    table
}

fn level_note(step: &StepResult, table: &mut Table) {
    let levels: Vec<Finite> = step.results.iter().filter(|entry| entry.interval_of().is_some()).filter_map(|entry| entry.level).collect();
    if let Some(level) = levels.first() {
        table.notes.push(format!("Intervals have a level of {} %.", percent(*level)));
    }
}

fn changes(step: &StepResult) -> Table {
    let mut table = Table::new(&["Change", "#n", "#mean change", "#standardizer", "#correlation", "#d", "#g", "#interval"]);
    for entry in &step.results {
        let three = |name: &str| entry.detail(name).map(|value| numbers::significant(value.get(), 3)).unwrap_or_default();
        let interval = entry
            .interval_of()
            .map(|[lower, upper]| format!("{} to {}", numbers::significant(lower.get(), 3), numbers::significant(upper.get(), 3)));
        table.row([
            name(entry),
            entry.n.map(|n| n.to_string()).unwrap_or_default(),
            tables::number(entry.detail("change")),
            tables::number(entry.detail("standardizer")),
            three("correlation"),
            if entry.state == State::Done { three("d") } else { state(entry).to_owned() },
            three("g"),
            interval.unwrap_or_default(),
        ]);
    }
    level_note(step, &mut table);
    if step.results.iter().any(|entry| entry.details.contains_key("interval_of")) {
        table.notes.push("Intervals are those of d, uncorrected for small samples.".to_owned());
    }
    reasons(step, &mut table);
    table
}

fn explained(step: &StepResult) -> Table {
    let mut table = Table::new(&["Of", "Form", "#share", "#interval"]);
    for entry in &step.results {
        if entry.sizes.is_empty() {
            table.row([name(entry), state(entry).to_owned(), String::new(), String::new()]);
        }
        for size in &entry.sizes {
            let interval = size.interval.map(|[lower, upper]| {
                let level = size.level.map(percent).unwrap_or_default();
                format!("{} to {} ({level} %)", numbers::significant(lower.get(), 3), numbers::significant(upper.get(), 3))
            });
            table.row([
                name(entry),
                size.name.clone(),
                size.value.map(|value| numbers::significant(value.get(), 3)).unwrap_or_default(),
                interval.unwrap_or_default(),
            ]);
        }
    }
    reasons(step, &mut table);
    table
}

/// A test in a sentence. What is not significant "was not shown to differ"; nothing is called alike.
pub(super) fn sentence(entry: &Entry, outcome: Option<&Outcome>) -> Option<String> {
    let verdict = entry.verdict.as_deref()?;
    let subject = name(entry);
    let unit = outcome.and_then(|outcome| outcome.unit.as_deref()).map(|unit| format!(" {}", markdown(unit))).unwrap_or_default();
    let error = entry.standard_error_of();
    let numbers = match (entry.estimate_of(), entry.interval_of()) {
        (Some(estimate), Some(interval)) => {
            let level = entry.detail("interval_level").map(percent).unwrap_or_default();
            format!(
                " The estimate is {}{unit} ({level} % interval {}).",
                tables::estimate(Some(estimate), error),
                tables::interval(Some(interval), error)
            )
        }
        _ => String::new(),
    };
    let p = match (entry.p, entry.p_adjusted) {
        (_, Some(adjusted)) => format!(" (adjusted {})", tables::p_in_words(adjusted, false)),
        (Some(p), None) => format!(" ({})", tables::p_in_words(p, entry.p_bound)),
        _ => String::new(),
    };
    let said = match verdict {
        "significant" => format!("{subject}: an effect was shown{p}."),
        "above zero" => format!("{subject}: shown to be above zero{p}."),
        "below zero" => format!("{subject}: shown to be below zero{p}."),
        "not significant" => format!("{subject}: not shown to differ from zero{p}."),
        "refused" | "not tested" => return None,
        other => match other.strip_prefix("favours ") {
            Some(level) => {
                let better = match outcome.and_then(|outcome| outcome.better) {
                    Some(Better::Lower) => " (lower is better)",
                    Some(Better::Higher) => " (higher is better)",
                    None => "",
                };
                format!("{subject}: favours {}{better}{p}.", markdown(level))
            }
            None => format!("{subject}: {}{p}.", markdown(other)),
        },
    };
    Some(format!("{said}{numbers}"))
}

/// `12 subjects`.
pub(super) fn subjects(count: usize) -> String {
    counted(count, "subject", "subjects")
}
