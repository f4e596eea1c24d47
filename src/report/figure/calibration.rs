//! The figure of a calibration: speeds found of injected pairs, and how they go with the signal-to-noise
//! ratio.

use super::axis::extent;
use super::canvas::{Align, Canvas, page};
use super::export;
use super::layout::{MARGIN_MM, Numbers, PAGE_MM, PLOT_RIGHT_MM};
use super::plot::{Frame, HEIGHT_BELOW_MM, Scale};
use super::style::{
    self, LABEL, NOTE, PAPER, Stroke, TITLE, V_LSR, VALUE, ZERO, leading_mm, solid,
};
use super::text;
use crate::report::ReportError;
use plotters::style::RGBColor;

/// Everything in the figure of a calibration.
#[derive(Clone, Debug, PartialEq)]
pub struct CalibrationFigure {
    /// Name of the source.
    pub source: String,
    /// What was injected, in words.
    pub injected: String,
    /// The injected inward speed, km/s.
    pub true_v_in_km_s: f64,
    /// Speeds found at the observation's own noise of pairs that move, km/s.
    pub moving_km_s: Vec<f64>,
    /// Speeds found there of pairs at rest, km/s.
    pub at_rest_km_s: Vec<f64>,
    /// Signal-to-noise ratio of the observation.
    pub signal_to_noise: f64,
    /// One a noise level, ascending.
    pub points: Vec<CalibrationPoint>,
    /// What is found of the pairs that move, such as `found as infall`.
    pub found: String,
    /// The main results: label and value.
    pub numbers: Vec<(String, String)>,
}

/// What was found at a noise level.
#[derive(Clone, Debug, PartialEq)]
pub struct CalibrationPoint {
    /// Peak of the thick line over the noise of a channel.
    pub signal_to_noise: f64,
    /// Median speed of the pairs that move and half the width of its central 68 %, km/s.
    pub speed_km_s: Option<(f64, f64)>,
    /// Share of the pairs that move in which motion is found, with its 95 % interval.
    pub found: (f64, f64, f64),
    /// Share of the pairs at rest in which infall is found, with its 95 % interval.
    pub false_alarms: (f64, f64, f64),
}

impl CalibrationFigure {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        draw(self)
    }

    /// The figure as a PNG image on white, `width_px` pixels wide.
    ///
    /// # Errors
    ///
    /// As [`CalibrationFigure::svg`].
    pub fn png(&self, width_px: u32) -> Result<Vec<u8>, ReportError> {
        export::png(&self.svg()?, width_px)
    }
}

const SPEEDS_MM: f64 = 24.0;
const LEVELS_MM: f64 = 24.0;
const LEFT_MM: f64 = MARGIN_MM + 8.5;
/// Right end of the left one of two plots, left end of the right one.
const LEFT_PLOT_END_MM: f64 = 43.0;
const RIGHT_PLOT_START_MM: f64 = 53.5;
/// Right end of the histogram: half a tick's label fits beside it.
const SPEEDS_RIGHT_MM: f64 = 83.0;
const BINS: usize = 36;
const DOT_MM: f64 = 0.55;
/// What is true, and false alarms: two strokes of the models' kind.
const MOVING: usize = 0;
const AT_REST: usize = 1;

type Drawn = Result<(), ReportError>;

fn draw(figure: &CalibrationFigure) -> Result<String, ReportError> {
    let room = PAGE_MM - 2.0 * MARGIN_MM - 1.0;
    let title = text::wrap(&figure.source, room, TITLE.size_pt, TITLE.weight);
    let words = text::wrap(&figure.injected, room, LABEL.size_pt, LABEL.weight);
    let title_end = MARGIN_MM + leading_mm(TITLE) * title.len() as f64;
    let words_end = title_end + leading_mm(LABEL) * words.len() as f64 + 1.0;
    let speeds_top = words_end + leading_mm(VALUE) + 1.4;
    let speeds_bottom = speeds_top + SPEEDS_MM;
    let levels_heading = speeds_bottom + HEIGHT_BELOW_MM + 2.2;
    let levels_top = levels_heading + leading_mm(VALUE) + 1.4;
    let levels_bottom = levels_top + LEVELS_MM;
    let numbers = Numbers::of(&figure.numbers);
    let numbers_top = levels_bottom + HEIGHT_BELOW_MM + 1.8;
    let height_mm = numbers_top + leading_mm(LABEL) * numbers.lines() as f64 + 2.0 + MARGIN_MM;
    let heading = format!("{}: calibration", figure.source);
    page(PAGE_MM, height_mm, &heading, |canvas| {
        canvas.rectangle((0.0, 0.0), (PAGE_MM, height_mm), PAPER)?;
        let left = MARGIN_MM + 0.5;
        let write = |lines: &[String], top: f64, look: style::Look| -> Drawn {
            for (index, line) in lines.iter().enumerate() {
                let y = top + leading_mm(look) * (index as f64 + 0.8);
                canvas.text(&text::plain(line), (left, y), Align::Start, look)?;
            }
            Ok(())
        };
        write(&title, MARGIN_MM, TITLE)?;
        write(&words, title_end, LABEL)?;
        let at = (left, words_end + leading_mm(VALUE) * 0.8);
        let words = text::plain("Speeds found");
        canvas.text(&words, at, Align::Start, VALUE)?;
        key(canvas, at.1, &["moving as fitted", "at rest"])?;
        speeds(canvas, figure, (speeds_top, speeds_bottom))?;
        let at = (left, levels_heading + leading_mm(VALUE) * 0.8);
        let words = text::plain("At other noise levels");
        canvas.text(&words, at, Align::Start, VALUE)?;
        key(canvas, at.1, &[figure.found.as_str(), "false alarms"])?;
        levels(canvas, figure, (levels_top, levels_bottom))?;
        let ends = [(left, numbers_top), (PAGE_MM - left, numbers_top)];
        canvas.line(&ends, solid(ZERO, 0.14))?;
        numbers.draw(canvas, numbers_top + 1.2)
    })
}

