//! The standardized mean change of paired data.
//!
//! The change is the second mean minus the first. d = change / standardizer is
//! biased in small samples; multiply it by Hedges' J with m = n - 1
//! ([`super::hedges_j_exact`]) to correct it. Intervals centre on the
//! uncorrected d.

use super::Refusal;
use crate::stats::dist::{noncentral_t, normal};

/// What a mean change is divided by. With s1, s2 the standard deviations at the
/// two occasions, r their correlation and s_c the standard deviation of the change:
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Standardizer {
    /// (s1 + s2) / 2 (common practice).
    AverageSd,
    /// sqrt((s1^2 + s2^2) / 2) (Cumming 2012; Bonett 2008).
    RootMeanSquareSd,
    /// s1 (Becker 1988).
    BaselineSd,
    /// s_c.
    ChangeSd,
    /// s_c / sqrt(2 (1 - r)) (Morris & DeShon 2002).
    ChangeSdCorrelationRemoved,
}

impl Standardizer {
    /// The name that plans and reports use.
    pub fn name(self) -> &'static str {
        match self {
            Self::AverageSd => "average sd",
            Self::RootMeanSquareSd => "root mean square sd",
            Self::BaselineSd => "baseline sd",
            Self::ChangeSd => "change sd",
            Self::ChangeSdCorrelationRemoved => "change sd, correlation removed",
        }
    }
}

/// How the interval of a standardized change is formed from the summary alone.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum IntervalMethod {
    /// d -+ z times Bonett's standard error (Bonett 2008, *Psychological Methods* 13:99).
    Bonett,
    /// The noncentral t inverted (Steiger & Fouladi 1997; Cumming & Finch 2001).
    NoncentralT,
}

/// Means, standard deviations and dependence of two measurements of the same subjects.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PairedSummary {
    n: usize,
    change: f64,
    sd1: f64,
    sd2: f64,
    sd_change: f64,
    /// None where a standard deviation is 0.
    correlation: Option<f64>,
}

/// Rounding may push a correlation this far past 1.
const CORRELATION_SLACK: f64 = 1e-9;

impl PairedSummary {
    /// A summary with the correlation `r` given. Means are those of the first and
    /// the second occasion, standard deviations have divisor n - 1.
    ///
    /// # Errors
    /// Fewer than two subjects; a value that is not finite; a negative standard
    /// deviation; `r` outside -1 to 1.
    pub fn with_correlation(n: usize, means: (f64, f64), sds: (f64, f64), r: f64) -> Result<Self, Refusal> {
        check_numbers(n, &[means.0, means.1, sds.0, sds.1, r], &[sds.0, sds.1])?;
        let (sd1, sd2) = sds;
        let r = within_unit(r).ok_or_else(|| Refusal::new(format!("a correlation lies between -1 and 1, this one is {r}")))?;
        // (s1 - s2)^2 + 2 (1 - r) s1 s2 loses nothing when r is near 1.
        let variance = (sd1 - sd2) * (sd1 - sd2) + 2.0 * (1.0 - r) * sd1 * sd2;
        let correlation = (sd1 > 0.0 && sd2 > 0.0).then_some(r);
        Ok(Self { n, change: means.1 - means.0, sd1, sd2, sd_change: variance.sqrt(), correlation })
    }

    /// A summary with the standard deviation of the change given.
    ///
    /// # Errors
    /// As for [`PairedSummary::with_correlation`]; three standard deviations that
    /// no correlation can bring together.
    pub fn with_sd_of_change(n: usize, means: (f64, f64), sds: (f64, f64), sd_change: f64) -> Result<Self, Refusal> {
        let (sd1, sd2) = sds;
        check_numbers(n, &[means.0, means.1, sd1, sd2, sd_change], &[sd1, sd2, sd_change])?;
        let correlation = if sd1 > 0.0 && sd2 > 0.0 {
            let apart = (sd_change - (sd1 - sd2)) * (sd_change + (sd1 - sd2));
            let r = 1.0 - apart / (2.0 * sd1 * sd2);
            Some(within_unit(r).ok_or_else(|| {
                Refusal::new(format!(
                    "standard deviations of {sd1} and {sd2} cannot go with {sd_change} for the change: \
                     the correlation would have to be {r}"
                ))
            })?)
        } else {
            None
        };
        Ok(Self { n, change: means.1 - means.0, sd1, sd2, sd_change, correlation })
    }

