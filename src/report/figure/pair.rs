//! The drawing of a pair's figure on its laid-out page.

use super::axis::{Axis, Ticks, extent};
use super::canvas::{Align, Canvas, page};
use super::layout::{
    Layout, MARGIN_MM, Note, PAGE_MM, PLOT_LEFT_MM, PLOT_RIGHT_MM, PanelPlace, PlacedNote, TICK_MM,
};
use super::posterior;
use super::style::{
    self, CAUTION, CAUTION_HEADING, DATA, GUIDE, INK, LABEL, NAME, NOTE, PAPER, POINT_MM, SOFT_INK,
    Stroke, TICK, TITLE, V_LSR, V_LSR_BAND, WINDOW, ZERO, leading_mm, solid,
};
use super::text::{self, Spans};
use super::{Curve, PairFigure, Panel};
use crate::report::ReportError;
use crate::spectrum::Window;

/// Length of a line's sample in the key, and the blank behind it.
const SAMPLE_MM: f64 = 6.4;
const SAMPLE_GAP_MM: f64 = 1.2;
/// Baselines of the line's name and of the key below the top of a panel, and the key's spacing.
const NAME_DEPTH_MM: f64 = 4.2;
const KEY_LEADING_MM: f64 = 3.1;
type Drawn = Result<(), ReportError>;

/// Draws the figure; the arrays have been checked.
pub(super) fn draw(figure: &PairFigure) -> Result<String, ReportError> {
    let layout = Layout::of(figure);
    let title = format!(
        "{}: {} and {}",
        figure.source, figure.thick.line_name, figure.thin.line_name
    );
    page(PAGE_MM, layout.height_mm, &title, |canvas| {
        canvas.rectangle((0.0, 0.0), (PAGE_MM, layout.height_mm), PAPER)?;
        for (index, line) in layout.title.iter().enumerate() {
            let y = MARGIN_MM + leading_mm(TITLE) * (index as f64 + 0.8);
            canvas.text(&text::plain(line), (PLOT_LEFT_MM, y), Align::Start, TITLE)?;
        }
        let sheet = Sheet {
            canvas,
            figure,
            layout: &layout,
        };
        sheet.panel(&figure.thick, &layout.thick, true)?;
        sheet.panel(&figure.thin, &layout.thin, false)?;
        sheet.velocity_axis()?;
        sheet.notes()?;
        sheet.posterior()?;
        sheet.numbers()?;
        sheet.cautions()
    })
}

struct Sheet<'a, 'svg> {
    canvas: &'a Canvas<'svg>,
    figure: &'a PairFigure,
    layout: &'a Layout,
}

impl Sheet<'_, '_> {
    fn panel(&self, panel: &Panel, place: &PanelPlace, with_key: bool) -> Drawn {
        let name = name(panel);
        let name_width = text::width_mm(&name, NAME.size_pt, NAME.weight);
        let key = Key::of(if with_key { &self.layout.models } else { &[] }, name_width);
        let (temperature, key_left) = self.temperature_axis(panel, place, &key);
        self.backdrop(panel, place.top, place.bottom)?;
        self.level(&temperature, 0.0, solid(ZERO, 0.16))?;
        self.systemic(place.top, place.bottom)?;
        let data = steps(panel, &panel.temperature_k);
        self.draw_steps(&data, &temperature, solid(DATA, 0.26))?;
        for curve in panel.curves.iter().rev() {
            self.curve(curve, &temperature)?;
        }
        self.window_bracket(panel.window, place.top)?;
        self.thin_marker(place.top)?;
        let (unit, per_kelvin) = temperature_unit(&temperature);
        let ticks = Ticks::between(
            temperature.low * per_kelvin,
            temperature.high * per_kelvin,
            if with_key { 6 } else { 4 },
        );
        let labels = ticks
            .values
            .iter()
            .map(|value| (*value / per_kelvin, ticks.label(*value)));
        self.frame(&temperature, &labels.collect::<Vec<_>>())?;
        let middle = f64::midpoint(place.top, place.bottom);
        let label = text::markup(&format!("T_{{mb}} ({unit})"));
        self.canvas
            .upward_text(&label, (MARGIN_MM + 2.4, middle), LABEL)?;

        let at = (PLOT_LEFT_MM + 1.4, place.top + NAME_DEPTH_MM);
        self.canvas.text(&name, at, Align::Start, NAME)?;
        self.key(&key, key_left, place.top)?;
        match place.residuals {
            Some((top, bottom)) => self.residuals(panel, top, bottom),
            None => Ok(()),
        }
    }

