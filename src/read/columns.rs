//! Which column of a table is the axis and which holds the values: by the user's choice, by the
//! column names, or by their units.

use std::fmt;
use std::path::Path;
use std::str::FromStr;

use super::error::{Place, ReadError};
use super::unit::{AxisUnit, UnknownUnit, ValueUnit, nearest};
use crate::spectrum::{AxisKind, BrightnessUnit};

/// A column by its number or its name.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum ColumnKey {
    /// Number from 1.
    Number(usize),
    /// Name, upper and lower case alike.
    Name(String),
}

impl fmt::Display for ColumnKey {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ColumnKey::Number(number) => write!(formatter, "{number}"),
            ColumnKey::Name(name) => write!(formatter, "`{name}`"),
        }
    }
}

/// The columns of axis and values with their units, as in `1:km/s,2:K`.
///
/// ```
/// use inrush::read::{ColumnChoice, ColumnKey};
/// let choice: ColumnChoice = "2:GHz,3:mK (TA*)".parse()?;
/// assert_eq!(choice.axis, ColumnKey::Number(2));
/// assert_eq!(choice.value_unit.factor, 1e-3);
/// # Ok::<(), inrush::read::ColumnChoiceError>(())
/// ```
#[derive(Clone, Debug, PartialEq)]
pub struct ColumnChoice {
    /// Column of the axis.
    pub axis: ColumnKey,
    /// Its unit.
    pub axis_unit: AxisUnit,
    /// Column of the values.
    pub value: ColumnKey,
    /// Its unit.
    pub value_unit: ValueUnit,
}

/// Why a text is no choice of columns.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ColumnChoiceError {
    /// Not two parts.
    #[error("`{found}` has {parts} part(s), expected two, as in `1:km/s,2:K`")]
    Parts {
        /// The text.
        found: String,
        /// Number of parts between commas.
        parts: usize,
    },
    /// A part without a colon.
    #[error("`{found}` names no unit, expected COLUMN:UNIT, as in `1:km/s`")]
    NoUnit {
        /// The part.
        found: String,
    },
    /// Column numbers start at 1.
    #[error("column `{found}`, expected a number from 1 or a name")]
    Column {
        /// The column.
        found: String,
    },
    /// The same column twice.
    #[error("column {column} as axis and as values, expected two columns")]
    SameColumn {
        /// The column.
        column: String,
    },
    /// A unit that is not known.
    #[error(transparent)]
    Unit(#[from] UnknownUnit),
}

impl ColumnChoiceError {
    /// What to do about it.
    pub fn hint(&self) -> Option<String> {
        match self {
            ColumnChoiceError::Unit(UnknownUnit { nearest, .. }) => nearest
                .as_ref()
                .map(|name| format!("did you mean `{name}`?")),
            _ => Some("give the axis first, then the values, as in `1:km/s,2:K`".into()),
        }
    }
}

impl FromStr for ColumnChoice {
    type Err = ColumnChoiceError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let parts: Vec<&str> = text.split(',').collect();
        let [axis, value] = parts.as_slice() else {
            return Err(ColumnChoiceError::Parts {
                found: text.to_string(),
                parts: parts.len(),
            });
        };
        let (axis, axis_unit) = split_part(axis)?;
        let (value, value_unit) = split_part(value)?;
        if axis == value {
            return Err(ColumnChoiceError::SameColumn {
                column: axis.to_string(),
            });
        }
        Ok(Self {
            axis,
            axis_unit: AxisUnit::parse(axis_unit)?,
            value,
            value_unit: ValueUnit::parse(value_unit)?,
        })
    }
}

fn split_part(part: &str) -> Result<(ColumnKey, &str), ColumnChoiceError> {
    let Some((column, unit)) = part.split_once(':') else {
        return Err(ColumnChoiceError::NoUnit {
            found: part.trim().to_string(),
        });
    };
    let column = column.trim();
    let key = match column.parse::<usize>() {
        Ok(number) if number > 0 => ColumnKey::Number(number),
        Ok(_) => {
            return Err(ColumnChoiceError::Column {
                found: column.to_string(),
            });
        }
        Err(_) if column.is_empty() => {
            return Err(ColumnChoiceError::Column {
                found: column.to_string(),
            });
        }
        Err(_) => ColumnKey::Name(column.to_string()),
    };
    Ok((key, unit))
}

