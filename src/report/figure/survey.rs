//! Figures of a sample: the distribution of velocity differences, two quantities against each other, the ranking
//! with its intervals, and a sheet of all profiles.

use super::axis::extent;
use super::canvas::{Align, Canvas, page};
use super::plot::{Frame, GROUPS, Interval, Scale, mark};
use super::style::{
    DATA, GUIDE, LABEL, MODELS, NAME, NOTE, PAPER, SOFT_INK, SOFT_LABEL, TICK, TITLE, ZERO,
    leading_mm, solid,
};
use super::text;
use crate::report::ReportError;

/// Width of a column of a journal, and of its page, mm.
const COLUMN_MM: f64 = 88.0;
const PAGE_MM: f64 = 180.0;
const LEFT_MM: f64 = 15.0;
const RIGHT_MM: f64 = 85.5;

type Drawn = Result<(), ReportError>;

/// Paper, title and groups of a figure of one column; returns where they end.
fn head(
    canvas: &Canvas<'_>,
    height_mm: f64,
    title: &str,
    groups: &[String],
) -> Result<f64, ReportError> {
    canvas.rectangle((0.0, 0.0), (COLUMN_MM, height_mm), PAPER)?;
    canvas.text(&text::plain(title), (LEFT_MM, 4.6), Align::Start, TITLE)?;
    Ok(key(canvas, groups, (LEFT_MM, RIGHT_MM), 6.2)? + 1.0)
}

/// Names of groups beside their marks, in one line or more below `top`; returns where it ends.
fn key(
    canvas: &Canvas<'_>,
    groups: &[String],
    (left, right): (f64, f64),
    top: f64,
) -> Result<f64, ReportError> {
    if groups.len() < 2 {
        return Ok(top);
    }
    let (mut x, mut y) = (left, top + 2.4);
    for (index, group) in groups.iter().enumerate() {
        let name = text::shortened(group, 30.0, NOTE.size_pt, NOTE.weight);
        let width = 3.2 + text::span_width_mm(&name, NOTE.size_pt, NOTE.weight);
        if x + width > right {
            (x, y) = (left, y + leading_mm(NOTE));
        }
        mark(canvas, (x + 1.0, y - 0.8), index, true)?;
        canvas.text(&text::plain(&name), (x + 2.6, y), Align::Start, NOTE)?;
        x += width + 2.6;
    }
    Ok(y + 1.4)
}

/// Velocity differences of a sample, as counts in bins, stacked by group.
#[derive(Clone, Debug, PartialEq)]
pub struct DistributionFigure {
    /// Heading.
    pub title: String,
    /// Names of the groups; one for all sources where there are none.
    pub groups: Vec<String>,
    /// Values and the group of each.
    pub values: Vec<(f64, usize)>,
    /// Where a profile counts as blue or red.
    pub limit: f64,
}

impl DistributionFigure {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        const HEIGHT_MM: f64 = 66.0;
        const BIN: f64 = 0.1;
        const MOST: f64 = 2.0;
        let (low, high) = extent(self.values.iter().map(|(value, _)| *value)).unwrap_or((0.0, 0.0));
        let edge = |value: f64| (value / BIN).floor() * BIN;
        let low = edge(low.min(-2.0 * self.limit)).max(-MOST);
        let high = (edge(high.max(2.0 * self.limit)) + BIN).min(MOST);
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "at most 40 bins"
        )]
        let bins = ((high - low) / BIN).round() as usize;
        let mut counts = vec![vec![0usize; self.groups.len().max(1)]; bins];
        for (value, group) in &self.values {
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "clamped"
            )]
            let bin = (((value - low) / BIN).floor().max(0.0) as usize).min(bins - 1);
            counts[bin][*group] += 1;
        }
        let highest = counts
            .iter()
            .map(|bin| bin.iter().sum::<usize>())
            .max()
            .unwrap_or(0);
        page(COLUMN_MM, HEIGHT_MM, &self.title, |canvas| {
            let top = head(canvas, HEIGHT_MM, &self.title, &self.groups)?;
            let up = (0.0, (highest.max(1) as f64 * 1.12).ceil());
            let frame = Frame::new(
                (LEFT_MM, RIGHT_MM, top, HEIGHT_MM - 9.6),
                (low, high),
                up,
                (Scale::Even, Scale::Even),
            );
            for value in [-self.limit, self.limit] {
                let (x, _) = frame.place(value, 0.0);
                canvas.line(&[(x, top), (x, frame.up.start_mm)], solid(ZERO, 0.18))?;
            }
            for (words, at, align) in [
                ("blue", -self.limit, Align::End),
                ("red", self.limit, Align::Start),
            ] {
                let (x, _) = frame.place(at, 0.0);
                let x = if align == Align::End {
                    x - 1.0
                } else {
                    x + 1.0
                };
                canvas.text(&text::plain(words), (x, top + 2.4), align, SOFT_LABEL)?;
            }
            for (index, bin) in counts.iter().enumerate() {
                let from = low + index as f64 * BIN;
                let mut below = 0;
                for (group, count) in bin.iter().enumerate() {
                    if *count > 0 {
                        let corner = frame.place(from, below as f64);
                        let other = frame.place(from + BIN, (below + count) as f64);
                        let other = (other.0 - 0.25, other.1);
                        canvas.rectangle(
                            (corner.0 + 0.25, corner.1),
                            other,
                            GROUPS[group % GROUPS.len()],
                        )?;
                        below += count;
                    }
                }
            }
            frame.draw(
                canvas,
                (Some("normalised velocity difference"), Some("line pairs")),
            )
        })
    }
}

