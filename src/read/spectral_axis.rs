//! The spectral axis that FITS keywords describe: channel numbers into frequencies or velocities.
//!
//! Sources: FITS standard 4.0, section 8.4; Greisen et al. 2006, A&A 446, 747 (Paper III). An
//! algorithm code such as `-F2W` says that the axis is linear in the variable of its first letter;
//! the reference value and increment are those of the named type (Paper III, section 3.4).
//! Older files append the frame to the type (`VELO-LSR`, `FELO-HEL`) and state frame and convention
//! in VELREF: 1 LSRK, 2 barycentric, 3 topocentric, 4 LSRD, 5 geocentric, 6 source,
//! 7 galactocentric; plus 256 for radio, without it optical.

use crate::constants::SPEED_OF_LIGHT;
use crate::spectrum::{AxisKind, Frame};

/// Keywords of one spectral axis, in the file's units.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Keywords {
    /// Axis type, CTYPE.
    pub kind: String,
    /// Value at the reference channel, CRVAL, Hz or m/s.
    pub reference_value: f64,
    /// Increment a channel at the reference channel, CDELT, Hz or m/s.
    pub increment: f64,
    /// Reference channel, CRPIX, counted from 1.
    pub reference_channel: f64,
    /// Rest frequency, Hz.
    pub rest_frequency_hz: Option<f64>,
    /// VELREF.
    pub velocity_reference: Option<u16>,
}

/// A decoded axis.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct SpectralAxis {
    pub kind: AxisKind,
    /// Whether the keywords state the velocity convention.
    pub convention_stated: bool,
    /// Hz or m/s, one a channel.
    pub values: Vec<f64>,
    /// Frame by the axis type or VELREF.
    pub frame: Option<Frame>,
}

/// Why keywords describe no axis that is read.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum AxisProblem {
    /// The axis type is not known.
    Type,
    /// The algorithm needs the rest frequency.
    NoRestFrequency,
    /// A channel has no frequency under the algorithm.
    OutOfRange,
}

/// The variable that an axis is linear in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Variable {
    Frequency,
    Wavelength,
    Velocity,
}

/// An axis type taken apart.
struct Type {
    kind: AxisKind,
    convention_stated: bool,
    /// `None` where the axis is linear in its own type.
    linear_in: Option<Variable>,
    frame: Option<Frame>,
}

/// Whether an axis type is spectral at all, known or not.
pub(super) fn is_spectral(kind: &str) -> bool {
    let kind = kind.trim().to_ascii_uppercase();
    [
        "FREQ", "VRAD", "VOPT", "VELO", "FELO", "WAVE", "AWAV", "ENER", "WAVN", "ZOPT", "BETA",
    ]
    .iter()
    .any(|known| kind.starts_with(known))
}

/// Axis values at channels 1 to `channels`.
pub(super) fn decode(channels: usize, keywords: &Keywords) -> Result<SpectralAxis, AxisProblem> {
    let parsed = parse_type(&keywords.kind, keywords.velocity_reference)?;
    let offset = |index: usize| index as f64 + 1.0 - keywords.reference_channel;
    let values: Vec<f64> = match parsed.linear_in {
        None => (0..channels)
            .map(|index| keywords.reference_value + keywords.increment * offset(index))
            .collect(),
        Some(variable) => {
            let algorithm = Algorithm::new(parsed.kind, variable, keywords)?;
            (0..channels)
                .map(|index| algorithm.value(keywords.increment * offset(index)))
                .collect()
        }
    };
    if values.iter().any(|value| !value.is_finite()) {
        return Err(AxisProblem::OutOfRange);
    }
    Ok(SpectralAxis {
        kind: parsed.kind,
        convention_stated: parsed.convention_stated,
        values,
        frame: parsed.frame,
    })
}

