//! Names bound, defaults spelt out, every test enumerated as a hypothesis.
//!
//! All errors of a plan are found in one go. A part that is in error is left out, and what depends on it stays silent.

mod comparisons;
mod conclusions;
mod conditions;
mod contrasts;
mod corrections;
mod data;
mod design;
mod effects;
mod estimates;
mod families;
mod graphs;
mod hypotheses;
mod margins;
mod methods;
mod prose;
mod reader;
mod references;
mod screens;
mod spacing;
mod steps;
mod tests;

use crate::plan::resolved::{CompleteOver, DECISION_RULE, MissingData, MissingRule, RESOLVED_FORMAT, ResolvedPlan, Step};
use crate::plan::syntax::tree::{Node, Value};
use crate::text::diagnostic::Diagnostic;
use crate::text::source::{Source, Span};
use reader::Reader;
use references::References;
use std::collections::HashMap;

const PLAN_KEYS: &[&str] = &[
    "plan",
    "title",
    "identifier",
    "prepared by",
    "blinding",
    "administration",
    "data status",
    "estimand",
    "data",
    "design",
    "outcomes",
    "missing data",
    "alpha",
    "steps",
    "families",
    "conclusions",
    "planning",
    "acknowledged",
];

/// What came of resolving.
#[derive(Debug)]
pub struct Resolution {
    /// The plan, where no error was found.
    pub plan: Option<ResolvedPlan>,
    /// Where the parts stand that later rules speak of.
    pub places: Places,
    /// What was found.
    pub findings: Vec<Diagnostic>,
}

/// Where parts of the plan stand, for rules that look at the resolved plan.
#[derive(Debug, Default)]
pub struct Places {
    /// Identifier of each step.
    pub steps: HashMap<String, Span>,
    /// Each rule that is acknowledged.
    pub acknowledged: HashMap<String, Span>,
    /// Top-level keys.
    pub keys: HashMap<String, Span>,
}

/// Resolves a plan.
pub fn resolve(source: &Source, root: &Node) -> Resolution {
    let reader = Reader::new(source);
    let mut places = Places::default();
    let plan = plan(&reader, root, &mut places);
    let findings = reader.into_findings();
    Resolution {
        plan: plan.filter(|_| findings.iter().all(|finding| finding.severity < crate::text::diagnostic::Severity::Error)),
        places,
        findings,
    }
}

/// Every reference of a plan with its label, in plan order.
pub fn references(plan: &ResolvedPlan) -> Vec<(String, String)> {
    conclusions::list(&plan.steps)
}

fn plan(reader: &Reader<'_>, root: &Node, places: &mut Places) -> Option<ResolvedPlan> {
    let fields = reader.map(root, "a plan", PLAN_KEYS, &["populations", "sensitivity"])?;
    places.keys = root.map().unwrap_or(&[]).iter().map(|entry| (entry.key.clone(), entry.key_span)).collect();
    let what = "the plan";
    let language = reader
        .required(&fields, "plan", what, "a plan starts with `plan: 1`, the version of the language")
        .and_then(|node| language(reader, node));
    let title = reader.required(&fields, "title", what, "the report is headed by it").and_then(|node| reader.text(node, "`title`"));
    let alpha = reader
        .required(&fields, "alpha", what, "say at which level the plan is tested, such as `alpha: 0.05`; there is no default")
        .and_then(|node| alpha(reader, node));
    let missing_data = reader
        .required(
            &fields,
            "missing data",
            what,
            "say what is done about missing values, such as `missing data: complete cases`; there is no default",
        )
        .and_then(|node| missing_data(reader, node));
    let design_node = reader.required(&fields, "design", what, "name the arms and the occasions");
    let design = design_node.and_then(|node| design::design(reader, node));
    let data_node = reader.required(&fields, "data", what, "say where the data stand in their file");
    let data = data_node.zip(design.as_ref()).and_then(|(node, design)| data::data(reader, node, design));
    if let (Some(node), Some(design), Some(data)) = (design_node, &design, &data) {
        design::strata_are_columns_of_their_own(reader, node, design, data);
    }
    let outcomes = data_node.and_then(|data| data::outcomes(reader, fields.get("outcomes"), data));

    let step_nodes = reader
        .required(&fields, "steps", what, "a plan is a list of steps: what is screened, tested and estimated, in order")
        .and_then(|node| reader.list(node, "`steps`"));
    let ids = step_nodes.map(|nodes| ids(reader, nodes));
    let (mut steps, mut families, mut conclusions) = (None, None, None);
    if let (Some(design), Some(outcomes), Some(nodes), Some(ids)) = (&design, &outcomes, step_nodes, &ids) {
        places.steps = ids.iter().cloned().collect();
        let columns = data.as_ref().map_or(&[][..], |data| &data.columns);
        let context = steps::Context { design, outcomes, columns, alpha: alpha.unwrap_or(0.05) };
        let mut references = References::new(ids);
        let found: Vec<Option<Step>> = nodes
            .iter()
            .enumerate()
            .map(|(number, node)| {
                references.current = Some(number);
                steps::step(reader, node, number, &context, &mut references)
            })
            .collect();
        references.current = None;
        families = fields.get("families").map_or(Some(Vec::new()), |node| families::families(reader, node, &found, &references, &context));
        families::families_judged_in_time(reader, families.as_deref().unwrap_or(&[]), &references);
        conclusions = reader
            .required(&fields, "conclusions", what, "say what will be concluded from each way the tests can turn out")
            .and_then(|node| conclusions::conclusions(reader, node, &references));
        steps = found.into_iter().collect::<Option<Vec<_>>>();
    }
    let prose = prose::prose(reader, &fields, places);
    Some(ResolvedPlan {
        format: RESOLVED_FORMAT.to_owned(),
        language: language?,
        title: title?.to_owned(),
        identifier: reader.optional_text(&fields, "identifier"),
        prepared_by: reader.optional_text(&fields, "prepared by"),
        blinding: reader.optional_text(&fields, "blinding").map(|text| text.trim().to_owned()),
        administration: prose.administration,
        data_status: prose.data_status,
        estimand: prose.estimand,
        data: data?,
        design: design?,
        outcomes: outcomes?,
        missing_data: missing_data?,
        alpha: alpha?,
        decision_rule: DECISION_RULE.to_owned(),
        steps: steps?,
        families: families?,
        conclusions: conclusions?,
        planning: prose.planning,
        acknowledged: prose.acknowledged,
    })
}

