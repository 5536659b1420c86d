//! The view model: everything that the Markdown template names, texts escaped, numbers formatted.

use super::decisions::{Line, path, short};
use super::escape::markdown;
use super::families::{Judged, families};
use super::figures::{Figure, Shows};
use super::input::ReportInput;
use super::methods::{Method, methods};
use super::steps::{Section, section, sentence, subjects};
use super::tables::{self, Table, counted, percent};
use crate::plan::resolved::{AllocationPlace, Condition, Design, ResolvedPlan};
use crate::results::{Description, State};
use serde::Serialize;

/// Subjects left out who are listed by name; results.json has all.
const MOST_LEFT_OUT: usize = 200;

/// What the Markdown template names.
#[derive(Debug, Serialize)]
pub(super) struct View {
    title: String,
    identifier: String,
    prepared_by: String,
    sealed: Vec<String>,
    correction: String,
    first_conclusion: String,
    conclusion: String,
    not_named: Vec<String>,
    carrying: Vec<String>,
    path: Vec<Line>,
    flow: Table,
    left_out: Option<Table>,
    left_out_words: String,
    cells: Vec<Cells>,
    steps: Vec<Section>,
    families: Vec<Judged>,
    forests: Vec<Picture>,
    plan: Vec<String>,
    plan_steps: Vec<String>,
    estimand: Vec<String>,
    acknowledged: Vec<String>,
    methods: Vec<Method>,
    hashes: Vec<Hash>,
}

/// A figure as the template links it.
#[derive(Debug, Serialize)]
pub(super) struct Picture {
    file: String,
    caption: String,
}

/// The cells of one outcome.
#[derive(Debug, Serialize)]
struct Cells {
    heading: String,
    table: Table,
    picture: Option<Picture>,
}

#[derive(Debug, Serialize)]
struct Hash {
    what: String,
    hash: String,
}

pub(super) fn view(input: &ReportInput<'_>, figures: &[Figure]) -> View {
    let (plan, results, status) = (input.plan, input.results, input.status);
    let outcome = |name: &str| plan.outcomes.iter().find(|outcome| outcome.name == name);
    let text = |text: &Option<String>| text.as_deref().map(markdown).unwrap_or_default();
    let several = plan.outcomes.len() > 1;
    View {
        title: markdown(&plan.title),
        identifier: text(&plan.identifier),
        prepared_by: text(&plan.prepared_by),
        sealed: sealed(input),
        correction: text(&status.correction),
        first_conclusion: text(&status.first_conclusion),
        conclusion: markdown(&results.conclusion.text),
        not_named: results
            .conclusion
            .not_named
            .iter()
            .map(|found| format!("{}: {}", markdown(&found.reference), markdown(&found.verdict)))
            .collect(),
        carrying: results
            .steps
            .iter()
            .filter(|step| step.species == "test" && step.role == "confirmatory")
            .flat_map(|step| step.results.iter().map(move |entry| (step, entry)))
            .filter(|(_, entry)| entry.state == State::Done && entry.verdict.as_deref().is_some_and(|verdict| verdict != "not significant"))
            .filter_map(|(step, entry)| sentence(entry, outcome(&step.outcome)))
            .take(3)
            .collect(),
        path: path(input.decisions),
        flow: flow(input),
        left_out: left_out(input),
        left_out_words: format!(
            "Of {} in the data, {} {} analysed for every outcome.",
            subjects(results.data.subjects),
            results.data.used,
            if results.data.used == 1 { "was" } else { "were" }
        ),
        cells: results.descriptions.iter().map(|description| cells(description, plan, figures)).collect(),
        steps: results
            .steps
            .iter()
            .map(|step| {
                let reason = plan.steps.iter().find(|planned| planned.id == step.id).and_then(|planned| planned.because.as_deref());
                section(step, outcome(&step.outcome), reason, several)
            })
            .collect(),
        families: families(input, figures),
        forests: figures.iter().filter(|figure| figure.shows == Shows::Sizes).map(picture).collect(),
        plan: plan_in_brief(plan),
        plan_steps: plan.steps.iter().map(|step| planned_step(step, plan)).collect(),
        estimand: estimand(plan),
        acknowledged: plan.acknowledged.iter().map(|(rule, reason)| format!("{}: {}", markdown(rule), markdown(reason))).collect(),
        methods: methods(input),
        hashes: hashes(input),
    }
}

pub(super) fn picture(figure: &Figure) -> Picture {
    Picture { file: figure.file.clone(), caption: markdown(&figure.title) }
}

