//! Walks a program over bound data, in plan order, and shows every decision to a witness.

use crate::canon::number::Finite;
use crate::data::trial::Trial;
use crate::execute::condition::BoundCondition;
use crate::execute::lower::{LowerError, Program};
use crate::execute::steps::{self, Sample, Samples};
use crate::execute::verdict::{Truth, Verdict};
use crate::execute::{conclude, family, words};
use crate::plan::resolved::{Action, Choice, Step};
use crate::plan::seal::SealedPlan;
use crate::results::decision::{Decision, Witness};
use crate::results::{ArmFlow, CellMoments, ConclusionResult, Description, Entry, FamilyResult, LeftOut, State, StepResult};
use serde_json::{Map, Value, json};
use std::collections::BTreeMap;
use std::marker::PhantomData;

/// Marks a program bound to the data of a sealed study: only such a one yields decisions that can be recorded.
#[derive(Debug, Clone, Copy)]
pub struct Sealed;

/// A program bound to data.
#[derive(Debug)]
pub struct Bound<'a, Kind> {
    program: Program<'a>,
    trial: &'a Trial,
    kind: PhantomData<Kind>,
}

/// What executing a plan yields, before it is stamped with the hashes of plan and data.
#[derive(Debug, Clone, PartialEq)]
pub struct Execution {
    /// Every cell of every outcome, described.
    pub descriptions: Vec<Description>,
    /// Steps in plan order.
    pub steps: Vec<StepResult>,
    /// Families in plan order.
    pub families: Vec<FamilyResult>,
    /// The conclusion.
    pub conclusion: ConclusionResult,
    /// Subjects analysed for every outcome.
    pub used: usize,
    /// Subjects left out, and why.
    pub left_out: Vec<LeftOut>,
    /// Flow of each between cell.
    pub arms: Vec<ArmFlow>,
}

impl<'a> Bound<'a, Sealed> {
    /// Binds a sealed plan to its data.
    ///
    /// # Errors
    /// A reference that the resolved plan does not define; a plan that this program compiled has none.
    pub fn new(plan: &'a SealedPlan, trial: &'a Trial) -> Result<Self, LowerError> {
        Ok(Bound { program: Program::lower(plan.resolved())?, trial, kind: PhantomData })
    }

    /// Executes the plan.
    pub fn run(&self, witness: &mut dyn Witness) -> Execution {
        let mut machine = Machine::new(&self.program, self.trial, witness);
        for number in 0..self.program.steps.len() {
            machine.step(number);
        }
        machine.finish()
    }
}

/// Raw state of a slot, before its family is judged.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Raw {
    Waiting,
    NotTested,
    Refused,
    Tested { p: f64, direction: crate::execute::verdict::Direction },
}

pub(crate) struct Machine<'a, 'w> {
    pub program: &'a Program<'a>,
    pub samples: Samples<'a>,
    witness: &'w mut dyn Witness,
    pub raw: Vec<Raw>,
    pub verdicts: Vec<Verdict>,
    pub steps: Vec<StepResult>,
    pub families: Vec<Option<FamilyResult>>,
}

impl<'a, 'w> Machine<'a, 'w> {
    fn new(program: &'a Program<'a>, trial: &'a Trial, witness: &'w mut dyn Witness) -> Self {
        Machine {
            program,
            samples: Samples::new(program.plan, trial),
            witness,
            raw: vec![Raw::Waiting; program.slots.len()],
            verdicts: vec![Verdict::Pending; program.slots.len()],
            steps: Vec::with_capacity(program.steps.len()),
            families: vec![None; program.families.len()],
        }
    }

    pub fn take_down(&mut self, step: &str, kind: &str, rule: Value, evidence: Map<String, Value>, verdict: &str) -> Option<String> {
        self.witness.take_down(Decision { step: step.to_owned(), kind: kind.to_owned(), rule, evidence, verdict: verdict.to_owned() })
    }

    fn step(&mut self, number: usize) {
        let plan_step = &self.program.plan.steps[number];
        self.witness.begins(&plan_step.id);
        let mut result = steps::blank(plan_step);
        if let Some(reason) = self.closed_gate(number, &mut result) {
            result.state = State::NotRun;
            result.because = Some(reason.clone());
            result.results = steps::not_run_entries(&plan_step.action, &reason);
            for slot in self.program.steps[number].slots.clone() {
                self.raw[slot] = Raw::NotTested;
            }
            self.steps.push(result);
        } else {
            let sample = self.samples.of(plan_step);
            self.attach_moments(plan_step, &sample, &mut result);
            self.steps.push(result);
            steps::run(self, number, &sample);
            let result = &mut self.steps[number];
            if !result.results.is_empty() && result.results.iter().all(|entry| entry.state == State::Refused) {
                result.state = State::Refused;
                result.because = result.results[0].because.clone();
            }
        }
        family::judge_what_is_complete(self, number);
        self.settle_step_verdicts();
    }

