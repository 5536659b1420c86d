//! A graph of tests: the weight that each holds, state by state.

use super::frame::{Drawn, GRID, INK, colour};
use crate::plan::resolved::Family;
use crate::report::escape::shorten;
use crate::results::FamilyResult;
use crate::results::numbers::significant;
use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

const ROW: u32 = 44;
const COLUMN: u32 = 92;
/// Members and states of one figure; the table has all.
const MOST: usize = 12;

/// Draws the states of a graph; nothing where it had no update, or is too large to be read.
pub(super) fn draw(result: &FamilyResult, family: &Family) -> Option<Drawn> {
    let start: Vec<f64> = family.weights.clone()?;
    if result.updates.is_empty() || result.members.len() > MOST {
        return None;
    }
    let mut states: Vec<(String, Vec<f64>)> = vec![("start".to_owned(), start)];
    for (number, update) in result.updates.iter().enumerate() {
        states.push((format!("update {}", number + 1), update.weights.iter().map(|weight| weight.get()).collect()));
    }
    let mut svg = String::new();
    paint(&mut svg, result, &states)?;
    Some(Drawn {
        title: format!("Weights of the tests of {}, update by update", result.id),
        description: format!(
            "A row for each of {} tests and a column for each of {} states; a disc's area is the weight that a test holds, and the number stands in it. \
             A ring marks a test that was significant and has handed its weight on. The numbers stand in the table of the family.",
            result.members.len(),
            states.len()
        ),
        svg,
    })
}

fn paint(svg: &mut String, result: &FamilyResult, states: &[(String, Vec<f64>)]) -> Option<()> {
    let (rows, columns) = (result.members.len(), states.len());
    let (left, top) = (280, 48);
    let size = (left + COLUMN * columns as u32 + 16, top + ROW * rows as u32 + 16);
    let area = SVGBackend::with_string(svg, size).into_drawing_area();
    area.fill(&WHITE).ok()?;
    let style = |anchor: HPos| ("sans-serif", 13).into_text_style(&area).color(&INK).pos(Pos::new(anchor, VPos::Center));
    let x = |column: usize| (left + COLUMN * column as u32 + COLUMN / 2) as i32;
    let y = |row: usize| (top + ROW * row as u32 + ROW / 2) as i32;
    for (row, member) in result.members.iter().enumerate() {
        area.draw(&PathElement::new(
            vec![(12, y(row) + ROW as i32 / 2), (size.0 as i32 - 12, y(row) + ROW as i32 / 2)],
            GRID.stroke_width(1),
        ))
        .ok()?;
        area.draw(&Text::new(shorten(member, 40), (left as i32 - 12, y(row)), style(HPos::Right))).ok()?;
    }
    for (column, (name, weights)) in states.iter().enumerate() {
        area.draw(&Text::new(name.clone(), (x(column), top as i32 / 2), style(HPos::Center))).ok()?;
        for (row, weight) in weights.iter().enumerate() {
            let done = result.updates[..column.min(result.updates.len())]
                .iter()
                .any(|update| update.significant && update.member == result.members[row]);
            let centre = (x(column), y(row));
            if done {
                area.draw(&Circle::new(centre, 12, colour(2).stroke_width(2))).ok()?;
            } else if *weight > 0.0 {
                let radius = libm::round(4.0 + 14.0 * weight.sqrt()) as i32;
                area.draw(&Circle::new(centre, radius, colour(0).mix(0.25).filled())).ok()?;
                area.draw(&Circle::new(centre, radius, colour(0).stroke_width(1))).ok()?;
            }
            let text = if done { "done".to_owned() } else { significant(*weight, 3) };
            let below = if done { (centre.0 + 34, centre.1) } else { (centre.0 + 38, centre.1) };
            area.draw(&Text::new(
                text,
                below,
                ("sans-serif", 12).into_text_style(&area).color(&INK).pos(Pos::new(HPos::Center, VPos::Center)),
            ))
            .ok()?;
        }
    }
    area.present().ok()?;
    Some(())
}