    /// The correlation of the two occasions; absent where one of them does not vary.
    pub fn correlation(&self) -> Option<f64> {
        self.correlation
    }

    /// The standard deviation of the change.
    pub fn sd_of_change(&self) -> f64 {
        self.sd_change
    }
}

fn check_numbers(n: usize, all: &[f64], sds: &[f64]) -> Result<(), Refusal> {
    if n < 2 {
        return Err(Refusal::new(format!("a standardized change needs at least two subjects measured twice; there are {n}")));
    }
    if let Some(bad) = all.iter().find(|v| !v.is_finite()) {
        return Err(Refusal::new(format!("a standardized change needs finite means, standard deviations and correlation; one is {bad}")));
    }
    match sds.iter().find(|s| **s < 0.0) {
        Some(bad) => Err(Refusal::new(format!("a standard deviation cannot be negative ({bad})"))),
        None => Ok(()),
    }
}

fn within_unit(r: f64) -> Option<f64> {
    (r.abs() <= 1.0 + CORRELATION_SLACK).then(|| r.clamp(-1.0, 1.0))
}

/// The value of the standardizer, in outcome units.
///
/// # Errors
/// A standardizer of 0, or one that is undefined because an occasion does not
/// vary or the correlation is 1.
pub fn standardizer_value(summary: &PairedSummary, standardizer: Standardizer) -> Result<f64, Refusal> {
    let PairedSummary { sd1, sd2, sd_change, correlation, .. } = *summary;
    let value = match standardizer {
        Standardizer::AverageSd => 0.5 * (sd1 + sd2),
        Standardizer::RootMeanSquareSd => (0.5 * (sd1 * sd1 + sd2 * sd2)).sqrt(),
        Standardizer::BaselineSd => sd1,
        Standardizer::ChangeSd => sd_change,
        Standardizer::ChangeSdCorrelationRemoved => {
            let r = correlation.ok_or_else(|| {
                Refusal::new(
                    "`change sd, correlation removed` needs the correlation of the two occasions, \
                     which is undefined because one of them does not vary",
                )
            })?;
            if r >= 1.0 {
                return Err(Refusal::new(
                    "`change sd, correlation removed` is undefined: the two occasions correlate \
                     perfectly, so that 2 (1 - r) is 0; another standardizer may be named",
                ));
            }
            sd_change / (2.0 * (1.0 - r)).sqrt()
        }
    };
    if value > 0.0 && value.is_finite() {
        Ok(value)
    } else {
        Err(Refusal::new(format!("the change cannot be standardized by `{}`: that standard deviation is {value}", standardizer.name())))
    }
}

/// d, the change (second mean minus first) over the standardizer; not corrected for bias.
///
/// # Errors
/// As for [`standardizer_value`].
///
/// ```
/// use aforesaid::stats::sizes::{PairedSummary, Standardizer, standardized_change};
/// // Invented figures: twelve subjects, 50 before and 56 after.
/// let summary = PairedSummary::with_correlation(12, (50.0, 56.0), (8.0, 10.0), 0.7).unwrap();
/// assert_eq!(standardized_change(&summary, Standardizer::BaselineSd), Ok(0.75));
/// ```
pub fn standardized_change(summary: &PairedSummary, standardizer: Standardizer) -> Result<f64, Refusal> {
    let value = standardizer_value(summary, standardizer)?;
    let d = summary.change / value;
    if d.is_finite() {
        Ok(d)
    } else {
        Err(Refusal::new(format!("the change over `{}` ({value}) is too large for double precision", standardizer.name())))
    }
}

/// The interval of a standardized change.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ChangeInterval {
    /// Lower limit.
    pub lower: f64,
    /// Upper limit.
    pub upper: f64,
    /// The standard error that the interval rests on; absent where it rests on none.
    pub standard_error: Option<f64>,
}

