//! Tables of sizes.

use super::{level_note, name, reasons, state};
use crate::report::escape::markdown;
use crate::report::tables::{self, Table, percent};
use crate::results::{Detail, Entry, State, StepResult, numbers};

/// Standardized changes.
pub(super) fn changes(step: &StepResult) -> Table {
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
    bootstrap_note(step, &mut table);
    reasons(step, &mut table);
    table
}

/// Shares of variance.
pub(super) fn explained(step: &StepResult) -> Table {
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

/// Differences in the outcome's unit.
pub(super) fn differences(step: &StepResult, unit: &str) -> Table {
    let head = if unit.is_empty() { "#difference".to_owned() } else { format!("#difference ({})", markdown(unit)) };
    let mut table = Table::new(&["Difference", "#n", &head, "#standard error", "#df", "#interval"]);
    for entry in &step.results {
        let error = entry.standard_error_of();
        table.row([
            name(entry),
            entry.n.map(|n| n.to_string()).unwrap_or_default(),
            if entry.state == State::Done { tables::estimate(entry.estimate_of(), error) } else { state(entry).to_owned() },
            tables::number(error),
            entry.detail("df").map(|df| tables::df(&[df])).unwrap_or_default(),
            tables::interval(entry.interval_of(), error),
        ]);
    }
    level_note(step, &mut table);
    reasons(step, &mut table);
    table
}

/// Numbers that a comparison may have beside its size: key in the details, head of the column.
const BESIDE: &[(&str, &str)] = &[
    ("difference", "#difference"),
    ("standardizer", "#standardizer"),
    ("d", "#d"),
    ("g", "#g"),
    ("d_uncorrected", "#uncorrected"),
    ("correlation", "#correlation"),
    ("standard_error_of_difference", "#SE of a difference"),
    ("improved", "#improved"),
    ("unchanged", "#unchanged"),
    ("deteriorated", "#deteriorated"),
    ("fell", "#fell"),
    ("rose", "#rose"),
];

/// Sizes that compare two arms, two occasions, or both.
pub(super) fn comparisons(step: &StepResult, unit: &str) -> Table {
    let size = match step.kind.as_str() {
        "responders" | "reliable change" => "#share",
        "probability of superiority" => "#probability",
        _ => "#size",
    };
    let mut heads = vec!["Comparison", "#n", "#counted", size, "#interval"];
    heads.extend(BESIDE.iter().map(|(_, head)| *head));
    let mut table = Table::new(&heads);
    for entry in &step.results {
        let three = |value: f64| numbers::significant(value, 3);
        let interval = entry.interval_of().map(|[lower, upper]| format!("{} to {}", three(lower.get()), three(upper.get())));
        let mut row = vec![
            name(entry),
            by_arm(entry, "n_by_arm"),
            by_arm(entry, "responders"),
            match (entry.state, entry.estimate_of()) {
                (State::Done, Some(estimate)) => three(estimate.get()),
                _ => state(entry).to_owned(),
            },
            interval.unwrap_or_default(),
        ];
        row.extend(BESIDE.iter().map(|(key, _)| entry.detail(key).map(|value| three(value.get())).unwrap_or_default()));
        table.row(row);
    }
    table.drop_empty_columns(2);
    level_note(step, &mut table);
    if step.results.iter().any(|entry| entry.details.contains_key("interval_of")) {
        table.notes.push("Intervals are those of d, uncorrected for small samples.".to_owned());
    }
    if step.kind == "responders" {
        let unit = if unit.is_empty() { String::new() } else { format!(" {}", markdown(unit)) };
        let amount = step.settings.get("reaching").cloned().unwrap_or_default();
        table.notes.push(format!("A response is a change of {amount}{unit} or more in the better direction; a comparison of arms is the second share minus the first."));
    }
    bootstrap_note(step, &mut table);
    reasons(step, &mut table);
    table
}

/// What a bootstrap rests on.
fn bootstrap_note(step: &StepResult, table: &mut Table) {
    let of = |key: &str| {
        step.results
            .iter()
            .filter_map(|entry| entry.detail(key))
            .map(|value| value.get())
            .fold(None, |most: Option<f64>, value| Some(most.map_or(value, |most| most.max(value))))
    };
    if let Some(resamples) = of("resamples") {
        let degenerate = of("degenerate_resamples").unwrap_or(0.0);
        let left_out =
            if degenerate > 0.0 { format!(", at most {degenerate:.0} of them without a value and left out") } else { String::new() };
        table.notes.push(format!("{resamples:.0} resamples{left_out}."));
    }
}

fn by_arm(entry: &Entry, key: &str) -> String {
    match entry.details.get(key) {
        Some(Detail::Numbers(counts)) => counts.iter().map(|count| format!("{:.0}", count.get())).collect::<Vec<_>>().join(", "),
        _ => String::new(),
    }
}
