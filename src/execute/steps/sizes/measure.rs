//! Each measure, and the interval that goes with it.

use super::super::put as put_number;
use super::super::sample::Sample;
use super::bootstrap::{Bootstrap, OfScores, of_rows};
use super::groups::{Groups, Scores};
use super::{Chosen, count};
use crate::canon::number::Finite;
use crate::execute::machine::Machine;
use crate::plan::resolved::{DifferenceStandardizer, Hypothesis, IntervalMethod, Measure, SmallSample};
use crate::results::{Detail, Entry};
use crate::stats::linear::DoubleDouble;
use crate::stats::sizes::{
    GroupInterval, GroupStandardizer, GroupSummary, Refusal, Share, Superiority, TwoChanges, change_difference, change_difference_interval,
    difference_of_shares, hedges_j_approximate, hedges_j_exact, reaches, reliable_change, robust_change, robust_difference,
    standardized_difference, standardized_difference_interval, superiority, superiority_of_change,
};

/// Puts the measure of an item into its entry.
pub(super) fn put(
    machine: &Machine<'_, '_>,
    chosen: &Chosen<'_>,
    item: &Hypothesis,
    groups: &Groups,
    sample: &Sample<'_>,
    entry: &mut Entry,
) -> Result<(), String> {
    match chosen.comparison.measure {
        Measure::StandardizedDifference => difference(chosen, groups, entry),
        Measure::DifferenceInStandardizedChange => in_change(chosen, groups, entry),
        Measure::ProbabilityOfSuperiority => of_superiority(chosen, groups, entry),
        Measure::RobustStandardizedDifference => robust(chosen, groups, entry),
        Measure::Responders => responders(chosen, groups, entry),
        Measure::ReliableChange => reliable(machine, chosen, item, groups, sample, entry),
    }
}

/// Lower and upper limit, and the standard error where the interval rests on one.
type Limits = (f64, f64, Option<f64>);

/// Puts limits into the entry, or why there are none.
fn put_limits(entry: &mut Entry, found: Option<Result<Limits, String>>) {
    match found {
        None => entry.level = None,
        Some(Ok((lower, upper, standard_error))) => {
            entry.interval = Finite::new(lower).zip(Finite::new(upper)).map(|(lower, upper)| [lower, upper]);
            entry.standard_error = standard_error.and_then(Finite::new);
        }
        Some(Err(because)) => {
            let earlier = entry.because.take().map(|earlier| format!("{earlier}; ")).unwrap_or_default();
            entry.because = Some(format!("{earlier}no interval: {because}"));
        }
    }
}

fn bootstrapped(chosen: &Chosen<'_>, groups: &Groups, entry: &mut Entry, statistic: &OfScores<'_>) -> Result<Limits, String> {
    let asked = Bootstrap { resamples: chosen.comparison.resamples, level: chosen.comparison.level, identity: &groups.identity };
    of_rows(&asked, groups, statistic, entry).map(|(lower, upper)| (lower, upper, None))
}

fn summary(gains: &[f64]) -> GroupSummary {
    let n = gains.len();
    let exact = |value: f64| DoubleDouble::from(value);
    let mean = gains.iter().map(|gain| exact(*gain)).sum::<DoubleDouble>() / DoubleDouble::from(n.max(1));
    let squares = gains.iter().map(|gain| (exact(*gain) - mean).square()).sum::<DoubleDouble>();
    let largest = gains.iter().fold(0.0_f64, |largest, gain| largest.max(gain.abs()));
    let unit = 4.0 * f64::EPSILON * largest;
    let variance = if n > 1 { (squares / DoubleDouble::from(n - 1)).value() } else { 0.0 };
    // What rounding leaves of a zero is zero, by the rule of the engine.
    GroupSummary { n, mean: mean.value(), sd: if variance <= unit * unit { 0.0 } else { variance.sqrt() } }
}

