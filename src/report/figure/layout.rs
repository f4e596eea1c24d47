//! Where the parts of a pair's figure stand on the page, before anything is drawn.

use super::axis::{Axis, Ticks, extent};
use super::canvas::{Align, Canvas};
use super::posterior::PosteriorPlace;
use super::style::{
    CAUTION_HEADING, LABEL, Look, NOTE, SOFT_LABEL, TICK, TITLE, VALUE, leading_mm,
};
use super::text::{self, Spans};
use super::{PairFigure, Panel};
use crate::report::ReportError;

/// Width of the page: one column of a journal.
pub(super) const PAGE_MM: f64 = 88.0;
pub(super) const MARGIN_MM: f64 = 1.5;
/// Left and right ends of the velocity axis.
pub(super) const PLOT_LEFT_MM: f64 = 12.6;
pub(super) const PLOT_RIGHT_MM: f64 = 85.8;
pub(super) const THICK_MM: f64 = 41.0;
pub(super) const THIN_MM: f64 = 25.0;
pub(super) const RESIDUAL_MM: f64 = 9.5;
/// Gaps between a line and its residuals, and between the two lines.
pub(super) const INNER_GAP_MM: f64 = 1.4;
pub(super) const OUTER_GAP_MM: f64 = 3.0;
pub(super) const TICK_MM: f64 = 0.9;
/// Cautions beyond this many are counted, not shown.
pub(super) const MOST_CAUTIONS: usize = 8;
/// Part of the window's width that is shown on either side of it.
pub(super) const VIEW_MARGIN: f64 = 0.6;

/// Top and bottom of a line's axes and of its residuals', mm.
pub(super) struct PanelPlace {
    pub(super) top: f64,
    pub(super) bottom: f64,
    pub(super) residuals: Option<(f64, f64)>,
}

impl PanelPlace {
    pub(super) fn of(panel: &Panel, top: f64, height: f64) -> Self {
        let bottom = top + height;
        let from = bottom + INNER_GAP_MM;
        Self {
            top,
            bottom,
            residuals: (!panel.curves.is_empty()).then_some((from, from + RESIDUAL_MM)),
        }
    }

    pub(super) fn end(&self) -> f64 {
        self.residuals.map_or(self.bottom, |(_, bottom)| bottom)
    }
}

pub(super) struct Layout {
    pub(super) title: Vec<String>,
    pub(super) velocity: Axis,
    pub(super) velocity_ticks: Ticks,
    pub(super) thick: PanelPlace,
    pub(super) thin: PanelPlace,
    /// Names of the models in the order of their strokes.
    pub(super) models: Vec<String>,
    pub(super) notes: Vec<PlacedNote>,
    pub(super) posterior: Option<PosteriorPlace>,
    /// Top of the block of numbers.
    pub(super) numbers_top: f64,
    pub(super) numbers: Numbers,
    pub(super) cautions_top: f64,
    pub(super) cautions: Vec<Vec<String>>,
    pub(super) height_mm: f64,
}

impl Layout {
    pub(super) fn of(figure: &PairFigure) -> Self {
        let velocity = velocity_axis(figure);
        let title = title_lines(&figure.source);
        let top = MARGIN_MM + leading_mm(TITLE) * title.len() as f64 + 1.4;
        let thick = PanelPlace::of(&figure.thick, top, THICK_MM);
        let thin = PanelPlace::of(&figure.thin, thick.end() + OUTER_GAP_MM, THIN_MM);

        let axis_end = thin.end() + TICK_MM + leading_mm(TICK) + leading_mm(LABEL) + 0.4;
        let notes = placed_notes(figure, axis_end + leading_mm(NOTE));
        let notes_end = notes.last().map_or(axis_end, |note| note.at.1) + 1.6;

        let posterior = figure.posterior.as_ref();
        let posterior = posterior.map(|part| PosteriorPlace::of(part, notes_end));
        let numbers = Numbers::of(&figure.numbers);
        let numbers_top = posterior.as_ref().map_or(notes_end, PosteriorPlace::end);
        let mut end = numbers_top;
        if numbers.lines() > 0 {
            end += 1.2 + leading_mm(LABEL) * numbers.lines() as f64 + 0.8;
        }
        let cautions = caution_lines(&figure.cautions);
        let cautions_top = end;
        if !cautions.is_empty() {
            let lines = cautions.iter().map(Vec::len).sum::<usize>();
            end += 1.2 + leading_mm(CAUTION_HEADING) + leading_mm(LABEL) * lines as f64 + 0.8;
        }
        Self {
            title,
            velocity,
            velocity_ticks: velocity_ticks(&velocity),
            thick,
            thin,
            models: model_names(figure),
            notes,
            posterior,
            numbers_top,
            numbers,
            cautions_top,
            cautions,
            height_mm: end + MARGIN_MM,
        }
    }
}

