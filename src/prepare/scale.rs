//! A spectrum as its file states it, onto the one scale that everything here works in: ascending
//! radio-convention LSRK velocities in km/s and main-beam temperatures in K.
//!
//! What has to be assumed for that is said in a [`ScaleNote`]; what cannot be assumed is a
//! [`ScaleError`]. Nothing is interpolated: channels keep their values, widths follow from the
//! converted channel edges.

use crate::constants::{BOLTZMANN, SPEED_OF_LIGHT, SPEED_OF_LIGHT_KM_S};
use crate::spectrum::doppler::{
    frequency_from_radio_hz, radio_from_optical_km_s, radio_from_relativistic_km_s,
    radio_velocity_km_s, radio_with_other_rest_km_s,
};
use crate::spectrum::{
    AxisKind, BeamArcsec, BrightnessUnit, Frame, RawSpectrum, Spectrum, SpectrumError,
};

/// No cloud is expected beyond this speed; a band wholly beyond it does not hold the line.
const LIMIT_VELOCITY_KM_S: f64 = 1000.0;

/// Widest beam taken for one, arcsec (two degrees).
const LIMIT_BEAM_ARCSEC: f64 = 7200.0;

/// Changes of velocity below this (km/s) are not worth a note: a hundredth of the finest channels.
const NOTED_SHIFT_KM_S: f64 = 1e-5;

/// pi/(4 ln 2): solid angle of a Gaussian beam over the product of its full widths at half maximum.
const GAUSSIAN_BEAM_AREA: f64 = std::f64::consts::PI / (4.0 * std::f64::consts::LN_2);

/// Radians in an arcsecond.
const ARCSEC: f64 = std::f64::consts::PI / 648_000.0;

/// One jansky in W m-2 Hz-1.
const JANSKY: f64 = 1e-26;

/// What is known of the observation beside the file.
#[derive(Clone, Debug, PartialEq)]
pub struct ScaleSettings {
    /// Rest frequency of the line, Hz; velocities are referred to it.
    pub rest_frequency_hz: f64,
    /// Main-beam efficiency, (0, 1]; needed for `T_A`*.
    pub eta_mb: Option<f64>,
    /// Its standard error; 0 where none is known.
    pub eta_mb_err: f64,
    /// Beam for Jy/beam, arcsec; stands above the file's.
    pub beam: Option<BeamArcsec>,
    /// Velocity to add to get from the file's frame to LSRK, km/s; only for other frames.
    pub frame_offset_km_s: Option<f64>,
}

impl ScaleSettings {
    /// Settings with a line's rest frequency (Hz) and nothing else.
    pub fn for_line(rest_frequency_hz: f64) -> Self {
        Self {
            rest_frequency_hz,
            eta_mb: None,
            eta_mb_err: 0.0,
            beam: None,
            frame_offset_km_s: None,
        }
    }
}

/// A spectrum on the common scale, and what was assumed on the way.
#[derive(Clone, Debug, PartialEq)]
pub struct Scaled {
    /// The spectrum.
    pub spectrum: Spectrum,
    /// What was assumed or changed, in the order in which it was.
    pub notes: Vec<ScaleNote>,
    /// Relative error of the main-beam efficiency; 0 where none was used.
    pub calibration_error: f64,
}

/// Something assumed or changed that a user should know; `Display` gives it in words.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ScaleNote {
    /// The file names no velocity convention.
    #[error("the velocity convention is not stated: taken as {kind}")]
    ConventionAssumed {
        /// What it was taken as.
        kind: AxisKind,
    },
    /// The velocities refer to a rest frequency that the file does not state.
    #[error("the velocities' rest frequency is not stated: taken as the line's")]
    RestFrequencyAssumed,
    /// The velocities were referred to the line's rest frequency.
    #[error(
        "velocities shifted by {shift_km_s:+.5} km/s: the file's rest frequency is {stated_hz} Hz, the line's {line_hz} Hz"
    )]
    RestFrequencyChanged {
        /// Rest frequency of the file, Hz.
        stated_hz: f64,
        /// Rest frequency of the line, Hz.
        line_hz: f64,
        /// Shift at zero velocity, km/s.
        shift_km_s: f64,
    },
    /// The file names no frame.
    #[error("the frame of rest is not stated: taken as LSRK")]
    FrameAssumed,
    /// Velocities were moved to LSRK by the given offset.
    #[error("velocities moved from {} to LSRK by {offset_km_s:+} km/s as given", frame.as_deref().unwrap_or("an unstated frame"))]
    FrameOffset {
        /// The file's frame; `None` where it names none.
        frame: Option<String>,
        /// The offset, km/s.
        offset_km_s: f64,
    },
    /// Plain K, no efficiency given: taken as main-beam temperature.
    #[error("K without a stated scale: taken as T_mb")]
    KelvinAsMainBeam,
    /// Plain K, efficiency given: taken as antenna temperature.
    #[error("K without a stated scale, eta_mb given: taken as T_A* and divided by {eta_mb}")]
    KelvinAsAntenna {
        /// Main-beam efficiency.
        eta_mb: f64,
    },
    /// The efficiency was given but the values need none.
    #[error("eta_mb not used: the values are in {unit}")]
    EfficiencyUnused {
        /// What the values are in.
        unit: &'static str,
    },
    /// A given beam stood above another one in the file.
    #[error(
        "the given beam of {} x {} arcsec was used, not the file's {} x {} arcsec",
        given.major, given.minor, stated.major, stated.minor
    )]
    BeamReplaced {
        /// The given beam.
        given: BeamArcsec,
        /// The file's beam.
        stated: BeamArcsec,
    },
    /// The file's beam is impossible, but the values did not need it.
    #[error("the file's beam of {} x {} arcsec is impossible; it was not needed", beam.major, beam.minor)]
    BeamImpossible {
        /// The beam.
        beam: BeamArcsec,
    },
    /// Some channels are blank.
    #[error("{masked} of {channels} channels are blank and stay masked")]
    Masked {
        /// Blank channels.
        masked: usize,
        /// All channels.
        channels: usize,
    },
}