    /// Why the step is not run, where its `when` does not hold.
    fn closed_gate(&mut self, number: usize, result: &mut StepResult) -> Option<String> {
        let when = self.program.steps[number].when.as_ref()?;
        let truth = when.holds(&self.verdicts);
        let evidence = self.evidence(when);
        let rule = json!({ "when": self.program.plan.steps[number].when });
        let verdict = match truth {
            Truth::True => "held",
            Truth::False => "did not hold",
            Truth::Unknown => "unknown",
        };
        result.decision = self.take_down(&result.id, "gate", rule, evidence, verdict);
        match truth {
            Truth::True => None,
            Truth::False => Some(format!("its condition did not hold: {}", self.in_words(when))),
            Truth::Unknown => Some(format!("its condition is unknown, because something it reads was refused: {}", self.in_words(when))),
        }
    }

    /// What a condition reads: per reference the verdict, and p and level where it is one test.
    pub fn evidence(&self, condition: &BoundCondition) -> Map<String, Value> {
        let mut evidence = Map::new();
        condition.each_target(&mut |reference, target| {
            let seen: Vec<Value> = target.slots().map(|slot| self.evidence_of_slot(slot)).collect();
            let value = if seen.len() == 1 { seen.into_iter().next().unwrap_or(Value::Null) } else { Value::Array(seen) };
            evidence.insert(reference.to_owned(), value);
        });
        evidence
    }

    fn evidence_of_slot(&self, slot: usize) -> Value {
        let place = &self.program.slots[slot];
        let mut value = Map::new();
        value.insert("ref".into(), json!(place.reference));
        value.insert("verdict".into(), json!(self.verdict_text(slot)));
        if let Some(entry) = self.entry(slot) {
            for (name, number) in [("p", entry.p), ("p_adjusted", entry.p_adjusted), ("level", entry.level)] {
                if let Some(number) = number {
                    value.insert(name.into(), json!(number));
                }
            }
        }
        Value::Object(value)
    }

    /// The entry that a slot's verdict belongs to, where it is one (a screen over several occasions has many).
    pub fn entry(&self, slot: usize) -> Option<&Entry> {
        let place = &self.program.slots[slot];
        self.steps.get(place.step)?.results.get(place.hypothesis)
    }

    /// Whether a slot's test is one-sided and counts estimates below zero.
    pub fn counts_below(&self, slot: usize) -> bool {
        let place = &self.program.slots[slot];
        let Action::Test(test) = &self.program.plan.steps[place.step].action else { return false };
        steps::one_side(&test.sides, &test.hypotheses[place.hypothesis]) == Some(crate::execute::verdict::Direction::Below)
    }

    /// The verdict of a slot as the plan words it.
    pub fn verdict_text(&self, slot: usize) -> String {
        let place = &self.program.slots[slot];
        let favours = match &self.program.plan.steps[place.step].action {
            Action::Test(test) => test.hypotheses[place.hypothesis].favours.as_ref(),
            _ => None,
        };
        words::verdict(self.verdicts[slot], favours)
    }