fn sealed(input: &ReportInput<'_>) -> Vec<String> {
    let (plan, status) = (input.plan, input.status);
    let mut lines = vec![
        format!(
            "The plan was sealed on {} by {}. Plan hash {}, meaning {}.",
            markdown(&status.sealed_at),
            markdown(&status.sealed_by),
            short(&status.plan_sha256),
            short(&status.meaning)
        ),
        if status.witnessed {
            "Someone outside witnessed the ledger before this run; the audit says who.".to_owned()
        } else {
            "Nobody outside witnessed the seal as far as this folder shows: its time is this machine's own claim, unless its hash was deposited elsewhere.".to_owned()
        },
        match &plan.data_status {
            Some(data) => format!(
                "When the plan was written, of the data {} had been collected and {} had been seen{}.",
                match data.collected.as_str() {
                    "none" => "nothing",
                    "part" => "a part",
                    _ => "all",
                },
                match data.seen.as_str() {
                    "nothing" => "nothing",
                    "pooled" => "results over all arms together",
                    _ => "results by arm",
                },
                data.by.as_deref().map(|by| format!(" (by {})", markdown(by))).unwrap_or_default()
            ),
            None => "The plan does not say what data had been collected and seen when it was written.".to_owned(),
        },
    ];
    let opened = match plan.data.allocation {
        AllocationPlace::SeparateFile => "The allocation was opened",
        AllocationPlace::InTheData => "The data, which hold the arms and so were never blind to whoever had the file, were opened",
        AllocationPlace::NoArms => "The data were analysed",
    };
    lines.push(format!(
        "{opened} on {} by {}; this is record {} of the study.",
        markdown(&status.unblinded_at),
        markdown(&status.run_by),
        status.record
    ));
    lines
}

fn design_levels(design: &Design, levels: &[String]) -> String {
    if design.between.is_empty() { "all subjects".to_owned() } else { markdown(&levels.join("; ")) }
}

fn flow(input: &ReportInput<'_>) -> Table {
    let plan = input.plan;
    let mut heads: Vec<String> = ["Arm", "#planned", "#allocated and in the data"].map(str::to_owned).to_vec();
    heads.extend(plan.outcomes.iter().map(|outcome| format!("#analysed for {}", markdown(&outcome.name))));
    let mut table = Table::new(&heads.iter().map(String::as_str).collect::<Vec<_>>());
    for arm in &input.results.data.arms {
        let mut cells = vec![
            design_levels(&plan.design, &arm.levels),
            arm.planned.map(|planned| planned.to_string()).unwrap_or_default(),
            arm.allocated.to_string(),
        ];
        cells.extend(arm.analysed.iter().map(usize::to_string));
        table.row(cells);
    }
    table
}

fn left_out(input: &ReportInput<'_>) -> Option<Table> {
    let all = &input.results.data.left_out;
    let mut table = Table::new(&["Left out", "Why"]);
    for subject in all.iter().take(MOST_LEFT_OUT) {
        table.row([markdown(&subject.subject), markdown(&subject.why)]);
    }
    if all.len() > MOST_LEFT_OUT {
        table.notes.push(format!("{} more stand in results.json.", all.len() - MOST_LEFT_OUT));
    }
    (!all.is_empty()).then_some(table)
}

fn cells(description: &Description, plan: &ResolvedPlan, figures: &[Figure]) -> Cells {
    let outcome = plan.outcomes.iter().find(|outcome| outcome.name == description.outcome);
    let label = outcome.map_or(description.outcome.as_str(), |outcome| outcome.label.as_str());
    let unit = outcome.and_then(|outcome| outcome.unit.as_deref()).map(|unit| format!(" ({})", markdown(unit))).unwrap_or_default();
    let occasions = !plan.design.within.is_empty();
    let interval = format!("#{} % interval", percent(description.level));
    let mean = format!("#mean{unit}");
    let heads: Vec<&str> =
        if occasions { vec!["Arm", "Occasion", "#n", &mean, "#SD", &interval] } else { vec!["Arm", "#n", &mean, "#SD", &interval] };
    let mut table = Table::new(&heads);
    for cell in &description.cells {
        // The precision of a mean follows its own standard error.
        let error = cell.sd.and_then(|sd| crate::canon::number::Finite::new(sd.get() / (cell.n.max(1) as f64).sqrt()));
        let mut row = vec![design_levels(&plan.design, &cell.between)];
        if occasions {
            row.push(markdown(&cell.within.join("; ")));
        }
        row.extend([
            cell.n.to_string(),
            tables::estimate(cell.mean, error),
            tables::number(cell.sd),
            tables::interval(cell.interval, error),
        ]);
        table.row(row);
    }
    Cells {
        heading: markdown(label),
        table,
        picture: figures.iter().find(|figure| figure.shows == Shows::Means && figure.about == description.outcome).map(picture),
    }
}