/// Why a spectrum cannot be brought onto the common scale. `Display` says what was found and
/// expected; the caller knows the file from [`RawSpectrum::origin`].
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ScaleError {
    /// The efficiency is impossible.
    #[error("{file}: eta_mb = {found}, expected a main-beam efficiency in (0, 1]")]
    Efficiency {
        /// The file.
        file: String,
        /// The efficiency.
        found: f64,
    },
    /// The error of the efficiency is impossible.
    #[error(
        "{file}: eta_mb = {eta_mb} with error {err}, expected an error of at least 0 and below the value"
    )]
    EfficiencyError {
        /// The file.
        file: String,
        /// The efficiency.
        eta_mb: f64,
        /// Its error.
        err: f64,
    },
    /// Antenna temperatures without an efficiency.
    #[error("{file}: antenna temperature T_A* and no eta_mb, expected a main-beam efficiency")]
    NoEfficiency {
        /// The file.
        file: String,
    },
    /// The beam is impossible.
    #[error(
        "{file}: a beam of {} x {} arcsec, expected full widths above 0 and up to {LIMIT_BEAM_ARCSEC} arcsec",
        beam.major, beam.minor
    )]
    Beam {
        /// The file.
        file: String,
        /// The beam.
        beam: BeamArcsec,
    },
    /// Jy/beam without a beam.
    #[error("{file}: values in Jy/beam and no beam, expected BMAJ and BMIN or a given beam")]
    NoBeam {
        /// The file.
        file: String,
    },
    /// A frame other than LSRK.
    #[error("{file}: velocities or frequencies in the frame {frame}, expected LSRK")]
    OtherFrame {
        /// The file.
        file: String,
        /// The frame by the file's name.
        frame: String,
    },
    /// An offset to LSRK for a spectrum in LSRK.
    #[error("{file}: an offset of {offset_km_s} km/s to LSRK, but the file is in LSRK already")]
    OffsetInLsrk {
        /// The file.
        file: String,
        /// The offset, km/s.
        offset_km_s: f64,
    },
    /// The offset is impossible.
    #[error(
        "{file}: a frame offset of {offset_km_s} km/s, expected at most {LIMIT_VELOCITY_KM_S} km/s either way"
    )]
    Offset {
        /// The file.
        file: String,
        /// The offset, km/s.
        offset_km_s: f64,
    },
    /// A rest frequency that is none.
    #[error("{file}: a rest frequency of {found_hz} Hz {whose}, expected one above 0")]
    RestFrequency {
        /// The file.
        file: String,
        /// The rest frequency, Hz.
        found_hz: f64,
        /// Whose it is, in words.
        whose: &'static str,
    },
    /// A frequency, or a velocity's frequency, that is not above 0.
    #[error("{file}: channel {channel} at {found}, expected a positive frequency")]
    ImpossibleChannel {
        /// The file.
        file: String,
        /// Channel in file order, from 1.
        channel: usize,
        /// Its axis value with unit.
        found: String,
    },
    /// The band does not hold the line.
    #[error(
        "{file}: the band {low_ghz:.6} to {high_ghz:.6} GHz lies {nearest_km_s:+.0} km/s or more from the line at {line_ghz:.6} GHz, expected the line inside"
    )]
    LineOutsideBand {
        /// The file.
        file: String,
        /// Lower end of the band, GHz.
        low_ghz: f64,
        /// Upper end of the band, GHz.
        high_ghz: f64,
        /// Rest frequency of the line, GHz.
        line_ghz: f64,
        /// Velocity of the channel nearest to the line, km/s.
        nearest_km_s: f64,
    },
    /// The velocities are those of another line.
    #[error(
        "{file}: velocities of a line at {stated_ghz:.6} GHz (RESTFRQ), {shift_km_s:+.0} km/s from the line at {line_ghz:.6} GHz, expected the line inside the band"
    )]
    OtherLine {
        /// The file.
        file: String,
        /// Rest frequency of the file, GHz.
        stated_ghz: f64,
        /// Rest frequency of the line, GHz.
        line_ghz: f64,
        /// Velocity of the file's line in velocities of the wanted one, km/s.
        shift_km_s: f64,
    },
    /// The arrays make no spectrum.
    #[error("{file}: {source}")]
    Spectrum {
        /// The file.
        file: String,
        /// Why.
        source: SpectrumError,
    },
}