/// The words of both strokes, at the right end of a heading.
fn key(canvas: &Canvas<'_>, baseline: f64, words: &[&str; 2]) -> Drawn {
    let mut right = PLOT_RIGHT_MM;
    for (index, words) in words.iter().enumerate().rev() {
        let width = text::span_width_mm(words, NOTE.size_pt, NOTE.weight);
        canvas.text(&text::plain(words), (right, baseline), Align::End, NOTE)?;
        let middle = baseline - 0.75;
        let sample = [(right - width - 6.2, middle), (right - width - 1.2, middle)];
        canvas.line(&sample, style::model(index))?;
        right -= width + 9.0;
    }
    Ok(())
}

/// Ends of the central 98 %.
fn central(values: &[f64]) -> Option<(f64, f64)> {
    let mut sorted: Vec<f64> = values.iter().copied().filter(|v| v.is_finite()).collect();
    sorted.sort_by(f64::total_cmp);
    let cut = sorted.len() / 100;
    extent(sorted[cut..sorted.len() - cut].iter().copied())
}

/// Histograms of the speeds found, with the true ones.
fn speeds(canvas: &Canvas<'_>, figure: &CalibrationFigure, (top, bottom): (f64, f64)) -> Drawn {
    let truths = [figure.true_v_in_km_s, 0.0];
    let found = [&figure.moving_km_s, &figure.at_rest_km_s];
    let ends = found.iter().filter_map(|values| central(values));
    let ends = ends.flat_map(|(low, high)| [low, high]).chain(truths);
    let (low, high) = extent(ends).unwrap_or((-1.0, 1.0));
    let pad = (0.06 * (high - low)).max(1e-3);
    let across = (low - pad, high + pad);
    let counts = found.map(|values| histogram(values, across));
    let most = counts.iter().flatten().copied().max().unwrap_or(0).max(1);
    let frame = Frame::new(
        (LEFT_MM, SPEEDS_RIGHT_MM, top, bottom),
        across,
        (0.0, 1.12 * most as f64),
        (Scale::Even, Scale::Even),
    )
    .with_ticks(8, 4);
    for (index, truth) in truths.into_iter().enumerate().rev() {
        let (x, _) = frame.place(truth, 0.0);
        let color = style::model(index).color;
        canvas.line(&[(x, top), (x, bottom)], solid(color, 0.14))?;
    }
    for (index, counts) in counts.iter().enumerate().rev() {
        let outline = bars(counts, &frame);
        if index == MOVING && !outline.is_empty() {
            canvas.polygon(&outline, light(style::model(index).color))?;
        }
        canvas.line(&outline, style::model(index))?;
    }
    let name = "inward speed found (km/s); thin lines: the true ones";
    frame.draw(canvas, (Some(name), Some("pairs")))
}

/// A colour mixed with paper.
fn light(RGBColor(red, green, blue): RGBColor) -> RGBColor {
    let mixed = |part: u8| part / 5 + 204;
    RGBColor(mixed(red), mixed(green), mixed(blue))
}

fn histogram(values: &[f64], (low, high): (f64, f64)) -> Vec<usize> {
    let mut counts = vec![0; BINS];
    let width = (high - low) / BINS as f64;
    for value in values.iter().filter(|value| (low..=high).contains(*value)) {
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "inside the range"
        )]
        let bin = ((value - low) / width) as usize;
        counts[bin.min(BINS - 1)] += 1;
    }
    counts
}

