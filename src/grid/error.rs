//! Why a map cannot be read.

use super::Reading;

/// Why a map cannot be read.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum GridError {
    /// A reading that is none.
    #[error(
        "reading {number} at ({}, {}) arcsec: {} +- {}, expected finite numbers and a positive error",
        reading.dx_arcsec, reading.dy_arcsec, reading.value, reading.err
    )]
    Reading {
        /// Its number, from 1.
        number: usize,
        /// What it is.
        reading: Reading,
    },
    /// A width of the noise's kernel that is none.
    #[error("noise goes together over {found_arcsec} arcsec, expected 0 or a positive width")]
    NoiseWidth {
        /// The width, arcsec.
        found_arcsec: f64,
    },
    /// Too few readings for what is fitted.
    #[error("{found} readings, expected at least {needed}")]
    TooFewReadings {
        /// Readings.
        found: usize,
        /// Readings needed.
        needed: usize,
    },
    /// Readings that do not spread over the sky.
    #[error("{found} readings on one line or too few places, expected them spread over the sky")]
    OneLine {
        /// Readings.
        found: usize,
    },
    /// Other than one systematic a reading.
    #[error("{found} systematics for {expected} readings, expected one each")]
    Systematic {
        /// Systematics.
        found: usize,
        /// Readings.
        expected: usize,
    },
    /// No brightness to find the centre from.
    #[error("no significant brightness in {found} readings, expected a source")]
    NoCentre {
        /// Readings.
        found: usize,
    },
}

impl GridError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        let text = match self {
            Self::Reading { .. } => "leave out pointings without a value",
            Self::NoiseWidth { .. } => "give 0 for pointings observed one by one, else the beam",
            Self::TooFewReadings { .. } | Self::OneLine { .. } => {
                "a map needs detections around its source, not along a cut"
            }
            Self::Systematic { .. } => "give none, or one for each reading in their order",
            Self::NoCentre { .. } => "give the centre",
        };
        Some(text.to_owned())
    }
}
