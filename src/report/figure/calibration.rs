//! The figure of a calibration: speeds found of injected pairs, and how they go with the signal-to-noise
//! ratio.

use super::axis::{Axis, extent};
use super::canvas::{Align, Canvas, page};
use super::export;
use super::frame::{Tick, frame, height_below_mm, round_ticks};
use super::layout::{MARGIN_MM, Numbers, PAGE_MM, PLOT_RIGHT_MM};
use super::style::{
    self, GUIDE, LABEL, NOTE, PAPER, SOFT_LABEL, Stroke, TITLE, V_LSR, VALUE, ZERO, leading_mm,
    solid,
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
    let levels_heading = speeds_bottom + height_below_mm() + 2.2;
    let levels_top = levels_heading + leading_mm(VALUE) + 1.4;
    let levels_bottom = levels_top + LEVELS_MM;
    let numbers = Numbers::of(&figure.numbers);
    let numbers_top = levels_bottom + height_below_mm() + 1.8;
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
        draw_numbers(canvas, &numbers, numbers_top + 1.2)
    })
}

fn draw_numbers(canvas: &Canvas<'_>, numbers: &Numbers, top: f64) -> Drawn {
    let first = top + leading_mm(LABEL) * 0.8;
    let lines_per_row = if numbers.values_below { 2.0 } else { 1.0 };
    for (index, (label, value)) in numbers.entries.iter().enumerate() {
        let (column, row) = (index / numbers.rows, index % numbers.rows);
        let (label_x, value_x) = numbers.places[column];
        let label_y = first + leading_mm(LABEL) * lines_per_row * row as f64;
        let value_y = label_y + leading_mm(LABEL) * (lines_per_row - 1.0);
        canvas.text(label, (label_x, label_y), Align::Start, SOFT_LABEL)?;
        canvas.text(value, (value_x, value_y), Align::Start, VALUE)?;
    }
    Ok(())
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
    let horizontal = Axis {
        low: low - pad,
        high: high + pad,
        start_mm: LEFT_MM,
        end_mm: PLOT_RIGHT_MM,
    };
    let counts = found.map(|values| histogram(values, &horizontal));
    let most = counts.iter().flatten().copied().max().unwrap_or(0).max(1);
    let vertical = Axis {
        low: 0.0,
        high: 1.12 * most as f64,
        start_mm: bottom,
        end_mm: top,
    };
    for (index, truth) in truths.into_iter().enumerate().rev() {
        let x = horizontal.place_mm(truth);
        let color = style::model(index).color;
        canvas.line(&[(x, top), (x, bottom)], solid(color, 0.14))?;
    }
    for (index, counts) in counts.iter().enumerate().rev() {
        let outline = bars(counts, &horizontal, &vertical);
        if index == MOVING {
            canvas.polygon(&outline, light(style::model(index).color))?;
        }
        canvas.line(&outline, style::model(index))?;
    }
    frame(
        canvas,
        (&horizontal, &round_ticks(&horizontal, 8)),
        (&vertical, &round_ticks(&vertical, 4)),
        "inward speed found (km/s); thin lines: the true ones",
    )?;
    pairs_label(canvas, (top, bottom))
}

fn pairs_label(canvas: &Canvas<'_>, (top, bottom): (f64, f64)) -> Drawn {
    let middle = f64::midpoint(top, bottom);
    canvas.upward_text(&text::plain("pairs"), (MARGIN_MM + 2.4, middle), LABEL)
}

/// A colour mixed with paper.
fn light(RGBColor(red, green, blue): RGBColor) -> RGBColor {
    let mixed = |part: u8| part / 5 + 204;
    RGBColor(mixed(red), mixed(green), mixed(blue))
}

fn histogram(values: &[f64], axis: &Axis) -> Vec<usize> {
    let mut counts = vec![0; BINS];
    let width = (axis.high - axis.low) / BINS as f64;
    for value in values.iter().filter(|value| axis.contains(**value)) {
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "inside the axis"
        )]
        let bin = ((value - axis.low) / width) as usize;
        counts[bin.min(BINS - 1)] += 1;
    }
    counts
}

/// The outline of a histogram, from the axis and back to it.
fn bars(counts: &[usize], horizontal: &Axis, vertical: &Axis) -> Vec<(f64, f64)> {
    let width = (horizontal.high - horizontal.low) / counts.len() as f64;
    let x = |bin: usize| horizontal.place_mm(horizontal.low + width * bin as f64);
    let mut outline = vec![(x(0), vertical.start_mm)];
    for (bin, count) in counts.iter().enumerate() {
        let y = vertical.place_mm(*count as f64);
        outline.extend([(x(bin), y), (x(bin + 1), y)]);
    }
    outline.push((x(counts.len()), vertical.start_mm));
    outline
}

