//! Sizes side by side, each with its interval.

use super::frame::{Drawn, GRID, INK, colour, range};
use crate::report::escape::shorten;
use crate::report::tables::percent;
use crate::results::{Entry, State, StepResult};
use plotters::prelude::*;

const WIDTH: u32 = 820;
const ROW: u32 = 26;
/// Rows of one figure; the table has all.
const MOST_ROWS: usize = 40;

/// Draws the sizes of a step; nothing where none was computed.
pub(super) fn draw(step: &StepResult) -> Option<Drawn> {
    let rows: Vec<&Entry> =
        step.results.iter().filter(|entry| entry.state == State::Done && entry.estimate_of().is_some()).take(MOST_ROWS).collect();
    if rows.is_empty() {
        return None;
    }
    let mut svg = String::new();
    paint(&mut svg, &rows, &step.kind, no_difference(step))?;
    let level = rows.iter().find(|entry| entry.interval_of().is_some()).and_then(|entry| entry.level);
    let intervals = level.map_or_else(String::new, |level| format!(", with {} % intervals", percent(level)));
    Some(Drawn {
        title: format!("{}{} ({}){intervals}", step.kind[..1].to_uppercase(), &step.kind[1..], step.id),
        description: format!(
            "{} results on one axis, {}, with a line at {}; the numbers stand in the table of the step.",
            rows.len(),
            step.kind,
            if no_difference(step) == 0.0 { "zero" } else { "one half" }
        ),
        svg,
    })
}

/// Where a size says that nothing differs.
fn no_difference(step: &StepResult) -> f64 {
    if step.kind == "probability of superiority" { 0.5 } else { 0.0 }
}

fn paint(svg: &mut String, rows: &[&Entry], kind: &str, line: f64) -> Option<()> {
    let height = 70 + ROW * rows.len() as u32;
    let area = SVGBackend::with_string(svg, (WIDTH, height)).into_drawing_area();
    area.fill(&WHITE).ok()?;
    let limits = rows.iter().flat_map(|entry| {
        let interval = entry.interval_of().map(|[lower, upper]| [lower.get(), upper.get()]);
        entry.estimate_of().map(|d| d.get()).into_iter().chain(interval.into_iter().flatten()).chain([line])
    });
    let axis = range(limits);
    let names: Vec<String> =
        rows.iter().map(|entry| shorten(if entry.label.is_empty() { &entry.reference } else { &entry.label }, 42)).collect();
    let count = rows.len() as f64;
    let mut chart = ChartBuilder::on(&area)
        .margin(12)
        .x_label_area_size(42)
        .y_label_area_size(290)
        .build_cartesian_2d(axis.clone(), -0.5..count - 0.5)
        .ok()?;
    // The first row stands on top.
    let name_of = |place: &f64| {
        let nearest = libm::round(*place);
        let row = count - 1.0 - nearest;
        if (place - nearest).abs() < 0.01 && row >= 0.0 { names.get(row as usize).cloned().unwrap_or_default() } else { String::new() }
    };
    chart
        .configure_mesh()
        .disable_y_mesh()
        .light_line_style(WHITE)
        .bold_line_style(GRID)
        .axis_style(INK)
        .y_labels(2 * rows.len() + 1)
        .y_label_formatter(&name_of)
        .x_labels(9)
        .x_desc(kind)
        .label_style(("sans-serif", 13, &INK))
        .draw()
        .ok()?;
    chart.draw_series([PathElement::new(vec![(line, -0.5), (line, count - 0.5)], INK.stroke_width(1))]).ok()?;
    for (row, entry) in rows.iter().enumerate() {
        let y = count - 1.0 - row as f64;
        if let Some([lower, upper]) = entry.interval_of() {
            chart.draw_series([PathElement::new(vec![(lower.get(), y), (upper.get(), y)], colour(0).stroke_width(2))]).ok()?;
        }
        if let Some(d) = entry.detail("d").or(entry.estimate_of()) {
            chart.draw_series([Circle::new((d.get(), y), 5, colour(0).filled())]).ok()?;
        }
    }
    area.present().ok()?;
    Some(())
}
