//! Corrections for departures from sphericity.

use super::reader::Reader;
use crate::plan::resolved::{Correction, CorrectionRule};
use crate::plan::syntax::tree::{Node, Value};

/// A correction, or one that follows epsilon.
pub(super) fn correction_rule(reader: &Reader<'_>, node: &Node) -> Option<CorrectionRule> {
    let words = [
        ("none", Correction::None),
        ("greenhouse-geisser", Correction::GreenhouseGeisser),
        ("huynh-feldt", Correction::HuynhFeldt),
        ("huynh-feldt 1976", Correction::HuynhFeldt1976),
        ("lower bound", Correction::LowerBound),
    ];
    let word = |node: &Node| reader.word(node, "`correction`", &words, &[]);
    let Value::Map(entries) = &node.value else { return word(node).map(CorrectionRule::Always) };
    let (mut below, mut otherwise, mut sound) = (Vec::new(), None, true);
    for entry in entries {
        if entry.key == "otherwise" {
            otherwise = word(&entry.node);
            sound &= otherwise.is_some();
            continue;
        }
        let bound = entry
            .key
            .strip_prefix("below ")
            .and_then(|bound| bound.trim().parse::<f64>().ok())
            .filter(|bound| *bound > 0.0 && *bound <= 1.0);
        match bound {
            None => {
                reader.error(
                    "unknown-key",
                    entry.key_span,
                    format!("`{}` is not a bound of epsilon", entry.key),
                    "here",
                    "write `below 0.75: greenhouse-geisser` and `otherwise: ...`; epsilon lies between 0 and 1",
                );
                sound = false;
            }
            Some(bound) => match word(&entry.node) {
                Some(correction) => below.push((bound, correction)),
                None => sound = false,
            },
        }
    }
    if sound && otherwise.is_none() {
        reader.error(
            "case-without-otherwise",
            reader.first_line(node.span),
            "the correction by epsilon has no `otherwise`",
            "`otherwise` is missing",
            "add `otherwise: ...`",
        );
    }
    otherwise.filter(|_| sound).map(|otherwise| CorrectionRule::ByEpsilon { below, otherwise })
}
