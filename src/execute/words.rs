//! Verdicts as the plan words them.

use crate::execute::steps::in_plan_words;
use crate::execute::verdict::{Direction, Truth, Verdict, Word, holds_of_several};
use crate::plan::resolved::{CorrectionRule, Covariate, Design, Favours};
use crate::stats::model::Refusal;

/// The verdict of one test or screen; a direction is worded `favours LEVEL` where the language grants it.
pub(crate) fn verdict(verdict: Verdict, favours: Option<&Favours>) -> String {
    match (verdict, favours) {
        (Verdict::Significant(Direction::Above), Some(favours)) => format!("favours {}", favours.above),
        (Verdict::Significant(Direction::Below), Some(favours)) => format!("favours {}", favours.below),
        (Verdict::Significant(Direction::Above), None) => "above zero".to_owned(),
        (Verdict::Significant(Direction::Below), None) => "below zero".to_owned(),
        (Verdict::Significant(Direction::None), _) => "significant".to_owned(),
        (Verdict::NotSignificant, _) => "not significant".to_owned(),
        (Verdict::Shown, _) => "shown".to_owned(),
        (Verdict::NotShown, _) => "not shown".to_owned(),
        (Verdict::NotTested | Verdict::Pending, _) => "not tested".to_owned(),
        (Verdict::Refused, _) => "refused".to_owned(),
        (Verdict::DepartureShown, _) => "departure shown".to_owned(),
        (Verdict::NoDepartureShown, _) => "no departure shown".to_owned(),
    }
}

/// The verdict of a step of several tests: the strongest word that is true of it.
pub(crate) fn step_verdict(verdicts: &[Verdict], claims: bool) -> &'static str {
    let words = if claims { ["all shown", "any shown", "none shown"] } else { ["all significant", "any significant", "none significant"] };
    [(Word::AllSignificant, words[0]), (Word::AnySignificant, words[1]), (Word::NoneSignificant, words[2]), (Word::NotTested, "not tested")]
        .into_iter()
        .find(|(word, _)| holds_of_several(*word, verdicts) == Truth::True)
        .map_or("refused", |(_, text)| text)
}

/// A correction rule as a plan would write it.
pub(crate) fn correction_rule(rule: &CorrectionRule) -> String {
    match rule {
        CorrectionRule::Always(correction) => in_plan_words(correction),
        CorrectionRule::ByEpsilon { below, otherwise } => {
            let mut parts: Vec<String> =
                below.iter().map(|(bound, correction)| format!("below {bound}: {}", in_plan_words(correction))).collect();
            parts.push(format!("otherwise: {}", in_plan_words(otherwise)));
            parts.join(", ")
        }
    }
}

/// The direction that a one-sided test counts.
pub(crate) fn direction(favours: &str) -> String {
    if matches!(favours, "above zero" | "below zero") { favours.to_owned() } else { format!("favouring {favours}") }
}

/// Covariates as a list.
pub(crate) fn covariates(covariates: &[Covariate]) -> String {
    covariates.iter().map(covariate).collect::<Vec<_>>().join(", ")
}

/// One covariate.
pub(crate) fn covariate(covariate: &Covariate) -> String {
    match covariate {
        Covariate::Column(column) => column.clone(),
        Covariate::Occasion { outcome, levels } => format!("{outcome} at {}", levels.join("; ")),
    }
}

/// As [`refusal`], covariates named too.
pub(crate) fn refusal_with(of: &Refusal, design: &Design, covariates: &[Covariate]) -> String {
    let name = |number: usize| covariates.get(number).map_or_else(|| (number + 1).to_string(), covariate);
    match of {
        Refusal::ConstantCovariate { covariate } => {
            format!("the covariate {} does not vary within arms, so that it cannot be adjusted for", name(*covariate))
        }
        Refusal::CollinearCovariate { covariate } => format!(
            "the covariate {} is, within arms, a linear copy of the covariates before it, so that their slopes cannot be told apart",
            name(*covariate)
        ),
        Refusal::NotFinite { occasion, .. } if *occasion >= design.occasions() => {
            format!("a value of the covariate {} is not a finite number", name(*occasion - design.occasions()))
        }
        Refusal::OutOfRange { occasion } if *occasion >= design.occasions() => format!(
            "the values of the covariate {} are so large or so small that their squares cannot be held; give them in another unit",
            name(*occasion - design.occasions())
        ),
        other => refusal(other, design),
    }
}

/// A refusal with arms and occasions named as the plan names them.
pub(crate) fn refusal(refusal: &Refusal, design: &Design) -> String {
    let arm = |cell: usize| match design.cell_levels(cell).join("; ") {
        levels if levels.is_empty() => "the subjects".to_owned(),
        levels => levels,
    };
    let visit = |occasion: usize| match design.occasion_levels(occasion).join("; ") {
        levels if levels.is_empty() => String::new(),
        levels => format!(" at {levels}"),
    };
    match refusal {
        Refusal::OutOfRange { occasion } => {
            format!("the values{} are so large or so small that their squares cannot be held; give them in another unit", visit(*occasion))
        }
        Refusal::EmptyCell { cell } => format!("no subject of {} was analysed, so that its mean cannot be estimated", arm(*cell)),
        Refusal::SingularCell { cell, subjects, occasions } => format!(
            "the covariance matrix of {} is singular (subjects: {subjects}, occasions: {occasions}); there are too few subjects, or an occasion is constant or a linear copy of others",
            arm(*cell)
        ),
        Refusal::ConstantDeviations { occasion } => {
            format!("the absolute deviations{} do not vary within arms, so that there is nothing to test against", visit(*occasion))
        }
        Refusal::ConstantOccasion { cell, occasion } => {
            format!("the values of {}{} do not vary, so that they correlate with nothing", arm(*cell), visit(*occasion))
        }
        other => other.to_string(),
    }
}