    /// The temperature range of all that is shown, high enough for the name and the key to stand free;
    /// and whether the key stands on the left, below the name.
    fn temperature_axis(&self, panel: &Panel, place: &PanelPlace, key: &Key) -> (Axis, bool) {
        let view = &self.layout.velocity;
        let noise = if panel.noise_k.is_finite() {
            panel.noise_k
        } else {
            0.0
        };
        let shown = shown_values(panel, view.low, view.high);
        let (low, high) = shown.unwrap_or((0.0, 1.0));
        let low = low.min(0.0).min(-2.0 * noise);
        let high = high.max(3.0 * noise).max(low + f64::MIN_POSITIVE.max(1e-9));
        let low = low - 0.05 * (high - low);
        let height = place.bottom - place.top;
        let velocity = |mm: f64| {
            view.low + (mm - PLOT_LEFT_MM) / (PLOT_RIGHT_MM - PLOT_LEFT_MM) * (view.high - view.low)
        };
        // The upper end that leaves the top `depth` of the panel free between two places.
        let upper = |from: f64, to: f64, depth: f64| {
            let share = (depth / height).min(0.8);
            let values = shown_values(panel, velocity(from), velocity(to));
            values.map_or(high, |(_, most)| (most - share * low) / (1.0 - share))
        };
        let name_width = text::width_mm(&name(panel), NAME.size_pt, NAME.weight);
        let base = (high + 0.1 * (high - low)).max(upper(
            PLOT_LEFT_MM,
            PLOT_LEFT_MM + name_width + 3.0,
            NAME_DEPTH_MM + 1.6,
        ));
        let right = upper(
            PLOT_RIGHT_MM - key.width - 2.5,
            PLOT_RIGHT_MM,
            key.depth(NAME_DEPTH_MM),
        );
        let left = upper(
            PLOT_LEFT_MM,
            PLOT_LEFT_MM + key.width + 3.0,
            key.depth(NAME_DEPTH_MM + KEY_LEADING_MM + 0.4),
        );
        let key_left = left.max(base) < right.max(base);
        let high = if key.labels.is_empty() {
            base
        } else {
            base.max(left.min(right))
        };
        let axis = Axis {
            low,
            high,
            start_mm: place.bottom,
            end_mm: place.top,
        };
        (axis, key_left)
    }

    /// The window, and guides at the ticks.
    fn backdrop(&self, panel: &Panel, top: f64, bottom: f64) -> Drawn {
        let axis = &self.layout.velocity;
        self.strip(
            panel.window.low_km_s,
            panel.window.high_km_s,
            top,
            bottom,
            WINDOW,
        )?;
        for tick in &self.layout.velocity_ticks.values {
            let x = axis.place_mm(*tick);
            self.canvas
                .line(&[(x, top), (x, bottom)], solid(GUIDE, 0.14))?;
        }
        Ok(())
    }

    /// The systemic velocity with its error as a band.
    fn systemic(&self, top: f64, bottom: f64) -> Drawn {
        let axis = &self.layout.velocity;
        if let Some(v_lsr) = self.figure.v_lsr_km_s {
            if v_lsr.err.is_finite() {
                let (low, high) = (v_lsr.value - v_lsr.err, v_lsr.value + v_lsr.err);
                self.strip(low, high, top, bottom, V_LSR_BAND)?;
            }
            if axis.contains(v_lsr.value) {
                let x = axis.place_mm(v_lsr.value);
                self.canvas
                    .line(&[(x, top), (x, bottom)], solid(V_LSR, 0.2))?;
            }
        }
        Ok(())
    }

