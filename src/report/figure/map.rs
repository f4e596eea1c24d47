//! One quantity over the sky: coloured cells or dots, contours of another, beam and scale bar.
//!
//! Offsets from the reference position, east to the left; 88 mm wide, a journal's column.

use super::axis::{Axis, Ticks, extent};
use super::canvas::{Align, Canvas, page};
use super::contour::contours;
use super::export;
use super::style::{
    CONTOUR, Colours, INK, LABEL, MISSING, NOTE, PAPER, POINT_MM, TICK, TITLE, leading_mm, solid,
};
use super::text;
use crate::read::cube::SkyBeam;
use crate::report::ReportError;

const PAGE_MM: f64 = 88.0;
const LEFT_MM: f64 = 14.0;
const TOP_MM: f64 = 12.0;
const PLOT_MM: f64 = 58.0;
const BAR_GAP_MM: f64 = 2.0;
const BAR_MM: f64 = 3.0;
const BELOW_MM: f64 = 10.5;
const TICK_MM: f64 = 1.0;

/// Cells along an axis beyond which neighbours are averaged: more than print shows.
const MOST_CELLS: usize = 256;
/// Shades of a colour scale.
const SHADES: usize = 96;
/// Share of values outside of the colour scale at either end, which single bad cells would stretch.
const OUTSIDE: f64 = 0.01;

/// Which colours suit a quantity.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ColourScale {
    /// From little to much.
    Sequential,
    /// About zero, negative values blue.
    CentredBlueBelow,
    /// About zero, positive values blue.
    CentredBlueAbove,
}

/// Where a map has its values.
#[derive(Clone, Debug, PartialEq)]
pub enum MapCells {
    /// On columns and rows.
    Raster {
        /// Columns.
        width: usize,
        /// Rows.
        height: usize,
        /// Offsets east and north of the first cell, arcsec.
        first_arcsec: [f64; 2],
        /// Offsets from one column to the next, arcsec.
        column_arcsec: [f64; 2],
        /// Offsets from one row to the next, arcsec.
        row_arcsec: [f64; 2],
        /// Row by row; `NaN` where there is none.
        values: Vec<f64>,
        /// What contours are drawn of, row by row; empty for none.
        contoured: Vec<f64>,
        /// Levels of the contours.
        levels: Vec<f64>,
    },
    /// At places.
    Points {
        /// Distance of neighbours, arcsec.
        step_arcsec: f64,
        /// Offsets east and north, arcsec, and value.
        points: Vec<([f64; 2], f64)>,
    },
}

/// A bar of a known length.
#[derive(Clone, Debug, PartialEq)]
pub struct ScaleBar {
    /// Length, arcsec.
    pub arcsec: f64,
    /// The same in words.
    pub label: String,
}

/// Everything in the figure of a map.
#[derive(Clone, Debug, PartialEq)]
pub struct MapFigure {
    /// Name of the source and, where it is known, the reference position.
    pub title: String,
    /// The quantity with its unit; may hold `_{...}` and `^{...}`.
    pub label: String,
    /// What the contours and colours are, in words; may be empty.
    pub note: String,
    /// Names of the axes.
    pub axes: [String; 2],
    /// Values and their places.
    pub cells: MapCells,
    /// Colours.
    pub colours: ColourScale,
    /// Beam.
    pub beam: Option<SkyBeam>,
    /// Scale bar.
    pub scale_bar: Option<ScaleBar>,
}

type Drawn = Result<(), ReportError>;

impl MapFigure {
    /// The figure as an SVG document.
    ///
    /// # Errors
    ///
    /// [`ReportError::LengthMismatch`] where arrays do not belong together, [`ReportError::Drawing`] where
    /// the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        self.check()?;
        let sheet = Sheet::new(self);
        page(PAGE_MM, sheet.height_mm, &self.title, |canvas| {
            sheet.draw(canvas)
        })
    }

    /// The figure as a PNG image on white, `width_px` pixels wide.
    ///
    /// # Errors
    ///
    /// As [`MapFigure::svg`].
    pub fn png(&self, width_px: u32) -> Result<Vec<u8>, ReportError> {
        export::png(&self.svg()?, width_px)
    }

    fn check(&self) -> Drawn {
        if let MapCells::Raster {
            width,
            height,
            values,
            contoured,
            ..
        } = &self.cells
        {
            super::same("map", values.len(), width * height)?;
            if !contoured.is_empty() {
                super::same("map, contours", contoured.len(), width * height)?;
            }
        }
        Ok(())
    }
}