/// One source in a figure of two quantities.
#[derive(Clone, Debug, PartialEq)]
pub struct ScatterPoint {
    /// Quantity across.
    pub x: Interval,
    /// Quantity upward.
    pub y: Interval,
    /// Its group.
    pub group: usize,
    /// Whether infall is likely: others are hollow.
    pub likely: bool,
}

/// Two positive quantities against each other on logarithmic axes.
#[derive(Clone, Debug, PartialEq)]
pub struct ScatterFigure {
    /// Heading.
    pub title: String,
    /// Names of the groups.
    pub groups: Vec<String>,
    /// Name and unit across, and upward.
    pub axes: (String, String),
    /// Sources; those at or below zero are left out.
    pub points: Vec<ScatterPoint>,
    /// Lines y = f x, each with its words, such as a fixed share of the free-fall speed.
    pub ratios: Vec<(f64, String)>,
    /// Sources that could not be shown, and why.
    pub left_out: Vec<String>,
}

impl ScatterFigure {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        const HEIGHT_MM: f64 = 84.0;
        let range = |of: fn(&ScatterPoint) -> Interval| {
            let values = self.points.iter().flat_map(|point| {
                let interval = of(point);
                // a bar that reaches far down would leave no room for the rest
                [
                    interval.low.max(0.3 * interval.value),
                    interval.value,
                    interval.high,
                ]
            });
            let (low, high) =
                extent(values.filter(|value| *value > 0.0).map(f64::log10)).unwrap_or((-1.0, 1.0));
            let margin = 0.08 * (high - low).max(0.3);
            (low - margin, high + margin)
        };
        page(COLUMN_MM, HEIGHT_MM, &self.title, |canvas| {
            let top = head(canvas, HEIGHT_MM, &self.title, &self.groups)?;
            let notes = self.notes();
            let bottom = HEIGHT_MM - 9.6 - leading_mm(NOTE) * notes.len() as f64;
            let frame = Frame::new(
                (LEFT_MM, RIGHT_MM, top, bottom),
                range(|point| point.x),
                range(|point| point.y),
                (Scale::Log, Scale::Log),
            );
            self.draw_ratios(canvas, &frame)?;
            for point in &self.points {
                frame.point(canvas, (point.x, point.y), point.group, point.likely)?;
            }
            frame.draw(canvas, (Some(&self.axes.0), Some(&self.axes.1)))?;
            for (index, note) in notes.iter().enumerate() {
                let y = bottom + 9.4 + leading_mm(NOTE) * index as f64;
                canvas.text(&text::plain(note), (LEFT_MM, y), Align::Start, NOTE)?;
            }
            Ok(())
        })
    }

    fn notes(&self) -> Vec<String> {
        let hollow = self.points.iter().any(|point| !point.likely);
        let hollow = hollow.then(|| "hollow: infall is not likely".to_owned());
        hollow
            .into_iter()
            .chain(self.left_out.iter().cloned())
            .collect()
    }

    fn draw_ratios(&self, canvas: &Canvas<'_>, frame: &Frame) -> Drawn {
        for (ratio, words) in &self.ratios {
            let shift = ratio.log10();
            let (across, up) = (&frame.across, &frame.up);
            // where the line is within the frame
            let from = across.low.max(up.low - shift);
            let to = across.high.min(up.high - shift);
            if from >= to {
                continue;
            }
            let at = |x: f64| (across.place_mm(x), up.place_mm(x + shift));
            canvas.line(&[at(from), at(to)], solid(ZERO, 0.18))?;
            // below the line where the words begin, which is where it is lowest
            let end = at(to);
            let width = text::span_width_mm(words, NOTE.size_pt, NOTE.weight);
            let begin = (end.0 - 1.0 - width).max(across.start_mm);
            let slope = (at(from).1 - end.1) / (end.0 - at(from).0);
            let place = (end.0 - 1.0, end.1 + slope * (end.0 - begin) + 2.6);
            canvas.text(&text::plain(words), place, Align::End, NOTE)?;
        }
        Ok(())
    }
}

