//! Figures as SVG: text as text, described for those who do not see them, distinguishable without colour.

mod forest;
mod frame;
mod means;

use super::input::ReportInput;

/// A figure with its file name.
#[derive(Debug, Clone)]
pub(super) struct Figure {
    /// File name in `figures/`.
    pub file: String,
    /// The outcome or step that it is about.
    pub about: String,
    /// Whether it shows sizes, not means.
    pub of_sizes: bool,
    pub title: String,
    pub svg: String,
}

/// Every figure of a report, in the order of their numbers.
pub(super) fn figures(input: &ReportInput<'_>) -> Vec<Figure> {
    let mut figures = Vec::new();
    let mut add = |kind: &str, about: &str, of_sizes: bool, drawn: Option<frame::Drawn>| {
        if let Some(drawn) = drawn {
            let number = figures.len() + 1;
            let file = format!("{number:02}-{kind}.svg");
            let svg = frame::described(&drawn, number);
            figures.push(Figure { file, about: about.to_owned(), of_sizes, title: drawn.title, svg });
        }
    };
    for description in &input.results.descriptions {
        let outcome = input.plan.outcomes.iter().find(|outcome| outcome.name == description.outcome);
        add("means", &description.outcome, false, means::draw(description, outcome, &input.plan.design));
    }
    for step in input.results.steps.iter().filter(|step| step.kind == "standardized change") {
        add("sizes", &step.id, true, forest::draw(step));
    }
    figures
}
