//! A spectrum as its file states it: axis kind, unit, frame and temperature scale still open.

use std::path::PathBuf;

/// What the spectral axis of a file counts.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum AxisKind {
    /// Frequency, Hz.
    Frequency,
    /// Radio-convention velocity, m/s: v = c (1 - nu/nu0).
    RadioVelocity,
    /// Optical-convention velocity, m/s: v = c (nu0/nu - 1).
    OpticalVelocity,
    /// Apparent radial (relativistic) velocity, m/s.
    RadialVelocity,
}

impl std::fmt::Display for AxisKind {
    fn fmt(&self, formatter: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        formatter.write_str(match self {
            AxisKind::Frequency => "frequency",
            AxisKind::RadioVelocity => "radio-convention velocity",
            AxisKind::OpticalVelocity => "optical-convention velocity",
            AxisKind::RadialVelocity => "apparent radial (relativistic) velocity",
        })
    }
}

/// Frame of rest of the spectral axis (FITS standard 4.0, table 27 names).
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Frame {
    /// Kinematic local standard of rest.
    Lsrk,
    /// Any other frame, by the name that the file gives it.
    Other(String),
}

impl Frame {
    /// The frame that a file names; `LSRK`, and `LSR` as older files write it, are the kinematic
    /// one.
    pub fn from_name(name: &str) -> Self {
        match name.trim().to_ascii_uppercase().as_str() {
            "LSRK" | "LSR" => Frame::Lsrk,
            _ => Frame::Other(name.trim().to_string()),
        }
    }
}

/// Unit and scale of the values.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum BrightnessUnit {
    /// Main-beam temperature, K.
    MainBeamKelvin,
    /// Antenna temperature corrected for the atmosphere, `T_A`*, K.
    AntennaKelvin,
    /// K without a statement of the scale.
    Kelvin,
    /// Jy per beam.
    JanskyPerBeam,
}

/// Elliptical Gaussian beam, full widths at half maximum in arcsec.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BeamArcsec {
    /// Major axis.
    pub major: f64,
    /// Minor axis.
    pub minor: f64,
}

/// Where a spectrum was read from, for messages and the record of a run.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Origin {
    /// The file.
    pub path: PathBuf,
    /// Format in words, such as `CSV` or `FITS binary table, one spectrum a row`.
    pub format: String,
}

/// A spectrum in the order, convention and unit of its file.
#[derive(Clone, Debug, PartialEq)]
pub struct RawSpectrum {
    /// What the axis counts.
    pub axis_kind: AxisKind,
    /// Whether the file states the velocity convention; where not, [`RawSpectrum::axis_kind`] is
    /// what the format's rules take it for.
    pub convention_stated: bool,
    /// Axis values at channel centres, Hz or m/s, in file order (ascending or descending).
    pub axis: Vec<f64>,
    /// Values in [`RawSpectrum::unit`] (milli- and other prefixes already applied), `NaN` where blank.
    pub values: Vec<f64>,
    /// Unit and scale of the values.
    pub unit: BrightnessUnit,
    /// Rest frequency that the file states, Hz.
    pub rest_frequency_hz: Option<f64>,
    /// Frame that the file states; `None` where it says nothing.
    pub frame: Option<Frame>,
    /// Beam that the file states.
    pub beam: Option<BeamArcsec>,
    /// Name of the object that the file states.
    pub object: Option<String>,
    /// Where it was read from.
    pub origin: Origin,
}
