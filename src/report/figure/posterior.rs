//! The posterior's part of a pair's figure: the marginal of the inward speed, and its correlation with
//! the optical depth.

use super::PosteriorPart;
use super::axis::extent;
use super::canvas::{Align, Canvas};
use super::layout::{MARGIN_MM, PAGE_MM, PLOT_RIGHT_MM};
use super::plot::{Frame, HEIGHT_BELOW_MM, Scale};
use super::style::{
    self, INK, LABEL, NOTE, POSTERIOR_68, POSTERIOR_95, VALUE, ZERO, leading_mm, solid,
};
use super::text;
use crate::report::ReportError;

const PLOT_MM: f64 = 17.0;
/// Right end of the marginal, left end of the correlation.
const MARGINAL_RIGHT_MM: f64 = 45.0;
const DEPTH_LEFT_MM: f64 = 56.0;
/// Radius of a draw's dot.
const DOT_MM: f64 = 0.22;
const MARGINAL_LEFT_MM: f64 = MARGIN_MM + 2.0;

/// Where the part stands.
pub(super) struct PosteriorPlace {
    top: f64,
    sentences: Vec<String>,
}

impl PosteriorPlace {
    pub(super) fn of(part: &PosteriorPart, top: f64) -> Self {
        let room = PAGE_MM - 2.0 * MARGIN_MM - 1.0;
        let sentences = part
            .sentences
            .iter()
            .flat_map(|sentence| text::wrap(sentence, room, LABEL.size_pt, LABEL.weight))
            .collect();
        Self { top, sentences }
    }

    fn plot_top(&self) -> f64 {
        self.top + 1.4 + leading_mm(VALUE) + leading_mm(NOTE) * 0.6
    }

    pub(super) fn end(&self) -> f64 {
        let words = leading_mm(LABEL) * self.sentences.len() as f64;
        self.plot_top() + PLOT_MM + HEIGHT_BELOW_MM + words + 1.4
    }
}

/// Draws the part; `stroke_of` gives a model's stroke by its label.
pub(super) fn draw(
    canvas: &Canvas<'_>,
    part: &PosteriorPart,
    place: &PosteriorPlace,
    stroke_of: &dyn Fn(&str) -> style::Stroke,
) -> Result<(), ReportError> {
    let (top, bottom) = (place.plot_top(), place.plot_top() + PLOT_MM);
    let ends = [
        (MARGIN_MM + 0.5, place.top),
        (PAGE_MM - MARGIN_MM - 0.5, place.top),
    ];
    canvas.line(&ends, solid(ZERO, 0.14))?;
    let heading = place.top + 1.2 + leading_mm(VALUE) * 0.8;
    let title = text::plain("Posterior of the inward speed");
    let left = MARGIN_MM + 0.5;
    canvas.text(&title, (left, heading), Align::Start, VALUE)?;
    let width = text::width_mm(&title, VALUE.size_pt, VALUE.weight);
    legend(canvas, heading, left + width)?;
    if let Some(correlation) = part.correlation.filter(|_| !part.draws.is_empty()) {
        let sign = if correlation < 0.0 { "\u{2212}" } else { "+" };
        let words = format!("correlation {sign}{:.2}", correlation.abs());
        let at = (PLOT_RIGHT_MM, heading);
        canvas.text(&text::plain(&words), at, Align::End, NOTE)?;
    }
    marginal(canvas, part, (top, bottom), stroke_of)?;
    if !part.draws.is_empty() {
        depth(canvas, part, (top, bottom), stroke_of)?;
    }
    let mut baseline = bottom + HEIGHT_BELOW_MM + leading_mm(LABEL) * 0.8;
    for line in &place.sentences {
        let at = (MARGIN_MM + 0.5, baseline);
        canvas.text(&text::plain(line), at, Align::Start, LABEL)?;
        baseline += leading_mm(LABEL);
    }
    Ok(())
}

