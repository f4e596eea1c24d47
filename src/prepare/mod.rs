//! Raw spectra into calibrated, baseline-free spectra with a line window and measured noise.

pub mod scale;

use crate::spectrum::{Noise, Spectrum, Window};

/// A spectrum ready to be measured and fitted.
#[derive(Clone, Debug, PartialEq)]
pub struct Prepared {
    /// Baseline-subtracted spectrum.
    pub spectrum: Spectrum,
    /// Line window.
    pub window: Window,
    /// Whether the window was found here (`true`) or given by the user (`false`).
    pub window_automatic: bool,
    /// Whether the line seems to go on beyond the window or the band.
    pub window_cuts_line: bool,
    /// The baseline that was subtracted.
    pub baseline: Baseline,
    /// Noise in the line-free channels.
    pub noise: Noise,
}

/// A fitted and subtracted polynomial baseline.
#[derive(Clone, Debug, PartialEq)]
pub struct Baseline {
    /// Polynomial order, 0 to 3; `None` where none was asked for.
    pub order: Option<usize>,
    /// Value of the subtracted baseline in each channel, K.
    pub values_k: Vec<f64>,
    /// Channels it was fitted on, after clipping.
    pub channels: usize,
    /// Line-free channels that clipping left out.
    pub clipped: usize,
}