fn difference(chosen: &Chosen<'_>, groups: &Groups, entry: &mut Entry) -> Result<(), String> {
    let [first, second] = two(groups)?;
    let standardizer = match chosen.standardizer {
        Some(DifferenceStandardizer::ReferenceSd) => GroupStandardizer::ReferenceSd,
        Some(DifferenceStandardizer::RootMeanSquareSd) => GroupStandardizer::RootMeanSquareSd,
        _ => GroupStandardizer::PooledSd,
    };
    let (one, other) = (summary(&first), summary(&second));
    let raw = other.mean - one.mean;
    entry.details.insert("means".to_owned(), numbers(&[one.mean, other.mean]));
    entry.details.insert("sds".to_owned(), numbers(&[one.sd, other.sd]));
    put_number(&mut entry.details, "difference", raw);
    let found = standardized_difference(&one, &other, raw, standardizer).map_err(|refusal| refusal.reason)?;
    put_number(&mut entry.details, "standardizer", found.standardizer);
    put_number(&mut entry.details, "d", found.d);
    let m = standardizer.df(&one, &other);
    let j = match chosen.small_sample {
        SmallSample::No => None,
        SmallSample::Yes | SmallSample::Both => Some(hedges_j_exact(m)),
        SmallSample::Approximate => Some(hedges_j_approximate(m)),
    };
    let mut reported = found.d;
    match j {
        None => {}
        Some(Ok(j)) => {
            put_number(&mut entry.details, "J", j);
            put_number(&mut entry.details, "g", j * found.d);
            if chosen.small_sample != SmallSample::Both {
                reported = j * found.d;
            }
        }
        // Where both are asked for, d stands although g cannot.
        Some(Err(refusal)) if chosen.small_sample == SmallSample::Both => entry.because = Some(format!("no g: {}", refusal.reason)),
        Some(Err(refusal)) => return Err(refusal.reason),
    }
    entry.estimate = Finite::new(reported);
    let level = chosen.comparison.level;
    let by = |method| {
        standardized_difference_interval(&one, &other, raw, standardizer, method, level).map_err(|refusal: Refusal| refusal.reason)
    };
    let limits = match chosen.method {
        IntervalMethod::NoncentralT => Some(by(GroupInterval::NoncentralT)),
        IntervalMethod::Bonett => Some(by(GroupInterval::Bonett)),
        IntervalMethod::Bca => Some(bootstrapped(chosen, groups, entry, &|rows| {
            let gains: Vec<Vec<f64>> = rows.iter().map(|rows| rows.iter().map(Scores::gain).collect()).collect();
            let (one, other) = (summary(&gains[0]), summary(&gains[1]));
            Ok(standardized_difference(&one, &other, other.mean - one.mean, standardizer)?.d)
        })),
        _ => None,
    };
    if limits.is_some() && chosen.small_sample != SmallSample::No {
        entry.details.insert("interval_of".to_owned(), Detail::Text("d, uncorrected".to_owned()));
    }
    put_limits(entry, limits);
    Ok(())
}

fn changes(rows: &[Vec<Scores>]) -> TwoChanges {
    let column = |rows: &[Scores], of: fn(&Scores) -> f64| rows.iter().map(of).collect::<Vec<f64>>();
    let sums = |rows: &[Scores]| {
        let (earlier, later) = (column(rows, |row| row.earlier), column(rows, |row| row.later));
        let (one, other, gain) = (summary(&earlier), summary(&later), summary(&column(rows, Scores::gain)));
        let df = rows.len() as f64 - 1.0;
        let product: DoubleDouble = rows
            .iter()
            .map(|row| (DoubleDouble::from(row.earlier) - one.mean.into()) * (DoubleDouble::from(row.later) - other.mean.into()))
            .sum();
        (df, one.sd * one.sd * df, other.sd * other.sd * df, product.value(), gain.mean)
    };
    let each: Vec<_> = rows.iter().map(|rows| sums(rows)).collect();
    let total = |of: fn(&(f64, f64, f64, f64, f64)) -> f64| each.iter().map(of).sum::<f64>();
    let (earlier, later) = (total(|one| one.1), total(|one| one.2));
    TwoChanges {
        n: [rows[0].len(), rows[1].len()],
        change: [each[0].4, each[1].4],
        pooled_sd: (earlier / total(|one| one.0)).sqrt(),
        correlation: (earlier > 0.0 && later > 0.0).then(|| (total(|one| one.3) / (earlier * later).sqrt()).clamp(-1.0, 1.0)),
    }
}