fn parse_type(text: &str, velocity_reference: Option<u16>) -> Result<Type, AxisProblem> {
    let text = text.trim().to_ascii_uppercase();
    let (name, code) = match text.split_once('-') {
        Some((name, code)) => (name.trim_end_matches('-'), code.trim_matches('-')),
        None => (text.as_str(), ""),
    };
    let old_frame = old_frame(code);
    let reference = velocity_reference.unwrap_or(0);
    let referred_radio = reference >= 256;
    let referred_frame = velocity_reference.and_then(frame_of_reference);
    let (kind, convention_stated) = match name {
        "FREQ" => (AxisKind::Frequency, true),
        "VRAD" => (AxisKind::RadioVelocity, true),
        "VOPT" | "FELO" => (AxisKind::OpticalVelocity, true),
        "VELO" if referred_radio => (AxisKind::RadioVelocity, true),
        // Greisen et al. 2006, section 3.5: optical without 256, but only in the older form.
        "VELO" if reference > 0 => (AxisKind::OpticalVelocity, true),
        "VELO" if old_frame.is_some() => (AxisKind::OpticalVelocity, false),
        "VELO" => (AxisKind::RadialVelocity, code.contains('2')),
        _ => return Err(AxisProblem::Type),
    };
    let linear_in = match (name, code) {
        ("FELO", _) => Some(Variable::Frequency),
        (_, "") => None,
        (_, _) if old_frame.is_some() => None,
        (_, code) => match code.as_bytes() {
            [from @ (b'F' | b'W' | b'V'), b'2', to] if *to == variable_letter(kind) => {
                Some(match from {
                    b'F' => Variable::Frequency,
                    b'W' => Variable::Wavelength,
                    _ => Variable::Velocity,
                })
            }
            _ => return Err(AxisProblem::Type),
        },
    };
    Ok(Type {
        kind,
        convention_stated,
        linear_in,
        frame: old_frame.or(referred_frame),
    })
}

/// Letter of the basic variable that a type is linear in (Paper III, table 1).
fn variable_letter(kind: AxisKind) -> u8 {
    match kind {
        AxisKind::Frequency | AxisKind::RadioVelocity => b'F',
        AxisKind::OpticalVelocity => b'W',
        AxisKind::RadialVelocity => b'V',
    }
}

fn old_frame(code: &str) -> Option<Frame> {
    match code {
        "LSR" => Some(Frame::Lsrk),
        "LSD" => Some(Frame::Other("LSRD".into())),
        "HEL" | "BAR" => Some(Frame::Other("BARYCENT".into())),
        "OBS" | "TOP" => Some(Frame::Other("TOPOCENT".into())),
        "GEO" => Some(Frame::Other("GEOCENTR".into())),
        _ => None,
    }
}

fn frame_of_reference(velocity_reference: u16) -> Option<Frame> {
    let name = match velocity_reference % 256 {
        1 => return Some(Frame::Lsrk),
        2 => "BARYCENT",
        3 => "TOPOCENT",
        4 => "LSRD",
        5 => "GEOCENTR",
        6 => "SOURCE",
        7 => "GALACTOC",
        _ => return None,
    };
    Some(Frame::Other(name.into()))
}

/// A type S that is a function of a variable X in which the axis is linear. All goes through
/// f = nu/nu0; where no velocity enters, nu0 cancels and the reference frequency serves.
struct Algorithm {
    kind: AxisKind,
    variable: Variable,
    /// Hz.
    unit_frequency_hz: f64,
    /// X at the reference channel.
    reference: f64,
    /// dX/dS at the reference channel, per Hz or m/s.
    slope: f64,
}

impl Algorithm {
    fn new(kind: AxisKind, variable: Variable, keywords: &Keywords) -> Result<Self, AxisProblem> {
        let value = keywords.reference_value;
        let frequency_in_velocity = kind == AxisKind::Frequency && variable == Variable::Velocity;
        let unit_frequency_hz = match (kind, keywords.rest_frequency_hz) {
            (_, None) if frequency_in_velocity => return Err(AxisProblem::NoRestFrequency),
            (AxisKind::Frequency, None) => value,
            (_, rest) => rest.unwrap_or(1.0),
        };
        let ratio = ratio_of(kind, value, unit_frequency_hz);
        if !(ratio.is_finite() && ratio > 0.0) {
            return Err(AxisProblem::OutOfRange);
        }
        // dX/dS = (dX/df) / (dS/df)
        let slope = variable_slope(variable, ratio) / value_slope(kind, ratio, unit_frequency_hz);
        Ok(Self {
            kind,
            variable,
            unit_frequency_hz,
            reference: variable_of(variable, ratio),
            slope,
        })
    }