/// A column as a table names it.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Column {
    pub name: String,
    /// Unit that stands beside the name, in a header or in brackets.
    pub unit: Option<String>,
}

/// Axis and value column of a table, by index from 0.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Roles {
    pub axis: usize,
    pub axis_unit: AxisUnit,
    pub value: usize,
    pub value_unit: ValueUnit,
}

/// What a column is, by its name and unit.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Part {
    Axis(AxisUnit),
    Value(ValueUnit),
    /// Neither, or an uncertainty, model or weight.
    Other,
}

/// Column names of CSV files that carry role and unit.
const AXIS_STEMS: [(&str, &str); 5] = [
    ("velocity_optical", "(optical)"),
    ("velocity_relativistic", "(relativistic)"),
    ("velocity_radio", "(radio)"),
    ("velocity", "(radio)"),
    ("frequency", ""),
];
const VALUE_STEMS: [(&str, &str); 4] = [
    ("tmb", "(Tmb)"),
    ("ta", "(TA*)"),
    ("temperature", ""),
    ("flux", ""),
];
/// Unit suffixes of those names and what they mean.
const AXIS_SUFFIXES: [(&str, &str); 6] = [
    ("km_s", "km/s"),
    ("m_s", "m/s"),
    ("ghz", "GHz"),
    ("mhz", "MHz"),
    ("khz", "kHz"),
    ("hz", "Hz"),
];
const VALUE_SUFFIXES: [(&str, &str); 4] = [
    ("k", "K"),
    ("mk", "mK"),
    ("jy_beam", "Jy/beam"),
    ("mjy_beam", "mJy/beam"),
];
/// Names shown when none is found.
const AXIS_NAMES: [&str; 9] = [
    "velocity_km_s",
    "velocity_m_s",
    "velocity_radio_km_s",
    "velocity_optical_km_s",
    "velocity_relativistic_km_s",
    "frequency_ghz",
    "frequency_mhz",
    "frequency_khz",
    "frequency_hz",
];
const VALUE_NAMES: [&str; 8] = [
    "tmb_k",
    "tmb_mk",
    "ta_k",
    "ta_mk",
    "temperature_k",
    "temperature_mk",
    "flux_jy_beam",
    "flux_mjy_beam",
];
/// Words in names of columns that are not the spectrum itself.
const NOT_THE_SPECTRUM: [&str; 13] = [
    "err",
    "error",
    "unc",
    "uncertainty",
    "rms",
    "noise",
    "sigma",
    "std",
    "weight",
    "model",
    "fit",
    "residual",
    "baseline",
];

impl Column {
    /// A column named `velocity_km_s`, `velocity (km/s)` or `velocity [km/s]`.
    pub fn from_header(text: &str) -> Self {
        let text = text.trim();
        for (open, close) in [('(', ')'), ('[', ']')] {
            if let Some((name, unit)) = text
                .strip_suffix(close)
                .and_then(|rest| rest.split_once(open))
                && !name.trim().is_empty()
            {
                return Self {
                    name: name.trim().to_string(),
                    unit: Some(unit.trim().to_string()),
                };
            }
        }
        Self {
            name: text.to_string(),
            unit: None,
        }
    }

    /// The unknown unit of a column that by its name plays a part.
    fn unknown_unit(&self, role: &str) -> Option<UnknownUnit> {
        let (words, error): (&[&str], _) = if role.starts_with("velocity") {
            (
                &["v", "vel", "freq"],
                AxisUnit::parse(self.unit.as_deref()?).err(),
            )
        } else {
            (
                &["t", "flux", "data"],
                ValueUnit::parse(self.unit.as_deref()?).err(),
            )
        };
        let name = self.name.to_ascii_lowercase();
        words
            .iter()
            .any(|word| name.starts_with(word))
            .then_some(error)
            .flatten()
    }