/// Limits of a colour scale: those of all values but a few, about zero where it is centred.
fn limits(values: impl Iterator<Item = f64>, colours: ColourScale) -> (f64, f64) {
    let mut finite: Vec<f64> = values.filter(|value| value.is_finite()).collect();
    finite.sort_by(f64::total_cmp);
    let (Some(first), Some(last)) = (finite.first(), finite.last()) else {
        return (0.0, 1.0);
    };
    // Not negative, and below the number of values.
    #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
    let cut = (OUTSIDE * finite.len() as f64) as usize;
    let (low, high) = (finite[cut], finite[finite.len() - 1 - cut]);
    let (low, high) = match colours {
        ColourScale::Sequential => (low, high),
        _ => (-low.abs().max(high.abs()), low.abs().max(high.abs())),
    };
    if low < high {
        (low, high)
    } else {
        (first - 0.5, last + 0.5)
    }
}

struct Sheet<'a> {
    figure: &'a MapFigure,
    height_mm: f64,
    /// Offsets east (to the left) and north on the page.
    east: Axis,
    north: Axis,
    mm_per_arcsec: f64,
    limits: (f64, f64),
}

impl<'a> Sheet<'a> {
    fn new(figure: &'a MapFigure) -> Self {
        let corners: Vec<[f64; 2]> = match &figure.cells {
            MapCells::Raster { width, height, .. } => {
                let (w, h) = (*width as f64 - 0.5, *height as f64 - 0.5);
                [(-0.5, -0.5), (w, -0.5), (-0.5, h), (w, h)]
                    .map(|(x, y)| figure.cells.offsets(x, y))
                    .to_vec()
            }
            MapCells::Points {
                step_arcsec,
                points,
            } => points
                .iter()
                .flat_map(|([x, y], _)| {
                    let half = 0.6 * step_arcsec;
                    [[x - half, y - half], [x + half, y + half]]
                })
                .collect(),
        };
        let range =
            |axis: usize| extent(corners.iter().map(|corner| corner[axis])).unwrap_or((-1.0, 1.0));
        let ((east_low, east_high), (north_low, north_high)) = (range(0), range(1));
        let widest = (east_high - east_low).max(north_high - north_low).max(1e-9);
        let mm_per_arcsec = PLOT_MM / widest;
        let plot_width = mm_per_arcsec * (east_high - east_low);
        let plot_height = mm_per_arcsec * (north_high - north_low);
        let left = LEFT_MM + 0.5 * (PLOT_MM - plot_width);
        let values: Vec<f64> = match &figure.cells {
            MapCells::Raster { values, .. } => values.clone(),
            MapCells::Points { points, .. } => points.iter().map(|(_, value)| *value).collect(),
        };
        Self {
            figure,
            height_mm: TOP_MM + plot_height + BELOW_MM,
            east: Axis {
                low: east_high,
                high: east_low,
                start_mm: left,
                end_mm: left + plot_width,
            },
            north: Axis {
                low: north_low,
                high: north_high,
                start_mm: TOP_MM + plot_height,
                end_mm: TOP_MM,
            },
            mm_per_arcsec,
            limits: limits(values.into_iter(), figure.colours),
        }
    }

    fn draw(&self, canvas: &Canvas<'_>) -> Drawn {
        canvas.rectangle((0.0, 0.0), (PAGE_MM, self.height_mm), PAPER)?;
        let room = PAGE_MM - LEFT_MM - 2.0;
        let title = text::shortened(&self.figure.title, room, TITLE.size_pt, TITLE.weight);
        canvas.text(&text::plain(&title), (LEFT_MM, 4.6), Align::Start, TITLE)?;
        let note = text::shortened(&self.figure.note, room, NOTE.size_pt, NOTE.weight);
        canvas.text(&text::plain(&note), (LEFT_MM, 8.2), Align::Start, NOTE)?;
        canvas.rectangle(
            (self.east.start_mm, self.north.end_mm),
            (self.east.end_mm, self.north.start_mm),
            MISSING,
        )?;
        self.cells(canvas)?;
        self.contours(canvas)?;
        self.beam(canvas)?;
        self.scale_bar(canvas)?;
        self.frame(canvas)?;
        self.colour_bar(canvas)
    }

    fn place(&self, [east, north]: [f64; 2]) -> (f64, f64) {
        (self.east.place_mm(east), self.north.place_mm(north))
    }

    /// Which shade a value has; none where there is no value.
    fn shade(&self, value: f64) -> Option<usize> {
        let (low, high) = self.limits;
        let share = ((value - low) / (high - low)).clamp(0.0, 1.0);
        // From 0 to SHADES - 1.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        (!value.is_nan()).then(|| ((share * SHADES as f64) as usize).min(SHADES - 1))
    }

    fn colours(&self) -> Colours {
        match self.figure.colours {
            ColourScale::Sequential => Colours::Sequential,
            ColourScale::CentredBlueBelow => Colours::BlueToRed,
            ColourScale::CentredBlueAbove => Colours::RedToBlue,
        }
    }