fn plan_in_brief(plan: &ResolvedPlan) -> Vec<String> {
    let factor = |factor: &crate::plan::resolved::Factor| {
        format!("{} ({})", markdown(&factor.name), factor.levels.iter().map(|level| markdown(level)).collect::<Vec<_>>().join(", "))
    };
    let list = |factors: &[crate::plan::resolved::Factor]| factors.iter().map(factor).collect::<Vec<_>>().join("; ");
    let mut lines = Vec::new();
    if !plan.design.between.is_empty() {
        lines.push(format!("Between subjects: {}.", list(&plan.design.between)));
    }
    if !plan.design.within.is_empty() {
        lines.push(format!("Within subjects: {}.", list(&plan.design.within)));
    }
    if let Some(randomised) = &plan.design.randomised {
        let scheme = randomised.scheme.as_deref().map(|scheme| format!(", scheme {}", markdown(scheme))).unwrap_or_default();
        lines.push(format!(
            "Randomised: {}{scheme}.",
            randomised.factors.iter().map(|factor| markdown(factor)).collect::<Vec<_>>().join(", ")
        ));
    }
    for outcome in &plan.outcomes {
        let mut parts = vec![format!("Outcome {}: {}", markdown(&outcome.name), markdown(&outcome.label))];
        parts.extend(outcome.unit.as_deref().map(|unit| format!("in {}", markdown(unit))));
        parts.extend(outcome.range.map(|[least, greatest]| format!("from {least} to {greatest}")));
        parts.extend(outcome.better.map(|better| format!("{} is better", super::methods::better(better))));
        parts.extend(outcome.smallest_worthwhile_difference.map(|value| format!("smallest worthwhile difference {value}")));
        lines.push(format!("{}.", parts.join(", ")));
    }
    lines.push(format!(
        "Missing data: complete cases over {}. Alpha {}; {}.",
        super::methods::over(&plan.missing_data),
        plan.alpha,
        plan.decision_rule
    ));
    if let Some(blinding) = &plan.blinding {
        lines.push(format!("Blinding: {}", markdown(blinding)));
    }
    lines
}

fn planned_step(step: &crate::plan::resolved::Step, plan: &ResolvedPlan) -> String {
    use crate::plan::resolved::Action;
    let what = match &step.action {
        Action::Screen(_) => "screen".to_owned(),
        Action::Test(test) => format!(
            "test of {} ({})",
            test.effect.iter().map(|factor| markdown(factor)).collect::<Vec<_>>().join(" by "),
            counted(test.hypotheses.len(), "hypothesis", "hypotheses")
        ),
        Action::Estimate(_) => "estimate".to_owned(),
    };
    let when = step.when.as_ref().map(|when| format!(", when {}", condition(when))).unwrap_or_default();
    let outcome = if plan.outcomes.len() > 1 { format!(" of {}", markdown(&step.outcome)) } else { String::new() };
    format!("{}: {what}{outcome}{when}", markdown(&step.id))
}

/// A condition in words.
fn condition(when: &Condition) -> String {
    let join = |parts: &[Condition], word: &str| parts.iter().map(condition).collect::<Vec<_>>().join(word);
    match when {
        Condition::All(parts) => join(parts, " and "),
        Condition::Either(parts) => format!("either {}", join(parts, " or ")),
        Condition::Not(inner) => format!("not ({})", condition(inner)),
        Condition::Is { reference, verdicts } => {
            format!("{} is {}", markdown(reference), verdicts.iter().map(|verdict| markdown(verdict)).collect::<Vec<_>>().join(" or "))
        }
    }
}

fn estimand(plan: &ResolvedPlan) -> Vec<String> {
    let Some(attributes) = plan.estimand.as_object() else { return Vec::new() };
    attributes
        .iter()
        .map(|(name, value)| {
            let text = match value {
                serde_json::Value::String(text) => markdown(text),
                serde_json::Value::Array(items) => items.iter().map(in_words).collect::<Vec<_>>().join("; "),
                other => in_words(other),
            };
            format!("{}: {text}", markdown(name))
        })
        .collect()
}

fn in_words(value: &serde_json::Value) -> String {
    match value {
        serde_json::Value::Object(map) => {
            map.iter().map(|(key, value)| format!("{} {}", markdown(key), in_words(value))).collect::<Vec<_>>().join(", ")
        }
        serde_json::Value::String(text) => markdown(text),
        other => markdown(&other.to_string()),
    }
}

fn hashes(input: &ReportInput<'_>) -> Vec<Hash> {
    let (results, status) = (input.results, input.status);
    let hash = |what: &str, hash: &str| Hash { what: what.to_owned(), hash: hash.to_owned() };
    let mut hashes = vec![
        hash("plan (plan.yaml)", &status.plan_sha256),
        hash("meaning (resolved.json)", &status.meaning),
        hash("data file", &results.data.sha256),
        hash("canonical table of the data", &results.data.content),
    ];
    hashes.extend(results.data.allocation_sha256.as_deref().map(|allocation| hash("allocation file", allocation)));
    hashes.push(hash("ledger head before the run", &status.ledger_head));
    hashes.extend(input.decisions.last().map(|last| hash("last decision", &last.hash)));
    hashes
}