    /// What the column is.
    ///
    /// # Errors
    ///
    /// The name's own unit contradicts the stated one.
    pub fn part(&self, path: &Path, place: &Place) -> Result<Part, ReadError> {
        let name = self.name.to_ascii_lowercase().replace([' ', '-'], "_");
        if name.split('_').any(|word| NOT_THE_SPECTRUM.contains(&word)) {
            return Ok(Part::Other);
        }
        let named = part_by_name(&name);
        let stated = match self.unit.as_deref().map(str::trim) {
            None | Some("") => return Ok(named.unwrap_or(Part::Other)),
            Some(unit) => unit,
        };
        let by_unit = part_by_unit(&name, stated);
        match (named, by_unit) {
            (None, by_unit) => Ok(by_unit.unwrap_or(Part::Other)),
            (Some(named), Some(by_unit)) if agree(&named, &by_unit) => Ok(named),
            (Some(_), _) => Err(ReadError::UnitContradictsName {
                path: path.to_path_buf(),
                place: place.clone(),
                column: self.name.clone(),
                unit: stated.to_string(),
            }),
        }
    }
}

/// Whether a name's own unit and the stated one are the same unit of the same quantity.
fn agree(named: &Part, stated: &Part) -> bool {
    match (named, stated) {
        (Part::Axis(a), Part::Axis(b)) => {
            let both_velocities = a.kind != AxisKind::Frequency && b.kind != AxisKind::Frequency;
            a.factor == b.factor && (a.kind == b.kind || (both_velocities && !b.convention_stated))
        }
        (Part::Value(a), Part::Value(b)) => a.factor == b.factor && b.leaves_open(*a),
        _ => false,
    }
}

impl ValueUnit {
    /// Whether another unit is this one, or this one with its scale stated.
    fn leaves_open(self, other: ValueUnit) -> bool {
        use BrightnessUnit::{JanskyPerBeam, Kelvin};
        self.unit == other.unit || (self.unit == Kelvin && other.unit != JanskyPerBeam)
    }
}

fn part_by_name(name: &str) -> Option<Part> {
    for (stem, convention) in AXIS_STEMS {
        if let Some(unit) = unit_of_suffix(name, stem, &AXIS_SUFFIXES) {
            let unit = AxisUnit::parse(&format!("{unit} {convention}")).ok()?;
            return Some(Part::Axis(unit));
        }
    }
    for (stem, scale) in VALUE_STEMS {
        if let Some(unit) = unit_of_suffix(name, stem, &VALUE_SUFFIXES) {
            let unit = ValueUnit::parse(&format!("{unit} {scale}")).ok()?;
            let flux = unit.unit == BrightnessUnit::JanskyPerBeam;
            return (flux == (stem == "flux")).then_some(Part::Value(unit));
        }
    }
    None
}

/// `km/s` of `velocity_km_s` for the stem `velocity`.
fn unit_of_suffix(
    name: &str,
    stem: &str,
    suffixes: &[(&str, &'static str)],
) -> Option<&'static str> {
    let suffix = suffix_of(name, stem)?;
    suffixes
        .iter()
        .find(|(known, _)| *known == suffix)
        .map(|(_, unit)| *unit)
}

/// `km_s` of `velocity_km_s` for the stem `velocity`; none where the name has no suffix.
fn suffix_of<'a>(name: &'a str, stem: &str) -> Option<&'a str> {
    name.strip_prefix(stem)?.strip_prefix('_')
}

fn part_by_unit(name: &str, unit: &str) -> Option<Part> {
    if let Ok(unit) = AxisUnit::parse(unit) {
        return Some(Part::Axis(on_convention_of(unit, name)));
    }
    let unit = ValueUnit::parse(unit).ok()?;
    Some(Part::Value(unit.on_scale_of(name)))
}