impl ScaleError {
    /// What to do about it, where there is something to say.
    pub fn hint(&self) -> Option<String> {
        Some(
            match self {
                ScaleError::Efficiency { .. } => "give the fraction, such as 0.81, not percent",
                ScaleError::EfficiencyError { .. } => "the error is that of the fraction, such as [0.81, 0.04] or 0.81,0.04, not percent",
                ScaleError::NoEfficiency { .. } => "give eta_mb in the run sheet, or --thick-eta-mb and --thin-eta-mb; 1 keeps the scale",
                ScaleError::Beam { .. } => {
                    "BMAJ and BMIN are in degrees; a given beam is in arcsec"
                }
                ScaleError::NoBeam { .. } => "give the beam's full width at half maximum in arcsec",
                ScaleError::OtherFrame { .. } => {
                    "convert the file to LSRK, or give the velocity to add with --frame-offset-km-s"
                }
                ScaleError::OffsetInLsrk { .. } => "leave the frame offset out",
                ScaleError::Offset { .. } => "the offset is in km/s",
                ScaleError::RestFrequency { .. } => "rest frequencies are in Hz here, RESTFRQ too",
                ScaleError::ImpossibleChannel { .. } => "check the axis's unit and its keywords",
                ScaleError::LineOutsideBand { .. } | ScaleError::OtherLine { .. } => {
                    "check the line's name, and thick and thin for a swap"
                }
                ScaleError::Spectrum { .. } => "check the channels' order and the blank values",
            }
            .into(),
        )
    }
}

/// Brings a spectrum onto the common scale.
///
/// Velocities: frequencies and optical or relativistic velocities become radio-convention ones
/// exactly; those of another rest frequency keep their frequency. A frame offset d scales
/// frequencies by 1 - d/c, so that v = 0 becomes d.
///
/// Temperatures: `T_A`* is divided by `eta_mb`; plain K is `T_mb`, or `T_A`* where `eta_mb` is
/// given; Jy/beam becomes the Rayleigh-Jeans temperature at the channel's frequency,
/// T = c^2 S/(2 k nu^2 Omega) with Omega = pi/(4 ln 2) major minor.
///
/// # Errors
///
/// [`ScaleError`] where efficiency, beam, frame, rest frequency or axis do not allow it.
///
/// ```
/// use inrush::prepare::scale::{ScaleSettings, to_spectrum};
/// use inrush::read::{ReadOptions, spectrum_from_bytes};
/// let text = b"frequency_ghz,ta_k\n89.185,0.4\n89.2,0.8\n";
/// let raw = spectrum_from_bytes("clump.csv".as_ref(), text, &ReadOptions::default())?;
/// let mut settings = ScaleSettings::for_line(89.1885247e9);
/// settings.eta_mb = Some(0.8);
/// let spectrum = to_spectrum(&raw, &settings)?.spectrum;
/// // astropy 8.0.2, doppler_radio
/// assert!((spectrum.velocity_km_s()[1] - 11.847695432433614).abs() < 1e-9);
/// assert_eq!(spectrum.temperature_k(), [1.0, 0.5]);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn to_spectrum(raw: &RawSpectrum, settings: &ScaleSettings) -> Result<Scaled, ScaleError> {
    let conversion = Conversion::new(raw, settings)?;
    let spectrum = (conversion.spectrum(raw.values.iter().copied())).map_err(|source| {
        ScaleError::Spectrum {
            file: file_of(raw),
            source,
        }
    })?;
    let calibration_error = conversion.calibration_error;
    let mut notes = conversion.notes;
    let masked = spectrum.len() - spectrum.usable_channels();
    if masked > 0 {
        notes.push(ScaleNote::Masked {
            masked,
            channels: spectrum.len(),
        });
    }
    Ok(Scaled {
        spectrum,
        notes,
        calibration_error,
    })
}

/// The way of many spectra of one axis and unit, such as those of a cube, onto the common scale.
#[derive(Clone, Debug, PartialEq)]
pub struct Conversion {
    velocity_km_s: Vec<f64>,
    width_km_s: Vec<f64>,
    kelvin_per_unit: Vec<f64>,
    /// Whether velocities descend in the file's order of channels.
    descending: bool,
    notes: Vec<ScaleNote>,
    calibration_error: f64,
}

impl Conversion {
    /// For spectra that `raw` describes; its values are not looked at.
    ///
    /// # Errors
    ///
    /// As [`to_spectrum`].
    pub fn new(raw: &RawSpectrum, settings: &ScaleSettings) -> Result<Self, ScaleError> {
        let mut notes = Vec::new();
        check_settings(raw, settings)?;
        let map = VelocityMap::new(raw, settings, &mut notes)?;
        let brightness = BrightnessMap::new(raw, settings, &mut notes)?;
        let mut velocity_km_s = map.velocities(raw)?;
        check_band(raw, settings, &velocity_km_s)?;
        let edges: Vec<f64> = edges(&raw.axis)
            .iter()
            .map(|&edge| map.velocity_km_s(edge))
            .collect();
        let mut width_km_s: Vec<f64> = (edges.windows(2))
            .map(|pair| (pair[1] - pair[0]).abs())
            .collect();
        let mut kelvin_per_unit: Vec<f64> = (velocity_km_s.iter())
            .map(|&velocity| brightness.kelvin_per_unit(velocity, settings.rest_frequency_hz))
            .collect();
        let descending = velocity_km_s.first() > velocity_km_s.last();
        if descending {
            velocity_km_s.reverse();
            width_km_s.reverse();
            kelvin_per_unit.reverse();
        }
        Ok(Self {
            velocity_km_s,
            width_km_s,
            kelvin_per_unit,
            descending,
            notes,
            calibration_error: calibration_error(raw.unit, settings),
        })
    }

    /// What was assumed or changed, but for blank channels.
    #[must_use]
    pub fn notes(&self) -> &[ScaleNote] {
        &self.notes
    }

