//! Steps, screens, tests and hypotheses of a resolved plan.
//!
//! A key that came with a later release is left out of the resolved form where it says what was always done, so that the
//! plans sealed before keep their hashes.

use super::{Condition, Estimate, Factor};
use serde::{Deserialize, Serialize};

/// One step.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Step {
    /// Identifier.
    pub id: String,
    /// What it does.
    pub action: Action,
    /// The outcome it is about.
    pub outcome: String,
    /// Confirmatory, supportive or exploratory.
    pub role: Role,
    /// Condition under which it runs; `None`: always.
    pub when: Option<Condition>,
    /// Why this choice was made, in the author's words.
    pub because: Option<String>,
}

/// Role of a step.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Role {
    /// Part of the confirmatory strategy.
    Confirmatory,
    /// Supports the confirmatory results.
    Supportive,
    /// Exploratory.
    Exploratory,
}

/// What a step does.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Action {
    /// Looks at an assumption.
    Screen(Screen),
    /// Takes decisions.
    Test(Test),
    /// Reports sizes.
    Estimate(Estimate),
}

/// A value fixed in the plan, or chosen by cases when the step runs.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Choice<T> {
    /// Fixed.
    Fixed(T),
    /// Tried in order; `otherwise` where none holds.
    Cases {
        /// The cases, in order.
        cases: Vec<Case<T>>,
        /// The compulsory last one.
        otherwise: T,
    },
}

/// One case of a [`Choice`].
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Case<T> {
    /// When it is taken.
    pub when: Condition,
    /// What is then used.
    #[serde(rename = "use")]
    pub value: T,
}

/// A screen.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Screen {
    /// Which assumption.
    pub kind: ScreenKind,
    /// Where a departure starts, in the unit of the screen: a p-value at or below it, a share of missing values or a
    /// residual in absolute size at or above it.
    pub threshold: Choice<f64>,
    /// Reference of each result, in the order of the design.
    pub references: Vec<String>,
}

/// Assumption that a screen looks at.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum ScreenKind {
    /// Sphericity of a within effect, by Mauchly's test.
    Sphericity {
        /// Within factors of the effect.
        of: Vec<String>,
    },
    /// Equal covariance matrices of the cells, by Box's M.
    EqualCovarianceMatrices,
    /// Equal variances of the cells at each occasion.
    EqualVariances {
        /// Levene's test on the mean or Brown and Forsythe's on the median.
        method: Choice<VarianceMethod>,
    },
    /// Normal residuals at each occasion and on adjacent differences, by Shapiro and Wilk's W.
    NormalResiduals,
    /// Subjects who lie far from the rest of their cell.
    OutlyingValues {
        /// How far is measured.
        method: Choice<OutlyingMethod>,
    },
    /// Share of missing values of each cell at each occasion.
    Missingness,
}

/// How the distance of a subject from the rest of its cell is measured.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum OutlyingMethod {
    /// Externally studentized residual at each occasion; the threshold is its absolute size.
    #[serde(rename = "studentized residuals")]
    StudentizedResiduals,
    /// Mahalanobis distance over all occasions; the threshold is the probability of one as large or larger.
    #[serde(rename = "mahalanobis distances")]
    MahalanobisDistances,
}

/// Centre used by a test of equal variances.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum VarianceMethod {
    /// Deviations from the mean.
    Levene,
    /// Deviations from the median.
    BrownForsythe,
}

/// A test step.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Test {
    /// Omnibus, partial interactions or simple effects.
    pub kind: TestKind,
    /// Factors of the effect, between ones first, in design order.
    pub effect: Vec<String>,
    /// How a hypothesis is tested.
    #[serde(with = "plain_where_fixed")]
    pub method: Choice<Method>,
    /// Which multivariate criterion decides, where the method may be multivariate.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub criterion: Option<Choice<Criterion>>,
    /// How many deals a randomisation test makes, where the method may be one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub deals: Option<u64>,
    /// Covariates of the model.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub covariates: Vec<Covariate>,
    /// One-sided or two-sided.
    #[serde(default, skip_serializing_if = "Sides::are_two")]
    pub sides: Sides,
    /// Margins of an equivalence or non-inferiority test.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub margin: Option<Margin>,
    /// Whose variation judges it.
    pub error: Choice<ErrorTerm>,
    /// Correction for departures from sphericity.
    pub correction: Choice<CorrectionRule>,
    /// How between cells are weighted when averaged.
    pub weights: Weights,
    /// Level for a test in no family; the plan's alpha unless the step says less. Families have their own.
    pub level: f64,
    /// The hypotheses, in the order of the plan's factors and levels.
    pub hypotheses: Vec<Hypothesis>,
}