    /// A range of velocities as a filled strip, as far as it is in view.
    fn strip(
        &self,
        low: f64,
        high: f64,
        top: f64,
        bottom: f64,
        color: plotters::style::RGBColor,
    ) -> Drawn {
        let axis = &self.layout.velocity;
        let (low, high) = (low.max(axis.low), high.min(axis.high));
        if low < high {
            let (from, to) = (axis.place_mm(low), axis.place_mm(high));
            self.canvas.rectangle((from, top), (to, bottom), color)?;
        }
        Ok(())
    }

    fn window_bracket(&self, window: Window, top: f64) -> Drawn {
        const DROP_MM: f64 = 1.3;
        let axis = &self.layout.velocity;
        let (low, high) = (
            window.low_km_s.max(axis.low),
            window.high_km_s.min(axis.high),
        );
        if low >= high {
            return Ok(());
        }
        let (from, to) = (axis.place_mm(low), axis.place_mm(high));
        let mut points = vec![(from, top), (to, top)];
        if axis.contains(window.low_km_s) {
            points.insert(0, (from, top + DROP_MM));
        }
        if axis.contains(window.high_km_s) {
            points.push((to, top + DROP_MM));
        }
        self.canvas.line(&points, solid(SOFT_INK, 0.18))
    }

    /// A small wedge on the upper edge at the thin line's velocity.
    fn thin_marker(&self, top: f64) -> Drawn {
        let axis = &self.layout.velocity;
        match self.figure.v_thin_km_s {
            Some(v_thin) if axis.contains(v_thin.value) => {
                self.wedge(axis.place_mm(v_thin.value), top + 0.1)
            }
            _ => Ok(()),
        }
    }

    fn wedge(&self, x: f64, top: f64) -> Drawn {
        self.canvas
            .polygon(&[(x - 0.85, top), (x + 0.85, top), (x, top + 1.7)], INK)
    }

    /// A horizontal line at a value.
    fn level(&self, axis: &Axis, value: f64, stroke: Stroke) -> Drawn {
        if !axis.contains(value) {
            return Ok(());
        }
        let y = axis.place_mm(value);
        self.canvas
            .line(&[(PLOT_LEFT_MM, y), (PLOT_RIGHT_MM, y)], stroke)
    }

    fn draw_steps(&self, runs: &[Vec<(f64, f64)>], vertical: &Axis, stroke: Stroke) -> Drawn {
        let axis = &self.layout.velocity;
        for run in runs {
            let points: Vec<_> = run
                .chunks_exact(2)
                .filter(|ends| ends[1].0 > axis.low && ends[0].0 < axis.high)
                .flatten()
                .map(|(velocity, value)| {
                    let velocity = velocity.clamp(axis.low, axis.high);
                    (axis.place_mm(velocity), vertical.place_mm(*value))
                })
                .collect();
            self.canvas.line(&points, stroke)?;
        }
        Ok(())
    }

    fn curve(&self, curve: &Curve, vertical: &Axis) -> Drawn {
        let axis = &self.layout.velocity;
        let points = curve.velocity_km_s.iter().zip(&curve.temperature_k);
        let mut runs: Vec<Vec<(f64, f64)>> = vec![Vec::new()];
        for (velocity, temperature) in points {
            if !temperature.is_finite() {
                runs.push(Vec::new());
            } else if axis.contains(*velocity)
                && let Some(run) = runs.last_mut()
            {
                run.push((axis.place_mm(*velocity), vertical.place_mm(*temperature)));
            }
        }
        for run in runs {
            self.canvas.line(&run, self.stroke(&curve.label))?;
        }
        Ok(())
    }

    fn stroke(&self, label: &str) -> Stroke {
        let names = &self.layout.models;
        style::model(names.iter().position(|name| name == label).unwrap_or(0))
    }

    fn posterior(&self) -> Drawn {
        match (&self.figure.posterior, &self.layout.posterior) {
            (Some(part), Some(place)) => {
                posterior::draw(self.canvas, part, place, &|label| self.stroke(label))
            }
            _ => Ok(()),
        }
    }

