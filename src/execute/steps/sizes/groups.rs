//! The scores that a comparison is about: one or two cells, one or two occasions.

use super::super::sample::Sample;
use super::super::test::parts;
use crate::data::trial::Trial;
use crate::plan::resolved::{Design, Factor, FactorPart, Hypothesis};
use crate::stats::hypothesis::{self as engine, Part, Weighting};
use crate::stats::linear::DoubleDouble;
use crate::stats::model::Refusal;

/// Scores of the subjects of each cell compared.
pub(crate) struct Groups {
    /// One cell, or two: the first is taken away from the second.
    pub rows: Vec<Vec<Scores>>,
    /// Cells and weights of occasions, as bits: what random numbers may hang on.
    pub identity: Vec<u64>,
}

/// Scores of one subject; the earlier one is 0 where there is one occasion only.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Scores {
    pub earlier: f64,
    pub later: f64,
}

impl Scores {
    /// What is compared between cells: the later score, or the change.
    pub fn gain(&self) -> f64 {
        self.later - self.earlier
    }
}

impl Groups {
    /// The scores of an item.
    pub fn of(design: &Design, trial: &Trial, sample: &Sample<'_>, item: &Hypothesis) -> Result<Groups, Refusal> {
        let cells = cells(design, &item.between);
        let (first, second) = occasions(&design.within, &item.within);
        let later = weights(design, &second)?;
        let earlier = first.map(|first| weights(design, &first)).transpose()?;
        let score = |subject: usize, weights: &[DoubleDouble]| -> f64 {
            let row = &sample.values[subject * design.occasions()..(subject + 1) * design.occasions()];
            let weighed = row.iter().zip(weights).filter(|(_, weight)| !weight.is_zero());
            weighed.map(|(value, weight)| DoubleDouble::from(*value) * *weight).sum::<DoubleDouble>().value()
        };
        let mut identity: Vec<u64> = cells.iter().map(|cell| *cell as u64).collect();
        for weight in earlier.iter().chain([&later]).flatten() {
            identity.push((weight.value() + 0.0).to_bits());
        }
        let kept = |subject: &usize| sample.kept.as_ref().is_none_or(|kept| kept[*subject]);
        let rows = cells
            .iter()
            .map(|cell| {
                (0..trial.cell.len())
                    .filter(|subject| trial.cell[*subject] as usize == *cell)
                    .filter(kept)
                    .map(|subject| Scores {
                        earlier: earlier.as_ref().map_or(0.0, |weights| score(subject, weights)),
                        later: score(subject, &later),
                    })
                    .collect()
            })
            .collect();
        Ok(Groups { rows, identity })
    }

    /// Subjects of all cells compared.
    pub fn subjects(&self) -> usize {
        self.rows.iter().map(Vec::len).sum()
    }

    /// What is compared, cell by cell.
    pub fn gains(&self) -> Vec<Vec<f64>> {
        self.rows.iter().map(|rows| rows.iter().map(Scores::gain).collect()).collect()
    }
}

/// The pair of levels that a part compares, first the one taken away.
fn pair(factor: &Factor, part: &FactorPart) -> Option<[usize; 2]> {
    let place = |level: &str| factor.levels.iter().position(|other| other == level).unwrap_or(0);
    match part {
        FactorPart::Weights(weights) => {
            let taken = weights.iter().find(|weight| weight.weight < 0.0)?;
            let kept = weights.iter().find(|weight| weight.weight > 0.0)?;
            Some([place(&taken.level), place(&kept.level)])
        }
        FactorPart::Whole if factor.levels.len() == 2 => Some([0, 1]),
        _ => None,
    }
}

fn cells(design: &Design, between: &[FactorPart]) -> Vec<usize> {
    let number = |side: usize| {
        design.between.iter().zip(between).fold(0, |cell, (factor, part)| {
            let level = match (pair(factor, part), part) {
                (Some(pair), _) => pair[side],
                (None, FactorPart::Hold(level)) => factor.levels.iter().position(|other| other == level).unwrap_or(0),
                _ => 0,
            };
            cell * factor.levels.len() + level
        })
    };
    let compares = design.between.iter().zip(between).any(|(factor, part)| pair(factor, part).is_some());
    if compares { vec![number(0), number(1)] } else { vec![number(0)] }
}

/// Parts of the earlier score, where there are two, and of the later one.
fn occasions(factors: &[Factor], within: &[FactorPart]) -> (Option<Vec<FactorPart>>, Vec<FactorPart>) {
    let score = |side: usize| -> Vec<FactorPart> {
        let held = |factor: &Factor, part: &FactorPart| match pair(factor, part) {
            Some(pair) => FactorPart::Hold(factor.levels[pair[side]].clone()),
            None => part.clone(),
        };
        factors.iter().zip(within).map(|(factor, part)| held(factor, part)).collect()
    };
    let compares = factors.iter().zip(within).any(|(factor, part)| pair(factor, part).is_some());
    (compares.then(|| score(0)), score(1))
}

/// One weight per occasion.
fn weights(design: &Design, within: &[FactorPart]) -> Result<Vec<DoubleDouble>, Refusal> {
    let one_group = [engine::FactorPart::new(1, Part::Average)];
    let hypothesis = engine::Hypothesis::new(&one_group, &parts(&design.within, within), Weighting::Equal)?;
    hypothesis.single().map(|(_, within)| within.to_vec()).ok_or(Refusal::NotEstimable)
}
