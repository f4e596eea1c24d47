//! One frame with two axes, for figures of many sources: ticks, labels, points with errors.

use super::axis::{Axis, Ticks};
use super::canvas::{Align, Canvas};
use super::style::{GUIDE, INK, LABEL, POINT_MM, TICK, solid};
use super::text;
use crate::report::ReportError;
use plotters::style::RGBColor;

/// A value with the ends of its interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// The value.
    pub value: f64,
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

/// How values lie on an axis.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Scale {
    /// As they are.
    Even,
    /// By their decimal logarithm.
    Log,
}

/// Colours of groups, told apart by their shapes too. No blue and no red: those are senses of asymmetry.
pub(super) const GROUPS: [RGBColor; 6] = [
    RGBColor(22, 112, 104),
    RGBColor(214, 138, 10),
    RGBColor(92, 30, 104),
    RGBColor(120, 140, 40),
    RGBColor(60, 66, 74),
    RGBColor(170, 110, 150),
];

/// A frame on the page.
pub(super) struct Frame {
    pub(super) across: Axis,
    pub(super) up: Axis,
    pub(super) scales: (Scale, Scale),
    /// Most ticks on either axis.
    most: (usize, usize),
}

pub(super) const TICK_MM: f64 = 0.9;

/// Room below a frame for its numbers and its axis' name.
pub(super) const HEIGHT_BELOW_MM: f64 = 7.6;

impl Frame {
    /// A frame from its left, right, top and bottom on the page and the values at its ends, logarithms taken
    /// already.
    pub(super) fn new(
        (left, right, top, bottom): (f64, f64, f64, f64),
        across: (f64, f64),
        up: (f64, f64),
        scales: (Scale, Scale),
    ) -> Self {
        Self {
            across: Axis {
                low: across.0,
                high: across.1,
                start_mm: left,
                end_mm: right,
            },
            up: Axis {
                low: up.0,
                high: up.1,
                start_mm: bottom,
                end_mm: top,
            },
            scales,
            most: (7, 6),
        }
    }

    /// The same with at most so many ticks across and up.
    pub(super) fn with_ticks(self, across: usize, up: usize) -> Self {
        Self {
            most: (across, up),
            ..self
        }
    }

    /// A place on the page, and within the frame.
    pub(super) fn place(&self, x: f64, y: f64) -> (f64, f64) {
        (
            placed(&self.across, self.scales.0, x),
            placed(&self.up, self.scales.1, y),
        )
    }

    /// Lines of the frame, ticks with numbers, and the axes' names; `None` leaves an axis without numbers.
    pub(super) fn draw(
        &self,
        canvas: &Canvas<'_>,
        names: (Option<&str>, Option<&str>),
    ) -> Result<(), ReportError> {
        let line = solid(INK, 0.2);
        let (left, right) = (self.across.start_mm, self.across.end_mm);
        let (bottom, top) = (self.up.start_mm, self.up.end_mm);
        if let Some(name) = names.0 {
            let base = bottom + TICK_MM + 0.36 * POINT_MM * 6.4 + 1.8;
            for (at, label) in ticks(&self.across, self.scales.0, self.most.0) {
                canvas.line(&[(at, bottom), (at, bottom + TICK_MM)], line)?;
                canvas.text(&label, (at, base), Align::Middle, TICK)?;
            }
            let middle = f64::midpoint(left, right);
            let at = (middle, base + 3.2);
            canvas.text(&text::markup(name), at, Align::Middle, LABEL)?;
        }
        if let Some(name) = names.1 {
            let mut widest: f64 = 0.0;
            for (at, label) in ticks(&self.up, self.scales.1, self.most.1) {
                canvas.line(&[(left - TICK_MM, at), (left, at)], line)?;
                widest = widest.max(text::width_mm(&label, TICK.size_pt, TICK.weight));
                let at = (left - TICK_MM - 0.6, at + 0.36 * TICK.size_pt * POINT_MM);
                canvas.text(&label, at, Align::End, TICK)?;
            }
            let at = (left - TICK_MM - widest - 1.6, f64::midpoint(top, bottom));
            canvas.upward_text(&text::markup(name), at, LABEL)?;
        }
        canvas.line(&[(left, top), (left, bottom), (right, bottom)], line)
    }

    /// A faint line from end to end at a height.
    pub(super) fn level(&self, canvas: &Canvas<'_>, value: f64) -> Result<(), ReportError> {
        let (_, y) = self.place(self.across.low, value);
        let ends = [(self.across.start_mm, y), (self.across.end_mm, y)];
        canvas.line(&ends, solid(GUIDE, 0.25))
    }

