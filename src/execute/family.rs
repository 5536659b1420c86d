//! Judges tests: those in no family as they come, a family once its last member has been computed.

use crate::canon::number::Finite;
use crate::execute::machine::{Machine, Raw};
use crate::execute::multiplicity;
use crate::execute::steps::in_plan_words;
use crate::execute::verdict::Verdict;
use crate::plan::resolved::{Action, Control, DECISION_RULE};
use crate::results::FamilyResult;
use serde_json::{Map, Value, json};

/// Judges what the step number `step` completed.
pub(crate) fn judge_what_is_complete(machine: &mut Machine<'_, '_>, step: usize) {
    for slot in machine.program.steps[step].slots.clone() {
        if machine.program.slots[slot].family.is_none() && machine.verdicts[slot] == Verdict::Pending {
            judge_alone(machine, slot);
        }
    }
    for family in 0..machine.program.families.len() {
        if machine.families[family].is_none() {
            judge_family(machine, family);
        }
    }
}

fn judge_alone(machine: &mut Machine<'_, '_>, slot: usize) {
    let place = &machine.program.slots[slot];
    let Action::Test(test) = &machine.program.plan.steps[place.step].action else {
        // A screen that was not run: it looked at nothing.
        machine.verdicts[slot] = Verdict::NotTested;
        return;
    };
    let level = test.level;
    let verdict = verdict_of(machine.raw[slot], level, test.is_claim());
    give_verdict(machine, slot, verdict, None, None);
    if verdict == Verdict::NotTested {
        return;
    }
    let rule = json!({ "test": place.reference, "level": level, "rule": DECISION_RULE });
    let evidence = numbers(machine, slot);
    let text = machine.verdict_text(slot);
    let hash = machine.take_down(&place.reference, "verdict", rule, evidence, &text);
    remember(machine, place.step, hash);
}

/// Judges a family whose members are all computed. One that judges in turn is judged as far as it goes: a member that no
/// later p could change has its verdict at once.
fn judge_family(machine: &mut Machine<'_, '_>, family: usize) {
    let program = machine.program;
    let members = &program.families[family];
    let plan = &program.plan.families[family];
    let waiting = members.iter().filter(|slot| machine.raw[**slot] == Raw::Waiting).count();
    let complete = waiting == 0;
    if !complete && (!plan.control.judges_in_turn() || waiting == members.len()) {
        return;
    }
    let judged = multiplicity::judge(machine, family);
    for (place, (slot, adjusted)) in members.iter().zip(&judged.adjusted).enumerate() {
        if machine.raw[*slot] == Raw::Waiting {
            continue;
        }
        let settled = complete
            || matches!(machine.raw[*slot], Raw::NotTested | Raw::Refused)
            || adjusted.is_some_and(|adjusted| adjusted <= plan.alpha)
            || (plan.control == Control::FixedSequence && members[..place].iter().all(|before| machine.raw[*before] != Raw::Waiting));
        if !settled {
            continue;
        }
        let verdict = match (machine.raw[*slot], adjusted, &judged.refused) {
            (Raw::Tested { .. }, _, Some(_)) => Verdict::Refused,
            (Raw::Tested { direction, .. }, Some(adjusted), None) => {
                verdict_of(Raw::Tested { p: *adjusted, direction }, plan.alpha, is_claim(machine, *slot))
            }
            (raw, ..) => verdict_of(raw, plan.alpha, is_claim(machine, *slot)),
        };
        give_verdict(machine, *slot, verdict, *adjusted, judged.refused.as_deref());
    }
    if !complete {
        return;
    }
    multiplicity::put_simultaneous_intervals(machine, family, &judged);
    let mut evidence = Map::new();
    let mut verdicts = Vec::new();
    for slot in members {
        let mut seen = numbers(machine, *slot);
        seen.insert("verdict".to_owned(), json!(machine.verdict_text(*slot)));
        evidence.insert(program.slots[*slot].reference.clone(), Value::Object(seen));
        verdicts.push(format!("{}: {}", program.slots[*slot].reference, machine.verdict_text(*slot)));
    }
    let control = in_plan_words(&plan.control);
    let mut rule = json!({ "family": plan.id, "control": control, "alpha": plan.alpha, "members": plan.members, "rule": DECISION_RULE });
    for (key, value) in [("weights", json!(plan.weights)), ("transfer", json!(plan.transfer)), ("deals", json!(plan.deals))] {
        if !value.is_null() {
            rule[key] = value;
        }
    }
    let hash = machine.take_down(&plan.id, "family", rule, evidence, &verdicts.join("; "));
    for slot in members {
        remember(machine, program.slots[*slot].step, hash.clone());
    }
    machine.families[family] = Some(FamilyResult {
        id: plan.id.clone(),
        control,
        alpha: finite_level(plan.alpha),
        members: members.iter().map(|slot| program.slots[*slot].reference.clone()).collect(),
        updates: judged.updates,
        notes: judged.notes,
        decision: hash,
    });
}

/// Whether a slot tests a claim.
fn is_claim(machine: &Machine<'_, '_>, slot: usize) -> bool {
    let step = &machine.program.plan.steps[machine.program.slots[slot].step];
    matches!(&step.action, Action::Test(test) if test.is_claim())
}

fn finite_level(level: f64) -> Finite {
    // The compiler lets only levels between 0 and 1 pass.
    Finite::new(level).unwrap_or_default()
}

fn verdict_of(raw: Raw, level: f64, claim: bool) -> Verdict {
    match raw {
        Raw::Tested { p, .. } if claim => {
            if p <= level {
                Verdict::Shown
            } else {
                Verdict::NotShown
            }
        }
        Raw::Waiting | Raw::NotTested => Verdict::NotTested,
        Raw::Refused => Verdict::Refused,
        Raw::Tested { p, direction } if p <= level => Verdict::Significant(direction),
        Raw::Tested { .. } => Verdict::NotSignificant,
    }
}

fn give_verdict(machine: &mut Machine<'_, '_>, slot: usize, verdict: Verdict, adjusted: Option<f64>, refused: Option<&str>) {
    machine.verdicts[slot] = verdict;
    let text = machine.verdict_text(slot);
    let place = &machine.program.slots[slot];
    if let Some(entry) = machine.steps.get_mut(place.step).and_then(|step| step.results.get_mut(place.hypothesis)) {
        entry.verdict = Some(text);
        entry.p_adjusted = adjusted.and_then(Finite::new);
        if let Some(why) = refused.filter(|_| verdict == Verdict::Refused && entry.because.is_none()) {
            entry.because = Some(why.to_owned());
        }
    }
}

/// The numbers that a verdict rests on.
fn numbers(machine: &Machine<'_, '_>, slot: usize) -> Map<String, Value> {
    let mut numbers = Map::new();
    if let Some(entry) = machine.entry(slot) {
        if let Some(statistic) = &entry.statistic {
            numbers.insert(statistic.name.clone(), json!(statistic.value));
        }
        for (name, number) in [("p", entry.p), ("p_adjusted", entry.p_adjusted), ("level", entry.level)] {
            if let Some(number) = number {
                numbers.insert(name.to_owned(), json!(number));
            }
        }
        numbers.insert("state".to_owned(), json!(entry.state));
    }
    numbers
}

fn remember(machine: &mut Machine<'_, '_>, step: usize, hash: Option<String>) {
    if let (Some(hash), Some(step)) = (hash, machine.steps.get_mut(step)) {
        step.decision = Some(hash);
    }
}
