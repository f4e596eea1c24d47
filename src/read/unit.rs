//! Unit texts of spectral axes and of values, as files and people write them.

use crate::spectrum::{AxisKind, BrightnessUnit};

/// Unit of a spectral axis.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AxisUnit {
    /// What the axis counts.
    pub kind: AxisKind,
    /// Factor to Hz or m/s.
    pub factor: f64,
    /// Whether the text names the velocity convention (always true for a frequency).
    pub convention_stated: bool,
}

/// Unit of the values.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ValueUnit {
    /// Unit and scale without its prefix.
    pub unit: BrightnessUnit,
    /// Factor to that unit.
    pub factor: f64,
}

/// A unit text that is not known.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[error("unknown unit `{found}`, expected one of {expected}")]
pub struct UnknownUnit {
    /// The text.
    pub found: String,
    /// The known ones.
    pub expected: String,
    /// The nearest known one.
    pub nearest: Option<String>,
}

/// Spellings of axis units and the factor to Hz or m/s; the first of each pair is shown.
const FREQUENCY_UNITS: [(&str, f64); 5] = [
    ("Hz", 1.0),
    ("kHz", 1e3),
    ("MHz", 1e6),
    ("GHz", 1e9),
    ("THz", 1e12),
];
const VELOCITY_UNITS: [(&str, f64); 2] = [("km/s", 1e3), ("m/s", 1.0)];
const KELVIN_UNITS: [(&str, f64); 3] = [("K", 1.0), ("mK", 1e-3), ("uK", 1e-6)];
const FLUX_UNITS: [(&str, f64); 3] = [("Jy/beam", 1.0), ("mJy/beam", 1e-3), ("uJy/beam", 1e-6)];

impl AxisUnit {
    /// Reads `km/s`, `m s-1`, `GHz`, ...; a velocity may name its convention in brackets, as in
    /// `km/s (optical)`. Without one it is taken as radio.
    ///
    /// # Errors
    ///
    /// [`UnknownUnit`] with the nearest known unit.
    pub fn parse(text: &str) -> Result<Self, UnknownUnit> {
        let (unit, qualifier) = split_qualifier(text);
        let spelled = spell(unit);
        if let Some(factor) = look_up(&FREQUENCY_UNITS, &spelled, Case::Ignored)
            && qualifier.is_none()
        {
            return Ok(Self {
                kind: AxisKind::Frequency,
                factor,
                convention_stated: true,
            });
        }
        let convention = qualifier.map(str::to_ascii_lowercase);
        let kind = match convention.as_deref() {
            None | Some("radio") => Some(AxisKind::RadioVelocity),
            Some("optical") => Some(AxisKind::OpticalVelocity),
            Some("relativistic") => Some(AxisKind::RadialVelocity),
            Some(_) => None,
        };
        match (look_up(&VELOCITY_UNITS, &spelled, Case::Ignored), kind) {
            (Some(factor), Some(kind)) => Ok(Self {
                kind,
                factor,
                convention_stated: convention.is_some(),
            }),
            _ => Err(unknown(
                text,
                &spelled,
                &[&VELOCITY_UNITS, &FREQUENCY_UNITS],
            )),
        }
    }
}

impl ValueUnit {
    /// Reads `K`, `mK`, `Jy/beam`, `mJy beam-1`, ...; kelvins may name their scale in brackets, as
    /// in `K (Tmb)` and `mK (TA*)`.
    ///
    /// # Errors
    ///
    /// [`UnknownUnit`] with the nearest known unit.
    pub fn parse(text: &str) -> Result<Self, UnknownUnit> {
        let (unit, qualifier) = split_qualifier(text);
        let spelled = spell(unit);
        let kelvin = look_up(&KELVIN_UNITS, &spelled, Case::Kept);
        let flux = look_up(&FLUX_UNITS, &spelled, Case::Kept)
            .or_else(|| (spelled == "JY/BEAM").then_some(1.0));
        let scale = match qualifier {
            None => Some(BrightnessUnit::Kelvin),
            Some(word) => scale_of(word),
        };
        match (kelvin, flux, scale) {
            (Some(factor), _, Some(unit)) => Ok(Self { unit, factor }),
            (_, Some(factor), _) if qualifier.is_none() => Ok(Self {
                unit: BrightnessUnit::JanskyPerBeam,
                factor,
            }),
            _ => Err(unknown(text, &spelled, &[&KELVIN_UNITS, &FLUX_UNITS])),
        }
    }

    /// The same unit on the temperature scale that a name states, such as `tmb` or `TA*`; the
    /// unit's own scale stays where it has one.
    #[must_use]
    pub(super) fn on_scale_of(self, name: &str) -> Self {
        match (self.unit, scale_of(name)) {
            (BrightnessUnit::Kelvin, Some(unit)) => Self { unit, ..self },
            _ => self,
        }
    }
}

