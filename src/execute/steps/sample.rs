//! Which subjects and occasions a step rests on, and their moments, computed once per set.

use crate::data::trial::Trial;
use crate::plan::resolved::{Action, Choice, CompleteOver, Covariate, ErrorTerm, Estimate, FactorPart, Hypothesis, ResolvedPlan, Step};
use crate::results::{ArmFlow, LeftOut};
use crate::stats::model::{Moments, Refusal};
use std::borrow::Cow;
use std::rc::Rc;

/// The subjects and occasions of a step.
#[derive(Debug)]
pub(crate) struct Sample<'a> {
    /// Number of the outcome.
    pub outcome: usize,
    /// Occasions used, in design order.
    pub occasions: Vec<usize>,
    /// Covariates of the model.
    pub covariates: Vec<Covariate>,
    /// Their values, subjects x covariates.
    pub covariate_values: Vec<f64>,
    /// Subjects left out because a covariate is missing, although their outcome is complete.
    pub without_covariate: usize,
    /// Values, subjects x all occasions; occasions that are not used are constant.
    pub values: Cow<'a, [f64]>,
    /// Subjects analysed; `None`: all.
    pub kept: Option<Vec<bool>>,
    /// Their moments over all occasions.
    pub moments: Result<Moments, Refusal>,
}

/// Every set of subjects and occasions that the steps have asked for.
pub(crate) struct Samples<'a> {
    pub plan: &'a ResolvedPlan,
    pub trial: &'a Trial,
    known: Vec<Rc<Sample<'a>>>,
}

/// Who was analysed.
pub(crate) struct Flow {
    pub used: usize,
    pub left_out: Vec<LeftOut>,
    pub arms: Vec<ArmFlow>,
}

impl<'a> Samples<'a> {
    pub fn new(plan: &'a ResolvedPlan, trial: &'a Trial) -> Self {
        Samples { plan, trial, known: Vec::new() }
    }

    fn outcome(&self, step: &Step) -> usize {
        self.plan.outcomes.iter().position(|outcome| outcome.name == step.outcome).unwrap_or(0)
    }

    /// Whether two steps rest on the same subjects and occasions.
    pub fn same(&self, one: &Step, other: &Step) -> bool {
        one.outcome == other.outcome && self.occasions(one) == self.occasions(other) && covariates(one) == covariates(other)
    }