fn in_change(chosen: &Chosen<'_>, groups: &Groups, entry: &mut Entry) -> Result<(), String> {
    two(groups)?;
    let groups_two = changes(&groups.rows);
    let found = change_difference(&groups_two).map_err(|refusal| refusal.reason)?;
    entry.details.insert("changes".to_owned(), numbers(&groups_two.change));
    put_number(&mut entry.details, "standardizer", groups_two.pooled_sd);
    put_number(&mut entry.details, "d_uncorrected", found.uncorrected);
    put_number(&mut entry.details, "factor", found.factor);
    if let Some(correlation) = groups_two.correlation {
        put_number(&mut entry.details, "correlation", correlation);
    }
    entry.estimate = Finite::new(found.d);
    let limits = match chosen.method {
        IntervalMethod::Morris => Some(
            change_difference_interval(&groups_two, chosen.comparison.level)
                .map(|(lower, upper, error)| (lower, upper, Some(error)))
                .map_err(|refusal| refusal.reason),
        ),
        IntervalMethod::Bca => Some(bootstrapped(chosen, groups, entry, &|rows| change_difference(&changes(rows)).map(|found| found.d))),
        _ => None,
    };
    put_limits(entry, limits);
    Ok(())
}

fn superior(rows: &[Vec<Scores>]) -> Result<Superiority, Refusal> {
    let gains: Vec<Vec<f64>> = rows.iter().map(|rows| rows.iter().map(Scores::gain).collect()).collect();
    match gains.as_slice() {
        [first, second] => superiority(first, second),
        _ => superiority_of_change(&gains[0]),
    }
}

fn of_superiority(chosen: &Chosen<'_>, groups: &Groups, entry: &mut Entry) -> Result<(), String> {
    let found = superior(&groups.rows).map_err(|refusal| refusal.reason)?;
    entry.estimate = Finite::new(found.p);
    let limits = match chosen.method {
        IntervalMethod::Logit => {
            Some(found.logit_interval(chosen.comparison.level).map(|(lower, upper)| (lower, upper, None)).map_err(|refusal| refusal.reason))
        }
        IntervalMethod::Bca => Some(bootstrapped(chosen, groups, entry, &|rows| superior(rows).map(|found| found.p))),
        _ => None,
    };
    put_limits(entry, limits);
    Ok(())
}

fn robust(chosen: &Chosen<'_>, groups: &Groups, entry: &mut Entry) -> Result<(), String> {
    let of = |rows: &[Vec<Scores>]| {
        let gains: Vec<Vec<f64>> = rows.iter().map(|rows| rows.iter().map(Scores::gain).collect()).collect();
        match gains.as_slice() {
            [first, second] => robust_difference(first, second),
            _ => robust_change(&gains[0]),
        }
    };
    entry.estimate = Finite::new(of(&groups.rows).map_err(|refusal| refusal.reason)?);
    let limits = (chosen.method == IntervalMethod::Bca).then(|| bootstrapped(chosen, groups, entry, &of));
    put_limits(entry, limits);
    Ok(())
}