/// One source in the figure of the ranking.
#[derive(Clone, Debug, PartialEq)]
pub struct RankBar {
    /// Its name.
    pub name: String,
    /// Its place, and the ends of the interval of its place.
    pub place: usize,
    /// Ends of the 68 % interval of its place.
    pub places: Option<(f64, f64)>,
    /// Probability of infall.
    pub p_infall: Option<f64>,
    /// Rate or speed.
    pub quantity: Option<Interval>,
    /// Its group.
    pub group: usize,
}

/// The ranking: names down the page, the interval of each place, probability of infall, and the rate.
#[derive(Clone, Debug, PartialEq)]
pub struct RankFigure {
    /// Heading.
    pub title: String,
    /// Names of the groups.
    pub groups: Vec<String>,
    /// Name and unit of the quantity.
    pub quantity: String,
    /// Sources in order.
    pub bars: Vec<RankBar>,
    /// Sources in all: places reach as far.
    pub sources: usize,
}

impl RankFigure {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        const ROW_MM: f64 = 3.9;
        const NAMES_MM: f64 = 40.0;
        let rows = self.bars.len().max(1) as f64;
        let key_mm = if self.groups.len() > 1 { 3.2 } else { 0.0 };
        let top = 7.0 + key_mm;
        let bottom = top + ROW_MM * rows;
        let height = bottom + 10.6;
        let middle = |index: usize| top + ROW_MM * (index as f64 + 0.5);
        let highest = self
            .bars
            .iter()
            .filter_map(|bar| bar.places)
            .map(|(_, high)| high)
            .fold(rows, f64::max);
        let values = self
            .bars
            .iter()
            .filter_map(|bar| bar.quantity)
            .flat_map(|one| [one.low, one.value, one.high]);
        let (low, high) = extent(values).unwrap_or((0.0, 1.0));
        let (low, high) = (low.min(0.0), high.max(low + 1e-12));
        let margin = 0.04 * (high - low);
        let power = exponent_of(high.max(-low));
        let unit = 10_f64.powi(power);
        page(PAGE_MM, height, &self.title, |canvas| {
            canvas.rectangle((0.0, 0.0), (PAGE_MM, height), PAPER)?;
            canvas.text(&text::plain(&self.title), (3.0, 4.6), Align::Start, TITLE)?;
            key(canvas, &self.groups, (3.0, PAGE_MM - 3.0), 5.8)?;
            let frame = |left: f64, right: f64, across: (f64, f64)| {
                Frame::new(
                    (left, right, top, bottom),
                    across,
                    (0.0, 1.0),
                    (Scale::Even, Scale::Even),
                )
            };
            let places = frame(
                NAMES_MM + 6.0,
                86.0,
                (0.5, highest.min(self.sources as f64) + 0.5),
            );
            let chances = frame(92.0, 120.0, (0.0, 1.0));
            let amounts = frame(
                126.0,
                177.0,
                ((low - margin) / unit, (high + margin) / unit),
            );
            for (index, bar) in self.bars.iter().enumerate() {
                let y = middle(index);
                if index % 2 == 1 {
                    canvas.rectangle(
                        (2.0, y - 0.5 * ROW_MM),
                        (PAGE_MM - 2.0, y + 0.5 * ROW_MM),
                        super::style::WINDOW,
                    )?;
                }
                let name = text::shortened(&bar.name, NAMES_MM - 8.0, LABEL.size_pt, LABEL.weight);
                canvas.text(
                    &text::plain(&bar.place.to_string()),
                    (9.0, y + 0.9),
                    Align::End,
                    TICK,
                )?;
                canvas.text(&text::plain(&name), (11.0, y + 0.9), Align::Start, LABEL)?;
            }
            let zero = amounts.place(0.0, 0.0).0;
            canvas.line(&[(zero, top), (zero, bottom)], solid(ZERO, 0.16))?;
            let half = chances.place(0.5, 0.0).0;
            canvas.line(&[(half, top), (half, bottom)], solid(GUIDE, 0.25))?;
            for (index, bar) in self.bars.iter().enumerate() {
                draw_bar(
                    canvas,
                    bar,
                    middle(index),
                    (&places, &chances, &amounts),
                    unit,
                )?;
            }
            places.draw(canvas, (Some("place, and 68 % by true value"), None))?;
            chances.draw(canvas, (Some("probability of infall"), None))?;
            let name = match power {
                0 => self.quantity.clone(),
                power => format!(
                    "{} in 10^{{{}}}",
                    self.quantity,
                    power.to_string().replace('-', "\u{2212}")
                ),
            };
            amounts.draw(canvas, (Some(&name), None))
        })
    }
}

