//! Verdicts as the plan words them.

use crate::execute::steps::in_plan_words;
use crate::execute::verdict::{Direction, Truth, Verdict, Word, holds_of_several};
use crate::plan::resolved::{CorrectionRule, Design, Favours};
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
        (Verdict::NotTested | Verdict::Pending, _) => "not tested".to_owned(),
        (Verdict::Refused, _) => "refused".to_owned(),
        (Verdict::DepartureShown, _) => "departure shown".to_owned(),
        (Verdict::NoDepartureShown, _) => "no departure shown".to_owned(),
    }
}

/// The verdict of a step of several tests: the strongest word that is true of it.
pub(crate) fn step_verdict(verdicts: &[Verdict]) -> &'static str {
    [
        (Word::AllSignificant, "all significant"),
        (Word::AnySignificant, "any significant"),
        (Word::NoneSignificant, "none significant"),
        (Word::NotTested, "not tested"),
    ]
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
