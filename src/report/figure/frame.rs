//! Axes of a small plot: a line on the left and one below, with labelled ticks.

use super::axis::{Axis, Ticks};
use super::canvas::{Align, Canvas};
use super::layout::TICK_MM;
use super::style::{INK, LABEL, POINT_MM, TICK, leading_mm, solid};
use super::text;
use crate::report::ReportError;

/// A value with its label.
pub(super) type Tick = (f64, String);

/// Round ticks of an axis, at most so many.
pub(super) fn round_ticks(axis: &Axis, most: usize) -> Vec<Tick> {
    let ticks = Ticks::between(axis.low, axis.high, most);
    let values = ticks.values.iter();
    values.map(|value| (*value, ticks.label(*value))).collect()
}

/// Height below a plot of tick labels and the axis' label.
pub(super) fn height_below_mm() -> f64 {
    TICK_MM + leading_mm(TICK) + leading_mm(LABEL) + 0.4
}

/// Both axes with their ticks, the label below the horizontal one; `horizontal` goes to the right,
/// `vertical` upward.
pub(super) fn frame(
    canvas: &Canvas<'_>,
    (horizontal, across): (&Axis, &[Tick]),
    (vertical, up): (&Axis, &[Tick]),
    label: &str,
) -> Result<(), ReportError> {
    let line = solid(INK, 0.2);
    let (left, right) = (horizontal.start_mm, horizontal.end_mm);
    let (bottom, top) = (vertical.start_mm, vertical.end_mm);
    canvas.line(&[(left, top), (left, bottom), (right, bottom)], line)?;
    for (value, label) in up {
        let y = vertical.place_mm(*value);
        canvas.line(&[(left - TICK_MM, y), (left, y)], line)?;
        let at = (left - TICK_MM - 0.6, y + 0.36 * TICK.size_pt * POINT_MM);
        canvas.text(&text::plain(label), at, Align::End, TICK)?;
    }
    let baseline = bottom + TICK_MM + leading_mm(TICK) * 0.8;
    for (value, label) in across {
        let x = horizontal.place_mm(*value);
        canvas.line(&[(x, bottom), (x, bottom + TICK_MM)], line)?;
        canvas.text(&text::plain(label), (x, baseline), Align::Middle, TICK)?;
    }
    let at = (f64::midpoint(left, right), baseline + leading_mm(LABEL));
    canvas.text(&text::markup(label), at, Align::Middle, LABEL)
}
