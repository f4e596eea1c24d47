//! The figure of one pair as SVG, PNG and PDF: values in, bytes out, the same bytes each time.
//!
//! Two lines over one velocity axis, the thick one above; each with its models and, beneath, the
//! residuals in units of the noise; then the main numbers and the cautions in words. Drawn 88 mm wide,
//! a journal's column, with no text below 6 points there.
//!
//! Fonts are read only when a figure is drawn.

mod axis;
mod calibration;
mod canvas;
mod contour;
mod export;
mod layout;
mod map;
mod pair;
mod plot;
mod posterior;
mod radius;
mod spectra_sheet;
mod style;
mod survey;
mod text;

pub use calibration::{CalibrationFigure, CalibrationPoint};
pub use map::{ColourScale, MapCells, MapFigure, ScaleBar};
pub use plot::Interval;
pub use radius::{RadiusCurve, RadiusFigure, RadiusPanel};
pub use spectra_sheet::{SpectraSheet, SpectrumPanel};
pub use survey::{
    DistributionFigure, ProfilePanel, ProfileSheet, RankBar, RankFigure, ScatterFigure,
    ScatterPoint,
};

use super::ReportError;
use crate::numeric::Estimate;
use crate::spectrum::Window;

/// One model over one line.
#[derive(Clone, Debug, PartialEq)]
pub struct Curve {
    /// Name of the model; curves of one name look the same in both panels.
    pub label: String,
    /// Velocities of the curve, km/s, ascending and finer than the channels.
    pub velocity_km_s: Vec<f64>,
    /// Model temperatures there, K.
    pub temperature_k: Vec<f64>,
    /// Data minus model over the noise, one a channel of the panel; `NaN` where masked.
    pub residuals: Vec<f64>,
}

/// One line: its spectrum, its window and the models over it.
#[derive(Clone, Debug, PartialEq)]
pub struct Panel {
    /// Name of the line; a chemical formula such as `H13CO+` is set as one.
    pub line_name: String,
    /// Channel centres, km/s, ascending.
    pub velocity_km_s: Vec<f64>,
    /// Channel widths, km/s.
    pub width_km_s: Vec<f64>,
    /// Main-beam temperatures, K; `NaN` where masked.
    pub temperature_k: Vec<f64>,
    /// Standard deviation of one channel, K.
    pub noise_k: f64,
    /// Line window.
    pub window: Window,
    /// Models, the most important one first.
    pub curves: Vec<Curve>,
}

/// The posterior of the inward speed.
#[derive(Clone, Debug, PartialEq)]
pub struct PosteriorPart {
    /// Speeds that are shown, km/s.
    pub range_km_s: (f64, f64),
    /// Speed (km/s, ascending) and density of the adopted posterior.
    pub adopted: Vec<(f64, f64)>,
    /// Ends of its 68 % interval, km/s.
    pub interval68_km_s: (f64, f64),
    /// Ends of its 95 % interval, km/s.
    pub interval95_km_s: (f64, f64),
    /// The same of each model, by the label of its curve.
    pub models: Vec<(String, Vec<(f64, f64)>)>,
    /// Draws of the slabs' averaged posterior; none leaves their plot out.
    pub draws: Vec<SpeedAndDepth>,
    /// Correlation of speed and optical depth.
    pub correlation: Option<f64>,
    /// The verdict.
    pub sentences: Vec<String>,
}

/// A draw of speed and optical depth.
#[derive(Clone, Debug, PartialEq)]
pub struct SpeedAndDepth {
    /// Label of its model's curve.
    pub label: String,
    /// Inward speed, km/s.
    pub v_in_km_s: f64,
    /// Optical depth of a half.
    pub tau: f64,
}

/// Everything in the figure of one pair.
///
/// Labels and values of `numbers` may hold `_{...}` and `^{...}` for sub- and superscripts; `+-`
/// becomes a plus-minus sign and `e-5` a power of ten.
#[derive(Clone, Debug, PartialEq)]
pub struct PairFigure {
    /// Name of the source.
    pub source: String,
    /// The optically thick line.
    pub thick: Panel,
    /// The optically thin line.
    pub thin: Panel,
    /// Systemic velocity, km/s.
    pub v_lsr_km_s: Option<Estimate>,
    /// Velocity of the thin line by itself, km/s.
    pub v_thin_km_s: Option<Estimate>,
    /// What posteriors say; `None` leaves their part out.
    pub posterior: Option<PosteriorPart>,
    /// The main results: label and value.
    pub numbers: Vec<(String, String)>,
    /// Cautions as sentences.
    pub cautions: Vec<String>,
}

impl PairFigure {
    /// The figure as an SVG document, with its text as text in IBM Plex Sans.
    ///
    /// # Errors
    ///
    /// [`ReportError::LengthMismatch`] where arrays do not belong together, [`ReportError::Drawing`]
    /// where the drawing library fails.
    pub fn svg(&self) -> Result<String, ReportError> {
        self.thick.check("thick line")?;
        self.thin.check("thin line")?;
        pair::draw(self)
    }

    /// The figure as a PNG image on white, `width_px` pixels wide.
    ///
    /// # Errors
    ///
    /// As [`PairFigure::svg`].
    pub fn png(&self, width_px: u32) -> Result<Vec<u8>, ReportError> {
        export::png(&self.svg()?, width_px)
    }

    /// The figure as a PDF page of its own size, text as text with its fonts embedded.
    ///
    /// # Errors
    ///
    /// As [`PairFigure::svg`].
    pub fn pdf(&self) -> Result<Vec<u8>, ReportError> {
        export::pdf(&self.svg()?)
    }
}

/// SVG, as [`PairFigure::svg`] returns it, to PNG: draws once where both are wanted.
///
/// # Errors
///
/// [`ReportError::Drawing`].
pub fn svg_to_png(svg: &str, width_px: u32) -> Result<Vec<u8>, ReportError> {
    export::png(svg, width_px)
}

/// SVG, as [`PairFigure::svg`] returns it, to PDF.
///
/// # Errors
///
/// [`ReportError::Drawing`].
pub fn svg_to_pdf(svg: &str) -> Result<Vec<u8>, ReportError> {
    export::pdf(svg)
}

impl Panel {
    fn check(&self, which: &str) -> Result<(), ReportError> {
        let channels = self.velocity_km_s.len();
        same(&format!("{which}, widths"), self.width_km_s.len(), channels)?;
        same(
            &format!("{which}, temperatures"),
            self.temperature_k.len(),
            channels,
        )?;
        for curve in &self.curves {
            let name = &curve.label;
            same(
                &format!("{which}, model `{name}`, temperatures"),
                curve.temperature_k.len(),
                curve.velocity_km_s.len(),
            )?;
            same(
                &format!("{which}, model `{name}`, residuals"),
                curve.residuals.len(),
                channels,
            )?;
        }
        Ok(())
    }
}

fn same(what: &str, found: usize, expected: usize) -> Result<(), ReportError> {
    if found == expected {
        return Ok(());
    }
    Err(ReportError::LengthMismatch {
        what: what.to_owned(),
        found,
        expected,
    })
}
