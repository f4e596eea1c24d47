//! The page: millimetres in, an SVG document out, through plotters' drawing elements.
//!
//! The library's coordinates are whole numbers, so that the page is drawn a hundred units to the
//! millimetre.

use plotters::coord::Shift;
use plotters::prelude::{
    Circle, DrawingArea, IntoDrawingArea, PathElement, Polygon, Rectangle, SVGBackend, Text,
};
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{
    Color, FontDesc, FontFamily, FontTransform, RGBColor, ShapeStyle, TextStyle,
};

use super::style::{Look, POINT_MM, Stroke};
use super::text::{self, Spans};
use crate::report::ReportError;

const UNITS_PER_MM: f64 = 100.0;
/// The library divides text sizes by this when it writes SVG.
const LIBRARY_TEXT_FACTOR: f64 = 1.24;

/// Which point of a text stands at its place.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Align {
    Start,
    Middle,
    End,
}

pub(super) struct Canvas<'a> {
    area: DrawingArea<SVGBackend<'a>, Shift>,
}

/// Draws a page through `draw` and returns it as an SVG document.
pub(super) fn page(
    width_mm: f64,
    height_mm: f64,
    title: &str,
    draw: impl FnOnce(&Canvas) -> Result<(), ReportError>,
) -> Result<String, ReportError> {
    let size = (
        units(width_mm).unsigned_abs(),
        units(height_mm).unsigned_abs(),
    );
    let mut svg = String::new();
    {
        let canvas = Canvas {
            area: SVGBackend::with_string(&mut svg, size).into_drawing_area(),
        };
        draw(&canvas)?;
        canvas.area.present().map_err(|error| failed(&error))?;
    }
    Ok(finished(&svg, size, title))
}

/// The library's document with a size in millimetres, a title, fallbacks for the typeface, and
/// text set from its baseline. Quotes in texts are escaped, so that only attributes can match.
fn finished(svg: &str, size: (u32, u32), title: &str) -> String {
    let body = svg.split_once(">\n").map_or("", |(_, body)| body);
    let body = body
        .replace(" dy=\"-0.5ex\"", "")
        .replace(" opacity=\"1\"", "")
        .replace(" \"/>", "\"/>")
        .replace(
            &format!("font-family=\"{}\"", text::FAMILY),
            &format!(
                "font-family=\"'{}', Helvetica, Arial, sans-serif\"",
                text::FAMILY
            ),
        )
        .replace("font-weight=\"bold\"", "font-weight=\"600\"");
    let (width, height) = size;
    let millimetres = |units: u32| f64::from(units) / UNITS_PER_MM;
    format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{}mm\" height=\"{}mm\" \
         viewBox=\"0 0 {width} {height}\" stroke-linejoin=\"round\" stroke-linecap=\"butt\">\n\
         <title>{}</title>\n{body}",
        millimetres(width),
        millimetres(height),
        escaped(title),
    )
}

fn escaped(text: &str) -> String {
    let clean = text.chars().map(|c| if c.is_control() { ' ' } else { c });
    clean
        .collect::<String>()
        .replace('&', "&amp;")
        .replace('<', "&lt;")
        .replace('>', "&gt;")
}

impl Canvas<'_> {
    /// A line through points of the page, dashed where the stroke is.
    pub(super) fn line(&self, points: &[(f64, f64)], stroke: Stroke) -> Result<(), ReportError> {
        let style = stroke
            .color
            .stroke_width(units(stroke.width_mm).unsigned_abs());
        if stroke.dashes.is_empty() {
            return self.path(points, style);
        }
        for dash in dashes(points, stroke.dashes) {
            self.path(&dash, style)?;
        }
        Ok(())
    }

    fn path(&self, points: &[(f64, f64)], style: ShapeStyle) -> Result<(), ReportError> {
        if points.len() < 2 {
            return Ok(());
        }
        let points: Vec<_> = points.iter().map(|&point| place(point)).collect();
        self.area
            .draw(&PathElement::new(points, style))
            .map_err(|error| failed(&error))
    }

    pub(super) fn rectangle(
        &self,
        from: (f64, f64),
        to: (f64, f64),
        color: RGBColor,
    ) -> Result<(), ReportError> {
        self.area
            .draw(&Rectangle::new([place(from), place(to)], color.filled()))
            .map_err(|error| failed(&error))
    }

    pub(super) fn polygon(
        &self,
        points: &[(f64, f64)],
        color: RGBColor,
    ) -> Result<(), ReportError> {
        let points: Vec<_> = points.iter().map(|&point| place(point)).collect();
        self.area
            .draw(&Polygon::new(points, color.filled()))
            .map_err(|error| failed(&error))
    }

    pub(super) fn dot(
        &self,
        at: (f64, f64),
        radius_mm: f64,
        color: RGBColor,
    ) -> Result<(), ReportError> {
        self.area
            .draw(&Circle::new(place(at), units(radius_mm), color.filled()))
            .map_err(|error| failed(&error))
    }

    /// Text with its baseline through a point.
    pub(super) fn text(
        &self,
        spans: &Spans,
        at: (f64, f64),
        align: Align,
        look: Look,
    ) -> Result<(), ReportError> {
        let start = at.0 - shift(spans, align, look);
        for span in placed(spans, look) {
            let place = (start + span.along_mm, at.1 - span.rise_mm);
            self.span(span.text, place, span.size_pt, look, FontTransform::None)?;
        }
        Ok(())
    }

    /// Text that runs upward, its baseline through a point, centred there.
    pub(super) fn upward_text(
        &self,
        spans: &Spans,
        at: (f64, f64),
        look: Look,
    ) -> Result<(), ReportError> {
        let start = at.1 + shift(spans, Align::Middle, look);
        for span in placed(spans, look) {
            let place = (at.0 - span.rise_mm, start - span.along_mm);
            self.span(
                span.text,
                place,
                span.size_pt,
                look,
                FontTransform::Rotate270,
            )?;
        }
        Ok(())
    }

    fn span(
        &self,
        text: &str,
        at: (f64, f64),
        size_pt: f64,
        look: Look,
        transform: FontTransform,
    ) -> Result<(), ReportError> {
        let size = size_pt * POINT_MM * UNITS_PER_MM * LIBRARY_TEXT_FACTOR;
        let font = FontDesc::new(
            FontFamily::Name(text::FAMILY),
            (size * 10.0).round() / 10.0,
            look.weight.font_style(),
        )
        .transform(transform);
        let style = TextStyle::from(font)
            .color(&look.color)
            .pos(Pos::new(HPos::Left, VPos::Bottom));
        self.area
            .draw(&Text::new(text, place(at), style))
            .map_err(|error| failed(&error))
    }
}