    fn residuals(&self, panel: &Panel, top: f64, bottom: f64) -> Drawn {
        let view = &self.layout.velocity;
        let shown = panel
            .curves
            .iter()
            .flat_map(|curve| channels_within(panel, &curve.residuals, view.low, view.high));
        let (low, high) = extent(shown).unwrap_or((0.0, 0.0));
        let largest = high.max(-low);
        let (limit, tick) = residual_scale(largest);
        let axis = Axis {
            low: -limit,
            high: limit,
            start_mm: bottom,
            end_mm: top,
        };
        self.backdrop(panel, top, bottom)?;
        for value in [-tick, tick] {
            self.level(&axis, value, solid(GUIDE, 0.14))?;
        }
        self.level(&axis, 0.0, solid(ZERO, 0.16))?;
        self.systemic(top, bottom)?;
        for (index, curve) in panel.curves.iter().enumerate().rev() {
            let width_mm = if index == 0 { 0.24 } else { 0.16 };
            let stroke = solid(self.stroke(&curve.label).color, width_mm);
            self.draw_steps(&steps(panel, &curve.residuals), &axis, stroke)?;
        }
        let labels = [
            (-tick, format!("\u{2212}{tick}\u{3c3}")),
            (0.0, "0".to_owned()),
            (tick, format!("+{tick}\u{3c3}")),
        ];
        self.frame(&axis, &labels)?;
        let middle = f64::midpoint(top, bottom);
        self.canvas
            .upward_text(&text::plain("residual"), (MARGIN_MM + 2.4, middle), NOTE)
    }

    /// The axis line on the left with labelled ticks, and the lower edge with velocity ticks.
    fn frame(&self, vertical: &Axis, labels: &[(f64, String)]) -> Drawn {
        let line = solid(INK, 0.2);
        let bottom = vertical.start_mm;
        let corner = [
            (PLOT_LEFT_MM, vertical.end_mm),
            (PLOT_LEFT_MM, bottom),
            (PLOT_RIGHT_MM, bottom),
        ];
        self.canvas.line(&corner, line)?;
        for (value, label) in labels {
            let y = vertical.place_mm(*value);
            self.canvas
                .line(&[(PLOT_LEFT_MM - TICK_MM, y), (PLOT_LEFT_MM, y)], line)?;
            let baseline = y + 0.36 * TICK.size_pt * POINT_MM;
            let at = (PLOT_LEFT_MM - TICK_MM - 0.6, baseline);
            self.canvas
                .text(&text::plain(label), at, Align::End, TICK)?;
        }
        for tick in &self.layout.velocity_ticks.values {
            let x = self.layout.velocity.place_mm(*tick);
            self.canvas
                .line(&[(x, bottom), (x, bottom + TICK_MM)], line)?;
        }
        Ok(())
    }

    fn velocity_axis(&self) -> Drawn {
        let bottom = self.layout.thin.end() + TICK_MM;
        let ticks = &self.layout.velocity_ticks;
        let baseline = bottom + leading_mm(TICK) * 0.8;
        for tick in &ticks.values {
            let at = (self.layout.velocity.place_mm(*tick), baseline);
            self.canvas
                .text(&text::plain(&ticks.label(*tick)), at, Align::Middle, TICK)?;
        }
        let middle = f64::midpoint(PLOT_LEFT_MM, PLOT_RIGHT_MM);
        let label = text::markup("V_{LSR} (km/s)");
        let at = (middle, baseline + leading_mm(LABEL));
        self.canvas.text(&label, at, Align::Middle, LABEL)
    }

    fn key(&self, key: &Key, on_left: bool, top: f64) -> Drawn {
        let (x, first) = if on_left {
            (
                PLOT_LEFT_MM + 1.4,
                top + NAME_DEPTH_MM + KEY_LEADING_MM + 0.4,
            )
        } else {
            (PLOT_RIGHT_MM - key.width - 0.6, top + NAME_DEPTH_MM)
        };
        for (index, label) in key.labels.iter().enumerate() {
            let baseline = first + KEY_LEADING_MM * index as f64;
            let middle = baseline - 0.3 * TICK.size_pt * POINT_MM;
            let sample = [(x, middle), (x + SAMPLE_MM, middle)];
            self.canvas.line(&sample, style::model(index))?;
            let at = (x + SAMPLE_MM + SAMPLE_GAP_MM, baseline);
            self.canvas
                .text(&text::plain(label), at, Align::Start, TICK)?;
        }
        Ok(())
    }