impl Test {
    /// Whether it tests a claim, equivalence or non-inferiority, which is shown or not.
    pub fn is_claim(&self) -> bool {
        matches!(self.kind, TestKind::Equivalence | TestKind::NonInferiority)
    }
}

/// Kind of a test step.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum TestKind {
    /// One effect of the design.
    Omnibus,
    /// Pieces of an interaction.
    PartialInteractions,
    /// The effect of factors at each level of others.
    SimpleEffects,
    /// Contrasts with weights of their own, or ways of splitting an effect.
    Contrasts,
    /// Two one-sided tests against margins.
    Equivalence,
    /// One one-sided test against a margin.
    NonInferiority,
    /// The product contrast on which an interaction is largest, by a bound that holds for all of them.
    LargestContrast,
}

/// How a hypothesis is tested.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Method {
    /// Univariate F.
    Univariate,
    /// Criteria of the roots of H E^-1.
    Multivariate,
    /// Welch and James: own covariance matrix of each cell (Johansen 1980).
    WelchJames,
    /// Arms dealt again among subjects.
    Randomisation,
}

/// Criterion of a multivariate test.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Criterion {
    /// Pillai's trace.
    Pillai,
    /// Wilks' lambda.
    Wilks,
    /// The trace of Hotelling and Lawley.
    HotellingLawley,
    /// Roy's largest root.
    Roy,
}

/// A covariate, centred at the mean of the subjects analysed.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Covariate {
    /// A column of numbers in the data, one value per subject.
    Column(String),
    /// A value of an outcome at an occasion that the step's contrasts do not use.
    Occasion {
        /// Outcome.
        outcome: String,
        /// Level of each within factor, in design order.
        levels: Vec<String>,
    },
}

/// Which departures from the hypothesis count.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Sides {
    /// Both directions.
    #[default]
    Two,
    /// One direction.
    One {
        /// The level that it favours, or `above zero` or `below zero`.
        favours: String,
    },
}

impl Sides {
    /// Whether both directions count.
    pub fn are_two(&self) -> bool {
        *self == Sides::Two
    }
}

/// Margins within which a difference counts as too small to matter.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Margin {
    /// Lower margin; absent where only the upper one counts.
    pub lower: Option<f64>,
    /// Upper margin; absent where only the lower one counts.
    pub upper: Option<f64>,
    /// What the margins are multiples of; the outcome's unit where nothing is named.
    pub standardizer: Option<MarginStandardizer>,
}

/// Standard deviation, pooled over the cells that a contrast compares, that margins are multiples of.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum MarginStandardizer {
    /// At the first occasion that the contrast uses.
    #[serde(rename = "baseline sd")]
    BaselineSd,
    /// Root of the mean of the variances at the occasions that the contrast uses.
    #[serde(rename = "root mean square sd")]
    RootMeanSquareSd,
    /// Of the contrast between occasions.
    #[serde(rename = "change sd")]
    ChangeSd,
}

/// Whose variation judges a piece.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum ErrorTerm {
    /// The cells and occasions that the piece concerns.
    #[serde(rename = "own")]
    Own,
    /// Every arm, the piece's occasions.
    #[serde(rename = "own occasions")]
    OwnOccasions,
    /// The whole design's error term.
    #[serde(rename = "pooled")]
    Pooled,
}

/// Correction for departures from sphericity.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Correction {
    /// None.
    #[serde(rename = "none")]
    None,
    /// Greenhouse and Geisser's epsilon.
    #[serde(rename = "greenhouse-geisser")]
    GreenhouseGeisser,
    /// Huynh and Feldt's epsilon with Lecoutre's correction for groups.
    #[serde(rename = "huynh-feldt")]
    HuynhFeldt,
    /// Huynh and Feldt's epsilon as printed in 1976.
    #[serde(rename = "huynh-feldt 1976")]
    HuynhFeldt1976,
    /// The least possible epsilon.
    #[serde(rename = "lower bound")]
    LowerBound,
}

