//! The path of decisions, each as a sentence with its hash.

use super::escape::markdown;
use super::input::ChainedDecision;
use super::tables::p_in_words;
use crate::canon::number::Finite;
use crate::results::decision::Decision;
use crate::results::numbers;
use serde::Serialize;
use serde_json::Value;

/// One decision, in words.
#[derive(Debug, Clone, Serialize)]
pub(super) struct Line {
    pub sentence: String,
    /// First 16 digits in groups of four.
    pub hash: String,
}

/// Digits of a hash that a report shows outside its appendix.
const SHOWN: usize = 16;

pub(super) fn short(hash: &str) -> String {
    let shown: Vec<char> = hash.chars().take(SHOWN).collect();
    shown.chunks(4).map(|group| group.iter().collect::<String>()).collect::<Vec<_>>().join(" ")
}

pub(super) fn path(decisions: &[ChainedDecision]) -> Vec<Line> {
    decisions.iter().map(|decision| Line { sentence: sentence(decision), hash: short(&decision.hash) }).collect()
}

fn sentence(chained: &ChainedDecision) -> String {
    let decision = &chained.decision;
    let step = markdown(&decision.step);
    let seen = evidence(&decision.evidence);
    match decision.kind.as_str() {
        "gate" => match decision.verdict.as_str() {
            "held" => format!("**{step}** was carried out, since its condition held: {seen}."),
            "did not hold" => format!("**{step}** was not carried out, since its condition did not hold: {seen}."),
            _ => format!("**{step}** was not carried out: its condition is unknown, because something that it reads was refused: {seen}."),
        },
        "choice" => {
            let key = decision.rule.get("key").and_then(Value::as_str).unwrap_or("choice");
            format!("For **{step}** the plan's cases of `{}` gave {}: {seen}.", key.replace('`', ""), markdown(&used(&decision.verdict)))
        }
        "family" => {
            let control = decision.rule.get("control").and_then(Value::as_str).unwrap_or("");
            let alpha = decision.rule.get("alpha").and_then(Value::as_f64).map(|alpha| alpha.to_string()).unwrap_or_default();
            format!("The family **{step}** was judged together ({}, alpha {alpha}): {}.", markdown(control), members(decision))
        }
        "conclusion" => format!("{}{}", upper_first(&markdown(&decision.verdict)), if decision.verdict.ends_with('.') { "" } else { "." }),
        _ => match decision.rule.get("threshold").and_then(Value::as_f64) {
            Some(threshold) => format!("**{step}**: {} (threshold {threshold}): {seen}.", markdown(&decision.verdict)),
            None => format!("**{step}**: {} ({seen}).", markdown(&decision.verdict)),
        },
    }
}

/// Each member of a family in the family's order, with its verdict and numbers.
fn members(decision: &Decision) -> String {
    let listed = decision.rule.get("members").and_then(Value::as_array).map(Vec::as_slice).unwrap_or_default();
    let parts: Vec<String> = listed
        .iter()
        .filter_map(Value::as_str)
        .filter_map(|member| decision.evidence.get(member).and_then(Value::as_object).map(|object| one(member, object)))
        .collect();
    if parts.is_empty() { markdown(&decision.verdict) } else { parts.join("; ") }
}

/// The value chosen, without the wrapping of the resolved form.
fn used(verdict: &str) -> String {
    match serde_json::from_str::<Value>(verdict) {
        Ok(Value::Object(map)) => map.values().next().and_then(Value::as_str).map_or_else(|| verdict.to_owned(), str::to_owned),
        _ => verdict.to_owned(),
    }
}

fn upper_first(text: &str) -> String {
    let mut characters = text.chars();
    characters.next().map(|first| first.to_uppercase().chain(characters).collect()).unwrap_or_default()
}

/// Every verdict and number that was read.
fn evidence(map: &serde_json::Map<String, Value>) -> String {
    if map.values().all(|value| !value.is_object() && !value.is_array()) {
        return numbers_of(map).join(", ");
    }
    let parts: Vec<String> = map
        .iter()
        .flat_map(|(key, value)| match value {
            Value::Array(items) => items.iter().filter_map(|item| item.as_object().map(|object| one(key, object))).collect::<Vec<_>>(),
            Value::Object(object) => vec![one(key, object)],
            _ => Vec::new(),
        })
        .collect();
    parts.join("; ")
}

fn one(key: &str, object: &serde_json::Map<String, Value>) -> String {
    let name = markdown(object.get("ref").and_then(Value::as_str).unwrap_or(key));
    let verdict = object.get("verdict").and_then(Value::as_str).map(|verdict| format!(" is {}", markdown(verdict))).unwrap_or_default();
    let numbers = numbers_of(object);
    match (numbers.is_empty(), verdict.is_empty()) {
        (true, _) => format!("{name}{verdict}"),
        (false, false) => format!("{name}{verdict} ({})", numbers.join(", ")),
        (false, true) => format!("{name} has {}", numbers.join(", ")),
    }
}

fn numbers_of(object: &serde_json::Map<String, Value>) -> Vec<String> {
    let number = |name: &str| object.get(name).and_then(Value::as_f64);
    let mut found = Vec::new();
    for name in ["F", "W", "M", "greenhouse-geisser epsilon"] {
        if let Some(value) = number(name) {
            found.push(format!("{name} = {}", numbers::significant(value, 4)));
        }
    }
    if let Some(p) = number("p").and_then(Finite::new) {
        found.push(p_in_words(p, p.get() <= 1e-300));
    }
    if let Some(p) = number("p_adjusted").and_then(Finite::new) {
        found.push(format!("adjusted {}", p_in_words(p, false)));
    }
    if let Some(level) = number("level") {
        found.push(format!("level {level}"));
    }
    if object.get("state").and_then(Value::as_str) == Some("refused") {
        found.push("refused".to_owned());
    }
    found
}
