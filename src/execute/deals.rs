//! Arms dealt again as the plan says they were dealt: for randomisation tests and for families judged by deals.

use crate::canon::hash::Hasher;
use crate::data::trial::Trial;
use crate::execute::machine::Machine;
use crate::execute::multiplicity::Judged;
use crate::execute::steps::{Sample, lowered, one_side, term};
use crate::execute::verdict::Direction;
use crate::execute::words;
use crate::plan::resolved::{Action, Design, ErrorTerm};
use crate::stats::hypothesis::Hypothesis;
use crate::stats::model;
use crate::stats::resample::{AdjustedData, Deals, DealtData, Question, Refusal, Scale, Side, westfall_young};
use std::num::NonZero;

/// Who was dealt what.
pub(crate) struct Dealing<'a> {
    values: &'a [f64],
    occasions: usize,
    kept: Option<&'a [bool]>,
    label: Vec<u32>,
    rest: Vec<u32>,
    cell_of: Vec<Vec<u32>>,
    strata: Option<&'a [u32]>,
    eligible: Vec<bool>,
}

impl<'a> Dealing<'a> {
    /// Deals among the subjects of the cells that some hypothesis weighs (`kept`, one flag for each cell).
    pub fn new(design: &Design, trial: &'a Trial, sample: &'a Sample<'_>, kept: &[&[bool]]) -> Result<Dealing<'a>, String> {
        let Some(randomised) = &design.randomised else { return Err("the plan does not say what was randomised".to_owned()) };
        let named = |factor: usize| randomised.factors.contains(&design.between[factor].name);
        // Of a cell: its combination of the randomised factors, and of the others.
        let split = |cell: usize| {
            let (mut left, mut label, mut rest, mut labels, mut rests) = (cell, 0, 0, 1, 1);
            for factor in (0..design.between.len()).rev() {
                let levels = design.between[factor].levels.len();
                let (place, step) = if named(factor) { (&mut label, &mut labels) } else { (&mut rest, &mut rests) };
                *place += left % levels * *step;
                *step *= levels;
                left /= levels;
            }
            (label, rest, labels, rests)
        };
        let (_, _, labels, rests) = split(0);
        let mut cell_of = vec![vec![0_u32; rests]; labels];
        for cell in 0..design.cells() {
            let (label, rest, ..) = split(cell);
            cell_of[label][rest] = cell as u32;
        }
        let weighed: Vec<bool> = (0..design.cells()).map(|cell| kept.iter().any(|kept| kept[cell])).collect();
        let of = |subject: usize| split(trial.cell[subject] as usize);
        Ok(Dealing {
            values: &sample.values,
            occasions: trial.occasions,
            kept: sample.kept.as_deref(),
            label: (0..trial.cell.len()).map(|subject| of(subject).0 as u32).collect(),
            rest: (0..trial.cell.len()).map(|subject| of(subject).1 as u32).collect(),
            cell_of,
            strata: trial.strata.as_deref(),
            eligible: trial.cell.iter().map(|cell| weighed[*cell as usize]).collect(),
        })
    }

    /// For the engine.
    pub fn data(&self) -> DealtData<'_> {
        DealtData {
            values: self.values,
            occasions: self.occasions,
            kept: self.kept,
            label: &self.label,
            rest: &self.rest,
            cell_of: &self.cell_of,
            strata: self.strata,
            eligible: Some(&self.eligible),
        }
    }

    /// For the test with covariates.
    pub fn adjusted(&'a self, trial: &'a Trial, sample: &'a Sample<'_>) -> AdjustedData<'a> {
        AdjustedData {
            values: self.values,
            occasions: self.occasions,
            covariates: &sample.covariate_values,
            cell: &trial.cell,
            cells: trial.cells,
            kept: self.kept,
            strata: self.strata,
            eligible: &self.eligible,
        }
    }

    /// A refusal in the plan's words.
    pub fn in_words(&self, refusal: &Refusal, of_model: &dyn Fn(model::Refusal) -> String) -> String {
        match refusal {
            Refusal::Observed(refusal) => of_model(refusal.clone()),
            other => other.to_string(),
        }
    }
}

/// How many threads may share the deals; they move no digit.
pub(crate) fn threads() -> NonZero<usize> {
    std::thread::available_parallelism().unwrap_or(NonZero::<usize>::MIN)
}

