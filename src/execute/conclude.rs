//! The preregistered conclusion that applies.

use crate::canon::number::Finite;
use crate::execute::condition::{BoundCondition, Target};
use crate::execute::machine::Machine;
use crate::execute::verdict::{Truth, Verdict, Word};
use crate::plan::resolved::{Action, Conclusion, Quoted, Role, SayPart};
use crate::results::{ConclusionResult, Entry, VerdictOf, numbers};
use serde_json::{Map, json};

/// Tries the conclusions in order. Where refusals leave it open which is first, nothing is concluded.
pub(crate) fn conclude(machine: &mut Machine<'_, '_>) -> ConclusionResult {
    let program = machine.program;
    let mut evidence = Map::new();
    let mut found = Err("none of the plan's conclusions applies to what was found".to_owned());
    for (index, condition) in program.conclusions.iter().enumerate() {
        let truth = condition.as_ref().map_or(Truth::True, |condition| condition.holds(&machine.verdicts));
        if let Some(condition) = condition {
            evidence.extend(machine.evidence(condition));
        }
        match truth {
            Truth::False => continue,
            Truth::True => found = Ok(index),
            Truth::Unknown => {
                let refused = condition.as_ref().map(|condition| refused_in(machine, condition)).unwrap_or_default();
                found = Err(format!(
                    "nothing is concluded: conclusion {} of the plan is left open, because {} refused",
                    index + 1,
                    match refused.as_slice() {
                        [one] => format!("{one} was"),
                        several => format!("{} were", several.join(" and ")),
                    }
                ));
            }
        }
        break;
    }
    let (index, text) = match found {
        Ok(index) => (Some(index), said(machine, &program.plan.conclusions[index])),
        Err(reason) => (None, reason),
    };
    let not_named = not_named(machine, index.and_then(|index| program.conclusions[index].as_ref()));
    let rule = json!({ "conclusions": program.plan.conclusions });
    let verdict = index.map_or_else(|| text.clone(), |index| format!("conclusion {}: {text}", index + 1));
    let decision = machine.take_down("conclusion", "conclusion", rule, evidence, &verdict).unwrap_or_default();
    ConclusionResult { index, text, not_named, decision }
}

fn refused_in(machine: &Machine<'_, '_>, condition: &BoundCondition) -> Vec<String> {
    let mut refused = Vec::new();
    condition.each_target(&mut |_, target| {
        for slot in target.slots() {
            let reference = &machine.program.slots[slot].reference;
            if machine.verdicts[slot] == Verdict::Refused && !refused.contains(reference) {
                refused.push(reference.clone());
            }
        }
    });
    refused
}

/// Confirmatory verdicts, significant or refused, that the condition does not name one by one.
fn not_named(machine: &Machine<'_, '_>, condition: Option<&BoundCondition>) -> Vec<VerdictOf> {
    let mut named = vec![false; machine.verdicts.len()];
    if let Some(condition) = condition {
        mark_named(condition, &mut named);
    }
    (0..machine.verdicts.len())
        .filter(|slot| {
            let step = &machine.program.plan.steps[machine.program.slots[*slot].step];
            let speaks = machine.verdicts[*slot].is_significant() || machine.verdicts[*slot] == Verdict::Refused;
            !named[*slot] && speaks && step.role == Role::Confirmatory && matches!(step.action, Action::Test(_))
        })
        .map(|slot| VerdictOf { reference: machine.program.slots[slot].reference.clone(), verdict: machine.verdict_text(slot) })
        .collect()
}

fn mark_named(condition: &BoundCondition, named: &mut [bool]) {
    match condition {
        BoundCondition::All(parts) | BoundCondition::Either(parts) => parts.iter().for_each(|part| mark_named(part, named)),
        BoundCondition::Not(inner) => mark_named(inner, named),
        BoundCondition::Is { target: Target::One(slot), .. } => named[*slot] = true,
        // `any significant` does not say which.
        BoundCondition::Is { target: Target::Several(slots), words, .. } => {
            if words.iter().all(|word| *word == Word::AllSignificant) {
                named[slots.clone()].fill(true);
            }
        }
    }
}

fn said(machine: &Machine<'_, '_>, conclusion: &Conclusion) -> String {
    conclusion
        .say
        .iter()
        .map(|part| match part {
            SayPart::Text(text) => text.clone(),
            SayPart::Quote { reference, what } => quote(machine, reference, *what),
        })
        .collect::<String>()
        .trim()
        .to_owned()
}

/// A quoted number, or in brackets why there is none.
fn quote(machine: &Machine<'_, '_>, reference: &str, what: Quoted) -> String {
    let entries = || machine.steps.iter().flat_map(|step| &step.results);
    let by_step = || machine.steps.iter().find(|step| step.id == reference).and_then(|step| step.results.first());
    let Some(entry) = entries().find(|entry| entry.reference == reference).or_else(by_step) else {
        return format!("({reference}: not available)");
    };
    let absent = || match &entry.because {
        Some(because) => format!("(not available: {because})"),
        None => "(not available)".to_owned(),
    };
    quoted(entry, what).unwrap_or_else(absent)
}

fn quoted(entry: &Entry, what: Quoted) -> Option<String> {
    let error = entry.standard_error_of().map(Finite::get);
    Some(match what {
        Quoted::P => numbers::p_value(entry.p?.get(), entry.p_bound),
        Quoted::AdjustedP => numbers::p_value(entry.p_adjusted?.get(), false),
        Quoted::Estimate => numbers::estimate(entry.estimate_of()?.get(), error),
        Quoted::Interval => {
            let [lower, upper] = entry.interval_of()?;
            format!("{} to {}", numbers::estimate(lower.get(), error), numbers::estimate(upper.get(), error))
        }
        Quoted::StandardError => numbers::estimate(error?, error),
        Quoted::Statistic => numbers::significant(entry.statistic.as_ref()?.value.get(), 4),
        Quoted::Df => {
            let df = &entry.statistic.as_ref()?.df;
            df.iter().map(|df| numbers::degrees_of_freedom(df.get())).collect::<Vec<_>>().join(", ")
        }
        Quoted::N => entry.n?.to_string(),
    })
}
