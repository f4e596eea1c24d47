//! Quantities of a map's pointings against their distance from the centre, one frame below the other.

use super::axis::extent;
use super::canvas::{Align, Canvas, page};
use super::plot::{Frame, HEIGHT_BELOW_MM, Interval, Scale};
use super::style::{self, NOTE, PAPER, TITLE, leading_mm};
use super::text;
use crate::report::ReportError;

/// A curve in a panel.
#[derive(Clone, Debug, PartialEq)]
pub struct RadiusCurve {
    /// What it is.
    pub label: String,
    /// Distances (arcsec, ascending) and values.
    pub points: Vec<(f64, f64)>,
}

/// One quantity.
#[derive(Clone, Debug, PartialEq)]
pub struct RadiusPanel {
    /// Name and unit of the quantity.
    pub label: String,
    /// Distance from the centre, arcsec, and value with the ends of its interval.
    pub points: Vec<(f64, Interval)>,
    /// What is fitted.
    pub curves: Vec<RadiusCurve>,
    /// What was found, a line each.
    pub notes: Vec<String>,
}

/// Quantities against radius.
#[derive(Clone, Debug, PartialEq)]
pub struct RadiusFigure {
    /// Heading.
    pub title: String,
    /// Quantities from the top.
    pub panels: Vec<RadiusPanel>,
}

const WIDTH_MM: f64 = 88.0;
const LEFT_MM: f64 = 15.0;
const RIGHT_MM: f64 = 85.5;
const TOP_MM: f64 = 7.0;
const FRAME_MM: f64 = 40.0;
const GAP_MM: f64 = 3.0;
/// Share of points at either end of an axis that may lie outside: single bad ones would stretch it.
const OUTSIDE: f64 = 0.02;

impl RadiusFigure {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        let radii = self.panels.iter().flat_map(|panel| &panel.points);
        let (_, farthest) = extent(radii.map(|(radius, _)| *radius)).unwrap_or((0.0, 1.0));
        let across = (0.0, 1.03 * farthest);
        let heading_mm = |panel: &RadiusPanel| {
            let lines = panel.notes.len() + usize::from(!panel.curves.is_empty());
            leading_mm(NOTE) * lines as f64 + 1.0
        };
        let below = HEIGHT_BELOW_MM + GAP_MM;
        let heights = self
            .panels
            .iter()
            .map(|one| heading_mm(one) + FRAME_MM + below);
        let height = TOP_MM + heights.sum::<f64>();
        page(WIDTH_MM, height, &self.title, |canvas| {
            canvas.rectangle((0.0, 0.0), (WIDTH_MM, height), PAPER)?;
            let title =
                text::shortened(&self.title, RIGHT_MM - LEFT_MM, TITLE.size_pt, TITLE.weight);
            canvas.text(&text::plain(&title), (LEFT_MM, 4.6), Align::Start, TITLE)?;
            let mut top = TOP_MM;
            for panel in &self.panels {
                let frame_top = top + heading_mm(panel);
                panel.heading(canvas, top)?;
                panel.draw(canvas, (frame_top, frame_top + FRAME_MM), across)?;
                top = frame_top + FRAME_MM + below;
            }
            Ok(())
        })
    }
}

impl RadiusPanel {
    /// Notes, and below them the names of the curves beside their strokes.
    fn heading(&self, canvas: &Canvas<'_>, top: f64) -> Result<(), ReportError> {
        let mut base = top + 0.8 * leading_mm(NOTE);
        for note in &self.notes {
            let note = text::shortened(note, RIGHT_MM - LEFT_MM, NOTE.size_pt, NOTE.weight);
            canvas.text(&text::plain(&note), (LEFT_MM, base), Align::Start, NOTE)?;
            base += leading_mm(NOTE);
        }
        let mut left = LEFT_MM;
        for (index, curve) in self.curves.iter().enumerate() {
            let middle = base - 0.75;
            canvas.line(&[(left, middle), (left + 5.0, middle)], style::model(index))?;
            left += 6.2;
            canvas.text(&text::plain(&curve.label), (left, base), Align::Start, NOTE)?;
            left += text::span_width_mm(&curve.label, NOTE.size_pt, NOTE.weight) + 3.0;
        }
        Ok(())
    }

    fn draw(
        &self,
        canvas: &Canvas<'_>,
        (top, bottom): (f64, f64),
        across: (f64, f64),
    ) -> Result<(), ReportError> {
        let ends = |end: fn(&Interval) -> f64| {
            let mut ends: Vec<f64> = self.points.iter().map(|(_, one)| end(one)).collect();
            ends.sort_by(f64::total_cmp);
            // Not negative, and below the number of points.
            #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
            let cut = (OUTSIDE * ends.len() as f64).ceil() as usize;
            ends[cut.min(ends.len() / 2)..ends.len() - cut.min(ends.len() / 2)].to_vec()
        };
        let curves = self.curves.iter().flat_map(|curve| &curve.points);
        let shown = (ends(|one| one.low).into_iter())
            .chain(ends(|one| one.high))
            .chain(curves.map(|(_, value)| *value));
        let (low, high) = extent(shown).unwrap_or((-1.0, 1.0));
        let margin = 0.06 * (high - low).max(1e-9);
        let up = (low - margin, high + margin);
        let box_mm = (LEFT_MM, RIGHT_MM, top, bottom);
        let frame = Frame::new(box_mm, across, up, (Scale::Even, Scale::Even));
        if up.0 < 0.0 && up.1 > 0.0 {
            frame.level(canvas, 0.0)?;
        }
        for (radius, value) in &self.points {
            if value.value < up.0 || value.value > up.1 {
                continue;
            }
            let at = Interval {
                value: *radius,
                low: *radius,
                high: *radius,
            };
            frame.point(canvas, (at, *value), 0, true)?;
        }
        for (index, curve) in self.curves.iter().enumerate() {
            let points: Vec<(f64, f64)> = (curve.points.iter())
                .map(|(radius, value)| frame.place(*radius, *value))
                .collect();
            canvas.line(&points, style::model(index))?;
        }
        let name = "distance from the centre (arcsec)";
        frame.draw(canvas, (Some(name), Some(&self.label)))
    }
}