    /// The verdict of a step of several tests.
    fn step_verdict(&self, slots: std::ops::Range<usize>) -> &'static str {
        let step = &self.program.plan.steps[self.program.slots[slots.start].step];
        words::step_verdict(&self.verdicts[slots], claims(step))
    }

    /// What was found about everything that a condition names, for sentences.
    fn in_words(&self, condition: &BoundCondition) -> String {
        let mut parts = Vec::new();
        condition.each_target(&mut |reference, target| {
            let slots = target.slots();
            let verdict = if slots.len() == 1 { self.verdict_text(slots.start) } else { self.step_verdict(slots).to_owned() };
            parts.push(format!("{reference} is {verdict}"));
        });
        parts.join("; ")
    }

    /// Takes a choice by cases: the first case that holds, else `otherwise`. The choice is taken down as a decision.
    pub fn choose<T: Clone + serde::Serialize>(&mut self, number: usize, key: &'static str, choice: &Choice<T>) -> T {
        let (cases, otherwise) = match choice {
            Choice::Fixed(value) => return value.clone(),
            Choice::Cases { cases, otherwise } => (cases, otherwise),
        };
        let program = self.program;
        let conditions = program.steps[number].cases.iter().find(|(name, _)| *name == key).map_or(&[][..], |(_, bound)| bound);
        let mut evidence = Map::new();
        let mut taken = otherwise;
        for (case, condition) in cases.iter().zip(conditions) {
            evidence.extend(self.evidence(condition));
            if condition.holds(&self.verdicts) == Truth::True {
                taken = &case.value;
                break;
            }
        }
        let verdict = serde_json::to_value(taken)
            .map_or_else(|_| String::new(), |value| value.as_str().map_or_else(|| value.to_string(), str::to_owned));
        let id = program.plan.steps[number].id.clone();
        let hash = self.take_down(&id, "choice", json!({ "key": key, "cases": choice }), evidence, &verdict);
        self.steps[number].decision = hash.or_else(|| self.steps[number].decision.take());
        taken.clone()
    }

    fn attach_moments(&self, step: &Step, sample: &Sample<'_>, result: &mut StepResult) {
        if !matches!(step.action, Action::Test(_) | Action::Screen(_) | Action::Estimate(_)) {
            return;
        }
        let earlier =
            self.steps.iter().zip(&self.program.plan.steps).find(|(done, plan_step)| {
                !done.moments.is_empty() && plan_step.outcome == step.outcome && self.samples.same(plan_step, step)
            });
        match earlier {
            Some((done, _)) => result.moments_of = Some(done.id.clone()),
            None => result.moments = moments(self.program, sample),
        }
    }

    /// Sets the verdict of each step from its slots.
    fn settle_step_verdicts(&mut self) {
        for (number, step) in self.steps.iter_mut().enumerate() {
            let slots = self.program.steps[number].slots.clone();
            if slots.is_empty() || self.verdicts[slots.clone()].contains(&Verdict::Pending) {
                continue;
            }
            step.verdict = Some(match slots.len() {
                1 => match &self.program.plan.steps[number].action {
                    Action::Test(test) => words::verdict(self.verdicts[slots.start], test.hypotheses[0].favours.as_ref()),
                    _ => words::verdict(self.verdicts[slots.start], None),
                },
                _ => words::step_verdict(&self.verdicts[slots], claims(&self.program.plan.steps[number])).to_owned(),
            });
        }
    }

    fn finish(mut self) -> Execution {
        let conclusion = conclude::conclude(&mut self);
        let flow = self.samples.flow();
        Execution {
            descriptions: steps::describe(&mut self.samples),
            steps: self.steps,
            families: self.families.into_iter().flatten().collect(),
            conclusion,
            used: flow.used,
            left_out: flow.left_out,
            arms: flow.arms,
        }
    }
}

/// Whether a step tests claims.
fn claims(step: &Step) -> bool {
    matches!(&step.action, Action::Test(test) if test.is_claim())
}

fn moments(program: &Program<'_>, sample: &Sample<'_>) -> Vec<CellMoments> {
    let design = &program.plan.design;
    let Ok(moments) = &sample.moments else { return Vec::new() };
    let names: Vec<String> = sample.occasions.iter().map(|occasion| design.occasion_levels(*occasion).join("; ")).collect();
    // Covariates stand after the occasions.
    let further = design.occasions()..design.occasions() + sample.covariates.len();
    let used = || sample.occasions.iter().copied().chain(further.clone());
    (0..design.cells())
        .map(|cell| {
            let n = moments.cells()[cell].subjects;
            let row = |one: usize| used().filter_map(|other| moments.covariance(cell, one, other).and_then(Finite::new)).collect();
            CellMoments {
                levels: design.cell_levels(cell).into_iter().map(str::to_owned).collect(),
                n,
                occasions: names.clone(),
                covariates: sample.covariates.iter().map(words::covariate).collect(),
                means: if n == 0 { Vec::new() } else { used().filter_map(|occasion| Finite::new(moments.mean(cell, occasion))).collect() },
                covariance: if n < 2 { Vec::new() } else { used().map(row).collect() },
            }
        })
        .collect()
}

/// Settings of a step in words, for the record.
pub(crate) fn setting(settings: &mut BTreeMap<String, String>, key: &str, value: impl Into<String>) {
    settings.insert(key.to_owned(), value.into());
}
