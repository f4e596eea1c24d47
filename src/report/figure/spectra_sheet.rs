//! The spectra of a map at their places, each with its fit: one small panel a pointing, all of one scale.

use super::axis::{Axis, Ticks, extent};
use super::canvas::{Align, Canvas, page};
use super::export;
use super::style::{
    self, DATA, GUIDE, INK, LABEL, NOTE, PAPER, TICK, TITLE, ZERO, leading_mm, solid,
};
use super::text;
use crate::report::ReportError;

const PAGE_MM: f64 = 180.0;
const LEFT_MM: f64 = 13.0;
const RIGHT_MM: f64 = 2.0;
const TOP_MM: f64 = 10.0;
const BELOW_MM: f64 = 11.0;
/// Tallest panel, as a share of its width.
const TALLEST: f64 = 0.9;

/// One pointing's panel.
#[derive(Clone, Debug, PartialEq)]
pub struct SpectrumPanel {
    /// Column from the left and row from the top.
    pub place: (usize, usize),
    /// Channel centres (km/s) and temperatures (K) of the thick line.
    pub thick: Vec<(f64, f64)>,
    /// The same of the thin line.
    pub thin: Vec<(f64, f64)>,
    /// The adopted model over the thick and over the thin line; empty where nothing was fitted.
    pub models: [Vec<(f64, f64)>; 2],
}

/// Everything in the sheet.
#[derive(Clone, Debug, PartialEq)]
pub struct SpectraSheet {
    /// Name of the source.
    pub title: String,
    /// What is drawn, in words.
    pub note: String,
    /// Panels side by side and above each other.
    pub size: (usize, usize),
    /// Velocities shown, km/s.
    pub velocity_km_s: (f64, f64),
    /// The panels there are.
    pub panels: Vec<SpectrumPanel>,
}