    /// S of a channel whose linear offset from the reference is `linear` (Hz or m/s).
    fn value(&self, linear: f64) -> f64 {
        let ratio = ratio_of_variable(self.variable, self.reference + self.slope * linear);
        if ratio > 0.0 {
            value_of(self.kind, ratio, self.unit_frequency_hz)
        } else {
            f64::NAN
        }
    }
}

const C_M_S: f64 = SPEED_OF_LIGHT.value;

/// f of S.
fn ratio_of(kind: AxisKind, value: f64, unit_frequency_hz: f64) -> f64 {
    match kind {
        AxisKind::Frequency => value / unit_frequency_hz,
        AxisKind::RadioVelocity => 1.0 - value / C_M_S,
        AxisKind::OpticalVelocity => 1.0 / (1.0 + value / C_M_S),
        AxisKind::RadialVelocity => {
            let beta = value / C_M_S;
            ((1.0 - beta) / (1.0 + beta)).sqrt()
        }
    }
}

/// S of f.
fn value_of(kind: AxisKind, ratio: f64, unit_frequency_hz: f64) -> f64 {
    match kind {
        AxisKind::Frequency => ratio * unit_frequency_hz,
        AxisKind::RadioVelocity => C_M_S * (1.0 - ratio),
        AxisKind::OpticalVelocity => C_M_S * (1.0 - ratio) / ratio,
        AxisKind::RadialVelocity => C_M_S * (1.0 - ratio) * (1.0 + ratio) / (1.0 + ratio * ratio),
    }
}

/// dS/df.
fn value_slope(kind: AxisKind, ratio: f64, unit_frequency_hz: f64) -> f64 {
    match kind {
        AxisKind::Frequency => unit_frequency_hz,
        AxisKind::RadioVelocity => -C_M_S,
        AxisKind::OpticalVelocity => -C_M_S / (ratio * ratio),
        AxisKind::RadialVelocity => -4.0 * C_M_S * ratio / (1.0 + ratio * ratio).powi(2),
    }
}

/// X of f: f itself, 1/f, or v/c = (1 - f^2)/(1 + f^2).
fn variable_of(variable: Variable, ratio: f64) -> f64 {
    match variable {
        Variable::Frequency => ratio,
        Variable::Wavelength => 1.0 / ratio,
        Variable::Velocity => (1.0 - ratio * ratio) / (1.0 + ratio * ratio),
    }
}

/// dX/df.
fn variable_slope(variable: Variable, ratio: f64) -> f64 {
    match variable {
        Variable::Frequency => 1.0,
        Variable::Wavelength => -1.0 / (ratio * ratio),
        Variable::Velocity => -4.0 * ratio / (1.0 + ratio * ratio).powi(2),
    }
}

/// f of X.
fn ratio_of_variable(variable: Variable, x: f64) -> f64 {
    match variable {
        Variable::Frequency => x,
        Variable::Wavelength => 1.0 / x,
        Variable::Velocity => ((1.0 - x) / (1.0 + x)).sqrt(),
    }
}

#[cfg(test)]
// Reference values stand as their source prints them.
#[allow(clippy::unreadable_literal)]
mod tests {
    use super::*;

    fn axis(kind: &str, value: f64, increment: f64, reference_channel: f64) -> Keywords {
        Keywords {
            kind: kind.into(),
            reference_value: value,
            increment,
            reference_channel,
            rest_frequency_hz: Some(89.1885247e9),
            velocity_reference: None,
        }
    }

    /// Tolerance of velocities that went through a frequency ratio: a few c eps, in m/s.
    const TOLERANCE_M_S: f64 = 3e-7;