    /// A point with the bars of its intervals, cut at the frame.
    pub(super) fn point(
        &self,
        canvas: &Canvas<'_>,
        (x, y): (Interval, Interval),
        group: usize,
        filled: bool,
    ) -> Result<(), ReportError> {
        let color = GROUPS[group % GROUPS.len()];
        let at = self.place(x.value, y.value);
        let (low, _) = self.place(x.low, y.value);
        let (high, _) = self.place(x.high, y.value);
        let (_, under) = self.place(x.value, y.low);
        let (_, over) = self.place(x.value, y.high);
        let bar = solid(color, 0.18);
        canvas.line(&[(low, at.1), (high, at.1)], bar)?;
        canvas.line(&[(at.0, under), (at.0, over)], bar)?;
        mark(canvas, at, group, filled)
    }
}

/// The mark of a group: shapes differ as well as colours; one that is not filled is hollow.
pub(super) fn mark(
    canvas: &Canvas<'_>,
    (x, y): (f64, f64),
    group: usize,
    filled: bool,
) -> Result<(), ReportError> {
    const SIZE_MM: f64 = 0.85;
    let color = GROUPS[group % GROUPS.len()];
    let shape = |size: f64| -> Vec<(f64, f64)> {
        let corners: &[(f64, f64)] = match group % GROUPS.len() {
            1 => &[(-1.0, -1.0), (1.0, -1.0), (1.0, 1.0), (-1.0, 1.0)],
            2 => &[(0.0, -1.3), (1.15, 0.9), (-1.15, 0.9)],
            3 => &[(0.0, -1.35), (1.35, 0.0), (0.0, 1.35), (-1.35, 0.0)],
            4 => &[(0.0, 1.3), (1.15, -0.9), (-1.15, -0.9)],
            5 => &[(-0.6, -1.2), (0.6, -1.2), (0.6, 1.2), (-0.6, 1.2)],
            _ => &[],
        };
        corners
            .iter()
            .map(|(dx, dy)| (x + size * dx, y + size * dy))
            .collect()
    };
    let draw = |size: f64, color: RGBColor| {
        if shape(size).is_empty() {
            canvas.dot((x, y), size, color)
        } else {
            canvas.polygon(&shape(size), color)
        }
    };
    draw(SIZE_MM, color)?;
    if filled {
        Ok(())
    } else {
        draw(0.6 * SIZE_MM, super::style::PAPER)
    }
}

fn placed(axis: &Axis, scale: Scale, value: f64) -> f64 {
    let value = match scale {
        Scale::Even => value,
        Scale::Log if value > 0.0 => value.log10(),
        Scale::Log => axis.low,
    };
    axis.place_mm(value.clamp(axis.low, axis.high))
}

/// Places and labels of ticks; powers of ten on a logarithmic axis, 2 and 5 between them where it is short,
/// and round numbers where it is shorter still.
fn ticks(axis: &Axis, scale: Scale, most: usize) -> Vec<(f64, text::Spans)> {
    match scale {
        Scale::Even => {
            let ticks = Ticks::between(axis.low, axis.high, most);
            let labelled = ticks.values.iter();
            labelled
                .map(|value| (axis.place_mm(*value), text::plain(&ticks.label(*value))))
                .collect()
        }
        Scale::Log => {
            #[allow(clippy::cast_possible_truncation, reason = "a power of ten of a float")]
            let (first, last) = (axis.low.floor() as i32, axis.high.ceil() as i32);
            let step = ((last - first).unsigned_abs() as usize)
                .div_ceil(most)
                .max(1);
            let factors: &[i32] = if axis.high - axis.low > 2.0 {
                &[1]
            } else {
                &[1, 2, 5]
            };
            let found: Vec<(f64, text::Spans)> = (first..=last)
                .step_by(step)
                .flat_map(|power| factors.iter().map(move |factor| (*factor, power)))
                .map(|(factor, power)| {
                    (f64::from(factor).log10() + f64::from(power), factor, power)
                })
                .filter(|(value, ..)| axis.contains(*value))
                .map(|(value, factor, power)| (axis.place_mm(value), power_of_ten(factor, power)))
                .collect();
            if found.len() > 1 {
                return found;
            }
            let ticks = Ticks::between(10_f64.powf(axis.low), 10_f64.powf(axis.high), most);
            let labelled = ticks.values.iter();
            labelled
                .map(|value| {
                    let place = axis.place_mm(value.log10());
                    (place, text::plain(&ticks.label(*value)))
                })
                .collect()
        }
    }
}

fn power_of_ten(factor: i32, power: i32) -> text::Spans {
    let decimals = usize::try_from(-power).unwrap_or(0);
    if (-2..=3).contains(&power) {
        let value = f64::from(factor) * 10_f64.powi(power);
        return text::plain(&format!("{value:.decimals$}"));
    }
    let power = format!("10^{{{power}}}").replace('-', "\u{2212}");
    text::markup(&match factor {
        1 => power,
        factor => format!("{factor}\u{d7}{power}"),
    })
}