    /// Relative error of the main-beam efficiency; 0 where none was used.
    #[must_use]
    pub fn calibration_error(&self) -> f64 {
        self.calibration_error
    }

    /// The spectrum of values in the file's order and unit, `NaN` where blank.
    ///
    /// # Errors
    ///
    /// [`SpectrumError`] where the values are not as many as the channels, or all blank.
    pub fn spectrum(
        &self,
        values: impl DoubleEndedIterator<Item = f64>,
    ) -> Result<Spectrum, SpectrumError> {
        let mut values: Vec<f64> = values.collect();
        if self.descending {
            values.reverse();
        }
        for (value, factor) in values.iter_mut().zip(&self.kelvin_per_unit) {
            *value *= factor;
        }
        Spectrum::new(self.velocity_km_s.clone(), self.width_km_s.clone(), values)
    }
}

/// Relative error of the main-beam efficiency; 0 where values of the unit need none.
fn calibration_error(unit: BrightnessUnit, settings: &ScaleSettings) -> f64 {
    match (unit, settings.eta_mb) {
        (BrightnessUnit::AntennaKelvin | BrightnessUnit::Kelvin, Some(eta_mb)) => {
            settings.eta_mb_err / eta_mb
        }
        _ => 0.0,
    }
}

fn file_of(raw: &RawSpectrum) -> String {
    raw.origin.path.display().to_string()
}

fn check_settings(raw: &RawSpectrum, settings: &ScaleSettings) -> Result<(), ScaleError> {
    let positive = |frequency: f64| frequency.is_finite() && frequency > 0.0;
    let rest_frequencies = [
        (Some(settings.rest_frequency_hz), "of the line"),
        (raw.rest_frequency_hz, "in the file"),
    ];
    for (frequency, whose) in rest_frequencies {
        if let Some(found_hz) = frequency.filter(|frequency| !positive(*frequency)) {
            return Err(ScaleError::RestFrequency {
                file: file_of(raw),
                found_hz,
                whose,
            });
        }
    }
    if let Some(found) = settings.eta_mb.filter(|eta| !(*eta > 0.0 && *eta <= 1.0)) {
        return Err(ScaleError::Efficiency {
            file: file_of(raw),
            found,
        });
    }
    if let Some(eta_mb) = settings.eta_mb
        && !(0.0..eta_mb).contains(&settings.eta_mb_err)
    {
        return Err(ScaleError::EfficiencyError {
            file: file_of(raw),
            eta_mb,
            err: settings.eta_mb_err,
        });
    }
    if let Some(offset_km_s) = settings
        .frame_offset_km_s
        .filter(|offset| !offset.is_finite() || offset.abs() > LIMIT_VELOCITY_KM_S)
    {
        return Err(ScaleError::Offset {
            file: file_of(raw),
            offset_km_s,
        });
    }
    match settings.beam.filter(|beam| !is_possible(*beam)) {
        Some(beam) => Err(ScaleError::Beam {
            file: file_of(raw),
            beam,
        }),
        None => Ok(()),
    }
}

fn is_possible(beam: BeamArcsec) -> bool {
    [beam.major, beam.minor]
        .iter()
        .all(|width| *width > 0.0 && *width <= LIMIT_BEAM_ARCSEC)
}

/// Axis values of a file into radio-convention LSRK velocities of the line.
struct VelocityMap {
    kind: AxisKind,
    line_hz: f64,
    /// Rest frequency that velocities of the file refer to, Hz, where it is not the line's.
    stated_hz: Option<f64>,
    /// Offset to LSRK, km/s.
    offset_km_s: Option<f64>,
}

impl VelocityMap {
    fn new(
        raw: &RawSpectrum,
        settings: &ScaleSettings,
        notes: &mut Vec<ScaleNote>,
    ) -> Result<Self, ScaleError> {
        let line_hz = settings.rest_frequency_hz;
        let mut stated_hz = None;
        if raw.axis_kind != AxisKind::Frequency {
            if !raw.convention_stated {
                notes.push(ScaleNote::ConventionAssumed {
                    kind: raw.axis_kind,
                });
            }
            match raw.rest_frequency_hz {
                None => notes.push(ScaleNote::RestFrequencyAssumed),
                Some(stated) if stated != line_hz => {
                    stated_hz = Some(stated);
                    let shift_km_s = radio_with_other_rest_km_s(0.0, stated, line_hz);
                    if shift_km_s.abs() >= NOTED_SHIFT_KM_S {
                        notes.push(ScaleNote::RestFrequencyChanged {
                            stated_hz: stated,
                            line_hz,
                            shift_km_s,
                        });
                    }
                }
                Some(_) => {}
            }
        }
        let offset_km_s = frame_offset(raw, settings, notes)?;
        Ok(Self {
            kind: raw.axis_kind,
            line_hz,
            stated_hz,
            offset_km_s,
        })
    }

    /// Velocity of an axis value (Hz or m/s).
    fn velocity_km_s(&self, value: f64) -> f64 {
        let stated = match self.kind {
            AxisKind::Frequency => radio_velocity_km_s(value, self.line_hz),
            AxisKind::RadioVelocity => value * 1e-3,
            AxisKind::OpticalVelocity => radio_from_optical_km_s(value * 1e-3),
            AxisKind::RadialVelocity => radio_from_relativistic_km_s(value * 1e-3),
        };
        let of_line = match self.stated_hz {
            Some(stated_hz) => radio_with_other_rest_km_s(stated, stated_hz, self.line_hz),
            None => stated,
        };
        match self.offset_km_s {
            Some(offset) => of_line + offset - of_line * offset / SPEED_OF_LIGHT_KM_S,
            None => of_line,
        }
    }