/// The temperature scale that a word names: `Tmb`, `T_MB`, `TA*`, `Ta`, `T_A^*`, ...
fn scale_of(word: &str) -> Option<BrightnessUnit> {
    let plain: String = word
        .to_ascii_lowercase()
        .chars()
        .filter(char::is_ascii_alphanumeric)
        .collect();
    match plain.as_str() {
        "tmb" => Some(BrightnessUnit::MainBeamKelvin),
        "ta" | "tastar" => Some(BrightnessUnit::AntennaKelvin),
        _ => None,
    }
}

/// Splits `km/s (optical)` into `km/s` and `optical`.
fn split_qualifier(text: &str) -> (&str, Option<&str>) {
    let text = text.trim();
    match text.strip_suffix(')').and_then(|rest| rest.split_once('(')) {
        Some((unit, qualifier)) => (unit.trim(), Some(qualifier.trim())),
        None => (text, None),
    }
}

/// One spelling for `km / s`, `km s-1`, `km.s**-1`, `km s^-1`, `Jy beam^-1`, `µK`.
fn spell(unit: &str) -> String {
    let unit = unit
        .replace(['µ', 'μ'], "u")
        .replace("**", "")
        .replace('^', "");
    let words: Vec<&str> = unit
        .split([' ', '.', '*'])
        .filter(|word| !word.is_empty())
        .collect();
    match words.as_slice() {
        [single] => (*single).to_string(),
        [numerator, denominator] if denominator.ends_with("-1") => {
            format!("{numerator}/{}", denominator.trim_end_matches("-1"))
        }
        _ => words.concat(),
    }
}

#[derive(Clone, Copy, PartialEq)]
enum Case {
    Kept,
    Ignored,
}

fn look_up(units: &[(&str, f64)], spelled: &str, case: Case) -> Option<f64> {
    let matches = |known: &str| match case {
        Case::Kept => known == spelled,
        Case::Ignored => known.eq_ignore_ascii_case(spelled),
    };
    units
        .iter()
        .find(|(known, _)| matches(known))
        .map(|(_, factor)| *factor)
}

fn unknown(text: &str, spelled: &str, tables: &[&[(&str, f64)]]) -> UnknownUnit {
    let known: Vec<&str> = tables
        .iter()
        .flat_map(|table| table.iter().map(|(name, _)| *name))
        .collect();
    UnknownUnit {
        found: text.trim().to_string(),
        expected: known.join(", "),
        nearest: nearest(spelled, known.iter().copied()),
    }
}

/// The candidate nearest to a text, if it is near at all.
pub(super) fn nearest<'a>(text: &str, candidates: impl Iterator<Item = &'a str>) -> Option<String> {
    let wanted = text.to_ascii_lowercase();
    candidates
        .map(|candidate| {
            let likeness = strsim::jaro_winkler(&wanted, &candidate.to_ascii_lowercase());
            (likeness, candidate)
        })
        .filter(|(likeness, _)| *likeness > 0.7)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, candidate)| candidate.to_string())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn spellings_of_one_unit_are_one_unit() {
        for text in [
            "km/s", "km / s", "km s-1", "km.s-1", "km s^-1", "km s**-1", "KM/S",
        ] {
            let unit = AxisUnit::parse(text).unwrap();
            assert_eq!(
                (unit.kind, unit.factor),
                (AxisKind::RadioVelocity, 1e3),
                "{text}"
            );
        }
        for text in [
            "Jy/beam",
            "Jy / beam",
            "Jy beam-1",
            "Jy beam**-1",
            "JY/BEAM",
        ] {
            assert_eq!(
                ValueUnit::parse(text).unwrap().unit,
                BrightnessUnit::JanskyPerBeam
            );
        }
        assert_eq!(AxisUnit::parse("MHZ").unwrap().factor, 1e6);
    }

    #[test]
    fn brackets_state_convention_and_scale() {
        let optical = AxisUnit::parse("m/s (optical)").unwrap();
        assert_eq!(optical.kind, AxisKind::OpticalVelocity);
        assert!(optical.convention_stated);
        assert_eq!(
            ValueUnit::parse("K (Ta*)").unwrap().unit,
            BrightnessUnit::AntennaKelvin
        );
        assert_eq!(
            ValueUnit::parse("mK(Tmb)").unwrap().unit,
            BrightnessUnit::MainBeamKelvin
        );
        assert_eq!(ValueUnit::parse("mK").unwrap().factor, 1e-3);
    }

    #[test]
    fn an_unknown_unit_is_answered_with_the_nearest() {
        assert_eq!(
            AxisUnit::parse("kms").unwrap_err().nearest.as_deref(),
            Some("km/s")
        );
        assert_eq!(
            AxisUnit::parse("Ghz/s").unwrap_err().nearest.as_deref(),
            Some("GHz")
        );
        assert_eq!(
            ValueUnit::parse("Jy/bm").unwrap_err().nearest.as_deref(),
            Some("Jy/beam")
        );
        // Kelvin is not kilo, and mega is not milli.
        assert!(ValueUnit::parse("k").is_err());
        assert!(ValueUnit::parse("MK").is_err());
    }
}