/// A velocity column whose unit names no convention, by its name.
fn on_convention_of(unit: AxisUnit, name: &str) -> AxisUnit {
    if unit.kind == AxisKind::Frequency || unit.convention_stated {
        return unit;
    }
    let kind = if name.contains("radio") || name == "vrad" {
        AxisKind::RadioVelocity
    } else if name.contains("optical") || name == "vopt" {
        AxisKind::OpticalVelocity
    } else if name.contains("relativistic") {
        AxisKind::RadialVelocity
    } else {
        return unit;
    };
    AxisUnit {
        kind,
        convention_stated: true,
        ..unit
    }
}

/// Chooses axis and values: by `choice` where given, by name and unit otherwise.
///
/// # Errors
///
/// A chosen column does not exist; no column, or more than one, plays a part; a unit is unknown.
pub(super) fn roles(
    path: &Path,
    place: &Place,
    columns: &[Column],
    choice: Option<&ColumnChoice>,
) -> Result<Roles, ReadError> {
    if let Some(choice) = choice {
        return Ok(Roles {
            axis: index_of(path, columns, &choice.axis)?,
            axis_unit: choice.axis_unit,
            value: index_of(path, columns, &choice.value)?,
            value_unit: choice.value_unit,
        });
    }
    let mut axes = Vec::new();
    let mut values = Vec::new();
    for (index, column) in columns.iter().enumerate() {
        match column.part(path, place)? {
            Part::Axis(unit) => axes.push((index, unit)),
            Part::Value(unit) => values.push((index, unit)),
            Part::Other => {}
        }
    }
    let (axis, axis_unit) = only(path, place, columns, &axes, "velocity or frequency")?;
    let (value, value_unit) = only(path, place, columns, &values, "temperature or flux")?;
    Ok(Roles {
        axis,
        axis_unit,
        value,
        value_unit,
    })
}

fn only<U: Copy>(
    path: &Path,
    place: &Place,
    columns: &[Column],
    candidates: &[(usize, U)],
    role: &'static str,
) -> Result<(usize, U), ReadError> {
    match candidates {
        [one] => Ok(*one),
        [] => Err(no_column_for(path, place, columns, role)),
        several => Err(ReadError::SeveralColumnsFor {
            path: path.to_path_buf(),
            place: place.clone(),
            role,
            columns: several
                .iter()
                .map(|(index, _)| format!("`{}`", columns[*index].name))
                .collect::<Vec<_>>()
                .join(", "),
        }),
    }
}

pub(super) fn no_column_for(
    path: &Path,
    place: &Place,
    columns: &[Column],
    role: &'static str,
) -> ReadError {
    let (expected, known): (_, &[&str]) = if role.starts_with("velocity") {
        ("`velocity_km_s` or `frequency_ghz`", &AXIS_NAMES)
    } else {
        ("`tmb_k` or `ta_k`", &VALUE_NAMES)
    };
    let has_stem = |name: &str| {
        let name = name.to_ascii_lowercase();
        known.iter().any(|known| {
            let stem = known.split('_').next().unwrap_or(known);
            suffix_of(&name, stem).is_some()
        })
    };
    if let Some(column) = columns.iter().find(|column| has_stem(&column.name)) {
        return ReadError::UnknownUnit {
            path: path.to_path_buf(),
            place: place.clone(),
            found: column.name.clone(),
            expected: known.join(", "),
            nearest: nearest(&column.name, known.iter().copied()),
        };
    }
    if let Some(unknown) = columns.iter().find_map(|column| column.unknown_unit(role)) {
        return unknown_unit(path, place, unknown);
    }
    ReadError::NoColumnFor {
        path: path.to_path_buf(),
        place: place.clone(),
        role,
        columns: list(columns),
        expected,
        nearest: columns
            .iter()
            .find_map(|column| nearest(&column.name, known.iter().copied())),
    }
}

/// Index of a column by number or name.
pub(super) fn index_of(
    path: &Path,
    columns: &[Column],
    key: &ColumnKey,
) -> Result<usize, ReadError> {
    let found = match key {
        ColumnKey::Number(number) => (*number <= columns.len()).then(|| number - 1),
        ColumnKey::Name(name) => columns
            .iter()
            .position(|column| column.name.trim().eq_ignore_ascii_case(name.trim())),
    };
    found.ok_or_else(|| ReadError::NoSuchColumn {
        path: path.to_path_buf(),
        wanted: key.to_string(),
        columns: list(columns),
        nearest: match key {
            ColumnKey::Number(_) => None,
            ColumnKey::Name(name) => {
                nearest(name, columns.iter().map(|column| column.name.as_str()))
            }
        },
    })
}

