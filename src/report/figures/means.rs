//! Means over occasions by arm, with their intervals.

use super::frame::{Drawn, GRID, INK, colour, gap, range, scale};
use crate::plan::resolved::{Design, Outcome};
use crate::report::escape::shorten;
use crate::report::tables::percent;
use crate::results::{CellDescription, Description};
use plotters::prelude::*;

const SIZE: (u32, u32) = (820, 470);

/// Draws the cells of an outcome; nothing where no cell has a mean, or the drawing fails.
pub(super) fn draw(description: &Description, outcome: Option<&Outcome>, design: &Design) -> Option<Drawn> {
    let label = outcome.map_or(description.outcome.as_str(), |outcome| outcome.label.as_str());
    let unit = outcome.and_then(|outcome| outcome.unit.as_deref()).unwrap_or("");
    let (cells, occasions) = (design.cells(), design.occasions());
    let limits = description.cells.iter().flat_map(|cell| {
        let interval = cell.interval.map(|[lower, upper]| [lower.get(), upper.get()]);
        cell.mean.map(|mean| mean.get()).into_iter().chain(interval.into_iter().flatten())
    });
    if description.cells.iter().all(|cell| cell.mean.is_none()) {
        return None;
    }
    let (divisor, times) = scale(&range(limits.clone()));
    let axis = range(limits.map(|value| value / divisor));
    let mut svg = String::new();
    let names: Vec<String> =
        (0..occasions).map(|occasion| shorten(&design.occasion_levels(occasion).join("; "), if occasions > 8 { 8 } else { 18 })).collect();
    paint(
        &mut svg,
        description,
        design,
        &Axes {
            divisor,
            axis,
            names,
            value: format!(
                "{}{}{times}",
                shorten(label, 40),
                if unit.is_empty() { String::new() } else { format!(", {}", shorten(unit, 20)) }
            ),
        },
    )?;
    let arms = if design.between.is_empty() { String::new() } else { " by arm".to_owned() };
    let over = if design.within.is_empty() { "" } else { " over occasions" };
    Some(Drawn {
        title: format!("Means of {label}{over}{arms}, with {} % intervals", percent(description.level)),
        description: format!(
            "{cells} {} with {occasions} {}; the numbers stand in the table of means.",
            if cells == 1 { "group" } else { "groups" },
            if occasions == 1 { "occasion" } else { "occasions" }
        ),
        svg,
    })
}

struct Axes {
    divisor: f64,
    axis: std::ops::Range<f64>,
    names: Vec<String>,
    value: String,
}

fn paint(svg: &mut String, description: &Description, design: &Design, axes: &Axes) -> Option<()> {
    let (cells, occasions) = (design.cells(), design.occasions());
    let area = SVGBackend::with_string(svg, SIZE).into_drawing_area();
    area.fill(&WHITE).ok()?;
    let mut chart = ChartBuilder::on(&area)
        .margin(14)
        .x_label_area_size(44)
        .y_label_area_size(76)
        .build_cartesian_2d(-0.5..occasions as f64 - 0.5, axes.axis.clone())
        .ok()?;
    let name_of = |place: &f64| {
        let nearest = libm::round(*place);
        if (place - nearest).abs() < 0.01 && nearest >= 0.0 {
            axes.names.get(nearest as usize).cloned().unwrap_or_default()
        } else {
            String::new()
        }
    };
    chart
        .configure_mesh()
        .disable_x_mesh()
        .light_line_style(WHITE)
        .bold_line_style(GRID)
        .axis_style(INK)
        .x_labels(2 * occasions + 1)
        .x_label_formatter(&name_of)
        .y_labels(7)
        .y_desc(axes.value.as_str())
        .label_style(("sans-serif", 13, &INK))
        .draw()
        .ok()?;
    // Arms stand side by side, so that intervals do not hide one another.
    let step = (0.5 / cells as f64).min(0.07);
    for cell in 0..cells {
        let shift = (cell as f64 - (cells as f64 - 1.0) / 2.0) * step;
        let of_cell: Vec<(f64, &CellDescription)> = description.cells[cell * occasions..(cell + 1) * occasions]
            .iter()
            .enumerate()
            .map(|(occasion, found)| (occasion as f64 + shift, found))
            .collect();
        let points: Vec<(f64, f64)> =
            of_cell.iter().filter_map(|(place, found)| Some((*place, found.mean?.get() / axes.divisor))).collect();
        let style = colour(cell).stroke_width(2);
        let line = match gap(cell) {
            0 => chart.draw_series(LineSeries::new(points.clone(), style)).ok()?,
            gap => chart.draw_series(DashedLineSeries::new(points.clone(), 8, gap, style)).ok()?,
        };
        if !design.between.is_empty() {
            let (name, ink) = (shorten(&design.cell_levels(cell).join("; "), 28), colour(cell));
            line.label(name).legend(move |(x, y)| PathElement::new(vec![(x, y), (x + 22, y)], ink.stroke_width(3)));
        }
        let bars = of_cell.iter().filter_map(|(place, found)| {
            let [lower, upper] = found.interval?;
            Some(PathElement::new(vec![(*place, lower.get() / axes.divisor), (*place, upper.get() / axes.divisor)], style))
        });
        chart.draw_series(bars).ok()?;
        let fill = colour(cell).filled();
        match cell % 3 {
            0 => chart.draw_series(points.iter().map(|point| Circle::new(*point, 5, fill))).ok()?,
            1 => chart.draw_series(points.iter().map(|point| TriangleMarker::new(*point, 7, fill))).ok()?,
            _ => chart.draw_series(points.iter().map(|point| Cross::new(*point, 5, colour(cell).stroke_width(2)))).ok()?,
        };
    }
    if !design.between.is_empty() {
        chart
            .configure_series_labels()
            .position(SeriesLabelPosition::UpperRight)
            .background_style(WHITE.mix(0.85))
            .border_style(GRID)
            .label_font(("sans-serif", 13, &INK))
            .draw()
            .ok()?;
    }
    area.present().ok()?;
    Some(())
}