/// The outline of a histogram over the frame's width, from the axis and back to it.
fn bars(counts: &[usize], frame: &Frame) -> Vec<(f64, f64)> {
    let width = (frame.across.high - frame.across.low) / counts.len() as f64;
    let at =
        |bin: usize, count: usize| frame.place(frame.across.low + width * bin as f64, count as f64);
    let held = |count: &usize| *count > 0;
    let (Some(first), Some(last)) = (counts.iter().position(held), counts.iter().rposition(held))
    else {
        return Vec::new();
    };
    let mut outline = vec![at(first, 0)];
    for (bin, count) in counts.iter().enumerate().take(last + 1).skip(first) {
        outline.extend([at(bin, *count), at(bin + 1, *count)]);
    }
    outline.push(at(last + 1, 0));
    outline
}

/// Speeds and shares over the signal-to-noise ratio.
fn levels(canvas: &Canvas<'_>, figure: &CalibrationFigure, (top, bottom): (f64, f64)) -> Drawn {
    let ratios = figure
        .points
        .iter()
        .map(|point| point.signal_to_noise.log10());
    let (low, high) = extent(ratios).unwrap_or((0.0, 1.0));
    let frame = |left: f64, right: f64, up: (f64, f64)| {
        let place = (left, right, top, bottom);
        let across = (low - 0.1, high + 0.1);
        Frame::new(place, across, up, (Scale::Log, Scale::Even)).with_ticks(4, 5)
    };
    let known = figure.points.iter().filter_map(|point| point.speed_km_s);
    let ends = known.flat_map(|(speed, half)| [speed - half, speed + half]);
    let ends = extent(ends.chain([0.0, figure.true_v_in_km_s])).unwrap_or((-1.0, 1.0));
    let pad = (0.06 * (ends.1 - ends.0)).max(1e-3);
    let speeds = frame(LEFT_MM, LEFT_PLOT_END_MM, (ends.0 - pad, ends.1 + pad));
    let shares = frame(RIGHT_PLOT_START_MM, PLOT_RIGHT_MM, (0.0, 1.04));
    for one in [&speeds, &shares] {
        let (x, _) = one.place(figure.signal_to_noise, 0.0);
        canvas.line(&[(x, top), (x, bottom)], solid(V_LSR, 0.2))?;
    }
    speeds_by_level(canvas, figure, &speeds)?;
    shares_by_level(canvas, figure, &shares)?;
    let (x, _) = speeds.place(figure.signal_to_noise, 0.0);
    let words = text::plain("this observation");
    let width = text::width_mm(&words, NOTE.size_pt, NOTE.weight);
    let align = if x + width > LEFT_PLOT_END_MM + 8.0 {
        Align::End
    } else {
        Align::Start
    };
    let look = style::Look {
        color: V_LSR,
        ..NOTE
    };
    canvas.text(&words, (x, top - 0.5), align, look)
}

const RATIO: &str = "peak over noise";

fn speeds_by_level(canvas: &Canvas<'_>, figure: &CalibrationFigure, frame: &Frame) -> Drawn {
    let color = style::model(MOVING).color;
    frame.level(canvas, 0.0)?;
    let (_, y) = frame.place(figure.signal_to_noise, figure.true_v_in_km_s);
    let ends = [(frame.across.start_mm, y), (frame.across.end_mm, y)];
    canvas.line(&ends, solid(color, 0.14))?;
    for point in &figure.points {
        let Some((speed, half)) = point.speed_km_s else {
            continue;
        };
        let at = |value: f64| frame.place(point.signal_to_noise, value);
        canvas.line(&[at(speed - half), at(speed + half)], solid(color, 0.3))?;
        canvas.dot(at(speed), DOT_MM, color)?;
    }
    frame.draw(canvas, (Some(RATIO), Some("speed (km/s)")))
}

fn shares_by_level(canvas: &Canvas<'_>, figure: &CalibrationFigure, frame: &Frame) -> Drawn {
    frame.level(canvas, 0.5)?;
    for index in [AT_REST, MOVING] {
        let stroke = style::model(index);
        let shares = figure.points.iter().map(|point| {
            let share = if index == MOVING {
                point.found
            } else {
                point.false_alarms
            };
            (point.signal_to_noise, share)
        });
        let shares: Vec<(f64, (f64, f64, f64))> = shares.collect();
        let points = shares
            .iter()
            .map(|(ratio, (share, ..))| frame.place(*ratio, *share));
        let points: Vec<(f64, f64)> = points.collect();
        let line = Stroke {
            width_mm: 0.24,
            ..stroke
        };
        canvas.line(&points, line)?;
        for (at, (ratio, (_, low, high))) in points.iter().zip(&shares) {
            let ends = [frame.place(*ratio, *low), frame.place(*ratio, *high)];
            canvas.line(&ends, solid(stroke.color, 0.2))?;
            canvas.dot(*at, DOT_MM, stroke.color)?;
        }
    }
    frame.draw(canvas, (Some(RATIO), Some("share of pairs")))
}
