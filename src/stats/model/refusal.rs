use std::fmt;

/// Why a quantity is not given. Cells and occasions are counted from 0, in the order of the plan.
#[derive(Clone, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum Refusal {
    /// A value is infinite or not a number.
    NotFinite {
        /// Row of the value.
        subject: usize,
        /// Column of the value.
        occasion: usize,
    },
    /// Squares of the values, or products of squares, would leave the range of a double.
    OutOfRange {
        /// The occasion with the extreme values.
        occasion: usize,
    },
    /// No subject at all.
    NoSubjects,
    /// A cell that the hypothesis compares has no subject.
    EmptyCell {
        /// The cell.
        cell: usize,
    },
    /// The weights leave nothing to test.
    NotEstimable,
    /// No cell has a second subject, so that there is no error variance.
    NoErrorDf,
    /// The covariates take up all error degrees of freedom.
    NoErrorDfLeft {
        /// How many covariates there are.
        covariates: usize,
    },
    /// A covariate does not vary within the cells.
    ConstantCovariate {
        /// Which, counted from 0.
        covariate: usize,
    },
    /// A covariate is a linear copy of those before it.
    CollinearCovariate {
        /// Which, counted from 0.
        covariate: usize,
    },
    /// The method takes no covariates.
    TakesNoCovariates,
    /// The largest root of several has no exact or upper-bounded probability.
    SeveralRoots {
        /// How many roots there are.
        roots: usize,
    },
    /// The F approximation to the trace of Hotelling and Lawley has no denominator df.
    HotellingLawleyApproximation {
        /// How many contrasts there are.
        contrasts: usize,
        /// Error degrees of freedom.
        error_df: usize,
    },
    /// The values do not vary within cells.
    NoErrorVariance,
    /// Several error strata are mixed, so that no one epsilon applies.
    SeveralStrata,
    /// nu - q e of Huynh and Feldt's formula is not above zero.
    HuynhFeldtUndefined,
    /// Sphericity cannot fail with a single contrast.
    OneContrast,
    /// The error matrix of the contrasts is singular.
    SingularError {
        /// How many independent contrasts there are.
        rank: usize,
        /// How many contrasts there are.
        contrasts: usize,
        /// Error degrees of freedom.
        error_df: usize,
    },
    /// The covariance matrix of a cell is singular.
    SingularCell {
        /// The cell.
        cell: usize,
        /// Its number of subjects.
        subjects: usize,
        /// Number of occasions.
        occasions: usize,
    },
    /// Cells are to be compared, and there is only one.
    OneCell,
    /// Every absolute deviation of a cell equals the others of that cell.
    ConstantDeviations {
        /// The occasion.
        occasion: usize,
    },
    /// Box's F approximation has no value for so large an M.
    BoxApproximation,
    /// The probability of the statistic could not be computed.
    Probability {
        /// What stands in the way.
        reason: String,
    },
    /// An occasion has no variance, so that it correlates with nothing.
    ConstantOccasion {
        /// The cell.
        cell: usize,
        /// The occasion.
        occasion: usize,
    },
    /// A list of values is too short for what is to be computed from it.
    TooFewValues {
        /// How many there are.
        given: usize,
        /// The fewest that would do.
        fewest: usize,
    },
    /// A list of values is longer than the method was made for.
    TooManyValues {
        /// How many there are.
        given: usize,
        /// The most that would do.
        most: usize,
    },
    /// A value of a list is infinite or not a number.
    ValueNotFinite {
        /// Its position, from 0.
        position: usize,
    },
    /// The values of a list do not vary.
    ConstantValues,
}

