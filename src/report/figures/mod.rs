//! Figures as SVG: text as text, described for those who do not see them, distinguishable without colour.

mod forest;
mod frame;
mod means;
mod weights;

use super::input::ReportInput;
use crate::results::StepResult;

/// A figure with its file name.
#[derive(Debug, Clone)]
pub(super) struct Figure {
    /// File name in `figures/`.
    pub file: String,
    /// The outcome or step that it is about.
    pub about: String,
    /// What it shows.
    pub shows: Shows,
    pub title: String,
    pub svg: String,
}

/// What a figure shows.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Shows {
    /// Means over occasions of an outcome.
    Means,
    /// Sizes of a step.
    Sizes,
    /// Weights of a family's graph.
    Weights,
}

/// Every figure of a report, in the order of their numbers.
pub(super) fn figures(input: &ReportInput<'_>) -> Vec<Figure> {
    let mut figures = Vec::new();
    let mut add = |kind: &str, about: &str, shows: Shows, drawn: Option<frame::Drawn>| {
        if let Some(drawn) = drawn {
            let number = figures.len() + 1;
            let file = format!("{number:02}-{kind}.svg");
            let svg = frame::described(&drawn, number);
            figures.push(Figure { file, about: about.to_owned(), shows, title: drawn.title, svg });
        }
    };
    for description in &input.results.descriptions {
        let outcome = input.plan.outcomes.iter().find(|outcome| outcome.name == description.outcome);
        add("means", &description.outcome, Shows::Means, means::draw(description, outcome, &input.plan.design));
    }
    let sizes = |step: &&StepResult| {
        step.species == "estimate" && !matches!(step.kind.as_str(), "cell means" | "variance explained" | "reliable change")
    };
    for step in input.results.steps.iter().filter(sizes) {
        add("sizes", &step.id, Shows::Sizes, forest::draw(step));
    }
    for result in &input.results.families {
        let family = input.plan.families.iter().find(|family| family.id == result.id);
        add("weights", &result.id, Shows::Weights, family.and_then(|family| weights::draw(result, family)));
    }
    figures
}
