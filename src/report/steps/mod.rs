//! One section per step: what it did, its table, and sentences for its comparisons.

mod sizes;
mod tests;

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
    let method = step.settings.get("method").map(String::as_str);
    let mut table = (step.state != State::NotRun).then(|| match (step.species.as_str(), step.kind.as_str()) {
        ("screen", _) => screens(step),
        ("test", "omnibus") if method == Some("univariate") => tests::omnibus(step),
        ("test", _) => tests::tests(step, unit),
        (_, "cell means") => means(step, unit),
        (_, "differences") => sizes::differences(step, unit),
        (_, "variance explained") => sizes::explained(step),
        (_, "standardized change") => sizes::changes(step),
        _ => sizes::comparisons(step, unit),
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
    let claim = margins(entry, &unit);
    let said = match verdict {
        "shown" => format!("{subject}: shown to lie {claim}{p}."),
        "not shown" => format!("{subject}: not shown to lie {claim}{p}."),
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

/// The margins of a claim in words.
fn margins(entry: &Entry, unit: &str) -> String {
    let margin = |name: &str| entry.detail(name).map(|value| numbers::significant(value.get(), 4));
    match (margin("margin_lower"), margin("margin_upper")) {
        (Some(lower), Some(upper)) => format!("within {lower} to {upper}{unit}"),
        (Some(lower), None) => format!("above the margin of {lower}{unit}"),
        (None, Some(upper)) => format!("below the margin of {upper}{unit}"),
        (None, None) => "within its margin".to_owned(),
    }
}

/// `12 subjects`.
pub(super) fn subjects(count: usize) -> String {
    counted(count, "subject", "subjects")
}