fn responders(chosen: &Chosen<'_>, groups: &Groups, entry: &mut Entry) -> Result<(), String> {
    let amount = chosen.comparison.reaching.unwrap_or(0.0);
    let responds = |row: &&Scores| reaches(row.earlier, row.later, amount, chosen.higher_is_better);
    let shares: Vec<Share> = groups.rows.iter().map(|rows| Share { count: rows.iter().filter(responds).count(), n: rows.len() }).collect();
    let level = chosen.comparison.level;
    let wanted = chosen.method == IntervalMethod::Newcombe;
    entry.details.insert("responders".to_owned(), Detail::Numbers(shares.iter().map(|share| count(share.count)).collect()));
    let reason = |refusal: Refusal| refusal.reason;
    match shares.as_slice() {
        [first, second] => {
            let (difference, (lower, upper)) = difference_of_shares(*first, *second, level).map_err(reason)?;
            let each = [first.value().map_err(reason)?, second.value().map_err(reason)?];
            entry.details.insert("shares".to_owned(), numbers(&each));
            entry.estimate = Finite::new(difference);
            put_limits(entry, wanted.then_some(Ok((lower, upper, None))));
        }
        _ => {
            entry.estimate = Finite::new(shares[0].value().map_err(reason)?);
            let limits = shares[0].wilson(level).map(|(lower, upper)| (lower, upper, None)).map_err(reason);
            put_limits(entry, wanted.then_some(limits));
        }
    }
    Ok(())
}

fn reliable(
    machine: &Machine<'_, '_>,
    chosen: &Chosen<'_>,
    item: &Hypothesis,
    groups: &Groups,
    sample: &Sample<'_>,
    entry: &mut Entry,
) -> Result<(), String> {
    let design = &machine.program.plan.design;
    let trial = machine.samples.trial;
    // Every cell's scores at the earlier occasion, about its own mean.
    let (mut squares, mut df) = (0.0, 0.0);
    for cell in 0..design.cells() {
        let mut alone = item.clone();
        alone.between = design
            .between
            .iter()
            .zip(design.cell_levels(cell))
            .map(|(_, level)| crate::plan::resolved::FactorPart::Hold(level.to_owned()))
            .collect();
        let found = Groups::of(design, trial, sample, &alone).map_err(|refusal| crate::execute::words::refusal(&refusal, design))?;
        let earlier: Vec<f64> = found.rows[0].iter().map(|row| row.earlier).collect();
        if earlier.len() > 1 {
            let own = summary(&earlier);
            squares += own.sd * own.sd * (earlier.len() as f64 - 1.0);
            df += earlier.len() as f64 - 1.0;
        }
    }
    if df == 0.0 {
        return Err("no arm has two subjects, so that there is no standard deviation before".to_owned());
    }
    let s = (squares / df).sqrt();
    let pairs: Vec<(f64, f64)> = groups.rows[0].iter().map(|row| (row.earlier, row.later)).collect();
    let reliability = chosen.comparison.reliability.unwrap_or(0.0);
    let found =
        reliable_change(&pairs, s, reliability, chosen.comparison.level, chosen.higher_is_better).map_err(|refusal| refusal.reason)?;
    let details = &mut entry.details;
    put_number(details, "standard_deviation", s);
    put_number(details, "standard_error_of_difference", found.standard_error_of_difference);
    let known = machine.program.plan.outcomes[sample.outcome].better.is_some();
    let names = if known { ["improved", "unchanged", "deteriorated"] } else { ["fell", "unchanged", "rose"] };
    for (name, number) in names.into_iter().zip([found.improved, found.unchanged, found.deteriorated]) {
        put_number(details, name, number as f64);
    }
    entry.estimate = Finite::new(found.improved as f64 / pairs.len().max(1) as f64);
    Ok(())
}

fn two(groups: &Groups) -> Result<[Vec<f64>; 2], String> {
    groups.gains().try_into().map_err(|_| "it compares two arms".to_owned())
}

fn numbers(values: &[f64]) -> Detail {
    Detail::Numbers(values.iter().copied().filter_map(Finite::new).collect())
}