/// The source's name on at most two lines.
pub(super) fn title_lines(source: &str) -> Vec<String> {
    let room = PLOT_RIGHT_MM - PLOT_LEFT_MM;
    let mut lines = text::wrap(source, room, TITLE.size_pt, TITLE.weight);
    if lines.len() > 2 {
        let rest = lines.split_off(1).join(" ");
        lines.push(text::shortened(&rest, room, TITLE.size_pt, TITLE.weight));
    }
    lines
}

/// The windows of both lines with a margin, as far as there are data.
pub(super) fn velocity_axis(figure: &PairFigure) -> Axis {
    let panels = [&figure.thick, &figure.thin];
    let band = extent(panels.iter().flat_map(|panel| edges_of(panel))).unwrap_or((-1.0, 1.0));
    let windows = panels
        .iter()
        .flat_map(|panel| [panel.window.low_km_s, panel.window.high_km_s])
        .chain(figure.v_lsr_km_s.map(|v_lsr| v_lsr.value));
    let (low, high) = extent(windows).unwrap_or(band);
    let channel = panels
        .iter()
        .flat_map(|panel| panel.width_km_s.iter().copied())
        .fold(0.0, f64::max);
    let margin = (VIEW_MARGIN * (high - low)).max(8.0 * channel);
    let (mut low, mut high) = ((low - margin).max(band.0), (high + margin).min(band.1));
    if high <= low {
        (low, high) = band;
    }
    Axis {
        low,
        high,
        start_mm: PLOT_LEFT_MM,
        end_mm: PLOT_RIGHT_MM,
    }
}

/// As many ticks as leave room between their labels.
fn velocity_ticks(axis: &Axis) -> Ticks {
    const MOST: usize = 8;
    const CLEAR: f64 = 1.4;
    let fits = |ticks: &Ticks| {
        let labels = ticks
            .values
            .iter()
            .map(|value| text::span_width_mm(&ticks.label(*value), TICK.size_pt, TICK.weight));
        let widest = labels.fold(0.0, f64::max);
        let spacing = ticks
            .values
            .windows(2)
            .map(|pair| axis.place_mm(pair[1]) - axis.place_mm(pair[0]))
            .fold(f64::INFINITY, f64::min);
        widest * CLEAR <= spacing
    };
    (2..=MOST)
        .rev()
        .map(|most| Ticks::between(axis.low, axis.high, most))
        .find(fits)
        .unwrap_or_else(|| Ticks::between(axis.low, axis.high, 2))
}

pub(super) fn edges_of(panel: &Panel) -> impl Iterator<Item = f64> {
    let channels = panel.velocity_km_s.iter().zip(&panel.width_km_s);
    channels.flat_map(|(velocity, width)| [velocity - width / 2.0, velocity + width / 2.0])
}

pub(super) fn model_names(figure: &PairFigure) -> Vec<String> {
    let mut names: Vec<String> = Vec::new();
    for curve in figure.thick.curves.iter().chain(&figure.thin.curves) {
        if !names.contains(&curve.label) {
            names.push(curve.label.clone());
        }
    }
    names
}

/// What the marks mean, in words below the axis.
#[derive(Clone, Copy, PartialEq)]
pub(super) enum Note {
    Data,
    Window,
    Systemic,
    Thin,
}

impl Note {
    pub(super) fn words(self) -> &'static str {
        match self {
            Self::Data => "data",
            Self::Window => "line window",
            Self::Systemic => "systemic velocity \u{b1} error",
            Self::Thin => "thin line's velocity",
        }
    }

    pub(super) fn mark_mm(self) -> f64 {
        match self {
            Self::Data | Self::Window => 4.0,
            Self::Systemic | Self::Thin => 2.0,
        }
    }
}

pub(super) struct PlacedNote {
    pub(super) note: Note,
    /// Left end of the mark, and baseline.
    pub(super) at: (f64, f64),
}

pub(super) fn placed_notes(figure: &PairFigure, first_baseline: f64) -> Vec<PlacedNote> {
    const BETWEEN_MM: f64 = 2.4;
    let mut shown = vec![Note::Data, Note::Window];
    if figure.v_lsr_km_s.is_some() {
        shown.push(Note::Systemic);
    }
    if figure.v_thin_km_s.is_some() {
        shown.push(Note::Thin);
    }
    let (mut x, mut y) = (MARGIN_MM + 0.5, first_baseline);
    let mut placed = Vec::new();
    for note in shown {
        let words = text::span_width_mm(note.words(), NOTE.size_pt, NOTE.weight);
        let width = note.mark_mm() + 0.9 + words;
        if x + width > PAGE_MM - MARGIN_MM {
            (x, y) = (MARGIN_MM + 0.5, y + leading_mm(NOTE));
        }
        placed.push(PlacedNote { note, at: (x, y) });
        x += width + BETWEEN_MM;
    }
    placed
}