    fn assert_values(keywords: &Keywords, expected: &[(usize, f64)], tolerance: f64) {
        let channels = expected.iter().map(|(channel, _)| *channel).max().unwrap();
        let decoded = decode(channels, keywords).unwrap();
        for (channel, value) in expected {
            let ours = decoded.values[channel - 1];
            assert!(
                (ours - value).abs() < tolerance,
                "{channel}: {ours} {value}"
            );
        }
    }

    // Expected values: astropy 8.0.2 with wcslib 8.6, `all_pix2world`, axes translated by `sptr`.

    #[test]
    fn linear_axes_agree_with_wcslib() {
        assert_values(
            &axis("FREQ", 89.187e9, 30.5e3, 513.0),
            &[
                (1, 89171384000.0),
                (257, 89179192000.0),
                (513, 89187000000.0),
                (1024, 89202585500.0),
            ],
            1e-4,
        );
        assert_values(
            &axis("VRAD", -10e3, 102.5, 1.0),
            &[(1, -10000.0), (100, 147.5), (256, 16137.5)],
            1e-9,
        );
    }

    #[test]
    fn axes_linear_in_frequency_agree_with_wcslib() {
        assert_values(
            &axis("VOPT-F2W", 5125.114206219455, -102.52420515303004, 513.0),
            &[
                (1, 57626.699893295765),
                (257, 31373.60868638754),
                (513, 5125.114206194878),
                (1024, -47255.601054906845),
            ],
            TOLERANCE_M_S,
        );
        assert_values(
            &axis("VELO-F2V", 5125.070397937206, -102.52245244629526, 513.0),
            &[
                (1, 57621.161334246484),
                (257, 31371.967045150614),
                (513, 5125.070397940254),
                (1024, -47259.32545106236),
            ],
            TOLERANCE_M_S,
        );
        assert_values(
            &axis("VOPT-F2W", -10000.0, 102.5, 1.0),
            &[
                (1, -10000.000000059605),
                (100, 147.84349983930588),
                (256, 16139.779080867767),
            ],
            TOLERANCE_M_S,
        );
    }

    #[test]
    fn the_older_velo_is_radio_or_optical_by_velref() {
        let kind = |text: &str, velref| {
            let parsed = parse_type(text, velref).unwrap_or_else(|_| panic!("{text}"));
            (parsed.kind, parsed.frame)
        };
        assert_eq!(kind("VELO", None), (AxisKind::RadialVelocity, None));
        assert_eq!(
            kind("VELO", Some(257)),
            (AxisKind::RadioVelocity, Some(Frame::Lsrk))
        );
        assert_eq!(
            kind("VELO-LSR", Some(257)),
            (AxisKind::RadioVelocity, Some(Frame::Lsrk))
        );
        assert_eq!(
            kind("VELO-LSR", Some(1)),
            (AxisKind::OpticalVelocity, Some(Frame::Lsrk))
        );
        assert_eq!(
            kind("FELO-HEL", None),
            (
                AxisKind::OpticalVelocity,
                Some(Frame::Other("BARYCENT".into()))
            )
        );
        assert_eq!(
            kind("VELO-OBS", Some(259)),
            (
                AxisKind::RadioVelocity,
                Some(Frame::Other("TOPOCENT".into()))
            )
        );
    }

    #[test]
    fn unknown_types_and_impossible_algorithms_are_problems() {
        for kind in ["WAVE", "AWAV", "VRAD-LOG", "VOPT-F2V", "FREQ-TAB", ""] {
            let problem = decode(4, &axis(kind, 1.0, 1.0, 1.0)).unwrap_err();
            assert_eq!(problem, AxisProblem::Type, "{kind}");
        }
        // Half the speed of light a channel runs past zero frequency.
        let problem = decode(9, &axis("VOPT-F2W", 0.0, 1.5e8, 1.0)).unwrap_err();
        assert_eq!(problem, AxisProblem::OutOfRange);
    }
}