/// A correction, or one that follows the Greenhouse-Geisser epsilon.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum CorrectionRule {
    /// Always this one.
    Always(Correction),
    /// By the size of epsilon (Greenhouse-Geisser).
    ByEpsilon {
        /// Tried in order: bound, and what is used where epsilon is below it.
        below: Vec<(f64, Correction)>,
        /// Used where epsilon is below none of them.
        otherwise: Correction,
    },
}

/// How between cells are weighted when averaged.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Weights {
    /// Cell means count alike.
    Equal,
    /// By the number of subjects analysed.
    Observed,
}

/// One hypothesis L B M = 0, as a product over the factors of the design.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Hypothesis {
    /// How it is referred to, such as `pieces / cast off vs week 6`.
    pub reference: String,
    /// In words for tables, such as `coached minus booklet, week 6 minus cast off`.
    pub label: String,
    /// Part of each between factor, in design order.
    pub between: Vec<FactorPart>,
    /// Part of each within factor, in design order.
    pub within: Vec<FactorPart>,
    /// Whether it is one comparison, so that its verdict has a direction.
    pub comparison: bool,
    /// Which level an estimate above or below zero favours, where the language grants that word.
    pub favours: Option<Favours>,
}

/// What a hypothesis does with one factor.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum FactorPart {
    /// Averaged over with equal weights.
    Average,
    /// All its contrasts (levels less one).
    Whole,
    /// Held at one level.
    Hold(String),
    /// One contrast: weight of each level named, as written; the others weigh zero.
    Weights(Vec<LevelWeight>),
    /// A mean of levels: weights as written, which sum to one.
    Mean(Vec<LevelWeight>),
    /// The mean of the later levels minus this level.
    AgainstLater(String),
    /// The orthogonal polynomial of this degree over the levels, per unit of spacing.
    Trend {
        /// 1 is linear.
        degree: usize,
        /// Position of each level, as written; evenly spaced ones are 0, 1, 2 and so on.
        spacing: Vec<f64>,
    },
}

impl FactorPart {
    /// Whether a level of the factor takes part.
    pub fn weighs(&self, factor: &Factor, level: &str) -> bool {
        let place = |level: &str| factor.levels.iter().position(|other| other == level);
        match self {
            FactorPart::Average | FactorPart::Whole | FactorPart::Trend { .. } => true,
            FactorPart::Hold(held) => held == level,
            FactorPart::AgainstLater(first) => place(level) >= place(first),
            FactorPart::Weights(weights) | FactorPart::Mean(weights) => weights.iter().any(|one| one.level == level && one.weight != 0.0),
        }
    }
}

/// A level and its weight.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LevelWeight {
    /// Level.
    pub level: String,
    /// Weight as written.
    pub weight: f64,
}

/// Which level each direction favours.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Favours {
    /// Level favoured by an estimate above zero.
    pub above: String,
    /// Level favoured by an estimate below zero.
    pub below: String,
}

/// A choice whose fixed value stands as such, as it did before choices of this key could have cases.
mod plain_where_fixed {
    use super::{Case, Choice};
    use serde::{Deserialize, Deserializer, Serialize, Serializer};

    #[derive(Serialize, Deserialize)]
    #[serde(untagged)]
    enum Written<T> {
        Fixed(T),
        Cases { cases: Vec<Case<T>>, otherwise: T },
    }

    pub fn serialize<T: Clone + Serialize, S: Serializer>(choice: &Choice<T>, serializer: S) -> Result<S::Ok, S::Error> {
        match choice.clone() {
            Choice::Fixed(value) => Written::Fixed(value),
            Choice::Cases { cases, otherwise } => Written::Cases { cases, otherwise },
        }
        .serialize(serializer)
    }

    pub fn deserialize<'de, T: Deserialize<'de>, D: Deserializer<'de>>(deserializer: D) -> Result<Choice<T>, D::Error> {
        Ok(match Written::deserialize(deserializer)? {
            Written::Fixed(value) => Choice::Fixed(value),
            Written::Cases { cases, otherwise } => Choice::Cases { cases, otherwise },
        })
    }
}