    /// Velocities of all channels in file order.
    fn velocities(&self, raw: &RawSpectrum) -> Result<Vec<f64>, ScaleError> {
        raw.axis
            .iter()
            .enumerate()
            .map(|(index, &value)| {
                let velocity = self.velocity_km_s(value);
                let optical_below_c =
                    self.kind != AxisKind::OpticalVelocity || value > -SPEED_OF_LIGHT.value;
                if velocity.is_finite() && velocity < SPEED_OF_LIGHT_KM_S && optical_below_c {
                    return Ok(velocity);
                }
                let unit = match self.kind {
                    AxisKind::Frequency => "Hz",
                    _ => "m/s",
                };
                Err(ScaleError::ImpossibleChannel {
                    file: file_of(raw),
                    channel: index + 1,
                    found: format!("{value} {unit}"),
                })
            })
            .collect()
    }
}

/// The offset to LSRK, where one is needed and given.
fn frame_offset(
    raw: &RawSpectrum,
    settings: &ScaleSettings,
    notes: &mut Vec<ScaleNote>,
) -> Result<Option<f64>, ScaleError> {
    match (&raw.frame, settings.frame_offset_km_s) {
        (Some(Frame::Lsrk), None) => Ok(None),
        (Some(Frame::Lsrk), Some(offset_km_s)) => Err(ScaleError::OffsetInLsrk {
            file: file_of(raw),
            offset_km_s,
        }),
        (Some(Frame::Other(frame)), None) => Err(ScaleError::OtherFrame {
            file: file_of(raw),
            frame: frame.clone(),
        }),
        (None, None) => {
            notes.push(ScaleNote::FrameAssumed);
            Ok(None)
        }
        (frame, Some(offset_km_s)) => {
            let frame = match frame {
                Some(Frame::Other(name)) => Some(name.clone()),
                _ => None,
            };
            notes.push(ScaleNote::FrameOffset { frame, offset_km_s });
            Ok(Some(offset_km_s))
        }
    }
}

/// At least one channel is at a velocity that a cloud can have.
fn check_band(
    raw: &RawSpectrum,
    settings: &ScaleSettings,
    velocities: &[f64],
) -> Result<(), ScaleError> {
    let low = velocities.iter().copied().fold(f64::INFINITY, f64::min);
    let high = velocities.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if low <= LIMIT_VELOCITY_KM_S && high >= -LIMIT_VELOCITY_KM_S {
        return Ok(());
    }
    let line_hz = settings.rest_frequency_hz;
    if let (Some(stated_hz), true) = (
        raw.rest_frequency_hz.filter(|stated| *stated != line_hz),
        raw.axis_kind != AxisKind::Frequency,
    ) {
        return Err(ScaleError::OtherLine {
            file: file_of(raw),
            stated_ghz: stated_hz * 1e-9,
            line_ghz: line_hz * 1e-9,
            shift_km_s: radio_with_other_rest_km_s(0.0, stated_hz, line_hz),
        });
    }
    Err(ScaleError::LineOutsideBand {
        file: file_of(raw),
        low_ghz: frequency_from_radio_hz(high, line_hz) * 1e-9,
        high_ghz: frequency_from_radio_hz(low, line_hz) * 1e-9,
        line_ghz: line_hz * 1e-9,
        nearest_km_s: if low > 0.0 { low } else { high },
    })
}

/// Channel edges: halfway between centres, and as far out at the ends as in. One more than channels.
fn edges(centres: &[f64]) -> Vec<f64> {
    let halfway = centres.windows(2).map(|pair| 0.5 * (pair[0] + pair[1]));
    let (first, last) = match centres {
        [first, second, ..] => {
            let [.., before_last, last] = centres else {
                return Vec::new();
            };
            (1.5 * first - 0.5 * second, 1.5 * last - 0.5 * before_last)
        }
        _ => return Vec::new(),
    };
    std::iter::once(first)
        .chain(halfway)
        .chain(std::iter::once(last))
        .collect()
}

/// Values of a file into main-beam temperatures.
#[derive(Clone, Copy, Debug, PartialEq)]
enum BrightnessMap {
    /// Factor to K.
    Factor(f64),
    /// Solid angle of the beam, sr.
    Beam(f64),
}

impl BrightnessMap {
    fn new(
        raw: &RawSpectrum,
        settings: &ScaleSettings,
        notes: &mut Vec<ScaleNote>,
    ) -> Result<Self, ScaleError> {
        if raw.unit == BrightnessUnit::JanskyPerBeam {
            if settings.eta_mb.is_some() {
                notes.push(ScaleNote::EfficiencyUnused { unit: "Jy/beam" });
            }
            return Ok(BrightnessMap::Beam(beam_solid_angle(raw, settings, notes)?));
        }
        if let Some(beam) = raw.beam.filter(|beam| !is_possible(*beam)) {
            notes.push(ScaleNote::BeamImpossible { beam });
        }
        match (raw.unit, settings.eta_mb) {
            (BrightnessUnit::AntennaKelvin, None) => {
                Err(ScaleError::NoEfficiency { file: file_of(raw) })
            }
            (BrightnessUnit::AntennaKelvin, Some(eta_mb)) => {
                Ok(BrightnessMap::Factor(1.0 / eta_mb))
            }
            (BrightnessUnit::Kelvin, Some(eta_mb)) => {
                notes.push(ScaleNote::KelvinAsAntenna { eta_mb });
                Ok(BrightnessMap::Factor(1.0 / eta_mb))
            }
            (BrightnessUnit::Kelvin, None) => {
                notes.push(ScaleNote::KelvinAsMainBeam);
                Ok(BrightnessMap::Factor(1.0))
            }
            (BrightnessUnit::MainBeamKelvin | BrightnessUnit::JanskyPerBeam, eta_mb) => {
                if eta_mb.is_some() {
                    notes.push(ScaleNote::EfficiencyUnused { unit: "T_mb" });
                }
                Ok(BrightnessMap::Factor(1.0))
            }
        }
    }