/// The block of numbers: two columns, the second after the first, where both fit, else one.
pub(super) struct Numbers {
    pub(super) entries: Vec<(Spans, Spans)>,
    /// Entries of one column.
    pub(super) rows: usize,
    /// Where labels and values of each column begin on the page.
    pub(super) places: Vec<(f64, f64)>,
    /// Whether values stand below their labels.
    pub(super) values_below: bool,
}

pub(super) const COLUMN_GAP_MM: f64 = 6.0;
pub(super) const NUMBERS_LEFT_MM: f64 = MARGIN_MM + 0.5;
pub(super) const NUMBERS_ROOM_MM: f64 = PAGE_MM - 2.0 * NUMBERS_LEFT_MM;
/// Entries that are few enough for one column even where two would fit.
pub(super) const ONE_COLUMN: usize = 3;

impl Numbers {
    /// Draws the block below `top_mm`.
    pub(super) fn draw(&self, canvas: &Canvas<'_>, top_mm: f64) -> Result<(), ReportError> {
        let first = top_mm + leading_mm(LABEL) * 0.8;
        let lines_per_row = if self.values_below { 2.0 } else { 1.0 };
        for (index, (label, value)) in self.entries.iter().enumerate() {
            let (column, row) = (index / self.rows, index % self.rows);
            let (label_x, value_x) = self.places[column];
            let label_y = first + leading_mm(LABEL) * lines_per_row * row as f64;
            let value_y = label_y + leading_mm(LABEL) * (lines_per_row - 1.0);
            canvas.text(label, (label_x, label_y), Align::Start, SOFT_LABEL)?;
            canvas.text(value, (value_x, value_y), Align::Start, VALUE)?;
        }
        Ok(())
    }

    pub(super) fn of(numbers: &[(String, String)]) -> Self {
        let entries: Vec<_> = numbers
            .iter()
            .map(|(label, value)| (text::markup(label), text::number(value)))
            .collect();
        let half = entries.len().div_ceil(2);
        let (two, two_width) = number_places(&entries, half);
        if entries.len() > ONE_COLUMN && two_width <= NUMBERS_ROOM_MM {
            return Self {
                entries,
                rows: half,
                places: two,
                values_below: false,
            };
        }
        let (one, width) = number_places(&entries, entries.len());
        let values_below = width > NUMBERS_ROOM_MM;
        Self {
            rows: entries.len(),
            entries,
            places: if values_below {
                vec![(NUMBERS_LEFT_MM, NUMBERS_LEFT_MM + COLUMN_GAP_MM)]
            } else {
                one
            },
            values_below,
        }
    }

    pub(super) fn lines(&self) -> usize {
        if self.values_below {
            2 * self.rows
        } else {
            self.rows
        }
    }
}

/// Where labels and values begin in columns of so many rows, and the width of all columns.
pub(super) fn number_places(entries: &[(Spans, Spans)], rows: usize) -> (Vec<(f64, f64)>, f64) {
    const BETWEEN_MM: f64 = 2.4;
    let mut places = Vec::new();
    let mut left = NUMBERS_LEFT_MM;
    for column in entries.chunks(rows.max(1)) {
        let label = widest(column.iter().map(|(label, _)| label), LABEL);
        let value = widest(column.iter().map(|(_, value)| value), VALUE);
        places.push((left, left + label + BETWEEN_MM));
        left += label + BETWEEN_MM + value + COLUMN_GAP_MM;
    }
    (places, left - COLUMN_GAP_MM - NUMBERS_LEFT_MM)
}

pub(super) fn widest<'a>(texts: impl Iterator<Item = &'a Spans>, look: Look) -> f64 {
    texts
        .map(|spans| text::width_mm(spans, look.size_pt, look.weight))
        .fold(0.0, f64::max)
}

pub(super) fn caution_lines(cautions: &[String]) -> Vec<Vec<String>> {
    let room = PAGE_MM - 2.0 * MARGIN_MM - 3.4;
    let wrapped = |caution: &str| text::wrap(caution, room, LABEL.size_pt, LABEL.weight);
    let shown = if cautions.len() > MOST_CAUTIONS {
        MOST_CAUTIONS - 1
    } else {
        cautions.len()
    };
    let mut lines: Vec<_> = cautions[..shown].iter().map(|c| wrapped(c)).collect();
    if shown < cautions.len() {
        lines.push(wrapped(&format!(
            "{} more, listed in the tables.",
            cautions.len() - shown
        )));
    }
    lines
}