    fn notes(&self) -> Drawn {
        for PlacedNote { note, at } in &self.layout.notes {
            self.mark(*note, *at)?;
            let at = (at.0 + note.mark_mm() + 0.9, at.1);
            self.canvas
                .text(&text::plain(note.words()), at, Align::Start, NOTE)?;
        }
        Ok(())
    }

    fn mark(&self, note: Note, (x, baseline): (f64, f64)) -> Drawn {
        let end = x + note.mark_mm();
        let (top, bottom) = (baseline - 1.8, baseline + 0.2);
        let middle = f64::midpoint(x, end);
        match note {
            Note::Data => {
                let points = [
                    (x, bottom),
                    (x + 1.3, bottom),
                    (x + 1.3, top),
                    (x + 2.7, top),
                    (x + 2.7, baseline - 0.6),
                    (end, baseline - 0.6),
                ];
                self.canvas.line(&points, solid(DATA, 0.26))
            }
            Note::Window => {
                self.canvas.rectangle((x, top), (end, bottom), WINDOW)?;
                let bracket = [(x, top + 0.9), (x, top), (end, top), (end, top + 0.9)];
                self.canvas.line(&bracket, solid(SOFT_INK, 0.18))
            }
            Note::Systemic => {
                self.canvas
                    .rectangle((middle - 0.9, top), (middle + 0.9, bottom), V_LSR_BAND)?;
                self.canvas
                    .line(&[(middle, top), (middle, bottom)], solid(V_LSR, 0.2))
            }
            Note::Thin => self.wedge(middle, top + 0.1),
        }
    }

    fn numbers(&self) -> Drawn {
        let numbers = &self.layout.numbers;
        if numbers.entries.is_empty() {
            return Ok(());
        }
        numbers.draw(self.canvas, self.rule(self.layout.numbers_top)?)
    }

    fn cautions(&self) -> Drawn {
        if self.layout.cautions.is_empty() {
            return Ok(());
        }
        let mut baseline = self.rule(self.layout.cautions_top)? + leading_mm(CAUTION_HEADING) * 0.8;
        let left = MARGIN_MM + 0.5;
        let heading = text::plain("Cautions");
        self.canvas
            .text(&heading, (left, baseline), Align::Start, CAUTION_HEADING)?;
        for caution in &self.layout.cautions {
            let dot = (
                left + 0.7,
                baseline + leading_mm(LABEL) - 0.28 * LABEL.size_pt * POINT_MM,
            );
            self.canvas.dot(dot, 0.4, CAUTION)?;
            for line in caution {
                baseline += leading_mm(LABEL);
                let at = (left + 2.2, baseline);
                self.canvas
                    .text(&text::plain(line), at, Align::Start, LABEL)?;
            }
        }
        Ok(())
    }

    /// A thin line across the page; returns where the block beneath it begins.
    fn rule(&self, y: f64) -> Result<f64, ReportError> {
        let ends = [(MARGIN_MM + 0.5, y), (PAGE_MM - MARGIN_MM - 0.5, y)];
        self.canvas.line(&ends, solid(ZERO, 0.14))?;
        Ok(y + 1.2)
    }
}

/// The line's name, shortened where it would not leave room for the key.
fn name(panel: &Panel) -> Spans {
    let room = 0.46 * (PLOT_RIGHT_MM - PLOT_LEFT_MM);
    let name = text::line_name(&panel.line_name);
    if text::width_mm(&name, NAME.size_pt, NAME.weight) <= room {
        return name;
    }
    text::plain(&text::shortened(
        &panel.line_name,
        room,
        NAME.size_pt,
        NAME.weight,
    ))
}

/// Extent of data and models between two velocities.
fn shown_values(panel: &Panel, low: f64, high: f64) -> Option<(f64, f64)> {
    let data = channels_within(panel, &panel.temperature_k, low, high);
    let models = panel.curves.iter().flat_map(|curve| {
        let points = curve.velocity_km_s.iter().zip(&curve.temperature_k);
        points
            .filter(|(velocity, _)| (low..=high).contains(*velocity))
            .map(|(_, temperature)| *temperature)
    });
    extent(data.chain(models))
}