impl fmt::Display for Refusal {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Refusal::NotFinite { subject, occasion } => {
                write!(out, "the value of subject {} at occasion {} is not a finite number", subject + 1, occasion + 1)
            }
            Refusal::OutOfRange { occasion } => write!(
                out,
                "the values at occasion {} are so large or so small that their squares cannot be held; give them in another unit",
                occasion + 1
            ),
            Refusal::NoSubjects => write!(out, "there is no subject to analyse"),
            Refusal::EmptyCell { cell } => {
                write!(out, "group {} has no subject, so that its mean cannot be estimated", cell + 1)
            }
            Refusal::NotEstimable => write!(out, "the weights leave nothing to test: every combination of them is zero"),
            Refusal::NoErrorDf => {
                write!(out, "no group that is compared has two subjects or more, so that there is no error variance to test against")
            }
            Refusal::NoErrorDfLeft { covariates } => write!(
                out,
                "no error df are left: with {covariates} covariate{} there are as many parameters as subjects",
                if *covariates == 1 { "" } else { "s" }
            ),
            Refusal::ConstantCovariate { covariate } => {
                write!(out, "covariate {} does not vary within groups, so that it cannot be adjusted for", covariate + 1)
            }
            Refusal::CollinearCovariate { covariate } => write!(
                out,
                "covariate {} is, within groups, a linear copy of other covariates, so that their slopes cannot be told apart",
                covariate + 1
            ),
            Refusal::TakesNoCovariates => write!(out, "this method takes no covariates"),
            Refusal::SeveralRoots { roots } => write!(
                out,
                "Roy's largest root has {roots} roots to choose from here, so that its p-value is only a lower bound, and no verdict can rest on it"
            ),
            Refusal::HotellingLawleyApproximation { contrasts, error_df } => write!(
                out,
                "the F approximation to the trace of Hotelling and Lawley needs more error df than contrasts between occasions, and \
                 there are {error_df} for {contrasts}; Pillai's trace and Wilks' lambda can still be had"
            ),
            Refusal::NoErrorVariance => write!(
                out,
                "the error variance is zero: within groups the values do not vary beyond what rounding leaves, so that there is nothing to test against"
            ),
            Refusal::SeveralStrata => write!(
                out,
                "the error mixes several strata, so that no single epsilon applies to it; use the effect's own error, or no correction"
            ),
            Refusal::HuynhFeldtUndefined => {
                write!(out, "Huynh and Feldt's epsilon has no value: too few subjects for this many contrasts (nu - q e is not above 0)")
            }
            Refusal::OneContrast => {
                write!(out, "sphericity cannot be departed from: there is only one contrast between occasions")
            }
            Refusal::SingularError { rank, contrasts, error_df } => write!(
                out,
                "the error matrix is singular: {contrasts} contrasts between occasions, {rank} of them independent, {error_df} error df; \
                 there are too few subjects, or occasions that are linear copies of others"
            ),
            Refusal::SingularCell { cell, subjects, occasions } => write!(
                out,
                "the covariance matrix of group {} is singular: {subjects} subjects, {occasions} occasions; \
                 there are too few subjects, or an occasion is constant or a linear copy of others",
                cell + 1
            ),
            Refusal::OneCell => write!(out, "there is only one group, so that there is nothing to compare it with"),
            Refusal::ConstantDeviations { occasion } => write!(
                out,
                "the absolute deviations at occasion {} do not vary within groups, so that there is nothing to test against",
                occasion + 1
            ),
            Refusal::BoxApproximation => {
                write!(out, "the F approximation to Box's M has no value here: M lies beyond the range that it covers")
            }
            Refusal::Probability { reason } => {
                write!(out, "the probability could not be computed: {reason}")
            }
            Refusal::ConstantOccasion { cell, occasion } => write!(
                out,
                "the values of group {} at occasion {} do not vary, so that they correlate with nothing",
                cell + 1,
                occasion + 1
            ),
            Refusal::TooFewValues { given, fewest } => {
                write!(out, "there are too few values: {given}, but at least {fewest} are needed")
            }
            Refusal::TooManyValues { given, most } => write!(
                out,
                "there are {given} values, but the published approximation to this test's probability reaches to {most} only; \
                 with so many values look at the distribution itself"
            ),
            Refusal::ValueNotFinite { position } => write!(out, "value number {} is not a finite number", position + 1),
            Refusal::ConstantValues => {
                write!(out, "the values do not vary beyond what rounding leaves, so that the shape of their distribution cannot be judged")
            }
        }
    }
}

impl std::error::Error for Refusal {}
