//! Families judged by the largest t of all members.

use crate::execute::machine::Machine;
use crate::execute::multiplicity::Judged;
use crate::execute::steps::lowered;
use crate::execute::words;
use crate::plan::resolved::{Action, Sides};
use crate::results::Entry;
use crate::results::numbers::{degrees_of_freedom, significant};
use crate::stats::dist::multivariate_t::MultivariateT;
use crate::stats::hypothesis::{Hypothesis, OccasionErrors, contrast_correlations};

/// Judges a family by the multivariate t of the correlations that its contrasts have: single step, so that its intervals
/// agree with its verdicts.
pub(crate) fn judge(machine: &Machine<'_, '_>, family: usize) -> Result<Judged, String> {
    let program = machine.program;
    let plan = &program.plan.families[family];
    let design = &program.plan.design;
    let mut sample = None;
    let (mut hypotheses, mut entries, mut one_sided) = (Vec::new(), Vec::new(), false);
    for slot in &program.families[family] {
        let place = &program.slots[*slot];
        let step = &program.plan.steps[place.step];
        let Action::Test(test) = &step.action else { continue };
        let own = machine.samples.known_of(step).ok_or("the data of a member are not at hand")?;
        if sample.as_ref().is_some_and(|known: &std::rc::Rc<crate::execute::steps::Sample<'_>>| known.occasions != own.occasions) {
            return Err("its members rest on different subjects, as they use different occasions: let `missing data` be complete over all occasions".to_owned());
        }
        let moments = own.moments.as_ref().map_err(|refusal| words::refusal(refusal, design))?;
        hypotheses.push(
            lowered(design, &test.hypotheses[place.hypothesis], test.weights, moments)
                .map_err(|refusal| words::refusal(&refusal, design))?,
        );
        one_sided |= matches!(test.sides, Sides::One { .. });
        entries.push(machine.entry(*slot).ok_or("a member has no result")?);
        sample = Some(own);
    }
    let sample = sample.ok_or("the family has no test")?;
    let moments = sample.moments.as_ref().map_err(|refusal| words::refusal(refusal, design))?;
    let number =
        |entry: &Entry, name: &str| entry.detail(name).map(|value| value.get()).ok_or_else(|| format!("{} has no t", entry.reference));
    let mut df = f64::INFINITY;
    let mut common = true;
    let first = (number(entries[0], "error_mean_square")?, number(entries[0], "df_of_t")?);
    for entry in &entries {
        let own = (number(entry, "error_mean_square")?, number(entry, "df_of_t")?);
        common &= own == first;
        df = df.min(own.1);
    }
    let errors = if common { OccasionErrors::Spherical } else { OccasionErrors::Estimated };
    let all: Vec<&Hypothesis> = hypotheses.iter().collect();
    let correlations = contrast_correlations(moments, &all, errors).map_err(|refusal| words::refusal(&refusal, design))?;
    let refuse = |error: crate::stats::dist::DistributionError| error.to_string();
    let joint = MultivariateT::new(&correlations, Some(df)).map_err(refuse)?;
    let mut judged = Judged::default();
    let mut bound = 0.0_f64;
    let mut exact = true;
    let mut reached = true;
    for (slot, entry) in program.families[family].iter().zip(&entries) {
        let t = number(entry, "t")?;
        let found = if one_sided {
            let sign = if machine.counts_below(*slot) { -1.0 } else { 1.0 };
            joint.max_upper_tail(sign * t).map_err(refuse)?
        } else {
            joint.max_abs_upper_tail(t.abs()).map_err(refuse)?
        };
        bound = bound.max(found.error_bound);
        exact &= found.exact;
        reached &= found.reached;
        // The joint tail is never below the member's own.
        let own = entry.p.map_or(0.0, |p| p.get());
        judged.adjusted.push(Some(found.p.max(own).min(1.0)));
    }
    let critical = if one_sided { joint.critical_value_one_sided(plan.alpha) } else { joint.critical_value_two_sided(plan.alpha) };
    let critical = critical.map_err(refuse)?;
    judged.critical = Some(critical.value);
    judged.notes.push(format!("multivariate t with {} df, critical value {}", degrees_of_freedom(df), significant(critical.value, 6)));
    judged.notes.push(if exact {
        "probabilities by quadrature".to_owned()
    } else {
        format!("probabilities by quasi-Monte Carlo, error bound {}", significant(bound, 2))
    });
    if !reached || !critical.reached {
        judged.notes.push("the points ran out before the accuracy aimed at was reached; the bound is the one reached".to_owned());
    }
    if !common {
        judged.notes.push(
            "approximate: the members have no common error, so that their correlations are estimated and the smallest df counts".to_owned(),
        );
    }
    for (entry, adjusted) in entries.iter().zip(&judged.adjusted) {
        if !exact && adjusted.is_some_and(|adjusted| (adjusted - plan.alpha).abs() <= bound) {
            judged.notes.push(format!("the adjusted p of {} is within its error bound of alpha", entry.reference));
        }
    }
    Ok(judged)
}
