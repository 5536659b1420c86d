//! Lowering: references become slots, families lists of slots, conditions bound ones.
//!
//! A plan that was resolved always lowers; [`LowerError`] is what a resolved form that no compiler made (an edited
//! `resolved.json`) meets.

use crate::execute::condition::{BoundCondition, Target};
use crate::execute::verdict::Word;
use crate::plan::resolved::{Action, Condition, Favours, ResolvedPlan};
use std::collections::HashMap;
use std::fmt;

/// A reference or word that the plan does not define.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct LowerError {
    /// The reference or word.
    pub name: String,
    /// Where it stands.
    pub place: String,
}

impl fmt::Display for LowerError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "the resolved plan names `{}` in {}, which it does not define", self.name, self.place)
    }
}

impl std::error::Error for LowerError {}

/// Where the verdicts of a step stand, and when it runs.
#[derive(Debug, Clone)]
pub struct LoweredStep {
    /// Its slots: one for a screen, one per hypothesis of a test, none for an estimate.
    pub slots: std::ops::Range<usize>,
    /// Its `when`.
    pub when: Option<BoundCondition>,
    /// Its choices by cases: key, conditions in order.
    pub cases: Vec<(&'static str, Vec<BoundCondition>)>,
}

/// A test's place in the plan.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Slot {
    /// Number of its step.
    pub step: usize,
    /// Number of its hypothesis in the step.
    pub hypothesis: usize,
    /// How it is referred to.
    pub reference: String,
    /// The family that judges it.
    pub family: Option<usize>,
}

/// A plan lowered: what the machine walks.
#[derive(Debug, Clone)]
pub struct Program<'p> {
    /// The plan.
    pub plan: &'p ResolvedPlan,
    /// One per step of the plan.
    pub steps: Vec<LoweredStep>,
    /// One per test hypothesis or screen.
    pub slots: Vec<Slot>,
    /// Per family: its members' slots, in order.
    pub families: Vec<Vec<usize>>,
    /// Per conclusion: its condition; `None` for `otherwise`.
    pub conclusions: Vec<Option<BoundCondition>>,
}

struct Names<'p> {
    targets: HashMap<&'p str, Target>,
    favours: HashMap<usize, &'p Favours>,
}

impl<'p> Program<'p> {
    /// Lowers a resolved plan.
    ///
    /// # Errors
    /// A reference or verdict that the plan does not define.
    pub fn lower(plan: &'p ResolvedPlan) -> Result<Self, LowerError> {
        let mut names = Names { targets: HashMap::new(), favours: HashMap::new() };
        let (mut slots, mut ranges) = (Vec::new(), Vec::new());
        for (number, step) in plan.steps.iter().enumerate() {
            let start = slots.len();
            let slot = |hypothesis, reference: &str| Slot { step: number, hypothesis, reference: reference.to_owned(), family: None };
            match &step.action {
                Action::Screen(_) => slots.push(slot(0, &step.id)),
                Action::Test(test) => {
                    for (index, hypothesis) in test.hypotheses.iter().enumerate() {
                        names.targets.insert(&hypothesis.reference, Target::One(slots.len()));
                        if let Some(favours) = &hypothesis.favours {
                            names.favours.insert(slots.len(), favours);
                        }
                        slots.push(slot(index, &hypothesis.reference));
                    }
                }
                Action::Estimate(_) => {}
            }
            let range = start..slots.len();
            match range.len() {
                0 => {}
                1 => drop(names.targets.insert(&step.id, Target::One(start))),
                _ => drop(names.targets.insert(&step.id, Target::Several(range.clone()))),
            }
            ranges.push(range);
        }
        let families = plan
            .families
            .iter()
            .map(|family| {
                let members: Result<Vec<_>, _> =
                    family.members.iter().map(|member| names.target(member, &family.id).map(Target::slots)).collect();
                Ok(members?.into_iter().flatten().collect::<Vec<_>>())
            })
            .collect::<Result<Vec<_>, _>>()?;
        for (number, members) in families.iter().enumerate() {
            for member in members {
                slots[*member].family = Some(number);
            }
        }
        let steps = plan
            .steps
            .iter()
            .zip(ranges)
            .map(|(step, slots)| {
                Ok(LoweredStep {
                    slots,
                    when: step.when.as_ref().map(|when| names.bind(when, &step.id)).transpose()?,
                    cases: crate::execute::steps::cases(&step.action)
                        .into_iter()
                        .map(|(key, conditions)| {
                            let bound: Result<Vec<_>, _> = conditions.into_iter().map(|when| names.bind(when, &step.id)).collect();
                            Ok((key, bound?))
                        })
                        .collect::<Result<_, _>>()?,
                })
            })
            .collect::<Result<_, _>>()?;
        let conclusions = plan
            .conclusions
            .iter()
            .map(|conclusion| conclusion.when.as_ref().map(|when| names.bind(when, "a conclusion")).transpose())
            .collect::<Result<_, _>>()?;
        Ok(Program { plan, steps, slots, families, conclusions })
    }
}

impl<'p> Names<'p> {
    fn target(&self, reference: &str, place: &str) -> Result<&Target, LowerError> {
        self.targets.get(reference).ok_or_else(|| LowerError { name: reference.to_owned(), place: place.to_owned() })
    }

    fn bind(&self, condition: &Condition, place: &str) -> Result<BoundCondition, LowerError> {
        let all = |parts: &[Condition]| parts.iter().map(|part| self.bind(part, place)).collect::<Result<Vec<_>, _>>();
        Ok(match condition {
            Condition::All(parts) => BoundCondition::All(all(parts)?),
            Condition::Either(parts) => BoundCondition::Either(all(parts)?),
            Condition::Not(inner) => BoundCondition::Not(Box::new(self.bind(inner, place)?)),
            Condition::Is { reference, verdicts } => {
                let target = self.target(reference, place)?.clone();
                let words = verdicts
                    .iter()
                    .map(|word| self.word(word, &target).ok_or_else(|| LowerError { name: word.clone(), place: place.to_owned() }))
                    .collect::<Result<_, _>>()?;
                BoundCondition::Is { reference: reference.clone(), target, words }
            }
        })
    }

    fn word(&self, word: &str, target: &Target) -> Option<Word> {
        Some(match word {
            "significant" | "shown" => Word::Significant,
            "not significant" | "not shown" => Word::NotSignificant,
            "not tested" => Word::NotTested,
            "refused" => Word::Refused,
            "above zero" => Word::Above,
            "below zero" => Word::Below,
            "departure shown" => Word::DepartureShown,
            "no departure shown" => Word::NoDepartureShown,
            "any significant" | "any shown" => Word::AnySignificant,
            "all significant" | "all shown" => Word::AllSignificant,
            "none significant" | "none shown" => Word::NoneSignificant,
            other => {
                let level = other.strip_prefix("favours ")?;
                let favours = self.favours.get(&target.slots().start)?;
                match level {
                    _ if level == favours.above => Word::Above,
                    _ if level == favours.below => Word::Below,
                    _ => return None,
                }
            }
        })
    }
}