/// Column names for a message; numbers where they have none.
pub(super) fn list(columns: &[Column]) -> String {
    columns
        .iter()
        .enumerate()
        .map(|(index, column)| {
            if column.name.is_empty() {
                format!("{}", index + 1)
            } else {
                format!("`{}`", column.name)
            }
        })
        .collect::<Vec<_>>()
        .join(", ")
}

pub(super) fn unknown_unit(path: &Path, place: &Place, error: UnknownUnit) -> ReadError {
    ReadError::UnknownUnit {
        path: path.to_path_buf(),
        place: place.clone(),
        found: error.found,
        expected: error.expected,
        nearest: error.nearest,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn part(name: &str, unit: Option<&str>) -> Result<Part, ReadError> {
        let column = Column {
            name: name.into(),
            unit: unit.map(Into::into),
        };
        column.part(Path::new("f"), &Place::Line(1))
    }

    #[test]
    fn every_name_that_messages_offer_is_understood() {
        for name in AXIS_NAMES {
            assert!(matches!(part(name, None), Ok(Part::Axis(_))), "{name}");
        }
        for name in VALUE_NAMES {
            assert!(matches!(part(name, None), Ok(Part::Value(_))), "{name}");
        }
    }

    #[test]
    fn an_unknown_unit_in_a_name_is_answered_with_the_nearest_name() {
        let columns = ["velocity_kms", "tmb_k"].map(Column::from_header);
        let error = roles(Path::new("f"), &Place::Line(1), &columns, None).unwrap_err();
        assert!(error.to_string().contains("unknown unit `velocity_kms`"));
        assert_eq!(error.hint().unwrap(), "did you mean `velocity_km_s`?");
    }

    #[test]
    fn uncertainties_are_not_the_spectrum() {
        assert_eq!(part("tmb_err", Some("K")).unwrap(), Part::Other);
        assert_eq!(part("noise", Some("K")).unwrap(), Part::Other);
        assert_eq!(part("tmb_k_err", None).unwrap(), Part::Other);
    }

    #[test]
    fn a_name_gives_the_scale_or_convention_that_the_unit_leaves_open() {
        let Part::Value(value) = part("Ta*", Some("mK")).unwrap() else {
            panic!("not a value")
        };
        assert_eq!(value.unit, BrightnessUnit::AntennaKelvin);
        let Part::Axis(axis) = part("VOPT", Some("m s-1")).unwrap() else {
            panic!("not an axis")
        };
        assert_eq!(axis.kind, AxisKind::OpticalVelocity);
    }

    #[test]
    fn a_unit_against_the_name_is_refused() {
        assert!(part("velocity_km_s", Some("km / s")).is_ok());
        assert!(part("tmb_k", Some("K")).is_ok());
        let error = part("velocity_km_s", Some("m / s")).unwrap_err();
        assert!(
            error
                .to_string()
                .contains("column `velocity_km_s` has the unit `m / s`")
        );
        assert!(part("tmb_k", Some("mK")).is_err());
    }

    #[test]
    fn a_choice_of_columns_says_what_is_wrong_with_it() {
        let error = |text: &str| text.parse::<ColumnChoice>().unwrap_err().to_string();
        assert!(error("1:km/s").contains("1 part(s), expected two"));
        assert!(error("1,2:K").contains("`1` names no unit, expected COLUMN:UNIT"));
        assert!(error("0:km/s,2:K").contains("column `0`, expected a number from 1"));
        assert!(error("1:km/s,1:K").contains("as axis and as values"));
        assert!(error("1:kmh,2:K").contains("unknown unit `kmh`, expected one of km/s"));
        assert!(error(":km/s,2:K").contains("column ``"));
    }
}