/// What random numbers hang on: the hypotheses, the method and how often, and nothing else.
pub(crate) fn key(method: &str, times: u64, hypotheses: &[&Hypothesis], errors: &[ErrorTerm]) -> [u8; 32] {
    let mut hasher = Hasher::new();
    hasher.update(b"aforesaid random numbers 1\n");
    hasher.update(method.as_bytes());
    hasher.update(&[0]);
    hasher.update(&times.to_be_bytes());
    for (hypothesis, error) in hypotheses.iter().zip(errors) {
        hasher.update(&[match error {
            ErrorTerm::Own => 1,
            ErrorTerm::OwnOccasions => 2,
            ErrorTerm::Pooled => 3,
        }]);
        for matrix in [hypothesis.between(), hypothesis.within()] {
            hasher.update(&(matrix.rows() as u64).to_be_bytes());
            hasher.update(&(matrix.columns() as u64).to_be_bytes());
            for row in matrix.to_rows() {
                row.iter().for_each(|weight| hasher.update(&(weight + 0.0).to_bits().to_be_bytes()));
            }
        }
    }
    hasher.finish().0
}

/// Judges a family by the largest statistic over the same deals (Westfall & Young 1993), step down.
pub(crate) fn judge(machine: &Machine<'_, '_>, family: usize) -> Result<Judged, String> {
    let program = machine.program;
    let plan = &program.plan.families[family];
    let design = &program.plan.design;
    let asked = plan.deals.ok_or("the plan does not say how often arms are dealt again")?;
    let mut sample = None;
    let (mut hypotheses, mut errors, mut sides) = (Vec::new(), Vec::new(), Vec::new());
    for slot in &program.families[family] {
        let place = &program.slots[*slot];
        let step = &program.plan.steps[place.step];
        let Action::Test(test) = &step.action else { continue };
        let own = machine.samples.known_of(step).ok_or("the data of a member are not at hand")?;
        if sample.as_ref().is_some_and(|known: &std::rc::Rc<Sample<'_>>| known.occasions != own.occasions) {
            return Err("its members rest on different subjects, as they use different occasions: let `missing data` be complete over all occasions".to_owned());
        }
        let moments = own.moments.as_ref().map_err(|refusal| words::refusal(refusal, design))?;
        let hypothesis = &test.hypotheses[place.hypothesis];
        hypotheses.push(lowered(design, hypothesis, test.weights, moments).map_err(|refusal| words::refusal(&refusal, design))?);
        errors.push(match machine.steps[place.step].settings.get("error").map(String::as_str) {
            Some("own") => ErrorTerm::Own,
            Some("own occasions") => ErrorTerm::OwnOccasions,
            _ => ErrorTerm::Pooled,
        });
        sides.push(match one_side(&test.sides, hypothesis) {
            None => Side::Both,
            Some(Direction::Below) => Side::Lower,
            Some(_) => Side::Upper,
        });
        sample = Some(own);
    }
    let sample = sample.ok_or("the family has no test")?;
    let kept: Vec<&[bool]> = hypotheses.iter().map(Hypothesis::kept).collect();
    let dealing = Dealing::new(design, machine.samples.trial, &sample, &kept)?;
    let questions: Vec<Question<'_>> = hypotheses
        .iter()
        .zip(errors.iter().zip(&sides))
        .map(|(hypothesis, (error, side))| Question { hypothesis, error: term(*error), side: *side })
        .collect();
    let all: Vec<&Hypothesis> = hypotheses.iter().collect();
    let deals = Deals { asked, key: key("westfall-young", asked, &all, &errors), threads: threads() };
    let in_words = |refusal: model::Refusal| words::refusal(&refusal, design);
    let found = westfall_young(&dealing.data(), &questions, &deals).map_err(|refusal| dealing.in_words(&refusal, &in_words))?;
    let mut judged = Judged::default();
    let mut done = None;
    for member in &found.members {
        let member = member.as_ref().map_err(|refusal| dealing.in_words(refusal, &in_words))?;
        judged.adjusted.push(Some(member.step_down));
        done = Some((member.test.deals, member.test.exact));
    }
    if let Some((count, exact)) = done {
        judged.notes.push(format!("{count} deals{}", if exact { ", all that there are" } else { " drawn at random" }));
    }
    judged.notes.push(match found.scale {
        Scale::Statistic => "members compared by their statistics, step down".to_owned(),
        Scale::TailArea => "members compared by the tails of their t, as their df differ, step down".to_owned(),
    });
    Ok(judged)
}
