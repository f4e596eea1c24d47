//! One spectrum: a checked velocity axis, values, mask, noise; and what a file states of itself.
//!
//! Everything downstream of [`crate::prepare`] sees [`Spectrum`] only: ascending radio-convention
//! LSRK velocities in km/s and main-beam temperatures in K. It does no I/O and fits nothing.

pub mod doppler;
mod raw;

pub use raw::{AxisKind, BeamArcsec, BrightnessUnit, Frame, Origin, RawSpectrum};

use crate::numeric::Autoregression;

/// A spectrum on the scale that everything here works in.
///
/// Channels ascend in velocity. A masked channel holds `NaN` and stays in place: nothing is
/// interpolated.
#[derive(Clone, Debug, PartialEq)]
pub struct Spectrum {
    velocity_km_s: Vec<f64>,
    width_km_s: Vec<f64>,
    temperature_k: Vec<f64>,
}

/// Why arrays do not make a spectrum.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SpectrumError {
    /// The arrays differ in length.
    #[error("{velocities} velocities but {temperatures} temperatures")]
    LengthMismatch {
        /// Number of velocities (or widths).
        velocities: usize,
        /// Number of temperatures.
        temperatures: usize,
    },
    /// Velocities are not finite or do not ascend strictly.
    #[error(
        "channel {channel} (counted from 1) at {velocity_km_s} km/s does not follow {previous_km_s} km/s"
    )]
    NotAscending {
        /// Index of the offending channel, from 1.
        channel: usize,
        /// Its velocity.
        velocity_km_s: f64,
        /// The velocity before it.
        previous_km_s: f64,
    },
    /// No channel holds a number.
    #[error("all {channels} channels are blank")]
    AllBlank {
        /// Number of channels.
        channels: usize,
    },
}

impl Spectrum {
    /// Checks and takes the arrays: channel centres (km/s, strictly ascending), channel widths
    /// (km/s) and temperatures (K, `NaN` where masked), all of one length.
    ///
    /// # Errors
    ///
    /// [`SpectrumError`] where the lengths differ, the axis does not ascend or nothing is usable.
    pub fn new(
        velocity_km_s: Vec<f64>,
        width_km_s: Vec<f64>,
        mut temperature_k: Vec<f64>,
    ) -> Result<Self, SpectrumError> {
        if velocity_km_s.len() != temperature_k.len() || width_km_s.len() != temperature_k.len() {
            return Err(SpectrumError::LengthMismatch {
                velocities: velocity_km_s.len(),
                temperatures: temperature_k.len(),
            });
        }
        for (index, pair) in velocity_km_s.windows(2).enumerate() {
            let ascending = pair[1] > pair[0] && pair[0].is_finite() && pair[1].is_finite();
            if !ascending {
                return Err(SpectrumError::NotAscending {
                    channel: index + 2,
                    velocity_km_s: pair[1],
                    previous_km_s: pair[0],
                });
            }
        }
        for value in &mut temperature_k {
            if !value.is_finite() {
                *value = f64::NAN;
            }
        }
        if temperature_k.iter().all(|value| value.is_nan()) {
            return Err(SpectrumError::AllBlank {
                channels: temperature_k.len(),
            });
        }
        Ok(Self {
            velocity_km_s,
            width_km_s,
            temperature_k,
        })
    }

    /// Channel centres, km/s, ascending.
    pub fn velocity_km_s(&self) -> &[f64] {
        &self.velocity_km_s
    }

    /// Channel widths, km/s, positive.
    pub fn width_km_s(&self) -> &[f64] {
        &self.width_km_s
    }

    /// Main-beam temperatures, K; `NaN` where masked.
    pub fn temperature_k(&self) -> &[f64] {
        &self.temperature_k
    }

    /// Number of channels, masked ones included.
    pub fn len(&self) -> usize {
        self.velocity_km_s.len()
    }

    /// Whether there are no channels.
    pub fn is_empty(&self) -> bool {
        self.velocity_km_s.is_empty()
    }

    /// Whether a channel holds a number.
    pub fn is_usable(&self, channel: usize) -> bool {
        !self.temperature_k[channel].is_nan()
    }

    /// Number of channels that hold a number.
    pub fn usable_channels(&self) -> usize {
        self.temperature_k
            .iter()
            .filter(|value| !value.is_nan())
            .count()
    }

    /// Median channel width, km/s.
    pub fn channel_width_km_s(&self) -> f64 {
        crate::numeric::robust::median(&self.width_km_s)
    }

    /// The same spectrum with each temperature (K) changed by a function of channel and value;
    /// masked channels stay masked, and so becomes what is not finite afterwards.
    #[must_use]
    pub fn map_temperature_k(&self, change: impl Fn(usize, f64) -> f64) -> Self {
        let temperature_k = self
            .temperature_k
            .iter()
            .enumerate()
            .map(|(channel, &value)| change(channel, value))
            .map(|value| if value.is_finite() { value } else { f64::NAN })
            .collect();
        Self {
            velocity_km_s: self.velocity_km_s.clone(),
            width_km_s: self.width_km_s.clone(),
            temperature_k,
        }
    }

    /// The same axis with other temperatures (K, one a channel, `NaN` where masked).
    ///
    /// # Errors
    ///
    /// [`SpectrumError`] as for [`Spectrum::new`].
    pub fn with_temperature_k(&self, temperature_k: Vec<f64>) -> Result<Self, SpectrumError> {
        Self::new(
            self.velocity_km_s.clone(),
            self.width_km_s.clone(),
            temperature_k,
        )
    }
}

/// A closed range of velocities, km/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Window {
    /// Lower (blue) end.
    pub low_km_s: f64,
    /// Upper (red) end.
    pub high_km_s: f64,
}

impl Window {
    /// Whether a velocity lies in the window, ends included.
    pub fn contains(&self, velocity_km_s: f64) -> bool {
        velocity_km_s >= self.low_km_s && velocity_km_s <= self.high_km_s
    }
}

/// The noise of one spectrum, as measured in its line-free channels.
#[derive(Clone, Debug, PartialEq)]
pub struct Noise {
    /// Standard deviation of one channel, K.
    pub rms_k: f64,
    /// Number of line-free channels it was measured on.
    pub channels: usize,
    /// Correlation from channel to channel as an autoregressive process; order 0 is white.
    pub process: Autoregression,
}