    /// The sample of a step.
    pub fn of(&mut self, step: &Step) -> Rc<Sample<'a>> {
        self.over(self.outcome(step), self.occasions(step), covariates(step))
    }

    /// The sample of a step, where it has been asked for before.
    pub fn known_of(&self, step: &Step) -> Option<Rc<Sample<'a>>> {
        let (outcome, occasions) = (self.outcome(step), self.occasions(step));
        let is_it =
            |sample: &&Rc<Sample<'a>>| sample.outcome == outcome && sample.occasions == occasions && sample.covariates == covariates(step);
        self.known.iter().find(is_it).map(Rc::clone)
    }

    /// The sample of an outcome over all occasions.
    pub fn whole(&mut self, outcome: usize) -> Rc<Sample<'a>> {
        self.over(outcome, (0..self.plan.design.occasions()).collect(), &[])
    }

    fn over(&mut self, outcome: usize, occasions: Vec<usize>, covariates: &[Covariate]) -> Rc<Sample<'a>> {
        let is_it =
            |sample: &&Rc<Sample<'a>>| sample.outcome == outcome && sample.occasions == occasions && sample.covariates == covariates;
        if let Some(known) = self.known.iter().find(is_it) {
            return Rc::clone(known);
        }
        let mut kept = self.trial.complete(outcome, &occasions);
        let (covariate_values, without_covariate) = self.covariate_values(covariates, &mut kept);
        let all = self.trial.occasions;
        let values = &self.trial.values[outcome];
        let values: Cow<'a, [f64]> = if occasions.len() == all {
            Cow::Borrowed(values)
        } else {
            // An occasion that is not used has no weight anywhere; held constant it cannot touch a number.
            let mut used = vec![false; all];
            occasions.iter().for_each(|occasion| used[*occasion] = true);
            Cow::Owned(
                values.chunks_exact(all).flat_map(|row| row.iter().zip(&used).map(|(y, used)| if *used { *y } else { 0.0 })).collect(),
            )
        };
        let (cell, cells) = (&self.trial.cell, self.trial.cells);
        let moments = if covariates.is_empty() {
            Moments::new(&values, all, cell, cells, kept.as_deref())
        } else {
            Moments::with_covariates(&values, all, &covariate_values, cell, cells, kept.as_deref())
        };
        let covariates = covariates.to_vec();
        let sample = Rc::new(Sample { outcome, occasions, covariates, covariate_values, without_covariate, values, kept, moments });
        self.known.push(Rc::clone(&sample));
        sample
    }

    /// Values of the covariates, subjects x covariates; a subject with a missing one is taken out of `kept`, and counted
    /// where it was in it.
    fn covariate_values(&self, covariates: &[Covariate], kept: &mut Option<Vec<bool>>) -> (Vec<f64>, usize) {
        let subjects = self.trial.subjects.len();
        let columns = self.plan.covariate_columns();
        let design = &self.plan.design;
        let of = |covariate: &Covariate, subject: usize| match covariate {
            Covariate::Column(column) => {
                columns.iter().position(|other| other == column).map_or(f64::NAN, |place| self.trial.covariates[place][subject])
            }
            Covariate::Occasion { outcome, levels } => {
                let outcome = self.plan.outcomes.iter().position(|other| other.name == *outcome);
                let occasion = (0..design.occasions()).find(|occasion| design.occasion_levels(*occasion) == *levels);
                outcome
                    .zip(occasion)
                    .map_or(f64::NAN, |(outcome, occasion)| self.trial.values[outcome][subject * self.trial.occasions + occasion])
            }
        };
        let values: Vec<f64> = (0..subjects).flat_map(|subject| covariates.iter().map(move |covariate| of(covariate, subject))).collect();
        let mut without = 0;
        for (subject, row) in values.chunks_exact(covariates.len().max(1)).enumerate() {
            if row.iter().any(|value| value.is_nan()) {
                let kept = kept.get_or_insert_with(|| vec![true; subjects]);
                without += usize::from(kept[subject]);
                kept[subject] = false;
            }
        }
        (values, without)
    }

    fn occasions(&self, step: &Step) -> Vec<usize> {
        let all = self.plan.design.occasions();
        if self.plan.missing_data.over == CompleteOver::AllOccasions {
            return (0..all).collect();
        }
        let mut used = vec![false; all];
        let mut mark = |parts: &[FactorPart]| {
            let design = &self.plan.design;
            for (occasion, used) in used.iter_mut().enumerate() {
                let levels = design.occasion_levels(occasion);
                *used |= design.within.iter().zip(parts).zip(levels).all(|((factor, part), level)| part.weighs(factor, level));
            }
        };
        match &step.action {
            Action::Test(test) if !can_be_pooled(&test.error) => {
                test.hypotheses.iter().for_each(|hypothesis: &Hypothesis| mark(&hypothesis.within))
            }
            Action::Estimate(Estimate::Differences { error, hypotheses, .. }) if !can_be_pooled(error) => {
                hypotheses.iter().for_each(|hypothesis| mark(&hypothesis.within))
            }
            Action::Estimate(Estimate::Comparison(comparison)) => comparison.items.iter().for_each(|item| mark(&item.within)),
            Action::Estimate(Estimate::StandardizedChange { items, .. }) => items.iter().for_each(|item| {
                mark(&item.first);
                mark(&item.second);
            }),
            _ => used.fill(true),
        }
        (0..all).filter(|occasion| used[*occasion]).collect()
    }

    /// Flow of subjects over every outcome that a step uses.
    pub fn flow(&self) -> Flow {
        let outcomes: Vec<usize> =
            (0..self.plan.outcomes.len()).filter(|number| self.plan.steps.iter().any(|step| self.outcome(step) == *number)).collect();
        let design = &self.plan.design;
        let all: Vec<usize> = (0..design.occasions()).collect();
        let masks: Vec<Option<Vec<bool>>> = outcomes.iter().map(|outcome| self.trial.complete(*outcome, &all)).collect();
        let used = (0..self.trial.subjects.len())
            .filter(|subject| masks.iter().all(|mask| mask.as_ref().is_none_or(|kept| kept[*subject])))
            .count();
        let arms = (0..design.cells())
            .map(|cell| {
                let levels: Vec<String> = design.cell_levels(cell).into_iter().map(str::to_owned).collect();
                let in_cell = |subject: &usize| self.trial.cell[*subject] as usize == cell;
                ArmFlow {
                    planned: self
                        .plan
                        .data
                        .expected_subjects
                        .iter()
                        .find(|planned| planned.levels == levels)
                        .map(|planned| planned.subjects),
                    levels,
                    allocated: (0..self.trial.subjects.len()).filter(in_cell).count(),
                    analysed: (0..self.plan.outcomes.len())
                        .map(|outcome| {
                            let mask = outcomes.iter().position(|used| *used == outcome).and_then(|at| masks[at].as_ref());
                            (0..self.trial.subjects.len()).filter(in_cell).filter(|subject| mask.is_none_or(|kept| kept[*subject])).count()
                        })
                        .collect(),
                }
            })
            .collect();
        Flow { used, left_out: self.left_out(&outcomes, &masks), arms }
    }

    fn left_out(&self, outcomes: &[usize], masks: &[Option<Vec<bool>>]) -> Vec<LeftOut> {
        let incomplete = |subject: usize| masks.iter().any(|mask| mask.as_ref().is_some_and(|kept| !kept[subject]));
        (0..self.trial.subjects.len())
            .filter(|subject| incomplete(*subject))
            .map(|subject| {
                let missing: Vec<String> = outcomes.iter().filter_map(|outcome| self.missing_in_words(subject, *outcome)).collect();
                LeftOut { subject: self.trial.subjects.get(subject).to_owned(), why: missing.join("; ") }
            })
            .collect()
    }

    fn missing_in_words(&self, subject: usize, outcome: usize) -> Option<String> {
        let design = &self.plan.design;
        let row = &self.trial.values[outcome][subject * self.trial.occasions..][..self.trial.occasions];
        let missing: Vec<String> =
            (0..row.len()).filter(|occasion| row[*occasion].is_nan()).map(|occasion| design.occasion_levels(occasion).join("; ")).collect();
        let name = &self.plan.outcomes[outcome].name;
        match missing.as_slice() {
            [] => None,
            _ if design.within.is_empty() => Some(format!("no {name}")),
            _ if missing.len() == row.len() => Some(format!("no {name} at any occasion")),
            _ => Some(format!("no {name} at {}", missing.join(", "))),
        }
    }
}

fn can_be_pooled(error: &Choice<ErrorTerm>) -> bool {
    match error {
        Choice::Fixed(error) => *error == ErrorTerm::Pooled,
        Choice::Cases { cases, otherwise } => *otherwise == ErrorTerm::Pooled || cases.iter().any(|case| case.value == ErrorTerm::Pooled),
    }
}

fn covariates(step: &Step) -> &[Covariate] {
    match &step.action {
        Action::Test(test) => &test.covariates,
        _ => &[],
    }
}