/// One span of a text, without blanks at its ends, which SVG drops.
struct PlacedSpan<'a> {
    text: &'a str,
    size_pt: f64,
    /// From the start of the text, and above its baseline.
    along_mm: f64,
    rise_mm: f64,
}

fn placed(spans: &Spans, look: Look) -> Vec<PlacedSpan<'_>> {
    let mut along_mm = 0.0;
    let mut placed = Vec::with_capacity(spans.len());
    for (script, text) in spans {
        let size_pt = look.size_pt * script.size();
        let width = |text: &str| text::span_width_mm(text, size_pt, look.weight);
        let trimmed = text.trim_start();
        let blanks = &text[..text.len() - trimmed.len()];
        placed.push(PlacedSpan {
            text: trimmed.trim_end(),
            size_pt,
            along_mm: along_mm + width(blanks),
            rise_mm: script.rise() * look.size_pt * POINT_MM,
        });
        along_mm += width(text);
    }
    placed
}

fn shift(spans: &Spans, align: Align, look: Look) -> f64 {
    let width = text::width_mm(spans, look.size_pt, look.weight);
    match align {
        Align::Start => 0.0,
        Align::Middle => width / 2.0,
        Align::End => width,
    }
}

fn units(millimetres: f64) -> i32 {
    // Saturates far outside of any page.
    #[allow(clippy::cast_possible_truncation)]
    let units = (millimetres * UNITS_PER_MM).round() as i32;
    units
}

fn place((x, y): (f64, f64)) -> (i32, i32) {
    (units(x), units(y))
}

fn failed(error: &impl std::fmt::Display) -> ReportError {
    ReportError::Drawing {
        format: "SVG",
        reason: error.to_string(),
    }
}

/// The dashes of a line: pattern lengths alternate between drawn and left out.
fn dashes(points: &[(f64, f64)], pattern: &[f64]) -> Vec<Vec<(f64, f64)>> {
    let mut dashes = Vec::new();
    let Some(&first) = points.first() else {
        return dashes;
    };
    let (mut index, mut left) = (0, pattern[0]);
    let mut dash = vec![first];
    for pair in points.windows(2) {
        let (mut from, to) = (pair[0], pair[1]);
        let mut length = (to.0 - from.0).hypot(to.1 - from.1);
        while length > left {
            let share = left / length;
            from = (
                from.0 + share * (to.0 - from.0),
                from.1 + share * (to.1 - from.1),
            );
            length -= left;
            if index % 2 == 0 {
                dash.push(from);
                dashes.push(std::mem::take(&mut dash));
            } else {
                dash = vec![from];
            }
            index = (index + 1) % pattern.len();
            left = pattern[index];
        }
        left -= length;
        if index % 2 == 0 {
            dash.push(to);
        }
    }
    if index % 2 == 0 && dash.len() > 1 {
        dashes.push(dash);
    }
    dashes
}

#[cfg(test)]
mod tests {
    use super::dashes;

    #[test]
    fn dashes_cover_their_share_of_a_bent_line() {
        let points = [(0.0, 0.0), (3.0, 0.0), (3.0, 4.0), (13.0, 4.0)];
        let found = dashes(&points, &[1.0, 0.5]);
        let length: f64 = found
            .iter()
            .flat_map(|dash| dash.windows(2))
            .map(|pair| (pair[1].0 - pair[0].0).hypot(pair[1].1 - pair[0].1))
            .sum();
        // 17 = 11 patterns of 1.5 and half of one: 11.5 drawn.
        assert!((length - 11.5).abs() < 1e-9, "{length}");
        assert_eq!(found.len(), 12);
    }
}
