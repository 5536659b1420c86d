//! Screens of single residuals: their normality, and values that lie far out.

use super::super::sample::Sample;
use super::super::{entry, put};
use super::{refuse, with_p, with_statistic};
use crate::canon::number::Finite;
use crate::execute::machine::Machine;
use crate::plan::resolved::OutlyingMethod;
use crate::results::{Detail, Entry};
use crate::stats::hypothesis::{Distance, Sample as Residuals, mahalanobis_distances, shapiro_wilk, studentized_residuals};
use crate::stats::linear::DoubleDouble;
use crate::stats::model::Refusal;

/// Of values this close, relatively, the first subject's counts as the largest.
const TIE: f64 = 1e-9;

/// Normality of the residuals at an occasion, or, after the last one, of those of adjacent differences.
pub(super) fn normality(machine: &Machine<'_, '_>, reference: &str, place: usize, sample: &Sample<'_>) -> Entry {
    let (design, trial) = (&machine.program.plan.design, machine.samples.trial);
    let occasions = design.occasions();
    let name = |occasion: usize| design.occasion_levels(occasion).join("; ");
    let (first, second) = if place < occasions { (None, place) } else { (Some(place - occasions), place - occasions + 1) };
    let label = match first {
        Some(first) => format!("normal residuals of {} minus {}", name(second), name(first)),
        None if occasions == 1 => "normal residuals".to_owned(),
        None => format!("normal residuals at {}", name(second)),
    };
    let entry = entry(reference, &label);
    let found = sample.moments.as_ref().map_err(Clone::clone).and_then(|moments| {
        let kept = |subject: &usize| sample.kept.as_ref().is_none_or(|kept| kept[*subject]);
        let residual = |subject: usize| {
            let of = |occasion: usize| {
                DoubleDouble::from(sample.values[subject * occasions + occasion])
                    - moments.cells()[trial.cell[subject] as usize].mean[occasion]
            };
            (of(second) - first.map_or(DoubleDouble::ZERO, of)).value()
        };
        let residuals: Vec<f64> = (0..trial.cell.len()).filter(kept).map(residual).collect();
        Ok((shapiro_wilk(&residuals)?, residuals.len()))
    });
    match found {
        Ok((found, n)) => {
            let mut entry = with_statistic(entry, "W", found.w, &[]);
            entry.n = Some(n);
            with_p(entry, found.p)
        }
        Err(refusal) => refuse(machine, entry, &refusal),
    }
}

/// Values that lie far from the rest of their cell: the largest of each occasion, or of all.
pub(super) fn outlying(
    machine: &Machine<'_, '_>,
    references: &[String],
    method: OutlyingMethod,
    threshold: f64,
    sample: &Sample<'_>,
) -> Vec<Entry> {
    let (design, trial) = (&machine.program.plan.design, machine.samples.trial);
    let residuals = Residuals { values: &sample.values, cell: &trial.cell, kept: sample.kept.as_deref() };
    references
        .iter()
        .enumerate()
        .map(|(occasion, reference)| {
            let name = design.occasion_levels(occasion).join("; ");
            let studentized = method == OutlyingMethod::StudentizedResiduals;
            let label = match (studentized, name.is_empty()) {
                (true, false) => format!("largest studentized residual at {name}"),
                (true, true) => "largest studentized residual".to_owned(),
                (false, _) => "largest Mahalanobis distance".to_owned(),
            };
            let entry = entry(reference, &label);
            let found = sample.moments.as_ref().map_err(Clone::clone).and_then(|moments| {
                let distances = if studentized {
                    studentized_residuals(&residuals, moments, occasion)?
                } else {
                    mahalanobis_distances(&residuals, moments)?
                };
                let count = distances.len();
                let furthest = distances
                    .iter()
                    .copied()
                    .reduce(|far, other| if other.value.abs() > far.value.abs() * (1.0 + TIE) { other } else { far })
                    .ok_or(Refusal::NoErrorDf)?;
                Ok((distances, furthest, count))
            });
            let (distances, furthest, count) = match found {
                Ok(found) => found,
                Err(refusal) => return refuse(machine, entry, &refusal),
            };
            let beyond = |one: &&Distance| if studentized { one.value.abs() >= threshold } else { one.p <= threshold };
            let flagged: Vec<&str> = distances.iter().filter(beyond).map(|one| trial.subjects.get(one.subject)).collect();
            let mut entry = with_statistic(entry, if studentized { "residual" } else { "D squared" }, furthest.value, &[]);
            entry.n = Some(count);
            let details = &mut entry.details;
            details.insert("furthest_subject".to_owned(), Detail::Text(trial.subjects.get(furthest.subject).to_owned()));
            put(details, "beyond_threshold", flagged.len() as f64);
            if !flagged.is_empty() {
                let few: Vec<&str> = flagged.iter().copied().take(20).collect();
                let more = flagged.len() - few.len();
                let more = if more > 0 { format!(" and {more} more") } else { String::new() };
                details.insert("subjects_beyond_threshold".to_owned(), Detail::Text(format!("{}{more}", few.join(", "))));
            }
            entry.p = Finite::new(furthest.p);
            entry
        })
        .collect()
}