/// The three marks of a source.
fn draw_bar(
    canvas: &Canvas<'_>,
    bar: &RankBar,
    y: f64,
    (places, chances, amounts): (&Frame, &Frame, &Frame),
    unit: f64,
) -> Drawn {
    let color = GROUPS[bar.group % GROUPS.len()];
    if let Some((low, high)) = bar.places {
        let ends = [
            (places.place(low - 0.4, 0.0).0, y),
            (places.place(high + 0.4, 0.0).0, y),
        ];
        canvas.line(&ends, solid(color, 1.1))?;
    }
    mark(
        canvas,
        (places.place(bar.place as f64, 0.0).0, y),
        bar.group,
        false,
    )?;
    if let Some(p_infall) = bar.p_infall {
        let ends = [
            (chances.across.start_mm, y),
            (chances.place(p_infall, 0.0).0, y),
        ];
        canvas.line(&ends, solid(color, 1.4))?;
    }
    if let Some(one) = bar.quantity {
        let at = |value: f64| amounts.place(value / unit, 0.0).0;
        canvas.line(&[(at(one.low), y), (at(one.high), y)], solid(color, 0.3))?;
        mark(canvas, (at(one.value), y), bar.group, true)?;
    }
    Ok(())
}

/// The power of ten that keeps an axis' numbers short; 0 where they are short already.
fn exponent_of(largest: f64) -> i32 {
    if largest <= 0.0 || (0.01..1000.0).contains(&largest) {
        return 0;
    }
    #[allow(clippy::cast_possible_truncation, reason = "a power of ten of a float")]
    let power = largest.log10().floor() as i32;
    power
}

/// Both lines of a source in small.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ProfilePanel {
    /// Heading, such as its place and name.
    pub name: String,
    /// One line below it.
    pub note: String,
    /// Velocities and temperatures of the thick line; `NaN` is left out.
    pub thick: Vec<(f64, f64)>,
    /// Those of the thin line.
    pub thin: Vec<(f64, f64)>,
    /// Velocity of the thin line, km/s.
    pub v_thin_km_s: Option<f64>,
}

/// A page of profiles, in rows of four.
#[derive(Clone, Debug, PartialEq)]
pub struct ProfileSheet {
    /// Heading.
    pub title: String,
    /// Sources in order; at most [`ProfileSheet::PANELS`].
    pub panels: Vec<ProfilePanel>,
}

impl ProfileSheet {
    /// Panels of a page.
    pub const PANELS: usize = 24;
    const COLUMNS: usize = 4;

    /// The page as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::Drawing`] where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        const WIDE_MM: f64 = 44.0;
        const HIGH_MM: f64 = 39.0;
        let rows = self.panels.len().div_ceil(Self::COLUMNS).max(1);
        let height = 9.0 + HIGH_MM * rows as f64 + 4.0;
        page(PAGE_MM, height, &self.title, |canvas| {
            canvas.rectangle((0.0, 0.0), (PAGE_MM, height), PAPER)?;
            canvas.text(&text::plain(&self.title), (3.0, 4.6), Align::Start, TITLE)?;
            let note = text::markup(
                "steps: thick line (V_{LSR} in km/s, T_{mb} in K); shaded: thin line, to 0.6 of its peak; below names: probability of infall, inward speed",
            );
            canvas.text(&note, (PAGE_MM - 3.0, 4.6), Align::End, NOTE)?;
            for (index, panel) in self.panels.iter().enumerate() {
                let (row, column) = (index / Self::COLUMNS, index % Self::COLUMNS);
                let corner = (2.0 + WIDE_MM * column as f64, 8.0 + HIGH_MM * row as f64);
                panel.draw(canvas, corner, (WIDE_MM, HIGH_MM))?;
            }
            Ok(())
        })
    }
}