    /// K per unit of the values, in a channel at a velocity (km/s) of the line.
    fn kelvin_per_unit(self, velocity_km_s: f64, line_hz: f64) -> f64 {
        match self {
            BrightnessMap::Factor(factor) => factor,
            BrightnessMap::Beam(solid_angle_sr) => {
                let wavenumber =
                    frequency_from_radio_hz(velocity_km_s, line_hz) / SPEED_OF_LIGHT.value;
                JANSKY / (2.0 * BOLTZMANN.value * wavenumber * wavenumber * solid_angle_sr)
            }
        }
    }
}

/// Solid angle (sr) of the beam that is given or stated.
fn beam_solid_angle(
    raw: &RawSpectrum,
    settings: &ScaleSettings,
    notes: &mut Vec<ScaleNote>,
) -> Result<f64, ScaleError> {
    if let (Some(given), Some(stated)) = (settings.beam, raw.beam)
        && given != stated
    {
        notes.push(ScaleNote::BeamReplaced { given, stated });
    }
    let beam = settings
        .beam
        .or(raw.beam)
        .ok_or_else(|| ScaleError::NoBeam { file: file_of(raw) })?;
    if !is_possible(beam) {
        return Err(ScaleError::Beam {
            file: file_of(raw),
            beam,
        });
    }
    Ok(GAUSSIAN_BEAM_AREA * beam.major * ARCSEC * beam.minor * ARCSEC)
}

#[cfg(test)]
// Reference values stand as their source prints them.
#[allow(clippy::unreadable_literal)]
mod tests {
    use super::*;
    use crate::spectrum::Origin;

    const HCO_PLUS_HZ: f64 = 89.188_524_7e9;

    fn raw(axis_kind: AxisKind, axis: &[f64], unit: BrightnessUnit) -> RawSpectrum {
        RawSpectrum {
            axis_kind,
            convention_stated: true,
            axis: axis.to_vec(),
            values: (0..axis.len()).map(|index| 1.0 + index as f64).collect(),
            unit,
            rest_frequency_hz: Some(HCO_PLUS_HZ),
            frame: Some(Frame::Lsrk),
            beam: None,
            object: None,
            origin: Origin {
                path: "made-up.fits".into(),
                format: "FITS image".into(),
            },
        }
    }

    fn main_beam(axis_kind: AxisKind, axis: &[f64]) -> RawSpectrum {
        raw(axis_kind, axis, BrightnessUnit::MainBeamKelvin)
    }

    fn scaled(raw: &RawSpectrum) -> Scaled {
        to_spectrum(raw, &ScaleSettings::for_line(HCO_PLUS_HZ)).unwrap()
    }

    fn refused(raw: &RawSpectrum, settings: &ScaleSettings) -> ScaleError {
        to_spectrum(raw, settings).unwrap_err()
    }

    #[test]
    fn radio_velocities_of_the_line_pass_unchanged() {
        let result = scaled(&main_beam(AxisKind::RadioVelocity, &[-1000.0, 0.0, 1000.0]));
        assert_eq!(result.spectrum.velocity_km_s(), [-1.0, 0.0, 1.0]);
        assert_eq!(result.spectrum.width_km_s(), [1.0, 1.0, 1.0]);
        assert_eq!(result.spectrum.temperature_k(), [1.0, 2.0, 3.0]);
        assert_eq!(result.notes, []);
    }

    #[test]
    fn an_ascending_frequency_axis_is_turned_round() {
        let result = scaled(&main_beam(
            AxisKind::Frequency,
            &[89.185e9, 89.19e9, 89.2e9],
        ));
        let spectrum = &result.spectrum;
        // astropy 8.0.2, doppler_radio.
        assert!((spectrum.velocity_km_s()[0] - -38.57232087714621).abs() < 1e-9);
        assert!((spectrum.velocity_km_s()[2] - 11.847695432433614).abs() < 1e-9);
        assert_eq!(spectrum.temperature_k(), [3.0, 2.0, 1.0]);
        // 5 and 10 MHz apart: edges half-way, widths 10, 7.5 and 5 MHz.
        for (width, megahertz) in spectrum.width_km_s().iter().zip([10.0, 7.5, 5.0]) {
            let expected = SPEED_OF_LIGHT_KM_S * megahertz * 1e6 / HCO_PLUS_HZ;
            assert!((width - expected).abs() < 1e-9, "{width} {expected}");
        }
    }