impl SpectraSheet {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        let width = (PAGE_MM - LEFT_MM - RIGHT_MM) / self.size.0.max(1) as f64;
        let height = (TALLEST * width).min(40.0);
        let height_mm = TOP_MM + height * self.size.1 as f64 + BELOW_MM;
        page(PAGE_MM, height_mm, &self.title, |canvas| {
            self.draw(canvas, (width, height), height_mm)
        })
    }

    /// The figure as a PNG image on white, `width_px` pixels wide.
    ///
    /// # Errors
    ///
    /// As [`SpectraSheet::svg`].
    pub fn png(&self, width_px: u32) -> Result<Vec<u8>, ReportError> {
        export::png(&self.svg()?, width_px)
    }

    fn draw(
        &self,
        canvas: &Canvas<'_>,
        (width, height): (f64, f64),
        height_mm: f64,
    ) -> Result<(), ReportError> {
        canvas.rectangle((0.0, 0.0), (PAGE_MM, height_mm), PAPER)?;
        let title = text::shortened(
            &self.title,
            PAGE_MM - 2.0 * LEFT_MM,
            TITLE.size_pt,
            TITLE.weight,
        );
        canvas.text(&text::plain(&title), (LEFT_MM, 4.4), Align::Start, TITLE)?;
        canvas.text(&text::plain(&self.note), (LEFT_MM, 8.0), Align::Start, NOTE)?;
        let (low, high) = self.velocity_km_s;
        let shown = |line: &[(f64, f64)]| {
            let within = line
                .iter()
                .filter(|(velocity, _)| (low..=high).contains(velocity));
            extent(within.map(|(_, temperature)| *temperature))
        };
        let ranges = self.panels.iter().flat_map(|panel| {
            [
                &panel.thick,
                &panel.thin,
                &panel.models[0],
                &panel.models[1],
            ]
            .map(|line| shown(line))
        });
        let (lowest, highest) = (ranges.flatten())
            .fold((0.0_f64, 0.0_f64), |(low, high), (a, b)| {
                (low.min(a), high.max(b))
            });
        let margin = 0.06 * (highest - lowest).max(1e-6);
        let line = solid(INK, 0.16);
        for panel in &self.panels {
            let (column, row) = panel.place;
            let left = LEFT_MM + width * column as f64;
            let top = TOP_MM + height * row as f64;
            let velocity = Axis {
                low,
                high,
                start_mm: left,
                end_mm: left + width,
            };
            let temperature = Axis {
                low: lowest - margin,
                high: highest + margin,
                start_mm: top + height,
                end_mm: top,
            };
            let zero = temperature.place_mm(0.0);
            canvas.line(&[(left, zero), (left + width, zero)], solid(GUIDE, 0.14))?;
            let place = |(v, t): &(f64, f64)| (velocity.place_mm(*v), temperature.place_mm(*t));
            for (spectrum, colour) in [(&panel.thin, ZERO), (&panel.thick, DATA)] {
                for run in steps(spectrum, low, high) {
                    let points: Vec<_> = run.iter().map(place).collect();
                    canvas.line(&points, solid(colour, 0.18))?;
                }
            }
            for (index, model) in panel.models.iter().enumerate().rev() {
                let points: Vec<_> = (model.iter())
                    .filter(|(v, _)| (low..=high).contains(v))
                    .map(place)
                    .collect();
                let stroke = style::model(index);
                canvas.line(&points, solid(stroke.color, 0.24))?;
            }
            let corners = [
                (left, top),
                (left, top + height),
                (left + width, top + height),
                (left + width, top),
                (left, top),
            ];
            canvas.line(&corners, line)?;
        }
        self.axes(canvas, (width, height), (lowest - margin, highest + margin))
    }

    /// Ticks of the panel at the lower left, which stand for all.
    fn axes(
        &self,
        canvas: &Canvas<'_>,
        (width, height): (f64, f64),
        (lowest, highest): (f64, f64),
    ) -> Result<(), ReportError> {
        let line = solid(INK, 0.16);
        let bottom = TOP_MM + height * self.size.1 as f64;
        let velocity = Axis {
            low: self.velocity_km_s.0,
            high: self.velocity_km_s.1,
            start_mm: LEFT_MM,
            end_mm: LEFT_MM + width,
        };
        let ticks = Ticks::between(velocity.low, velocity.high, 3);
        for value in &ticks.values {
            let x = velocity.place_mm(*value);
            canvas.line(&[(x, bottom), (x, bottom + 0.9)], line)?;
            let at = (x, bottom + 0.9 + leading_mm(TICK) * 0.8);
            canvas.text(&text::plain(&ticks.label(*value)), at, Align::Middle, TICK)?;
        }
        let label = text::markup("V_{LSR} (km/s)");
        let at = (
            LEFT_MM,
            bottom + 0.9 + leading_mm(TICK) * 0.8 + leading_mm(LABEL),
        );
        canvas.text(&label, at, Align::Start, LABEL)?;
        let temperature = Axis {
            low: lowest,
            high: highest,
            start_mm: bottom,
            end_mm: bottom - height,
        };
        let ticks = Ticks::between(lowest, highest, 3);
        for value in &ticks.values {
            let y = temperature.place_mm(*value);
            canvas.line(&[(LEFT_MM - 0.9, y), (LEFT_MM, y)], line)?;
            let at = (LEFT_MM - 1.4, y + 0.36 * TICK.size_pt * style::POINT_MM);
            canvas.text(&text::plain(&ticks.label(*value)), at, Align::End, TICK)?;
        }
        let at = (4.0, bottom - 0.5 * height);
        canvas.upward_text(&text::markup("T_{mb} (K)"), at, LABEL)
    }
}

/// Channels as steps: runs of those that are there.
fn steps(spectrum: &[(f64, f64)], low: f64, high: f64) -> Vec<Vec<(f64, f64)>> {
    let mut runs: Vec<Vec<(f64, f64)>> = vec![Vec::new()];
    for (index, (velocity, value)) in spectrum.iter().enumerate() {
        let next = spectrum.get(index + 1).map(|(next, _)| next - velocity);
        let before = index
            .checked_sub(1)
            .map(|before| velocity - spectrum[before].0);
        let half = 0.5 * next.or(before).unwrap_or(0.0);
        let (from, to) = ((velocity - half).max(low), (velocity + half).min(high));
        if value.is_nan() || from >= to {
            runs.push(Vec::new());
        } else if let Some(run) = runs.last_mut() {
            run.extend([(from, *value), (to, *value)]);
        }
    }
    runs.retain(|run| !run.is_empty());
    runs
}
