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
            Refusal::NoneAsked => write!(out, "the number of deals or resamples is zero; ask for at least one"),
        }
    }
}

impl std::error::Error for Refusal {}