impl ProfilePanel {
    fn draw(
        &self,
        canvas: &Canvas<'_>,
        (left, top): (f64, f64),
        (wide, high): (f64, f64),
    ) -> Drawn {
        let room = wide - 9.0;
        let name = text::shortened(&self.name, room, NAME.size_pt, NAME.weight);
        canvas.text(
            &text::plain(&name),
            (left + 7.0, top + 3.0),
            Align::Start,
            NAME,
        )?;
        let note = text::shortened(&self.note, room, NOTE.size_pt, NOTE.weight);
        canvas.text(
            &text::number(&note),
            (left + 7.0, top + 6.0),
            Align::Start,
            NOTE,
        )?;
        let all = || self.thick.iter().chain(&self.thin);
        let velocities = extent(all().map(|(velocity, _)| *velocity)).unwrap_or((-1.0, 1.0));
        let (low, peak) =
            extent(self.thick.iter().map(|(_, temperature)| *temperature)).unwrap_or((0.0, 1.0));
        let (low, peak) = (low.min(0.0), peak.max(1e-6));
        let place = (left + 7.0, left + wide - 2.0, top + 7.4, top + high - 6.0);
        let up = (low - 0.05 * (peak - low), peak + 0.08 * (peak - low));
        let frame = Frame::new(place, velocities, up, (Scale::Even, Scale::Even));
        let thin_peak = extent(self.thin.iter().map(|(_, temperature)| *temperature))
            .map_or(1.0, |(_, high)| high);
        let scale = if thin_peak > 0.0 {
            0.6 * peak / thin_peak
        } else {
            0.0
        };
        let width = |line: &[(f64, f64)]| {
            line.windows(2)
                .map(|two| two[1].0 - two[0].0)
                .fold(f64::INFINITY, f64::min)
        };
        let channel = width(&self.thin);
        for (velocity, temperature) in &self.thin {
            if temperature.is_finite() && channel.is_finite() {
                let corner = frame.place(velocity - 0.5 * channel, 0.0);
                let other = frame.place(velocity + 0.5 * channel, scale * temperature);
                canvas.rectangle(corner, other, GUIDE)?;
            }
        }
        frame.level(canvas, 0.0)?;
        if let Some(v_thin) = self.v_thin_km_s.filter(|v| frame.across.contains(*v)) {
            let x = frame.place(v_thin, 0.0).0;
            canvas.line(&[(x, place.2), (x, place.3)], solid(MODELS[1].color, 0.2))?;
        }
        for run in self
            .thick
            .split(|(_, temperature)| !temperature.is_finite())
        {
            let half = 0.5 * width(&self.thick);
            let steps: Vec<(f64, f64)> = run
                .iter()
                .flat_map(|(velocity, temperature)| {
                    [
                        frame.place(velocity - half, *temperature),
                        frame.place(velocity + half, *temperature),
                    ]
                })
                .collect();
            canvas.line(&steps, solid(DATA, 0.24))?;
        }
        small_axes(canvas, &frame)
    }
}

/// A small frame's lines with a few numbers and no names.
fn small_axes(canvas: &Canvas<'_>, frame: &Frame) -> Drawn {
    use super::axis::Ticks;
    let (left, bottom) = (frame.across.start_mm, frame.up.start_mm);
    let line = solid(SOFT_INK, 0.16);
    canvas.line(
        &[
            (left, frame.up.end_mm),
            (left, bottom),
            (frame.across.end_mm, bottom),
        ],
        line,
    )?;
    let across = Ticks::between(frame.across.low, frame.across.high, 4);
    for value in &across.values {
        let x = frame.across.place_mm(*value);
        canvas.line(&[(x, bottom), (x, bottom + 0.6)], line)?;
        canvas.text(
            &text::plain(&across.label(*value)),
            (x, bottom + 3.0),
            Align::Middle,
            NOTE,
        )?;
    }
    let up = Ticks::between(frame.up.low, frame.up.high, 3);
    for value in &up.values {
        let y = frame.up.place_mm(*value);
        canvas.line(&[(left - 0.6, y), (left, y)], line)?;
        canvas.text(
            &text::plain(&up.label(*value)),
            (left - 1.0, y + 0.8),
            Align::End,
            NOTE,
        )?;
    }
    Ok(())
}
