//! The report: Markdown and one self-contained HTML page. Computes no number.
//!
//! `ReportInput -> view -> Markdown (a template) -> HTML (another)`. Every text of the plan or the data is escaped where the
//! view is made, so that no level name or title can become markup.

mod decisions;
mod escape;
mod families;
mod figures;
mod html;
pub mod input;
mod methods;
mod steps;
mod tables;
mod view;

use input::ReportInput;
use tera::{Context, Tera};

/// A rendered report.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Rendered {
    /// `report.md`.
    pub markdown: String,
    /// `report.html`.
    pub html: String,
    /// File name in `figures/` and SVG.
    pub figures: Vec<(String, String)>,
}

/// Why a report could not be rendered.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ReportError {
    /// The template.
    pub template: String,
    /// What is wrong with it.
    pub message: String,
}

impl std::fmt::Display for ReportError {
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(out, "{}: {}", self.template, self.message)
    }
}

impl std::error::Error for ReportError {}

const MARKDOWN: &str = "report.md.tera";
const PAGE: &str = "page.html.tera";
const BUILT_IN: [(&str, &str); 3] = [
    (MARKDOWN, include_str!("../../templates/report.md.tera")),
    (PAGE, include_str!("../../templates/page.html.tera")),
    ("style.css", include_str!("../../templates/style.css")),
];

/// Renders a report.
///
/// # Errors
/// A template that does not parse, names something undefined, or does not render.
pub fn render(input: &ReportInput<'_>) -> Result<Rendered, ReportError> {
    let template = |name: &str| {
        let own = input.templates.and_then(|templates| templates.get(name)).map(String::as_str);
        own.unwrap_or_else(|| BUILT_IN.iter().find(|(built_in, _)| *built_in == name).map_or("", |(_, text)| text))
    };
    let figures = figures::figures(input);
    let view = view::view(input, &figures);
    let markdown = fill(MARKDOWN, template(MARKDOWN), &view)?;
    let body = html::body(&markdown, &figures);
    let page = html::Page {
        title: escape::html(&input.plan.title),
        style: template("style.css").to_owned(),
        contents: body.contents,
        body: body.html,
    };
    Ok(Rendered {
        markdown,
        html: fill(PAGE, template(PAGE), &page)?,
        figures: figures.into_iter().map(|figure| (figure.file, figure.svg)).collect(),
    })
}

/// Fills a template. A name that the view does not have is an error, also where the engine would let it pass.
fn fill<T: serde::Serialize>(name: &str, template: &str, view: &T) -> Result<String, ReportError> {
    let failed = |error: tera::Error| ReportError { template: name.to_owned(), message: error.to_string() };
    let mut engine = Tera::new();
    engine.autoescape_on(Vec::<&'static str>::new());
    engine.add_raw_template(name, template).map_err(failed)?;
    let known = serde_json::to_value(view).unwrap_or_default();
    for variable in engine.get_template_variables(name).map_err(failed)? {
        if known.get(variable).is_none() {
            let message = format!("the template names `{variable}`, which the report does not have");
            return Err(ReportError { template: name.to_owned(), message });
        }
    }
    let context = Context::from_serialize(view).map_err(failed)?;
    engine.render(name, &context).map_err(failed)
}
