//! The methods that a report used, with their sources.

mod sizes;
mod tests;

use super::input::ReportInput;
use crate::plan::resolved::{Action, Better, CompleteOver, Estimate, MissingData, ScreenKind};
use serde::Serialize;

/// A method and its source.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub(super) struct Method {
    pub what: String,
    pub source: String,
}

pub(super) fn better(better: Better) -> &'static str {
    match better {
        Better::Lower => "lower",
        Better::Higher => "higher",
    }
}

pub(super) fn over(missing: &MissingData) -> &'static str {
    match missing.over {
        CompleteOver::AllOccasions => "all occasions of the outcome",
        CompleteOver::StepOccasions => "the occasions of each step",
    }
}

pub(super) fn methods(input: &ReportInput<'_>) -> Vec<Method> {
    let mut found: Vec<Method> = Vec::new();
    let mut add = |what: &str, source: &str| {
        let method = Method { what: what.to_owned(), source: source.to_owned() };
        if !found.contains(&method) {
            found.push(method);
        }
    };
    let settings = |id: &str, key: &str| {
        input.results.steps.iter().find(|step| step.id == id).and_then(|step| step.settings.get(key)).cloned().unwrap_or_default()
    };
    for step in &input.plan.steps {
        match &step.action {
            Action::Screen(screen) => match &screen.kind {
                ScreenKind::Sphericity { .. } => add(
                    "Sphericity: W of the orthonormal contrasts; p from two terms of the chi-square expansion",
                    "Mauchly 1940; Anderson 1958",
                ),
                ScreenKind::EqualCovarianceMatrices => {
                    add("Equal covariance matrices: M with its F approximation, which decides, and its chi-square", "Box 1949")
                }
                ScreenKind::EqualVariances { .. } => add(
                    "Equal variances: one-way analysis of absolute deviations from the cell means or medians, adjusted over occasions by Holm",
                    "Levene 1960; Brown & Forsythe 1974",
                ),
                ScreenKind::NormalResiduals => add(
                    "Normal residuals: W of the residuals at each occasion and of adjacent differences, adjusted by Holm",
                    "Shapiro & Wilk 1965; Royston 1995 (AS R94)",
                ),
                ScreenKind::OutlyingValues { .. } => add(
                    "Outlying values: externally studentized residuals, or Mahalanobis distances by the beta distribution",
                    "Belsley, Kuh & Welsch 1980; Gnanadesikan & Kettenring 1972",
                ),
                ScreenKind::Missingness => add("Missingness: shares of missing values by arm and occasion", "common practice"),
            },
            Action::Test(test) => {
                tests::methods(test, &settings(&step.id, "method"), &mut add);
                if settings(&step.id, "method") != "univariate" {
                    continue;
                }
                match settings(&step.id, "error").as_str() {
                    "own" => add("Error `own`: the arms and occasions that the comparison concerns", "common practice"),
                    "own occasions" => add("Error `own occasions`: every arm, the occasions of the comparison", "common practice"),
                    _ => add(
                        "Error `pooled`: the whole design's error term; over several strata its df are Satterthwaite's",
                        "Kirk 2013; Satterthwaite 1946",
                    ),
                }
                let correction = settings(&step.id, "correction");
                if correction.contains("greenhouse") {
                    add("Correction: Greenhouse-Geisser epsilon", "Greenhouse & Geisser 1959");
                }
                if correction.contains("huynh-feldt") {
                    add(
                        "Correction: Huynh-Feldt epsilon, with Lecoutre's correction for groups unless 1976 is named; capped at 1",
                        "Huynh & Feldt 1976; Lecoutre 1991",
                    );
                }
                if correction.contains("lower bound") {
                    add("Correction: the least possible epsilon", "Geisser & Greenhouse 1958");
                }
                add("Partial eta squared at uncorrected sums of squares; interval from the noncentral F", "Steiger 2004");
            }
            Action::Estimate(Estimate::CellMeans { .. }) => add("Cell means: interval of Student's t within the cell", "common practice"),
            Action::Estimate(Estimate::StandardizedChange { .. }) => {
                add(
                    "Standardized change: second minus first occasion over the standardizer; J with n - 1 df",
                    "Cumming 2012; Becker 1988; Morris & DeShon 2002; Hedges 1981",
                );
                match settings(&step.id, "interval method").as_str() {
                    "bonett" => add("Intervals of standardized change: Bonett's variance", "Bonett 2008"),
                    "bca" => sizes::bootstrap(&mut add),
                    "noncentral-t" => add("Intervals of standardized change: noncentral t inverted", "Cumming & Finch 2001"),
                    _ => {}
                }
            }
            Action::Estimate(Estimate::VarianceExplained { .. }) => add(
                "Variance explained: partial and generalized eta squared, omega squared",
                "Olejnik & Algina 2003; Steiger 2004; Hays 1963",
            ),
            Action::Estimate(Estimate::Differences { .. }) => {
                add("Differences of means in the outcome's unit: interval of Student's t", "common practice")
            }
            Action::Estimate(Estimate::Comparison(comparison)) => {
                sizes::methods(comparison.measure, &settings(&step.id, "interval method"), &mut add)
            }
        }
    }
    for family in &input.results.families {
        let source = match family.control.as_str() {
            "holm" => "Holm 1979",
            "hochberg" => "Hochberg 1988; needs independent or positively dependent tests",
            "hommel" => "Hommel 1988; needs independent or positively dependent tests",
            "sidak" | "holm-sidak" => "Sidak 1967",
            "benjamini-hochberg" => "Benjamini & Hochberg 1995",
            "benjamini-yekutieli" => "Benjamini & Yekutieli 2001",
            "fixed sequence" => "Maurer, Hothorn & Lehmacher 1995",
            "shaffer" => "Shaffer 1986",
            "fallback" => "Wiens 2003; Bretz, Maurer, Brannath & Posch 2009",
            "graph" => "Bretz, Maurer, Brannath & Posch 2009",
            "max-t" => "Genz & Bretz 2009; single step",
            "westfall-young" => "Westfall & Young 1993; step down on the deals of the arms",
            "none" => "no control of the error over the family",
            _ => "Bonferroni",
        };
        add(&format!("Multiplicity: {}, as adjusted p", family.control), &format!("Wright 1992; {source}"));
    }
    found
}