/// Speeds and shares over the signal-to-noise ratio.
fn levels(canvas: &Canvas<'_>, figure: &CalibrationFigure, (top, bottom): (f64, f64)) -> Drawn {
    let ratios = figure.points.iter().map(|point| point.signal_to_noise.ln());
    let (low, high) = extent(ratios).unwrap_or((0.0, 1.0));
    let across = |start_mm, end_mm| Axis {
        low: low - 0.2,
        high: high + 0.2,
        start_mm,
        end_mm,
    };
    let left = across(LEFT_MM, LEFT_PLOT_END_MM);
    let right = across(RIGHT_PLOT_START_MM, PLOT_RIGHT_MM);
    for horizontal in [&left, &right] {
        let x = horizontal.place_mm(figure.signal_to_noise.ln());
        canvas.line(&[(x, top), (x, bottom)], solid(V_LSR, 0.2))?;
    }
    speeds_by_level(canvas, figure, &left, (top, bottom))?;
    shares_by_level(canvas, figure, &right, (top, bottom))?;
    let x = left.place_mm(figure.signal_to_noise.ln());
    let words = text::plain("this observation");
    let width = text::width_mm(&words, NOTE.size_pt, NOTE.weight);
    let align = if x + width > LEFT_PLOT_END_MM + 8.0 {
        Align::End
    } else {
        Align::Start
    };
    canvas.text(
        &words,
        (x, top - 0.5),
        align,
        style::Look {
            color: V_LSR,
            ..NOTE
        },
    )
}

const RATIO_LABEL: &str = "peak over noise";

fn speeds_by_level(
    canvas: &Canvas<'_>,
    figure: &CalibrationFigure,
    horizontal: &Axis,
    (top, bottom): (f64, f64),
) -> Drawn {
    let known: Vec<(f64, f64, f64)> = figure
        .points
        .iter()
        .filter_map(|point| {
            let (speed, half) = point.speed_km_s?;
            Some((point.signal_to_noise.ln(), speed, half))
        })
        .collect();
    let ends = known
        .iter()
        .flat_map(|(_, speed, half)| [speed - half, speed + half]);
    let (low, high) = extent(ends.chain([0.0, figure.true_v_in_km_s])).unwrap_or((-1.0, 1.0));
    let pad = (0.06 * (high - low)).max(1e-3);
    let vertical = Axis {
        low: low - pad,
        high: high + pad,
        start_mm: bottom,
        end_mm: top,
    };
    let ends = |value: f64| {
        let y = vertical.place_mm(value);
        [(horizontal.start_mm, y), (horizontal.end_mm, y)]
    };
    canvas.line(&ends(0.0), solid(GUIDE, 0.16))?;
    let color = style::model(MOVING).color;
    canvas.line(&ends(figure.true_v_in_km_s), solid(color, 0.14))?;
    for (ratio, speed, half) in known {
        let x = horizontal.place_mm(ratio);
        let [low, high] = [speed - half, speed + half].map(|value| vertical.place_mm(value));
        canvas.line(&[(x, low), (x, high)], solid(color, 0.3))?;
        canvas.dot((x, vertical.place_mm(speed)), DOT_MM, color)?;
    }
    frame(
        canvas,
        (horizontal, &ratio_ticks(horizontal)),
        (&vertical, &round_ticks(&vertical, 5)),
        RATIO_LABEL,
    )?;
    let middle = f64::midpoint(top, bottom);
    let label = text::plain("speed (km/s)");
    canvas.upward_text(&label, (MARGIN_MM + 2.4, middle), LABEL)
}

fn shares_by_level(
    canvas: &Canvas<'_>,
    figure: &CalibrationFigure,
    horizontal: &Axis,
    (top, bottom): (f64, f64),
) -> Drawn {
    let vertical = Axis {
        low: 0.0,
        high: 1.03,
        start_mm: bottom,
        end_mm: top,
    };
    let y = vertical.place_mm(0.5);
    canvas.line(
        &[(horizontal.start_mm, y), (horizontal.end_mm, y)],
        solid(GUIDE, 0.16),
    )?;
    for index in [AT_REST, MOVING] {
        let stroke = style::model(index);
        let shares = figure.points.iter().map(|point| {
            let share = if index == MOVING {
                point.found
            } else {
                point.false_alarms
            };
            (horizontal.place_mm(point.signal_to_noise.ln()), share)
        });
        let shares: Vec<(f64, (f64, f64, f64))> = shares.collect();
        let points: Vec<(f64, f64)> = shares
            .iter()
            .map(|(x, (share, ..))| (*x, vertical.place_mm(*share)))
            .collect();
        canvas.line(
            &points,
            Stroke {
                width_mm: 0.24,
                ..stroke
            },
        )?;
        for ((x, y), (_, (_, low, high))) in points.iter().zip(&shares) {
            let [low, high] = [low, high].map(|value| vertical.place_mm(*value));
            canvas.line(&[(*x, low), (*x, high)], solid(stroke.color, 0.2))?;
            canvas.dot((*x, *y), DOT_MM, stroke.color)?;
        }
    }
    let ticks: Vec<Tick> = [0, 50, 100]
        .into_iter()
        .map(|percent| (f64::from(percent) / 100.0, format!("{percent} %")))
        .collect();
    frame(
        canvas,
        (horizontal, &ratio_ticks(horizontal)),
        (&vertical, &ticks),
        RATIO_LABEL,
    )
}

/// Round ratios on a logarithmic axis.
fn ratio_ticks(axis: &Axis) -> Vec<Tick> {
    let decades = (-2..=4).map(|power| 10f64.powi(power));
    let all = decades.flat_map(|decade| [1.0, 3.0].map(|step| step * decade));
    all.filter(|ratio| axis.contains(ratio.ln()))
        .map(|ratio| (ratio.ln(), format!("{ratio}")))
        .collect()
}
