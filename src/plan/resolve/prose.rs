//! Sections that are registered as written: administration, data status, estimand, planning, acknowledgements.

use super::Places;
use super::reader::{Fields, Reader, as_json};
use crate::plan::resolved::DataStatus;
use crate::plan::syntax::tree::Node;
use std::collections::BTreeMap;

/// The sections that no computation reads.
pub(super) struct Prose {
    pub administration: serde_json::Value,
    pub data_status: Option<DataStatus>,
    pub estimand: serde_json::Value,
    pub planning: serde_json::Value,
    pub acknowledged: BTreeMap<String, String>,
}

const ESTIMAND_KEYS: &[&str] = &["population", "treatments", "variable", "intercurrent events", "summary"];
const PLANNING_KEYS: &[&str] = &["subjects", "scenarios"];
const SCENARIO_KEYS: &[&str] = &["id", "means", "sd", "correlation", "dropout", "shape", "subjects"];

pub(super) fn prose(reader: &Reader<'_>, fields: &Fields<'_>, places: &mut Places) -> Prose {
    let section = |key: &str, keys: &[&str]| match fields.get(key) {
        None => serde_json::Value::Null,
        Some(node) => {
            let what = format!("`{key}`");
            let sound =
                if keys.is_empty() { reader.entries(node, &what, "a map").is_some() } else { reader.map(node, &what, keys, &[]).is_some() };
            if sound { as_json(node) } else { serde_json::Value::Null }
        }
    };
    let estimand = section("estimand", ESTIMAND_KEYS);
    let planning = section("planning", PLANNING_KEYS);
    if let Some(scenarios) = fields.get("planning").and_then(|node| node.get("scenarios")) {
        for scenario in reader.list(scenarios, "`scenarios`").unwrap_or(&[]) {
            reader.map(scenario, "a scenario", SCENARIO_KEYS, &[]);
        }
    }
    Prose {
        administration: section("administration", &[]),
        data_status: fields.get("data status").and_then(|node| data_status(reader, node)),
        estimand,
        planning,
        acknowledged: fields.get("acknowledged").map_or(BTreeMap::new(), |node| acknowledged(reader, node, places)),
    }
}

fn data_status(reader: &Reader<'_>, node: &Node) -> Option<DataStatus> {
    let fields = reader.map(node, "`data status`", &["collected", "seen", "by"], &[])?;
    let word = |key: &str, words: &[&'static str]| {
        let pairs: Vec<(&str, &'static str)> = words.iter().map(|word| (*word, *word)).collect();
        reader
            .required(&fields, key, "`data status`", &format!("it may be: {}", words.join(", ")))
            .and_then(|node| reader.word(node, &format!("`{key}`"), &pairs, &[]))
    };
    let collected = word("collected", &["none", "part", "all"]);
    let seen = word("seen", &["nothing", "pooled", "by arm"]);
    let by = reader.optional_text(&fields, "by");
    if seen == Some("by arm") && by.is_none() {
        reader.required(&fields, "by", "`data status`", "data were seen by arm: say by whom");
        return None;
    }
    Some(DataStatus { collected: collected?.to_owned(), seen: seen?.to_owned(), by })
}

fn acknowledged(reader: &Reader<'_>, node: &Node, places: &mut Places) -> BTreeMap<String, String> {
    let mut found = BTreeMap::new();
    for entry in reader.entries(node, "`acknowledged`", "a map of findings to reasons").unwrap_or(&[]) {
        if let Some(reason) = reader.text(&entry.node, "the reason") {
            found.insert(entry.key.clone(), reason.trim().to_owned());
            places.acknowledged.insert(entry.key.clone(), entry.key_span);
        }
    }
    found
}
