//! Cell means with their intervals: as a step, and for the tables and figures of every report.

use super::sample::{Sample, Samples};
use super::test::rounded;
use super::{entry, refused};
use crate::canon::number::Finite;
use crate::execute::machine::Machine;
use crate::execute::words;
use crate::plan::resolved::CellMean;
use crate::results::{CellDescription, Description};
use crate::stats::dist::student;
use crate::stats::model::Moments;

/// Mean, standard deviation, standard error and interval of Student's t within one cell, in the outcome's unit.
struct MeanOfCell {
    n: usize,
    mean: Option<Finite>,
    sd: Option<Finite>,
    standard_error: Option<Finite>,
    interval: Option<[Finite; 2]>,
}

fn mean_of(moments: &Moments, cell: usize, occasion: usize, level: f64) -> MeanOfCell {
    let n = moments.cells()[cell].subjects;
    let mean = (n > 0).then(|| moments.mean(cell, occasion));
    let sd = moments.standard_deviation(cell, occasion);
    let standard_error = sd.map(|sd| sd / (n as f64).sqrt());
    let interval = mean.zip(standard_error).and_then(|(mean, error)| {
        let half = student::quantile_upper((1.0 - level) / 2.0, (n - 1) as f64).ok()? * error;
        Some([Finite::new(mean - half)?, Finite::new(mean + half)?])
    });
    MeanOfCell {
        n,
        mean: mean.and_then(Finite::new),
        sd: sd.and_then(Finite::new),
        standard_error: standard_error.and_then(Finite::new),
        interval,
    }
}

pub(super) fn cell_means(machine: &mut Machine<'_, '_>, number: usize, level: f64, items: &[CellMean], sample: &Sample<'_>) {
    for item in items {
        let mut entry = entry(&item.reference, &item.label);
        entry.level = Finite::new(level);
        let entry = match &sample.moments {
            Err(refusal) => refused(entry, words::refusal(refusal, &machine.program.plan.design)),
            Ok(moments) => {
                let found = mean_of(moments, item.cell, item.occasion, level);
                entry.n = Some(found.n);
                entry.estimate = found.mean;
                entry.standard_error = found.standard_error;
                entry.interval = found.interval;
                if let Some(sd) = found.sd {
                    super::put(&mut entry.details, "sd", sd.get());
                }
                match found.n {
                    0 => refused(entry, "no subject of this arm was analysed"),
                    1 => {
                        entry.because = Some("one subject: no standard deviation and no interval".to_owned());
                        entry
                    }
                    _ => entry,
                }
            }
        };
        machine.steps[number].results.push(entry);
    }
}

/// Describes every cell of every outcome that a step uses.
pub(crate) fn describe(samples: &mut Samples<'_>) -> Vec<Description> {
    let plan = samples.plan;
    let design = &plan.design;
    let level = rounded(1.0 - plan.alpha);
    let used: Vec<usize> =
        (0..plan.outcomes.len()).filter(|number| plan.steps.iter().any(|step| step.outcome == plan.outcomes[*number].name)).collect();
    used.into_iter()
        .map(|outcome| {
            let sample = samples.whole(outcome);
            let mut cells = Vec::new();
            for cell in 0..design.cells() {
                for occasion in 0..design.occasions() {
                    let found = match &sample.moments {
                        Ok(moments) => mean_of(moments, cell, occasion, level),
                        Err(_) => MeanOfCell { n: 0, mean: None, sd: None, standard_error: None, interval: None },
                    };
                    cells.push(CellDescription {
                        between: design.cell_levels(cell).into_iter().map(str::to_owned).collect(),
                        within: design.occasion_levels(occasion).into_iter().map(str::to_owned).collect(),
                        n: found.n,
                        mean: found.mean,
                        sd: found.sd,
                        interval: found.interval,
                    });
                }
            }
            Description { outcome: plan.outcomes[outcome].name.clone(), level: Finite::new(level).unwrap_or_default(), cells }
        })
        .collect()
}
