//! Tables of pointings: where each is, and which files hold its two spectra; or FITS tables of one line with
//! a spectrum a row and its place beside it.
//!
//! CSV with the columns `id`, `dx_arcsec` and `dy_arcsec` or `ra_deg` and `dec_deg`, `thick_file` and `thin_file`; `#`
//! begins a comment, other columns are passed over, paths are relative to the table.

use std::collections::HashMap;
use std::path::{Path, PathBuf};

use super::error::{Place, ReadError};
use super::{ReadOptions, bytes, fits, text};
use crate::spectrum::RawSpectrum;

/// Where a pointing is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum PointingPlace {
    /// East and north of the reference position, arcsec.
    Offset([f64; 2]),
    /// Right ascension and declination (ICRS), degrees.
    Sky([f64; 2]),
}

/// One pointing of a table.
#[derive(Clone, Debug, PartialEq)]
pub struct PointingFiles {
    /// Its name.
    pub id: String,
    /// Where it is; all of a table are of one kind.
    pub place: PointingPlace,
    /// Spectrum of the optically thick line.
    pub thick: PathBuf,
    /// Spectrum of the optically thin line.
    pub thin: PathBuf,
    /// Line of the table, from 1.
    pub line: usize,
}

/// One row of a FITS table of spectra.
#[derive(Clone, Debug, PartialEq)]
pub struct PointingSpectrum {
    /// Its `id` column, else its row's number.
    pub id: String,
    /// Where it is; all of a table are of one kind.
    pub place: PointingPlace,
    /// Row, from 1.
    pub row: usize,
    /// Its spectrum, or why there is none.
    pub spectrum: Result<RawSpectrum, ReadError>,
}

/// Reads a FITS binary table with a spectrum a row and its place in columns: `dx_arcsec` and `dy_arcsec`,
/// `ra_deg` and `dec_deg`, or `CRVAL2` and `CRVAL3`.
///
/// # Errors
///
/// [`ReadError`] where it is no such table. A row whose spectrum cannot be used is no error.
pub fn read_pointing_spectra(
    path: &Path,
    options: &ReadOptions,
) -> Result<Vec<PointingSpectrum>, ReadError> {
    let mut content = bytes::load(path)?;
    if content.starts_with(&bytes::GZIP_MAGIC) {
        content = bytes::unpack(path, &content)?;
    }
    fits::read_pointings(path, &content, options)
}

const OFFSETS: [&str; 2] = ["dx_arcsec", "dy_arcsec"];
const POSITION: [&str; 2] = ["ra_deg", "dec_deg"];

/// Pointings closer to each other than this are one position, arcsec.
const SAME_ARCSEC: f64 = 0.01;

/// Reads a table of pointings.
///
/// # Errors
///
/// [`ReadError`] with the line: a missing column, text in a number's place, a position or a name twice.
pub fn read_pointings(path: &Path) -> Result<Vec<PointingFiles>, ReadError> {
    let content = bytes::load(path)?;
    if content.is_empty() {
        return Err(ReadError::Empty {
            path: path.to_path_buf(),
        });
    }
    let text = text::decode(path, &content)?;
    let folder = path.parent().unwrap_or(Path::new(""));
    let mut rows = (text.lines().enumerate())
        .map(|(index, line)| (index + 1, line.trim()))
        .filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
    let Some((first, names)) = rows.next() else {
        return Err(no_rows(path));
    };
    let names = fields(path, first, names)?;
    let column = |name: &str| {
        let place = names
            .iter()
            .position(|found| found.eq_ignore_ascii_case(name));
        place.ok_or_else(|| ReadError::NoColumnFor {
            path: path.to_path_buf(),
            place: Place::Line(first),
            role: "pointing's",
            columns: names.join(", "),
            expected: "id, dx_arcsec and dy_arcsec (or ra_deg and dec_deg), thick_file and thin_file",
            nearest: super::unit::nearest(name, names.iter().map(String::as_str))
                .map(|_| name.to_owned()),
        })
    };
    let has = |name: &str| names.iter().any(|found| found.eq_ignore_ascii_case(name));
    let on_sky = POSITION.iter().all(|name| has(name));
    if on_sky && OFFSETS.iter().any(|name| has(name)) {
        return Err(ReadError::SeveralColumnsFor {
            path: path.to_path_buf(),
            place: Place::Line(first),
            role: "position",
            columns: "offsets as well as ra_deg and dec_deg".into(),
        });
    }
    let [x, y] = if on_sky { POSITION } else { OFFSETS };
    let (x_column, y_column) = (column(x)?, column(y)?);
    let (id, thick, thin) = (column("id")?, column("thick_file")?, column("thin_file")?);
    let mut pointings = Vec::new();
    for (line, row) in rows {
        let cells = fields(path, line, row)?;
        if cells.len() != names.len() {
            return Err(ReadError::FieldCount {
                path: path.to_path_buf(),
                line,
                found: cells.len(),
                expected: names.len(),
            });
        }
        let number = |column: usize| {
            let found = &cells[column];
            (found.parse::<f64>().ok().filter(|value| value.is_finite())).ok_or_else(|| {
                ReadError::NotANumber {
                    path: path.to_path_buf(),
                    place: Place::Line(line),
                    column: names[column].clone(),
                    found: found.clone(),
                }
            })
        };
        let at = [number(x_column)?, number(y_column)?];
        pointings.push(PointingFiles {
            id: cells[id].clone(),
            place: if on_sky {
                PointingPlace::Sky(at)
            } else {
                PointingPlace::Offset(at)
            },
            thick: folder.join(&cells[thick]),
            thin: folder.join(&cells[thin]),
            line,
        });
    }
    if pointings.is_empty() {
        return Err(no_rows(path));
    }
    refuse_repeated(path, &pointings)?;
    Ok(pointings)
}

