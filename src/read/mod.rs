//! Files into spectra as they state themselves, one file per format: CSV, ECSV, plain columns, FITS
//! images and binary tables, each also as gzip.
//!
//! The format is told from the content; nothing is converted, averaged or interpolated here. What
//! the values mean on one common scale is for [`crate::prepare`].

mod bytes;
mod columns;
mod csv;
pub mod cube;
mod ecsv;
mod error;
mod fits;
mod fits_image;
mod fits_table;
mod plain;
pub mod pointings;
pub mod sky;
mod spectral_axis;
mod text;
mod unit;

use std::fmt;
use std::path::Path;
use std::str::FromStr;

pub use bytes::load;
pub use columns::{ColumnChoice, ColumnChoiceError, ColumnKey};
pub use error::{Place, ReadError};
pub use unit::{AxisUnit, UnknownUnit, ValueUnit};

use crate::spectrum::{BeamArcsec, Frame, Origin, RawSpectrum};
use columns::Roles;

/// What the caller knows about a file; the default is to know nothing.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct ReadOptions {
    /// Columns of axis and values in a text or a table, where names and units do not tell.
    pub columns: Option<ColumnChoice>,
    /// The row of a FITS table that holds one spectrum a row.
    pub select: Option<RowChoice>,
    /// The FITS header-data unit, from 0 (the primary one), where several hold data.
    pub hdu: Option<usize>,
    /// Unit of the values of a FITS file that states none.
    pub value_unit: Option<ValueUnit>,
}

/// One row of a table of spectra: `3`, or `SOURCE=clump-a`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum RowChoice {
    /// Row number from 1.
    Number(usize),
    /// The row where a column has a value.
    Value {
        /// Column name, upper and lower case alike.
        column: String,
        /// Its value: text without surrounding blanks, or a number.
        value: String,
    },
}

impl fmt::Display for RowChoice {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            RowChoice::Number(number) => write!(formatter, "{number}"),
            RowChoice::Value { column, value } => write!(formatter, "{column}={value}"),
        }
    }
}

/// A text that chooses no row.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("`{found}` chooses no row, expected a row number from 1 or COLUMN=VALUE")]
pub struct RowChoiceError {
    /// The text.
    pub found: String,
}

impl FromStr for RowChoice {
    type Err = RowChoiceError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        if let Some((column, value)) = text.split_once('=')
            && !column.trim().is_empty()
        {
            return Ok(RowChoice::Value {
                column: column.trim().to_string(),
                value: value.trim().to_string(),
            });
        }
        match text.trim().parse() {
            Ok(number) if number > 0 => Ok(RowChoice::Number(number)),
            _ => Err(RowChoiceError {
                found: text.to_string(),
            }),
        }
    }
}

/// Reads one spectrum from a file of any supported format.
///
/// # Errors
///
/// [`ReadError`] names the file, the line, row or card, what was found and what was expected.
///
/// ```
/// use inrush::read::{ReadOptions, read_spectrum};
/// let error = read_spectrum("missing.fits".as_ref(), &ReadOptions::default()).unwrap_err();
/// assert_eq!(error.to_string(), "missing.fits: no such file");
/// ```
pub fn read_spectrum(path: &Path, options: &ReadOptions) -> Result<RawSpectrum, ReadError> {
    spectrum_from_bytes(path, &bytes::load(path)?, options)
}

/// Reads one spectrum from the content of a file, packed or not; `path` serves messages only.
///
/// # Errors
///
/// As [`read_spectrum`].
///
/// ```
/// use inrush::read::{ReadOptions, spectrum_from_bytes};
/// let text = b"frequency_ghz,ta_mk\n89.188,120\n89.189,80\n";
/// let raw = spectrum_from_bytes("clump.csv".as_ref(), text, &ReadOptions::default())?;
/// assert_eq!(raw.axis, [89.188e9, 89.189e9]);
/// assert_eq!(raw.values, [0.12, 0.08]);
/// # Ok::<(), inrush::read::ReadError>(())
/// ```
pub fn spectrum_from_bytes(
    path: &Path,
    content: &[u8],
    options: &ReadOptions,
) -> Result<RawSpectrum, ReadError> {
    if content.is_empty() {
        return Err(ReadError::Empty {
            path: path.to_path_buf(),
        });
    }
    if content.starts_with(&bytes::GZIP_MAGIC) {
        return from_bytes(path, &bytes::unpack(path, content)?, options);
    }
    from_bytes(path, content, options)
}