fn language(reader: &Reader<'_>, node: &Node) -> Option<u32> {
    if node.number() == Some(1.0) {
        return Some(1);
    }
    reader.error("language-version", node.span, "this program reads version 1 of the plan language", "here", "write `plan: 1`");
    None
}

fn alpha(reader: &Reader<'_>, node: &Node) -> Option<f64> {
    let alpha = steps::probability(reader, node, "`alpha`")?;
    if alpha > 0.5 {
        reader.error(
            "wrong-range",
            node.span,
            "`alpha` is the chance of a false rejection; above one half it protects from nothing",
            "here",
            "0.05 and 0.025 are common",
        );
        return None;
    }
    Some(alpha)
}

fn missing_data(reader: &Reader<'_>, node: &Node) -> Option<MissingData> {
    let later = ["mixed model", "multiple imputation", "reference-based imputation"];
    let rule = |node: &Node| reader.word(node, "the rule for missing data", &[("complete cases", MissingRule::CompleteCases)], &later);
    if !matches!(node.value, Value::Map(_)) {
        return Some(MissingData { rule: rule(node)?, over: CompleteOver::AllOccasions });
    }
    let fields = reader.map(node, "`missing data`", &["rule", "over"], &[])?;
    let rule = reader.required(&fields, "rule", "`missing data`", "write `rule: complete cases`").and_then(rule);
    let words = [("all occasions", CompleteOver::AllOccasions), ("the step's occasions", CompleteOver::StepOccasions)];
    let over = fields.get("over").map_or(Some(CompleteOver::AllOccasions), |node| reader.word(node, "`over`", &words, &[]));
    Some(MissingData { rule: rule?, over: over? })
}

/// Identifiers of all steps, so that a reference can be told to point down. A step whose id is in error gets one that
/// nothing can refer to, so that the rest of it is read all the same.
fn ids(reader: &Reader<'_>, nodes: &[Node]) -> Vec<(String, Span)> {
    let mut first_at: HashMap<String, Span> = HashMap::new();
    nodes
        .iter()
        .enumerate()
        .map(|(number, node)| {
            let unnamed = || (format!("\u{0}step {}", number + 1), reader.first_line(node.span));
            let Some((id, span)) = id_of(reader, node) else { return unnamed() };
            if matches!(id, "either" | "not") {
                reader.error(
                    "reserved-id",
                    span,
                    format!("`{id}` is a word of conditions and cannot be the id of a step"),
                    "reserved",
                    "choose another id",
                );
                return unnamed();
            }
            if let Some(first) = first_at.get(id) {
                reader.conflict(
                    "duplicate-id",
                    [(span, "the second"), (*first, "the first")],
                    format!("`{id}` is the id of two steps"),
                    "conditions and the report refer to steps by their ids; rename one",
                );
                return unnamed();
            }
            first_at.insert(id.to_owned(), span);
            (id.to_owned(), span)
        })
        .collect()
}

fn id_of<'n>(reader: &Reader<'_>, node: &'n Node) -> Option<(&'n str, Span)> {
    let entries = reader.entries(node, "a step", "a map")?;
    let fields = reader.map(node, "a step", &entries.iter().map(|entry| entry.key.as_str()).collect::<Vec<_>>(), &[])?;
    let node = reader.required(&fields, "id", "the step", "conditions and the report refer to a step by its id")?;
    Some((reader.text(node, "`id`")?, node.span))
}
