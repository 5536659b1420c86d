//! What every figure shares: palette, marks, the range of an axis, and the description of the finished SVG.

use crate::report::escape;
use plotters::prelude::*;

/// A drawn figure, not yet described.
pub(super) struct Drawn {
    pub title: String,
    pub description: String,
    pub svg: String,
}

/// Ink, and colours that differ in lightness as well as hue.
pub(super) const INK: RGBColor = RGBColor(29, 36, 48);
pub(super) const GRID: RGBColor = RGBColor(222, 217, 205);
const PALETTE: [RGBColor; 6] = [
    RGBColor(27, 79, 114),
    RGBColor(191, 97, 6),
    RGBColor(46, 125, 92),
    RGBColor(122, 62, 128),
    RGBColor(120, 120, 120),
    RGBColor(160, 35, 50),
];

pub(super) fn colour(series: usize) -> RGBColor {
    PALETTE[series % PALETTE.len()]
}

/// Gap in the line of a series, in pixels; none for the first.
pub(super) fn gap(series: usize) -> i32 {
    [0, 5, 2, 8, 3, 10][series % 6]
}

/// A range that holds all values with room, also where they are all the same or none is there.
pub(super) fn range(values: impl Iterator<Item = f64>) -> std::ops::Range<f64> {
    let (mut least, mut greatest) = (f64::INFINITY, f64::NEG_INFINITY);
    for value in values {
        least = least.min(value);
        greatest = greatest.max(value);
    }
    if !least.is_finite() || !greatest.is_finite() {
        return 0.0..1.0;
    }
    let size = least.abs().max(greatest.abs());
    let width = greatest - least;
    // Below this the axis could not be divided in doubles.
    let room = if width > 1e-9 * size {
        width * 0.06
    } else if size > 0.0 {
        size * 0.05
    } else {
        1.0
    };
    least - room..greatest + room
}

/// Divides values that no axis can be labelled with (very large, very small) by a power of ten.
pub(super) fn scale(range: &std::ops::Range<f64>) -> (f64, String) {
    let size = range.start.abs().max(range.end.abs());
    if size == 0.0 || (1e-3..1e6).contains(&size) {
        return (1.0, String::new());
    }
    let exponent = libm::floor(libm::log10(size));
    (libm::pow(10.0, exponent), format!(" (times 10^{exponent})"))
}

/// Puts title and description into the SVG for those who hear it read.
pub(super) fn described(drawn: &Drawn, number: usize) -> String {
    let head_end = drawn.svg.find('>').map_or(0, |end| end + 1);
    let (head, rest) = drawn.svg.split_at(head_end);
    let head = head.trim_end_matches('>');
    format!(
        "{head} role=\"img\" aria-labelledby=\"figure-{number}-title figure-{number}-words\">\n<title id=\"figure-{number}-title\">{}</title>\n<desc id=\"figure-{number}-words\">{}</desc>{rest}",
        escape::html(&drawn.title),
        escape::html(&drawn.description)
    )
}