    fn colour(&self, shade: usize) -> plotters::style::RGBColor {
        self.colours().at((shade as f64 + 0.5) / SHADES as f64)
    }

    fn cells(&self, canvas: &Canvas<'_>) -> Drawn {
        match &self.figure.cells {
            MapCells::Points {
                step_arcsec,
                points,
            } => {
                let radius = 0.45 * step_arcsec * self.mm_per_arcsec;
                for (at, value) in points {
                    if let Some(shade) = self.shade(*value) {
                        canvas.dot(self.place(*at), radius, self.colour(shade))?;
                    }
                }
                Ok(())
            }
            cells @ MapCells::Raster {
                width,
                height,
                values,
                ..
            } => {
                let every = width.max(height).div_ceil(MOST_CELLS);
                for row in (0..*height).step_by(every) {
                    let shades: Vec<Option<usize>> = (0..*width)
                        .step_by(every)
                        .map(|column| {
                            self.shade(mean_of(values, (*width, *height), (column, row), every))
                        })
                        .collect();
                    let mut start = 0;
                    // Cells of one shade side by side are one polygon: no seams, and small files.
                    for end in 1..=shades.len() {
                        if end < shades.len() && shades[end] == shades[start] {
                            continue;
                        }
                        if let Some(shade) = shades[start] {
                            let bottom = row as f64 - 0.5;
                            let top = (row + every).min(*height) as f64 - 0.5;
                            let left = (start * every) as f64 - 0.5;
                            let right = (end * every).min(*width) as f64 - 0.5;
                            let corners =
                                [(left, bottom), (right, bottom), (right, top), (left, top)]
                                    .map(|(x, y)| self.place(cells.offsets(x, y)));
                            canvas.polygon(&corners, self.colour(shade))?;
                        }
                        start = end;
                    }
                }
                Ok(())
            }
        }
    }

    fn contours(&self, canvas: &Canvas<'_>) -> Drawn {
        let MapCells::Raster {
            width,
            height,
            contoured,
            levels,
            ..
        } = &self.figure.cells
        else {
            return Ok(());
        };
        if contoured.is_empty() {
            return Ok(());
        }
        for (index, level) in levels.iter().enumerate() {
            let stroke = solid(CONTOUR, 0.16 + 0.05 * index as f64);
            for [from, to] in contours(contoured, (*width, *height), *level) {
                let ends = [from, to].map(|(x, y)| self.place(self.figure.cells.offsets(x, y)));
                canvas.line(&ends, stroke)?;
            }
        }
        Ok(())
    }

    fn beam(&self, canvas: &Canvas<'_>) -> Drawn {
        let Some(beam) = self.figure.beam else {
            return Ok(());
        };
        let half =
            [beam.major_arcsec, beam.minor_arcsec].map(|width| 0.5 * width * self.mm_per_arcsec);
        if half[0] > 0.3 * PLOT_MM {
            return Ok(());
        }
        let middle = (
            self.east.start_mm + half[0] + 1.4,
            self.north.start_mm - half[0] - 1.4,
        );
        let box_half = half[0] + 0.7;
        canvas.rectangle(
            (middle.0 - box_half, middle.1 - box_half),
            (middle.0 + box_half, middle.1 + box_half),
            PAPER,
        )?;
        let (sin, cos) = beam.angle_deg.to_radians().sin_cos();
        let outline: Vec<(f64, f64)> = (0..48)
            .map(|step| {
                let (s, c) = (std::f64::consts::TAU * f64::from(step) / 48.0).sin_cos();
                let (along, across) = (half[0] * c, half[1] * s);
                // East is to the left, north up.
                let (east, north) = (along * sin + across * cos, along * cos - across * sin);
                (middle.0 - east, middle.1 - north)
            })
            .collect();
        canvas.polygon(&outline, INK)
    }

    fn scale_bar(&self, canvas: &Canvas<'_>) -> Drawn {
        let Some(bar) = &self.figure.scale_bar else {
            return Ok(());
        };
        let length = bar.arcsec * self.mm_per_arcsec;
        let label = text::plain(&bar.label);
        let width = text::width_mm(&label, TICK.size_pt, TICK.weight).max(length);
        let (right, bottom) = (self.east.end_mm - 1.6, self.north.start_mm - 1.8);
        canvas.rectangle(
            (right - width - 0.7, bottom - 4.4),
            (right + 0.7, bottom + 0.7),
            PAPER,
        )?;
        let middle = right - 0.5 * width;
        let ends = [
            (middle - 0.5 * length, bottom),
            (middle + 0.5 * length, bottom),
        ];
        canvas.line(&ends, solid(INK, 0.5))?;
        canvas.text(&label, (middle, bottom - 1.2), Align::Middle, TICK)
    }

