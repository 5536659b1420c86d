use std::fmt;

use crate::stats::model;

/// Why a result by dealing or drawing again is not given.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub enum Refusal {
    /// The statistic has no value on the data as they are.
    Observed(model::Refusal),
    /// A direction was asked for, but the hypothesis is not one contrast.
    DirectionOfSeveral {
        /// Its degrees of freedom.
        df: usize,
    },
    /// The hypothesis does not compare the labels that are dealt.
    NotOfTheDealtFactor,
    /// Every deal gives the data as they are.
    NothingToDeal,
    /// No deals, or no resamples, were asked for.
    NoneAsked,
    /// The statistic is not a finite number on the data as they are.
    NoEstimate,
    /// An arm has too few subjects to be drawn from.
    FewSubjects {
        /// The arm, counted from 0.
        arm: usize,
        /// Its number of subjects.
        subjects: usize,
    },
    /// Too many resamples in which the statistic is not a finite number.
    Degenerate {
        /// How many.
        degenerate: u64,
        /// Of how many.
        resamples: u64,
    },
    /// All resamples lie on one side of the estimate.
    OneSide,
    /// The statistic does not vary as single subjects are left out, or has no value without one of them.
    NoAcceleration,
    /// The level of a limit lies beyond the first or last resample.
    LevelOutOfReach {
        /// Resamples that count.
        resamples: u64,
    },
}

impl From<model::Refusal> for Refusal {
    fn from(refusal: model::Refusal) -> Refusal {
        Refusal::Observed(refusal)
    }
}

impl fmt::Display for Refusal {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Refusal::Observed(refusal) => refusal.fmt(out),
            Refusal::DirectionOfSeveral { df } => write!(
                out,
                "a one-sided test needs one contrast, but this hypothesis has {df} degrees of freedom; test it two-sided or name one contrast"
            ),
            Refusal::NotOfTheDealtFactor => write!(
                out,
                "the hypothesis does not compare the arms that are dealt, so that dealing them again says nothing about it; \
                 its weights must sum to zero and differ between the dealt arms"
            ),
            Refusal::NothingToDeal => write!(
                out,
                "there is nothing to deal: within every stratum all subjects have the same arm, so that every deal gives the data as they are"
            ),
            Refusal::NoEstimate => write!(
                out,
                "the statistic has no value on the data as they are, so that there is nothing to put an interval around; \
                 look for a spread of zero"
            ),
            Refusal::FewSubjects { arm, subjects } => {
                write!(out, "arm {} has {subjects} subject(s); drawing again with one left out needs at least three", arm + 1)
            }
            Refusal::Degenerate { degenerate, resamples } => write!(
                out,
                "the statistic has no value in {degenerate} of {resamples} resamples, more than the 1 % that is allowed: \
                 too few different values for a bootstrap"
            ),
            Refusal::OneSide => write!(
                out,
                "all resamples lie on one side of the estimate, so that its bias cannot be corrected: \
                 too few resamples, or a statistic at the edge of its range"
            ),
            Refusal::NoAcceleration => write!(
                out,
                "the acceleration cannot be had: the statistic stays the same whoever is left out, or has no value without one of the subjects"
            ),
            Refusal::LevelOutOfReach { resamples } => write!(
                out,
                "{resamples} resamples are too few for this level: the corrected limit lies beyond the outermost of them; ask for more resamples"
            ),
            Refusal::NoneAsked => write!(out, "the number of deals or resamples is zero; ask for at least one"),
        }
    }
}

impl std::error::Error for Refusal {}
