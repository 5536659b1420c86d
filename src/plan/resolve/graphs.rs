//! Weights and transfers of families that hand alpha on.

use super::reader::{Fields, Reader};
use super::steps::misplaced;
use crate::plan::resolved::Control;
use crate::plan::syntax::tree::Node;

/// Sums may pass one by what rounding of decimals leaves.
const SLACK: f64 = 1e-12;

/// Weights and transfers, in the order of the members.
pub(super) struct Shares {
    pub weights: Option<Vec<f64>>,
    pub transfer: Option<Vec<Vec<f64>>>,
}

/// Reads `weights` and `transfer` where the control has them.
pub(super) fn shares(reader: &Reader<'_>, fields: &Fields<'_>, control: Control, members: &[String]) -> Option<Shares> {
    if control != Control::Graph {
        misplaced(reader, fields, "transfer", "only `control: graph` says what is handed to whom");
    }
    if !matches!(control, Control::Graph | Control::Fallback) {
        misplaced(reader, fields, "weights", "only `control: graph` and `fallback` start with shares of alpha");
        return Some(Shares { weights: None, transfer: None });
    }
    let example = members.first().map_or("TEST", String::as_str);
    let node = reader.required(
        fields,
        "weights",
        "the family",
        &format!("give each member its share of alpha at the start, such as `weights: {{{example}: 1}}`; they sum to one at most"),
    );
    let weights = node.and_then(|node| row(reader, node, members, "`weights`", "spends more than alpha"));
    if control == Control::Fallback {
        return Some(Shares { weights: Some(weights?), transfer: None });
    }
    let node = reader.required(
        fields,
        "transfer",
        "the family",
        &format!("say what each member hands on when it is significant, such as `transfer: {{{example}: {{OTHER: 1}}}}`"),
    )?;
    let mut transfer = vec![vec![0.0; members.len()]; members.len()];
    let names: Vec<&str> = members.iter().map(String::as_str).collect();
    let mut sound = true;
    for entry in reader.entries(node, "`transfer`", "a map of members to maps of members")? {
        let Some(place) = reader.name(&entry.key, entry.key_span, "member of the family", &names) else {
            sound = false;
            continue;
        };
        let what = format!("what `{}` hands on", entry.key);
        let Some(found) = row(reader, &entry.node, members, &what, "hands on more than it has") else {
            sound = false;
            continue;
        };
        if found[place] != 0.0 {
            reader.error(
                "graph-hands-to-itself",
                entry.node.span,
                format!("`{}` hands alpha to itself", entry.key),
                "here",
                "a test that is significant is done; hand its alpha to others",
            );
            sound = false;
        }
        transfer[place] = found;
    }
    let weights = weights?;
    sound.then_some(Shares { weights: Some(weights), transfer: Some(transfer) })
}

/// One share per member, none below zero, their sum at most one.
fn row(reader: &Reader<'_>, node: &Node, members: &[String], what: &str, too_much: &str) -> Option<Vec<f64>> {
    let names: Vec<&str> = members.iter().map(String::as_str).collect();
    let mut found = vec![0.0; members.len()];
    let mut sound = true;
    for entry in reader.entries(node, what, "a map of members to shares")? {
        let place = reader.name(&entry.key, entry.key_span, "member of the family", &names);
        match place.zip(reader.number(&entry.node, "a share")) {
            Some((_, share)) if !(0.0..=1.0).contains(&share) => {
                reader.error(
                    "wrong-range",
                    entry.node.span,
                    format!("a share of {share} is not between 0 and 1"),
                    "here",
                    "write a share of one",
                );
                sound = false;
            }
            Some((place, share)) => found[place] = share,
            None => sound = false,
        }
    }
    let sum: f64 = found.iter().sum();
    if sound && sum > 1.0 + SLACK {
        reader.error(
            "alpha-overspent",
            node.span,
            format!("{what}: the shares sum to {}, which {too_much}", (sum * 1e12).round() / 1e12),
            "more than one",
            "let them sum to one at most",
        );
        sound = false;
    }
    sound.then_some(found)
}
