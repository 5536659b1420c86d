//! How a family turns the results of its members into adjusted p-values, and which intervals go with them.

use crate::canon::number::Finite;
use crate::execute::machine::{Machine, Raw};
use crate::execute::steps::{put, rounded};
use crate::execute::{deals, largest_t};
use crate::plan::resolved::{Control, Family};
use crate::results::{Detail, Entry, GraphUpdate};
use crate::stats::adjust::{Graph, GraphError, GraphResult, Procedure, adjust, shaffer};
use crate::stats::dist::student;

/// What came of judging a family.
#[derive(Default)]
pub(crate) struct Judged {
    /// In the order of the members.
    pub adjusted: Vec<Option<f64>>,
    /// Why no member has a verdict, where the family as a whole is refused.
    pub refused: Option<String>,
    /// Updates of a graph.
    pub updates: Vec<GraphUpdate>,
    /// What is to be said of it.
    pub notes: Vec<String>,
    /// What standard errors are multiplied by for intervals that hold together.
    pub critical: Option<f64>,
}

/// Adjusts over what has been computed so far; a member that is missing counts as p = 1.
pub(crate) fn judge(machine: &Machine<'_, '_>, family: usize) -> Judged {
    let plan = &machine.program.plan.families[family];
    let members = &machine.program.families[family];
    let p: Vec<Option<f64>> = members
        .iter()
        .map(|slot| match machine.raw[*slot] {
            Raw::Tested { p, .. } => Some(p),
            _ => None,
        })
        .collect();
    let by = |procedure: Procedure| Judged { adjusted: adjust(procedure, &p), ..Judged::default() };
    match plan.control {
        Control::None => by(Procedure::None),
        Control::Bonferroni => by(Procedure::Bonferroni),
        Control::Sidak => by(Procedure::Sidak),
        Control::Holm => by(Procedure::Holm),
        Control::HolmSidak => by(Procedure::HolmSidak),
        Control::Hochberg => by(Procedure::Hochberg),
        Control::Hommel => by(Procedure::Hommel),
        Control::BenjaminiHochberg => by(Procedure::BenjaminiHochberg),
        Control::BenjaminiYekutieli => by(Procedure::BenjaminiYekutieli),
        Control::FixedSequence => by(Procedure::FixedSequence),
        Control::Shaffer => Judged { adjusted: shaffer(levels_of_all_pairs(p.len()), &p), ..Judged::default() },
        Control::Fallback => by_graph(machine, family, &p, Graph::fallback(plan.weights.clone().unwrap_or_default())),
        Control::Graph => {
            let graph = Graph::new(plan.weights.clone().unwrap_or_default(), plan.transfer.clone().unwrap_or_default());
            by_graph(machine, family, &p, graph)
        }
        Control::MaxT | Control::WestfallYoung if p.contains(&None) => {
            let without: Vec<&str> = members
                .iter()
                .zip(&p)
                .filter(|(_, p)| p.is_none())
                .map(|(slot, _)| machine.program.slots[*slot].reference.as_str())
                .collect();
            refused(p.len(), format!("its family is judged by all its statistics together, and there is none of {}", without.join(", ")))
        }
        Control::MaxT => largest_t::judge(machine, family).unwrap_or_else(|why| refused(p.len(), why)),
        Control::WestfallYoung => deals::judge(machine, family).unwrap_or_else(|why| refused(p.len(), why)),
    }
}

fn refused(members: usize, why: String) -> Judged {
    Judged { adjusted: vec![None; members], refused: Some(why), ..Judged::default() }
}

/// k with k (k - 1) / 2 pairs; the compiler has seen to it that there is one.
fn levels_of_all_pairs(pairs: usize) -> usize {
    (2..).find(|levels| levels * (levels - 1) / 2 >= pairs).unwrap_or(2)
}

fn by_graph(machine: &Machine<'_, '_>, family: usize, p: &[Option<f64>], graph: Result<Graph, GraphError>) -> Judged {
    let plan: &Family = &machine.program.plan.families[family];
    let GraphResult { adjusted, updates } = match graph {
        Ok(graph) => graph.adjust(p),
        Err(error) => return refused(p.len(), error.to_string()),
    };
    let updates = updates
        .into_iter()
        .map(|update| GraphUpdate {
            member: machine.program.slots[machine.program.families[family][update.rejected]].reference.clone(),
            p_adjusted: Finite::new(update.adjusted).unwrap_or_default(),
            significant: update.adjusted <= plan.alpha,
            weights: update.weights.into_iter().filter_map(Finite::new).collect(),
        })
        .collect();
    Judged { adjusted, updates, ..Judged::default() }
}

/// Puts intervals that hold together into the members' entries, where such intervals go with the control; says plainly
/// where none do.
pub(crate) fn put_simultaneous_intervals(machine: &mut Machine<'_, '_>, family: usize, judged: &Judged) {
    let program = machine.program;
    let plan = &program.plan.families[family];
    let members = &program.families[family];
    let count = members.len() as f64;
    let share = match plan.control {
        Control::Bonferroni => Some(plan.alpha / count),
        Control::Sidak => Some(-libm::expm1(libm::log1p(-plan.alpha) / count)),
        _ => None,
    };
    for slot in members {
        let place = &program.slots[*slot];
        let entry = machine.steps.get_mut(place.step).and_then(|step| step.results.get_mut(place.hypothesis));
        let Some(entry) = entry.filter(|entry| matches!(entry.details.get("df_of_t"), Some(Detail::Number(_)))) else { continue };
        // A claim has its interval by its margins.
        if entry.details.contains_key("margin_lower") || entry.details.contains_key("margin_upper") {
            continue;
        }
        let one_sided = entry.details.contains_key("p_two_sided");
        let width = match (share, judged.critical) {
            (Some(share), _) => width_of(entry, share, one_sided),
            (None, critical) => critical,
        };
        match width {
            Some(width) => put_interval(entry, width, if one_sided { 1.0 - 2.0 * plan.alpha } else { 1.0 - plan.alpha }),
            None => {
                let why = match plan.control {
                    Control::None => "its interval stands alone: the family controls nothing".to_owned(),
                    Control::BenjaminiHochberg | Control::BenjaminiYekutieli => {
                        "its interval stands alone: no simultaneous intervals go with a control of the false discovery rate".to_owned()
                    }
                    _ => "its interval stands alone: this control works in steps, and no simultaneous intervals of use match it".to_owned(),
                };
                entry.details.insert("simultaneous_interval_note".to_owned(), Detail::Text(why));
            }
        }
    }
}

fn width_of(entry: &Entry, share: f64, one_sided: bool) -> Option<f64> {
    let df = entry.detail("df_of_t")?.get();
    student::quantile_upper(if one_sided { share } else { share / 2.0 }, df).ok()
}

fn put_interval(entry: &mut Entry, width: f64, level: f64) {
    let Some((estimate, error)) = entry.estimate_of().zip(entry.standard_error_of()) else { return };
    let half = width * error.get();
    let limits: Vec<Finite> = [estimate.get() - half, estimate.get() + half].into_iter().filter_map(Finite::new).collect();
    if limits.len() == 2 {
        entry.details.insert("simultaneous_interval".to_owned(), Detail::Numbers(limits));
        put(&mut entry.details, "simultaneous_interval_level", rounded(level));
    }
}