/// The interval of the standardized change at confidence `level`, where one of that
/// kind is published for the standardizer.
///
/// With d uncorrected and m = n - 1:
///
/// * `change sd`, noncentral t: limits of delta at t = d sqrt n on m df, over sqrt n
///   (exact for normal changes).
/// * `root mean square sd`, Bonett: variance
///   d^2 (s1^4 + s2^4 + 2 r^2 s1^2 s2^2) / (8 m s^4) + s_c^2 / (m s^2).
/// * `baseline sd`, Bonett: variance d^2 / (2 m) + s_c^2 / (m s1^2).
///
/// # Errors
/// A refusal for every other combination, for a standardizer that is 0 or
/// undefined, and for a `level` outside 0 to 1.
pub fn change_interval(
    summary: &PairedSummary,
    standardizer: Standardizer,
    method: IntervalMethod,
    level: f64,
) -> Result<ChangeInterval, Refusal> {
    use IntervalMethod::{Bonett, NoncentralT};
    if !(level > 0.0 && level < 1.0) {
        return Err(Refusal::new(format!("a confidence level lies between 0 and 1, this one is {level}")));
    }
    let variance: fn(&PairedSummary, f64) -> Result<f64, Refusal> = match (standardizer, method) {
        (Standardizer::ChangeSd, NoncentralT) => return exact_interval(summary, level),
        (Standardizer::RootMeanSquareSd, Bonett) => root_mean_square_variance,
        (Standardizer::BaselineSd, Bonett) => baseline_variance,
        _ => return Err(no_such_interval(standardizer, method)),
    };
    let d = standardized_change(summary, standardizer)?;
    let standard_error = variance(summary, d)?.sqrt();
    let half = normal::quantile_upper(0.5 * (1.0 - level))? * standard_error;
    Ok(ChangeInterval { lower: d - half, upper: d + half, standard_error: Some(standard_error) })
}

fn exact_interval(summary: &PairedSummary, level: f64) -> Result<ChangeInterval, Refusal> {
    let d = standardized_change(summary, Standardizer::ChangeSd)?;
    let root_n = (summary.n as f64).sqrt();
    let df = summary.n as f64 - 1.0;
    let (lower, upper) = noncentral_t::noncentrality_limits(d * root_n, df, level)?;
    Ok(ChangeInterval { lower: lower / root_n, upper: upper / root_n, standard_error: None })
}

fn root_mean_square_variance(summary: &PairedSummary, d: f64) -> Result<f64, Refusal> {
    let PairedSummary { n, sd1, sd2, sd_change, correlation, .. } = *summary;
    let m = n as f64 - 1.0;
    // Where an occasion does not vary its covariance with the other is 0, whatever r.
    let r = correlation.unwrap_or(0.0);
    let (v1, v2) = (sd1 * sd1, sd2 * sd2);
    let mean = 0.5 * (v1 + v2);
    let of_sd = d * d * (v1 * v1 + v2 * v2 + 2.0 * r * r * v1 * v2) / (8.0 * m * mean * mean);
    Ok(of_sd + sd_change * sd_change / (m * mean))
}

fn baseline_variance(summary: &PairedSummary, d: f64) -> Result<f64, Refusal> {
    let PairedSummary { n, sd1, sd_change, .. } = *summary;
    let m = n as f64 - 1.0;
    Ok(d * d / (2.0 * m) + sd_change * sd_change / (m * sd1 * sd1))
}

fn no_such_interval(standardizer: Standardizer, method: IntervalMethod) -> Refusal {
    let name = standardizer.name();
    Refusal::new(match (method, standardizer) {
        (IntervalMethod::Bonett, Standardizer::ChangeSd) => {
            format!("Bonett (2008) gives no interval for `{name}`; the noncentral t gives an exact one")
        }
        (IntervalMethod::Bonett, Standardizer::AverageSd) => format!(
            "Bonett (2008) gives no interval for `{name}`, (s1 + s2) / 2; it belongs to \
             `root mean square sd`, sqrt((s1^2 + s2^2) / 2). Name that standardizer, or a bootstrap \
             interval for this one"
        ),
        (IntervalMethod::Bonett, _) => format!("Bonett (2008) gives no interval for `{name}`; a bootstrap interval can be named instead"),
        (IntervalMethod::NoncentralT, Standardizer::RootMeanSquareSd | Standardizer::BaselineSd) => {
            format!(
                "`{name}` does not follow a noncentral t in paired data, only `change sd` does; \
                 name Bonett's interval or a bootstrap one"
            )
        }
        (IntervalMethod::NoncentralT, _) => format!(
            "`{name}` does not follow a noncentral t in paired data, only `change sd` does; \
             a bootstrap interval can be named instead"
        ),
    })
}