    fn frame(&self, canvas: &Canvas<'_>) -> Drawn {
        let line = solid(INK, 0.2);
        let (left, right) = (self.east.start_mm, self.east.end_mm);
        let (bottom, top) = (self.north.start_mm, self.north.end_mm);
        let corners = [
            (left, top),
            (left, bottom),
            (right, bottom),
            (right, top),
            (left, top),
        ];
        canvas.line(&corners, line)?;
        let ticks = Ticks::between(self.east.high, self.east.low, 6);
        for value in &ticks.values {
            let x = self.east.place_mm(*value);
            canvas.line(&[(x, bottom), (x, bottom + TICK_MM)], line)?;
            let at = (x, bottom + TICK_MM + leading_mm(TICK) * 0.8);
            canvas.text(&text::plain(&ticks.label(*value)), at, Align::Middle, TICK)?;
        }
        let middle = f64::midpoint(left, right);
        let at = (
            middle,
            bottom + TICK_MM + leading_mm(TICK) * 0.8 + leading_mm(LABEL),
        );
        canvas.text(&text::plain(&self.figure.axes[0]), at, Align::Middle, LABEL)?;
        let ticks = Ticks::between(self.north.low, self.north.high, 6);
        let mut widest: f64 = 0.0;
        for value in &ticks.values {
            let y = self.north.place_mm(*value);
            canvas.line(&[(left - TICK_MM, y), (left, y)], line)?;
            let label = text::plain(&ticks.label(*value));
            widest = widest.max(text::width_mm(&label, TICK.size_pt, TICK.weight));
            let at = (left - TICK_MM - 0.6, y + 0.36 * TICK.size_pt * POINT_MM);
            canvas.text(&label, at, Align::End, TICK)?;
        }
        let at = (left - TICK_MM - widest - 1.8, f64::midpoint(bottom, top));
        canvas.upward_text(&text::plain(&self.figure.axes[1]), at, LABEL)
    }

    fn colour_bar(&self, canvas: &Canvas<'_>) -> Drawn {
        let left = self.east.end_mm + BAR_GAP_MM;
        let (bottom, top) = (self.north.start_mm, self.north.end_mm);
        let step = (bottom - top) / SHADES as f64;
        for shade in 0..SHADES {
            let y = bottom - step * shade as f64;
            // A little overlap leaves no seams.
            let above = (y - step - 0.02).max(top);
            canvas.rectangle((left, above), (left + BAR_MM, y), self.colour(shade))?;
        }
        let line = solid(INK, 0.2);
        let right = left + BAR_MM;
        canvas.line(
            &[
                (left, top),
                (left, bottom),
                (right, bottom),
                (right, top),
                (left, top),
            ],
            line,
        )?;
        let axis = Axis {
            low: self.limits.0,
            high: self.limits.1,
            start_mm: bottom,
            end_mm: top,
        };
        let ticks = Ticks::between(axis.low, axis.high, 6);
        let mut widest: f64 = 0.0;
        for value in &ticks.values {
            let y = axis.place_mm(*value);
            canvas.line(&[(right, y), (right + TICK_MM, y)], line)?;
            let label = text::plain(&ticks.label(*value));
            widest = widest.max(text::width_mm(&label, TICK.size_pt, TICK.weight));
            let at = (right + TICK_MM + 0.6, y + 0.36 * TICK.size_pt * POINT_MM);
            canvas.text(&label, at, Align::Start, TICK)?;
        }
        let x = right + TICK_MM + widest + 1.4 + LABEL.size_pt * POINT_MM * 0.8;
        let at = (x, f64::midpoint(bottom, top));
        canvas.upward_text(&text::markup(&self.figure.label), at, LABEL)
    }
}

impl MapCells {
    /// Offsets east and north (arcsec) of a place between cells.
    fn offsets(&self, x: f64, y: f64) -> [f64; 2] {
        match self {
            Self::Raster {
                first_arcsec,
                column_arcsec,
                row_arcsec,
                ..
            } => std::array::from_fn(|axis| {
                first_arcsec[axis] + x * column_arcsec[axis] + y * row_arcsec[axis]
            }),
            Self::Points { .. } => [x, y],
        }
    }
}

/// Mean of what is there in a square of cells.
fn mean_of(
    values: &[f64],
    (width, height): (usize, usize),
    (column, row): (usize, usize),
    every: usize,
) -> f64 {
    let (mut sum, mut count) = (0.0, 0.0);
    for y in row..(row + every).min(height) {
        for x in column..(column + every).min(width) {
            let value = values[y * width + x];
            if !value.is_nan() {
                sum += value;
                count += 1.0;
            }
        }
    }
    sum / count
}