    #[test]
    fn optical_and_relativistic_velocities_become_radio_ones() {
        // astropy 8.0.2: the same frequency, 97.9 GHz for 97.9809533 GHz at rest.
        for (kind, velocity) in [
            (AxisKind::OpticalVelocity, 247897.74045156736),
            (AxisKind::RadialVelocity, 247795.24743170904),
        ] {
            let mut raw = main_beam(kind, &[0.0, velocity]);
            raw.rest_frequency_hz = None;
            let result = scaled(&raw);
            let ours = result.spectrum.velocity_km_s()[1];
            assert!((ours - 247.69292370431023).abs() < 1e-9, "{kind} {ours}");
            assert_eq!(result.notes, [ScaleNote::RestFrequencyAssumed]);
        }
    }

    #[test]
    fn another_rest_frequency_shifts_and_says_so() {
        let mut raw = main_beam(AxisKind::RadioVelocity, &[-1000.0, 0.0, 1000.0]);
        raw.rest_frequency_hz = Some(HCO_PLUS_HZ - 29e3);
        let result = scaled(&raw);
        // c 29 kHz / 89.1885247 GHz, by hand.
        let shift = 0.097_478_7;
        assert!((result.spectrum.velocity_km_s()[1] - shift).abs() < 1e-7);
        let [note] = result.notes.as_slice() else {
            panic!("one note")
        };
        assert!(
            note.to_string().contains("shifted by +0.09748 km/s"),
            "{note}"
        );
    }

    #[test]
    fn a_frequency_axis_needs_no_stated_rest_frequency() {
        let mut raw = main_beam(AxisKind::Frequency, &[89.18e9, 89.19e9]);
        raw.rest_frequency_hz = None;
        assert_eq!(scaled(&raw).notes, []);
        raw.rest_frequency_hz = Some(115.271_201_8e9);
        assert_eq!(scaled(&raw).notes, []);
    }

    #[test]
    fn jansky_per_beam_agree_with_astropy() {
        // Frequency (GHz), FWHM (arcsec), Jy/beam, K: astropy 8.0.2 `brightness_temperature`.
        for [frequency, width, flux, kelvin] in [
            [89.1885247, 30.0, 1.0, 0.17070785439505715],
            [89.1885247, 1.5, 0.010, 0.6828314175802286],
            [93.1733977, 27.0, 1.0, 0.19310902865788096],
            [267.5576259, 9.2, 5.0, 1.0084947826717432],
            [345.7959899, 14.0, 1.0, 0.05214563939712218],
        ] {
            let mut raw = raw(
                AxisKind::Frequency,
                &[frequency * 1e9, frequency * 1e9 + 1e6],
                BrightnessUnit::JanskyPerBeam,
            );
            raw.values = vec![flux, 0.0];
            raw.beam = Some(BeamArcsec {
                major: width,
                minor: width,
            });
            let result = to_spectrum(&raw, &ScaleSettings::for_line(frequency * 1e9)).unwrap();
            let ours = result.spectrum.temperature_k()[1];
            assert!((ours / kelvin - 1.0).abs() < 1e-14, "{ours} {kelvin}");
        }
    }

    #[test]
    fn antenna_temperatures_are_divided_by_the_efficiency() {
        let settings = ScaleSettings {
            eta_mb: Some(0.5),
            ..ScaleSettings::for_line(HCO_PLUS_HZ)
        };
        let axis = [0.0, 1000.0];
        let antenna = raw(
            AxisKind::RadioVelocity,
            &axis,
            BrightnessUnit::AntennaKelvin,
        );
        let result = to_spectrum(&antenna, &settings).unwrap();
        assert_eq!(result.spectrum.temperature_k(), [2.0, 4.0]);
        assert_eq!(result.notes, []);

        let plain = raw(AxisKind::RadioVelocity, &axis, BrightnessUnit::Kelvin);
        let result = to_spectrum(&plain, &settings).unwrap();
        assert_eq!(result.spectrum.temperature_k(), [2.0, 4.0]);
        assert_eq!(result.notes, [ScaleNote::KelvinAsAntenna { eta_mb: 0.5 }]);
        let result = scaled(&plain);
        assert_eq!(result.spectrum.temperature_k(), [1.0, 2.0]);
        assert_eq!(result.notes, [ScaleNote::KelvinAsMainBeam]);

        let main_beam = main_beam(AxisKind::RadioVelocity, &axis);
        let result = to_spectrum(&main_beam, &settings).unwrap();
        assert_eq!(result.spectrum.temperature_k(), [1.0, 2.0]);
        assert_eq!(result.notes, [ScaleNote::EfficiencyUnused { unit: "T_mb" }]);

        let error = refused(&antenna, &ScaleSettings::for_line(HCO_PLUS_HZ));
        assert!(error.to_string().contains("T_A* and no eta_mb"), "{error}");
    }

    #[test]
    fn an_efficiency_outside_its_range_is_refused() {
        for eta in [0.0, -0.1, 1.01, 81.0, f64::NAN] {
            let settings = ScaleSettings {
                eta_mb: Some(eta),
                ..ScaleSettings::for_line(HCO_PLUS_HZ)
            };
            let error = refused(&main_beam(AxisKind::RadioVelocity, &[0.0, 1.0]), &settings);
            let text = error.to_string();
            assert!(text.contains(&format!("eta_mb = {eta}")), "{text}");
            assert!(
                text.contains("made-up.fits") && text.contains("(0, 1]"),
                "{text}"
            );
            assert!(error.hint().unwrap().contains("0.81"));
        }
    }

