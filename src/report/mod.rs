//! The report: Markdown and one self-contained HTML page. Computes no number.

pub mod input;

use input::ReportInput;

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

/// Renders a report.
///
/// # Errors
/// A template that does not render.
pub fn render(input: &ReportInput<'_>) -> Result<Rendered, ReportError> {
    let _ = input;
    Err(ReportError { template: "report.md.tera".to_owned(), message: "not written yet".to_owned() })
}