fn from_bytes(
    path: &Path,
    content: &[u8],
    options: &ReadOptions,
) -> Result<RawSpectrum, ReadError> {
    if content.starts_with(fits::MAGIC) {
        return fits::read(path, content, options);
    }
    let text = text::decode(path, content)?;
    if is_named_fits(path) {
        let first = text.trim().lines().next().unwrap_or_default();
        return Err(ReadError::NotFits {
            path: path.to_path_buf(),
            found: first.chars().take(20).collect(),
        });
    }
    let lines = text::lines(text);
    let rows = text::data_lines(&lines);
    let Some(&first) = rows.first() else {
        return Err(if text.trim().is_empty() {
            ReadError::Empty {
                path: path.to_path_buf(),
            }
        } else {
            ReadError::NoRows {
                path: path.to_path_buf(),
            }
        });
    };
    let (draft, channels) = if text.starts_with(ecsv::MAGIC) {
        ecsv::read(path, &lines, options)?
    } else if plain::is_numbers(path, first)? {
        plain::read(path, &rows, options)?
    } else {
        csv::read(path, &rows, options)?
    };
    if let Some(choice) = &options.select {
        return Err(ReadError::RowChoiceUnused {
            path: path.to_path_buf(),
            wanted: choice.to_string(),
        });
    }
    let lines = channels.lines;
    draft.finish(path, channels.axis, channels.values, |channel| {
        Place::Line(lines[channel])
    })
}

/// Whether a name promises FITS, so that text in the file is something else gone wrong.
fn is_named_fits(path: &Path) -> bool {
    let name = path.to_string_lossy().to_ascii_lowercase();
    let name = name.strip_suffix(".gz").unwrap_or(&name);
    [".fits", ".fit", ".fts"]
        .iter()
        .any(|ending| name.ends_with(ending))
}

/// A spectrum whose arrays are not checked yet.
struct Draft {
    format: String,
    axis_unit: AxisUnit,
    value_unit: ValueUnit,
    rest_frequency_hz: Option<f64>,
    frame: Option<Frame>,
    beam: Option<BeamArcsec>,
    object: Option<String>,
}

impl Draft {
    /// A draft that states units only.
    fn new(format: &str, roles: &Roles) -> Self {
        Self {
            format: format.to_string(),
            axis_unit: roles.axis_unit,
            value_unit: roles.value_unit,
            rest_frequency_hz: None,
            frame: None,
            beam: None,
            object: None,
        }
    }

    /// What a cube's file states of every spectrum: the axis is checked, there are no values.
    fn without_values(self, path: &Path, axis: Vec<f64>) -> Result<RawSpectrum, ReadError> {
        check_axis(path, &axis, |channel| Place::Channel {
            unit: 0,
            channel: channel + 1,
        })?;
        Ok(self.raw(path, axis, Vec::new()))
    }

    /// Checks the arrays (in the file's units) and applies the units.
    fn finish(
        self,
        path: &Path,
        axis: Vec<f64>,
        values: Vec<f64>,
        place_of: impl Fn(usize) -> Place,
    ) -> Result<RawSpectrum, ReadError> {
        check_axis(path, &axis, place_of)?;
        check_values(path, &values)?;
        Ok(self.raw(path, axis, values))
    }

    /// Applies the units.
    fn raw(self, path: &Path, axis: Vec<f64>, values: Vec<f64>) -> RawSpectrum {
        let scaled = |array: Vec<f64>, factor: f64| -> Vec<f64> {
            array.into_iter().map(|value| value * factor).collect()
        };
        RawSpectrum {
            axis_kind: self.axis_unit.kind,
            convention_stated: self.axis_unit.convention_stated,
            axis: scaled(axis, self.axis_unit.factor),
            values: scaled(values, self.value_unit.factor)
                .into_iter()
                .map(|value| if value.is_finite() { value } else { f64::NAN })
                .collect(),
            unit: self.value_unit.unit,
            rest_frequency_hz: self.rest_frequency_hz,
            frame: self.frame,
            beam: self.beam,
            object: self.object,
            origin: Origin {
                path: path.to_path_buf(),
                format: self.format,
            },
        }
    }
}

/// The axis has at least two channels, all finite, strictly ascending or strictly descending.
fn check_axis(
    path: &Path,
    axis: &[f64],
    place_of: impl Fn(usize) -> Place,
) -> Result<(), ReadError> {
    if axis.len() < 2 {
        return Err(ReadError::TooFewChannels {
            path: path.to_path_buf(),
            channels: axis.len(),
        });
    }
    if let Some(blank) = axis.iter().position(|value| !value.is_finite()) {
        return Err(ReadError::BlankAxis {
            path: path.to_path_buf(),
            place: place_of(blank),
        });
    }
    let ascending = axis[1] > axis[0];
    for (index, pair) in axis.windows(2).enumerate() {
        let (previous, value) = (pair[0], pair[1]);
        if value == previous {
            return Err(ReadError::RepeatedAxis {
                path: path.to_path_buf(),
                place: place_of(index + 1),
                value,
            });
        }
        if (value > previous) != ascending {
            return Err(ReadError::UnsortedAxis {
                path: path.to_path_buf(),
                place: place_of(index + 1),
                value,
                previous,
            });
        }
    }
    Ok(())
}

/// At least two different numbers are among the values.
fn check_values(path: &Path, values: &[f64]) -> Result<(), ReadError> {
    let mut usable = values.iter().filter(|value| value.is_finite());
    let Some(&first) = usable.next() else {
        return Err(ReadError::AllBlank {
            path: path.to_path_buf(),
            channels: values.len(),
        });
    };
    let others = usable.clone().count();
    if usable.all(|&value| value == first) {
        return Err(ReadError::Constant {
            path: path.to_path_buf(),
            channels: others + 1,
            value: first,
        });
    }
    Ok(())
}