    #[test]
    fn an_impossible_beam_is_refused_where_it_is_needed() {
        let axis = [0.0, 1000.0];
        for major in [-30.0, 0.0, 108_000.0, f64::NAN] {
            let beam = BeamArcsec { major, minor: 30.0 };
            let mut flux = raw(
                AxisKind::RadioVelocity,
                &axis,
                BrightnessUnit::JanskyPerBeam,
            );
            flux.beam = Some(beam);
            let error = refused(&flux, &ScaleSettings::for_line(HCO_PLUS_HZ));
            let text = error.to_string();
            assert!(
                text.contains(&format!("a beam of {major} x 30 arcsec")),
                "{text}"
            );
            assert!(error.hint().unwrap().contains("degrees"));

            let mut kelvin = main_beam(AxisKind::RadioVelocity, &axis);
            kelvin.beam = Some(beam);
            assert!(matches!(
                scaled(&kelvin).notes.as_slice(),
                [ScaleNote::BeamImpossible { .. }]
            ));
        }
        let flux = raw(
            AxisKind::RadioVelocity,
            &axis,
            BrightnessUnit::JanskyPerBeam,
        );
        let error = refused(&flux, &ScaleSettings::for_line(HCO_PLUS_HZ));
        assert!(error.to_string().contains("Jy/beam and no beam"), "{error}");
    }

    #[test]
    fn another_frame_is_refused_unless_an_offset_is_given() {
        let mut raw = main_beam(AxisKind::RadioVelocity, &[0.0, 50_000.0]);
        raw.frame = Some(Frame::Other("TOPOCENT".into()));
        let error = refused(&raw, &ScaleSettings::for_line(HCO_PLUS_HZ));
        assert!(
            error
                .to_string()
                .contains("the frame TOPOCENT, expected LSRK"),
            "{error}"
        );
        assert!(error.hint().unwrap().contains("offset"));

        let settings = ScaleSettings {
            frame_offset_km_s: Some(-12.5),
            ..ScaleSettings::for_line(HCO_PLUS_HZ)
        };
        let result = to_spectrum(&raw, &settings).unwrap();
        assert_eq!(result.spectrum.velocity_km_s()[0], -12.5);
        // Frequencies scale by one factor: 50 km/s (1 + 12.5 km/s / c) - 12.5 km/s, by hand.
        assert!((result.spectrum.velocity_km_s()[1] - 37.502_084_775_5).abs() < 1e-9);
        assert!(
            result.notes[0]
                .to_string()
                .contains("from TOPOCENT to LSRK by -12.5 km/s")
        );

        raw.frame = None;
        assert_eq!(scaled(&raw).notes, [ScaleNote::FrameAssumed]);
        raw.frame = Some(Frame::Lsrk);
        assert!(
            refused(&raw, &settings)
                .to_string()
                .contains("in LSRK already")
        );
    }

    #[test]
    fn a_line_outside_the_band_is_refused() {
        let raw = main_beam(AxisKind::Frequency, &[86.70e9, 86.75e9, 86.80e9]);
        let error = refused(&raw, &ScaleSettings::for_line(HCO_PLUS_HZ));
        let text = error.to_string();
        assert!(text.contains("86.700000 to 86.800000 GHz"), "{text}");
        assert!(text.contains("+8029 km/s"), "{text}");
        assert!(text.contains("line at 89.188525 GHz"), "{text}");
        assert!(error.hint().unwrap().contains("swap"));
    }

    #[test]
    fn velocities_of_another_line_are_refused() {
        let mut raw = main_beam(AxisKind::RadioVelocity, &[-1e3, 0.0, 1e3]);
        raw.rest_frequency_hz = Some(86.754_288_4e9);
        let error = refused(&raw, &ScaleSettings::for_line(HCO_PLUS_HZ));
        let text = error.to_string();
        // c (89.1885247 - 86.7542884)/89.1885247 = 8182 km/s, by hand.
        for part in ["86.754288 GHz (RESTFRQ)", "+8182 km/s", "89.188525 GHz"] {
            assert!(text.contains(part), "{text}");
        }
        assert!(error.hint().unwrap().contains("swap"));
    }

    #[test]
    fn impossible_frequencies_and_velocities_are_refused() {
        let settings = ScaleSettings::for_line(HCO_PLUS_HZ);
        for (kind, value) in [
            (AxisKind::Frequency, 0.0),
            (AxisKind::Frequency, -1e6),
            (AxisKind::RadialVelocity, 3e8),
            (AxisKind::OpticalVelocity, -3e8),
            (AxisKind::RadioVelocity, 3e8),
        ] {
            let text = refused(&main_beam(kind, &[value, value + 1.0]), &settings).to_string();
            assert!(text.contains("channel 1 at"), "{kind} {value}: {text}");
        }
        let error = refused(
            &main_beam(AxisKind::RadioVelocity, &[0.0, 1.0]),
            &ScaleSettings::for_line(-1.0),
        );
        assert!(error.to_string().contains("of the line"), "{error}");
    }

    #[test]
    fn blank_channels_stay_masked_and_are_counted() {
        let mut raw = main_beam(AxisKind::RadioVelocity, &[0.0, 1e3, 2e3]);
        raw.values[1] = f64::NAN;
        let result = scaled(&raw);
        assert!(!result.spectrum.is_usable(1));
        assert_eq!(
            result.notes,
            [ScaleNote::Masked {
                masked: 1,
                channels: 3
            }]
        );
    }
}