/// Values of those channels that reach between two velocities.
fn channels_within<'a>(
    panel: &'a Panel,
    values: &'a [f64],
    low: f64,
    high: f64,
) -> impl Iterator<Item = f64> + 'a {
    let channels = panel.velocity_km_s.iter().zip(&panel.width_km_s);
    channels
        .zip(values)
        .filter(move |((velocity, width), _)| {
            *velocity + *width / 2.0 >= low && *velocity - *width / 2.0 <= high
        })
        .map(|(_, value)| *value)
}

/// The models' names beside samples of their strokes.
struct Key {
    labels: Vec<String>,
    width: f64,
}

impl Key {
    fn of(models: &[String], name_width: f64) -> Self {
        // The key may stand beside the line's name.
        let room = PLOT_RIGHT_MM - PLOT_LEFT_MM - name_width - 6.0 - SAMPLE_MM - SAMPLE_GAP_MM;
        let labels: Vec<_> = models
            .iter()
            .map(|name| text::shortened(name, room, TICK.size_pt, TICK.weight))
            .collect();
        let longest = labels
            .iter()
            .map(|label| text::span_width_mm(label, TICK.size_pt, TICK.weight))
            .fold(0.0, f64::max);
        Self {
            labels,
            width: SAMPLE_MM + SAMPLE_GAP_MM + longest,
        }
    }

    /// How far down it reaches from the top of the panel, its first baseline given.
    fn depth(&self, first_baseline: f64) -> f64 {
        first_baseline + KEY_LEADING_MM * (self.labels.len().max(1) - 1) as f64 + 1.6
    }
}

/// Unit that keeps a temperature axis' numbers short, and how many of it make a kelvin.
fn temperature_unit(axis: &Axis) -> (&'static str, f64) {
    const MILLIKELVIN_BELOW_K: f64 = 0.2;
    if axis.high - axis.low < MILLIKELVIN_BELOW_K {
        ("mK", 1000.0)
    } else {
        ("K", 1.0)
    }
}

/// Half range of a residual axis and the value of its labelled ticks, in units of the noise.
fn residual_scale(largest: f64) -> (f64, f64) {
    const SCALES: [(f64, f64); 6] = [
        (4.0, 3.0),
        (6.0, 3.0),
        (8.0, 5.0),
        (10.0, 5.0),
        (15.0, 10.0),
        (20.0, 10.0),
    ];
    let wanted = largest * 1.05;
    if let Some(scale) = SCALES.iter().find(|(limit, _)| *limit >= wanted) {
        return *scale;
    }
    let power = 10_f64.powf(wanted.log10().floor());
    let limit = [2.0, 3.0, 5.0, 10.0]
        .into_iter()
        .map(|factor| factor * power)
        .find(|limit| *limit >= wanted)
        .unwrap_or(10.0 * power);
    (limit, limit / 2.0)
}

/// Values as steps: runs of unmasked neighbouring channels, two points (the ends) a channel.
fn steps(panel: &Panel, values: &[f64]) -> Vec<Vec<(f64, f64)>> {
    let mut runs: Vec<Vec<(f64, f64)>> = Vec::new();
    let mut open_end = f64::NAN;
    let channels = panel.velocity_km_s.iter().zip(&panel.width_km_s);
    for ((velocity, width), value) in channels.zip(values) {
        let (low, high) = (velocity - width / 2.0, velocity + width / 2.0);
        if !value.is_finite() {
            open_end = f64::NAN;
            continue;
        }
        // At the start and behind a masked channel there is no open end.
        if open_end.is_nan() || (low - open_end).abs() > 0.5 * width {
            runs.push(Vec::new());
        }
        if let Some(run) = runs.last_mut() {
            run.extend([(low, *value), (high, *value)]);
        }
        open_end = high;
    }
    runs
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn residual_axes_hold_their_residuals() {
        for (largest, expected) in [
            (0.0, (4.0, 3.0)),
            (3.7, (4.0, 3.0)),
            (4.1, (6.0, 3.0)),
            (9.6, (15.0, 10.0)),
            (19.5, (30.0, 15.0)),
            (170.0, (200.0, 100.0)),
            (480.0, (1000.0, 500.0)),
        ] {
            assert_eq!(residual_scale(largest), expected, "{largest}");
        }
    }
}
