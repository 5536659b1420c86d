//! The bias-corrected and accelerated bootstrap over subjects, drawn within arms.

use super::super::put;
use super::groups::{Groups, Scores};
use crate::canon::hash::Hasher;
use crate::execute::deals::threads;
use crate::results::Entry;
use crate::stats::resample::{ArmMoments, ArmRows, BcaInterval, Resamples, Spread, bca_of_moments, bca_of_rows};
use crate::stats::sizes::Refusal;

/// A statistic of the scores of each cell.
pub(super) type OfScores<'s> = dyn Fn(&[Vec<Scores>]) -> Result<f64, Refusal> + Sync + 's;

/// What an interval asks for.
#[derive(Clone, Copy)]
pub(in crate::execute::steps) struct Bootstrap<'b> {
    pub resamples: Option<u64>,
    pub level: f64,
    /// Cells and weights of occasions, as bits.
    pub identity: &'b [u64],
}

impl Bootstrap<'_> {
    fn options(&self) -> Result<Resamples, String> {
        let asked = self.resamples.ok_or("the plan does not say how often subjects are drawn again")?;
        let mut hasher = Hasher::new();
        hasher.update(b"aforesaid random numbers 1\n");
        hasher.update(b"bca\0");
        hasher.update(&asked.to_be_bytes());
        self.identity.iter().for_each(|bits| hasher.update(&bits.to_be_bytes()));
        Ok(Resamples { asked, level: self.level, key: hasher.finish().0, threads: threads() })
    }
}

/// The interval of a statistic of whole rows.
pub(super) fn of_rows(asked: &Bootstrap<'_>, groups: &Groups, statistic: &OfScores<'_>, entry: &mut Entry) -> Result<(f64, f64), String> {
    let sizes: Vec<usize> = groups.rows.iter().map(Vec::len).collect();
    let of_picks = |picks: &[Vec<u32>], out: &mut [f64]| {
        let drawn: Vec<Vec<Scores>> =
            picks.iter().zip(&groups.rows).map(|(picks, rows)| picks.iter().map(|pick| rows[*pick as usize]).collect()).collect();
        out[0] = statistic(&drawn).unwrap_or(f64::NAN);
    };
    let found = bca_of_rows(&sizes, 1, &of_picks, &asked.options()?).map_err(|refusal| refusal.to_string())?;
    only(found, entry)
}

/// The interval of a statistic of the moments of two scores of one arm.
pub(in crate::execute::steps) fn of_pair(
    asked: &Bootstrap<'_>,
    pairs: &[f64],
    statistic: &(dyn Fn(&ArmMoments) -> f64 + Sync),
    entry: &mut Entry,
) -> Result<(f64, f64), String> {
    let arm = vec![0; pairs.len() / 2];
    let of_moments = |arms: &[ArmMoments], out: &mut [f64]| out[0] = statistic(&arms[0]);
    let found = bca_of_moments(
        &ArmRows { values: pairs, occasions: 2, arm: &arm, arms: 1, kept: None },
        Spread::Covariances,
        1,
        &of_moments,
        &asked.options()?,
    )
    .map_err(|refusal| refusal.to_string())?;
    only(found, entry)
}

/// The one interval asked for; what it was made of goes into the entry.
fn only(found: Vec<Result<BcaInterval, crate::stats::resample::Refusal>>, entry: &mut Entry) -> Result<(f64, f64), String> {
    let interval = found.into_iter().next().ok_or("nothing was asked for")?.map_err(|refusal| refusal.to_string())?;
    let details = &mut entry.details;
    put(details, "resamples", interval.resamples as f64);
    put(details, "degenerate_resamples", interval.degenerate as f64);
    put(details, "bias_correction", interval.z0);
    put(details, "acceleration", interval.acceleration);
    put(details, "lower_quantile", interval.lower_level);
    put(details, "upper_quantile", interval.upper_level);
    Ok((interval.lower, interval.upper))
}