/// What the shades mean, beside the heading that ends at `from`.
fn legend(canvas: &Canvas<'_>, baseline: f64, from: f64) -> Result<(), ReportError> {
    let mut left = from + 3.0;
    for (words, color) in [("68 %", POSTERIOR_68), ("95 %", POSTERIOR_95)] {
        let right = left + 3.4;
        canvas.rectangle((left, baseline - 1.8), (right, baseline + 0.2), color)?;
        let at = (right + 0.9, baseline);
        canvas.text(&text::plain(words), at, Align::Start, NOTE)?;
        left = right + text::span_width_mm(words, NOTE.size_pt, NOTE.weight) + 3.0;
    }
    Ok(())
}

fn marginal(
    canvas: &Canvas<'_>,
    part: &PosteriorPart,
    (top, bottom): (f64, f64),
    stroke_of: &dyn Fn(&str) -> style::Stroke,
) -> Result<(), ReportError> {
    let curves = part.models.iter().map(|(_, density)| density);
    let all = curves.chain([&part.adopted]).flatten();
    let tallest = all.map(|(_, density)| *density).fold(0.0, f64::max);
    let frame = Frame::new(
        (MARGINAL_LEFT_MM, MARGINAL_RIGHT_MM, top, bottom),
        part.range_km_s,
        (0.0, 1.06 * tallest.max(f64::MIN_POSITIVE)),
        (Scale::Even, Scale::Even),
    )
    .with_ticks(5, 0);
    let at = |(v, density): &(f64, f64)| frame.place(*v, *density);
    for ((from, to), color) in [
        (part.interval95_km_s, POSTERIOR_95),
        (part.interval68_km_s, POSTERIOR_68),
    ] {
        let inside: Vec<(f64, f64)> = part
            .adopted
            .iter()
            .filter(|(v, _)| (from..=to).contains(v))
            .map(at)
            .collect();
        if let (Some(first), Some(last)) = (inside.first(), inside.last()) {
            let mut outline = vec![(first.0, bottom)];
            let end = (last.0, bottom);
            outline.extend(&inside);
            outline.push(end);
            canvas.polygon(&outline, color)?;
        }
    }
    let (zero, _) = frame.place(0.0, 0.0);
    canvas.line(&[(zero, top), (zero, bottom)], solid(ZERO, 0.16))?;
    let outline: Vec<(f64, f64)> = part.adopted.iter().map(at).collect();
    canvas.line(&outline, solid(INK, 0.16))?;
    for (label, density) in part.models.iter().rev() {
        let points: Vec<(f64, f64)> = density.iter().map(at).collect();
        canvas.line(&points, stroke_of(label))?;
    }
    frame.draw(canvas, (Some(SPEED), None))
}

const SPEED: &str = "inward speed (km/s)";

fn depth(
    canvas: &Canvas<'_>,
    part: &PosteriorPart,
    (top, bottom): (f64, f64),
    stroke_of: &dyn Fn(&str) -> style::Stroke,
) -> Result<(), ReportError> {
    let speeds = part.draws.iter().map(|draw| draw.v_in_km_s);
    let depths = part.draws.iter().map(|draw| draw.tau.log10());
    let (Some(across), Some(up)) = (extent(speeds), extent(depths)) else {
        return Ok(());
    };
    let padded = |(low, high): (f64, f64)| {
        let pad = (0.05 * (high - low)).max(1e-6);
        (low - pad, high + pad)
    };
    let frame = Frame::new(
        (DEPTH_LEFT_MM, PLOT_RIGHT_MM, top, bottom),
        padded(across),
        padded(up),
        (Scale::Even, Scale::Log),
    )
    .with_ticks(4, 4);
    for draw in &part.draws {
        let at = frame.place(draw.v_in_km_s, draw.tau);
        canvas.dot(at, DOT_MM, stroke_of(&draw.label).color)?;
    }
    frame.draw(canvas, (Some(SPEED), Some("optical depth")))
}
