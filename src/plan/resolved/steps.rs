//! Steps, hypotheses, conditions, families and conclusions of a resolved plan.

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
    /// A p-value at or below this shows a departure.
    pub threshold: Choice<f64>,
    /// Reference of each result: one, or one per occasion for equal variances over several occasions.
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
    pub method: Method,
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
}

/// How a hypothesis is tested.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Method {
    /// Univariate F.
    Univariate,
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

/// An estimate step.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Estimate {
    /// Mean of each cell at each occasion with the interval of Student's t within the cell.
    CellMeans {
        /// Confidence level.
        level: f64,
        /// One item per cell and occasion, cells slowest.
        items: Vec<CellMean>,
    },
    /// Standardized change between two occasions within each cell.
    StandardizedChange {
        /// What divides the change.
        standardizer: Choice<Standardizer>,
        /// Hedges' small-sample correction.
        small_sample_correction: Choice<SmallSample>,
        /// Interval, where one is asked for.
        interval: ChangeInterval,
        /// One item per cell and pair of occasions, pairs slowest.
        items: Vec<Change>,
    },
    /// Share of variance that tested effects explain.
    VarianceExplained {
        /// References of the tests.
        of: Vec<String>,
        /// Which forms.
        kinds: Vec<VarianceExplainedKind>,
        /// Factors that are measured, not manipulated; decides the generalized form.
        measured_factors: Vec<String>,
        /// Confidence level of the interval of the partial form.
        level: f64,
        /// Reference of each result, one per entry of `of`.
        references: Vec<String>,
    },
}

/// One cell mean.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellMean {
    /// Reference, such as `means / coached at week 6`.
    pub reference: String,
    /// In words.
    pub label: String,
    /// Number of the between cell.
    pub cell: usize,
    /// Number of the occasion.
    pub occasion: usize,
}

/// One standardized change: within one between cell, `second` minus `first`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Change {
    /// Reference, such as `sizes / cast off vs week 6 at coached`.
    pub reference: String,
    /// In words.
    pub label: String,
    /// Number of the between cell.
    pub cell: usize,
    /// Part of each within factor at the first (earlier) score: `Hold` or `Average`.
    pub first: Vec<FactorPart>,
    /// Part of each within factor at the second (later) score.
    pub second: Vec<FactorPart>,
}

/// What divides a change.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Standardizer {
    /// Mean of the two standard deviations.
    #[serde(rename = "average sd")]
    AverageSd,
    /// Root of the mean of the two variances.
    #[serde(rename = "root mean square sd")]
    RootMeanSquareSd,
    /// Standard deviation at the first occasion.
    #[serde(rename = "baseline sd")]
    BaselineSd,
    /// Standard deviation of the differences.
    #[serde(rename = "change sd")]
    ChangeSd,
    /// Standard deviation of the differences over the root of 2 (1 - r).
    #[serde(rename = "change sd, correlation removed")]
    ChangeSdCorrelationRemoved,
}

/// Hedges' small-sample correction.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum SmallSample {
    /// d alone.
    No,
    /// g by the exact J.
    Yes,
    /// g by 1 - 3 / (4 m - 1).
    Approximate,
    /// d, and g by the exact J.
    Both,
}

/// Interval of a standardized change.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ChangeInterval {
    /// Confidence level.
    pub level: f64,
    /// Method.
    pub method: Choice<ChangeIntervalMethod>,
}

/// Method of the interval of a standardized change.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum ChangeIntervalMethod {
    /// Bonett's large-sample variance.
    Bonett,
    /// Noncentral t inverted.
    NoncentralT,
    /// No interval.
    None,
}

/// Form of variance explained.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum VarianceExplainedKind {
    /// SS / (SS + SS error).
    #[serde(rename = "partial eta squared")]
    PartialEtaSquared,
    /// Olejnik and Algina's form.
    #[serde(rename = "generalized eta squared")]
    GeneralizedEtaSquared,
}

/// A condition in verdicts. Three-valued: a refusal makes it unknown.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Condition {
    /// All must hold.
    All(Vec<Condition>),
    /// One must hold.
    Either(Vec<Condition>),
    /// Turned over within the tested verdicts only.
    Not(Box<Condition>),
    /// The verdict of what is referred to is one of these words.
    Is {
        /// A step, or one hypothesis of a step.
        reference: String,
        /// The words; any of them will do.
        verdicts: Vec<String>,
    },
}

/// A family of tests.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Family {
    /// Identifier.
    pub id: String,
    /// References of its hypotheses, in order.
    pub members: Vec<String>,
    /// How the error is controlled.
    pub control: Control,
    /// Level of the family.
    pub alpha: f64,
}

/// How a family controls its error.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Control {
    /// Each p as it is.
    None,
    /// Bonferroni.
    Bonferroni,
    /// Sidak.
    Sidak,
    /// Holm.
    Holm,
    /// Holm's steps with Sidak's levels.
    HolmSidak,
    /// Hochberg.
    Hochberg,
    /// Hommel.
    Hommel,
    /// Benjamini and Hochberg (false discovery rate).
    BenjaminiHochberg,
    /// Benjamini and Yekutieli (false discovery rate under any dependence).
    BenjaminiYekutieli,
    /// In the order given, stopping at the first that is not significant.
    #[serde(rename = "fixed sequence")]
    FixedSequence,
}

/// A conclusion.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Conclusion {
    /// When it applies; `None` for `otherwise`.
    pub when: Option<Condition>,
    /// What is said.
    pub say: Vec<SayPart>,
}

/// A part of what a conclusion says.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum SayPart {
    /// Words as written.
    Text(String),
    /// A number of a result.
    Quote {
        /// Of which result.
        reference: String,
        /// Which number.
        what: Quoted,
    },
}

/// A number that a conclusion may quote.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Quoted {
    /// The p-value, uncorrected for multiplicity.
    #[serde(rename = "p")]
    P,
    /// The adjusted p-value.
    #[serde(rename = "adjusted p")]
    AdjustedP,
    /// The estimate.
    #[serde(rename = "estimate")]
    Estimate,
    /// The interval.
    #[serde(rename = "interval")]
    Interval,
    /// The standard error.
    #[serde(rename = "standard error")]
    StandardError,
    /// The test statistic.
    #[serde(rename = "statistic")]
    Statistic,
    /// Its degrees of freedom.
    #[serde(rename = "df")]
    Df,
    /// Subjects analysed.
    #[serde(rename = "n")]
    N,
}