fn no_rows(path: &Path) -> ReadError {
    ReadError::NoRows {
        path: path.to_path_buf(),
    }
}

/// The fields of a line of CSV, without blanks around them.
fn fields(path: &Path, line: usize, text: &str) -> Result<Vec<String>, ReadError> {
    let mut reader = csv::ReaderBuilder::new()
        .has_headers(false)
        .flexible(true)
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    match reader.records().next() {
        Some(Ok(record)) => Ok(record.iter().map(str::to_owned).collect()),
        _ => Err(ReadError::OneColumn {
            path: path.to_path_buf(),
            line,
            found: text.to_owned(),
        }),
    }
}

/// A name or a position twice.
fn refuse_repeated(path: &Path, pointings: &[PointingFiles]) -> Result<(), ReadError> {
    let mut names: HashMap<&str, usize> = HashMap::new();
    // Positions in cells as wide as what counts as one; neighbours are looked at too.
    let mut places: HashMap<(i64, i64), Vec<&PointingFiles>> = HashMap::new();
    for pointing in pointings {
        if let Some(before) = names.insert(&pointing.id, pointing.line) {
            return Err(ReadError::RepeatedPointing {
                path: path.to_path_buf(),
                line: pointing.line,
                what: format!("the name `{}`", pointing.id),
                before,
            });
        }
        let [x, y] = arcsec(pointing.place);
        // Far below 2^63.
        #[allow(clippy::cast_possible_truncation)]
        let cell = |value: f64| (value / SAME_ARCSEC).floor() as i64;
        let (i, j) = (cell(x), cell(y));
        for near in (-1..=1).flat_map(|a| (-1..=1).map(move |b| (i + a, j + b))) {
            let twin = places.get(&near).and_then(|there| {
                there.iter().find(|other| {
                    let [a, b] = arcsec(other.place);
                    (a - x).hypot(b - y) < SAME_ARCSEC
                })
            });
            if let Some(twin) = twin {
                return Err(ReadError::RepeatedPointing {
                    path: path.to_path_buf(),
                    line: pointing.line,
                    what: match pointing.place {
                        PointingPlace::Offset([x, y]) => format!("the position {x}, {y} arcsec"),
                        PointingPlace::Sky([x, y]) => format!("the position {x}, {y} deg"),
                    },
                    before: twin.line,
                });
            }
        }
        places.entry((i, j)).or_default().push(pointing);
    }
    Ok(())
}

/// A place in arcsec on a plane that keeps small distances along the parallel.
fn arcsec(place: PointingPlace) -> [f64; 2] {
    match place {
        PointingPlace::Offset(offset) => offset,
        PointingPlace::Sky([ra, dec]) => [ra * dec.to_radians().cos() * 3600.0, dec * 3600.0],
    }
}
