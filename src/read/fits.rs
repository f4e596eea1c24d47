//! FITS files (standard 4.0): finds the header-data units, checks every size that a header states
//! against the file before anything is allocated, and chooses the unit that holds the spectrum.

use std::io::{self, Cursor, Read, Seek, SeekFrom};
use std::path::Path;

use fitskit::Header;

use super::error::{Place, ReadError};
use super::pointings::PointingSpectrum;
use super::unit::{AxisUnit, ValueUnit};
use super::{Draft, ReadOptions, fits_image, fits_table};
use crate::spectrum::{AxisKind, BeamArcsec, Frame, RawSpectrum};

/// First bytes of every FITS file.
pub(super) const MAGIC: &[u8] = b"SIMPLE  =";

const BLOCK_BYTES: usize = 2880;
const CARD_BYTES: usize = 80;
/// Most axes, and most table columns, that the standard allows.
const LIMIT_AXES: i64 = 999;

/// One header-data unit whose stated sizes lie within the file.
pub(super) struct Unit<'a> {
    /// Number from 0.
    pub number: usize,
    /// Cards.
    pub header: Header,
    /// Lengths of the axes.
    pub axes: Vec<usize>,
    /// The data, without padding; nothing where they stay in the file.
    pub data: &'a [u8],
    /// Where the data begin in the file, and their length.
    pub place: DataPlace,
}

/// A unit's data in its file, bytes, without padding.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct DataPlace {
    pub start: u64,
    pub length: u64,
}

/// What a unit is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Content {
    Empty,
    Image,
    Table,
    TileCompressed,
    Other,
}

/// Reads the spectrum of a FITS file.
pub(super) fn read(
    path: &Path,
    bytes: &[u8],
    options: &ReadOptions,
) -> Result<RawSpectrum, ReadError> {
    let units = units(path, bytes)?;
    let unit = choose(path, &units, options)?;
    match unit.content() {
        Content::Image => {
            if let Some(choice) = &options.select {
                return Err(ReadError::RowChoiceUnused {
                    path: path.to_path_buf(),
                    wanted: choice.to_string(),
                });
            }
            fits_image::read(path, unit, options)
        }
        Content::Table => fits_table::read(path, unit, options),
        Content::TileCompressed => Err(ReadError::FitsTileCompressed {
            path: path.to_path_buf(),
            unit: unit.number,
        }),
        Content::Empty | Content::Other => Err(no_spectrum(path, &units)),
    }
}

/// Reads every spectrum of a binary table with one a row.
pub(super) fn read_pointings(
    path: &Path,
    bytes: &[u8],
    options: &ReadOptions,
) -> Result<Vec<PointingSpectrum>, ReadError> {
    let units = units(path, bytes)?;
    let unit = choose(path, &units, options)?;
    match unit.content() {
        Content::Table => fits_table::read_pointings(path, unit, options),
        _ => Err(no_spectrum(path, &units)),
    }
}

impl Unit<'_> {
    pub fn content(&self) -> Content {
        let extension = self.header.get_string("XTENSION").map(str::trim);
        match extension {
            _ if self.place.length == 0 => Content::Empty,
            None | Some("IMAGE") => Content::Image,
            Some("BINTABLE") if self.header.get_bool("ZIMAGE") == Some(true) => {
                Content::TileCompressed
            }
            Some("BINTABLE") => Content::Table,
            Some(_) => Content::Other,
        }
    }

    pub fn describe(&self) -> String {
        let what = match self.content() {
            Content::Empty => "no data".to_string(),
            Content::Image => {
                let axes: Vec<String> = self.axes.iter().map(ToString::to_string).collect();
                format!("image of {}", axes.join(" x "))
            }
            Content::Table => format!("table of {} rows", self.axes.get(1).unwrap_or(&0)),
            Content::TileCompressed => "tile-compressed image".to_string(),
            Content::Other => format!(
                "extension of type {}",
                self.header.get_string("XTENSION").unwrap_or("?").trim()
            ),
        };
        format!("HDU {}: {what}", self.number)
    }

    /// A keyword of this unit as a place.
    pub fn card(&self, keyword: &str) -> Place {
        Place::Card {
            unit: self.number,
            keyword: keyword.to_string(),
        }
    }

    /// A text keyword without trailing blanks; none where it is empty.
    pub fn text(&self, keyword: &str) -> Option<String> {
        let text = self.header.get_string(keyword)?.trim();
        (!text.is_empty()).then(|| text.to_string())
    }

    /// The value of a number card, if the card is there.
    ///
    /// # Errors
    ///
    /// The card holds something else.
    pub fn number(&self, path: &Path, keyword: &str) -> Result<Option<f64>, ReadError> {
        let Some(card) = self.header.find(keyword) else {
            return Ok(None);
        };
        match self.header.get_float(keyword) {
            Some(value) if value.is_finite() => Ok(Some(value)),
            _ => Err(self.wrong_card(path, keyword, shown(card), "a number")),
        }
    }

    /// RESTFRQ or, older, RESTFREQ; zero stands for none.
    pub fn rest_frequency_hz(&self, path: &Path) -> Result<Option<f64>, ReadError> {
        let rest = match self.number(path, "RESTFRQ")? {
            Some(rest) => Some(rest),
            None => self.number(path, "RESTFREQ")?,
        };
        Ok(rest.filter(|rest| *rest != 0.0))
    }

    pub fn wrong_card(
        &self,
        path: &Path,
        keyword: &str,
        found: String,
        expected: &str,
    ) -> ReadError {
        ReadError::FitsCard {
            path: path.to_path_buf(),
            unit: self.number,
            keyword: keyword.to_string(),
            found,
            expected: expected.to_string(),
        }
    }

    /// A draft with what the header states of beam, object and rest frequency.
    pub fn draft(
        &self,
        path: &Path,
        format: &str,
        axis_unit: AxisUnit,
        value_unit: ValueUnit,
    ) -> Result<Draft, ReadError> {
        let major = self.number(path, "BMAJ")?;
        let minor = self.number(path, "BMIN")?;
        Ok(Draft {
            format: format.to_string(),
            axis_unit,
            value_unit,
            rest_frequency_hz: self.rest_frequency_hz(path)?,
            frame: self.text("SPECSYS").map(|name| Frame::from_name(&name)),
            beam: major.map(|major| BeamArcsec {
                major: major * 3600.0,
                minor: minor.unwrap_or(major) * 3600.0,
            }),
            object: self.text("OBJECT"),
        })
    }
}

/// Unit of an axis that is already in Hz or m/s.
pub(super) fn base_unit(kind: AxisKind, convention_stated: bool) -> AxisUnit {
    AxisUnit {
        kind,
        factor: 1.0,
        convention_stated,
    }
}

/// Unit of values that a caller gives, or a text states; `None` where neither does.
pub(super) fn value_unit(
    path: &Path,
    place: &Place,
    stated: Option<&str>,
    options: &ReadOptions,
) -> Result<ValueUnit, ReadError> {
    match (options.value_unit, stated) {
        (Some(unit), _) => Ok(unit),
        (None, Some(text)) => {
            ValueUnit::parse(text).map_err(|error| super::columns::unknown_unit(path, place, error))
        }
        (None, None) => Err(ReadError::NoUnit {
            path: path.to_path_buf(),
            place: place.clone(),
            role: "values",
            expected: "K, mK, K (TA*), Jy/beam",
        }),
    }
}

/// A card's value for a message.
pub(super) fn shown(card: &fitskit::Keyword) -> String {
    match &card.value {
        Some(value) => value.to_string(),
        None => "nothing".to_string(),
    }
}

/// The unit to read: the caller's, or the only one with data.
fn choose<'u, 'a>(
    path: &Path,
    units: &'u [Unit<'a>],
    options: &ReadOptions,
) -> Result<&'u Unit<'a>, ReadError> {
    if let Some(number) = options.hdu {
        return units.get(number).ok_or_else(|| no_spectrum(path, units));
    }
    only(path, units, |unit| unit.content() != Content::Empty)
}

/// The one unit that is `wanted`.
pub(super) fn only<'a, 'b>(
    path: &Path,
    units: &'b [Unit<'a>],
    wanted: impl Fn(&Unit<'a>) -> bool,
) -> Result<&'b Unit<'a>, ReadError> {
    let found: Vec<&Unit> = units.iter().filter(|unit| wanted(unit)).collect();
    match found.as_slice() {
        [one] => Ok(one),
        [] => Err(no_spectrum(path, units)),
        several => Err(ReadError::FitsSeveralUnits {
            path: path.to_path_buf(),
            units: several
                .iter()
                .map(|unit| unit.describe())
                .collect::<Vec<_>>()
                .join("; "),
        }),
    }
}

pub(super) fn no_spectrum(path: &Path, units: &[Unit<'_>]) -> ReadError {
    ReadError::FitsNoSpectrum {
        path: path.to_path_buf(),
        units: units
            .iter()
            .map(Unit::describe)
            .collect::<Vec<_>>()
            .join("; "),
    }
}

/// All header-data units, each checked against the length of the file.
fn units<'a>(path: &Path, bytes: &'a [u8]) -> Result<Vec<Unit<'a>>, ReadError> {
    let mut units = scan(path, &mut Cursor::new(bytes), bytes.len() as u64)?;
    for unit in &mut units {
        // The scan found both within `bytes`.
        let [start, length] = [unit.place.start, unit.place.length]
            .map(|place| usize::try_from(place).unwrap_or(usize::MAX));
        unit.data = &bytes[start..start + length];
    }
    Ok(units)
}

/// All header-data units of a file of `file_bytes`, their data left where they are.
pub(super) fn scan<'a>(
    path: &Path,
    file: &mut (impl Read + Seek),
    file_bytes: u64,
) -> Result<Vec<Unit<'a>>, ReadError> {
    let failed = |error: io::Error| ReadError::Unreadable {
        path: path.to_path_buf(),
        reason: error.to_string(),
    };
    let mut units = Vec::new();
    let mut start = 0;
    loop {
        let number = units.len();
        file.seek(SeekFrom::Start(start)).map_err(failed)?;
        let Some(cards) = header_cards(path, number, file)? else {
            return Ok(units);
        };
        let header = Header::read_from(&mut cards.as_slice())
            .map_err(|_| damaged_card(path, number, &cards))?;
        let axes = axes(path, number, &header)?;
        let needed = data_bytes(path, number, &header, &axes)?;
        let data_start = start + cards.len() as u64;
        let left = file_bytes.saturating_sub(data_start);
        let length = u64::try_from(needed)
            .ok()
            .filter(|length| *length <= left)
            .ok_or_else(|| truncated(path, number, &header, needed, left))?;
        units.push(Unit {
            number,
            header,
            axes,
            data: &[],
            place: DataPlace {
                start: data_start,
                length,
            },
        });
        start = data_start + length.div_ceil(BLOCK_BYTES as u64) * BLOCK_BYTES as u64;
    }
}

/// The bytes of a header in whole blocks: up to END, printable ASCII throughout. None at the end of the
/// file: what follows the last unit without starting an extension is no part of the standard's files.
fn header_cards(
    path: &Path,
    unit: usize,
    file: &mut impl Read,
) -> Result<Option<Vec<u8>>, ReadError> {
    let mut bytes = Vec::new();
    let mut cards = 0;
    loop {
        let start = bytes.len();
        (file
            .by_ref()
            .take(BLOCK_BYTES as u64)
            .read_to_end(&mut bytes))
        .map_err(|error| ReadError::Unreadable {
            path: path.to_path_buf(),
            reason: error.to_string(),
        })?;
        let block = &bytes[start..];
        if start == 0 && unit > 0 && !block.starts_with(b"XTENSION") {
            return Ok(None);
        }
        if block.len() < BLOCK_BYTES {
            return Err(ReadError::FitsNoEnd {
                path: path.to_path_buf(),
                unit,
                cards: bytes.len() / CARD_BYTES,
            });
        }
        for card in block.chunks_exact(CARD_BYTES) {
            cards += 1;
            if let Some(&found) = card.iter().find(|byte| !matches!(byte, b' '..=b'~')) {
                return Err(ReadError::FitsHeaderByte {
                    path: path.to_path_buf(),
                    unit,
                    card: cards,
                    found,
                });
            }
            if card.starts_with(b"END     ") {
                return Ok(Some(bytes));
            }
        }
    }
}

/// The first card that cannot be understood.
fn damaged_card(path: &Path, unit: usize, header: &[u8]) -> ReadError {
    let (cards, _) = header.as_chunks::<CARD_BYTES>();
    let damaged = cards
        .iter()
        .find(|card| fitskit::Keyword::parse(card).is_err())
        .map(|card| String::from_utf8_lossy(card).trim_end().to_string())
        .unwrap_or_default();
    ReadError::FitsCard {
        path: path.to_path_buf(),
        unit,
        keyword: damaged.chars().take(8).collect::<String>().trim().into(),
        found: format!("`{damaged}`"),
        expected: "a card such as KEYWORD = 'text' or KEYWORD = 1.5".into(),
    }
}

/// A whole number from a card, within limits.
pub(super) fn whole(
    path: &Path,
    unit: usize,
    header: &Header,
    keyword: &str,
    (low, high): (i64, i64),
) -> Result<usize, ReadError> {
    let wrong = |found: String| ReadError::FitsCard {
        path: path.to_path_buf(),
        unit,
        keyword: keyword.to_string(),
        found,
        expected: match high {
            i64::MAX => format!("a whole number from {low}"),
            _ => format!("a whole number from {low} to {high}"),
        },
    };
    let card = header
        .find(keyword)
        .ok_or_else(|| wrong("no such card".into()))?;
    header
        .get_int(keyword)
        .filter(|value| (low..=high).contains(value))
        .and_then(|value| usize::try_from(value).ok())
        .ok_or_else(|| wrong(shown(card)))
}

fn axes(path: &Path, unit: usize, header: &Header) -> Result<Vec<usize>, ReadError> {
    let count = whole(path, unit, header, "NAXIS", (0, LIMIT_AXES))?;
    (1..=count)
        .map(|axis| whole(path, unit, header, &format!("NAXIS{axis}"), (0, i64::MAX)))
        .collect()
}

/// Bytes of data that a header states (FITS 4.0, equation 2).
fn data_bytes(
    path: &Path,
    unit: usize,
    header: &Header,
    axes: &[usize],
) -> Result<u128, ReadError> {
    let bits = header.get_int("BITPIX");
    if !matches!(bits, Some(8 | 16 | 32 | 64 | -32 | -64)) {
        return Err(ReadError::FitsCard {
            path: path.to_path_buf(),
            unit,
            keyword: "BITPIX".into(),
            found: header
                .find("BITPIX")
                .map_or_else(|| "no such card".into(), shown),
            expected: "8, 16, 32, 64, -32 or -64".into(),
        });
    }
    let optional = |keyword: &str, missing: usize| match header.find(keyword) {
        None => Ok(missing),
        Some(_) => whole(path, unit, header, keyword, (0, i64::MAX)),
    };
    let parameters = optional("PCOUNT", 0)? as u128;
    let groups = optional("GCOUNT", 1)? as u128;
    if axes.is_empty() {
        return Ok(0);
    }
    let elements = axes.iter().fold(1_u128, |product, &axis| {
        product.saturating_mul(axis as u128)
    });
    let bytes = u128::from(bits.unwrap_or(8).unsigned_abs() / 8);
    Ok(bytes
        .saturating_mul(groups)
        .saturating_mul(elements.saturating_add(parameters)))
}

fn truncated(path: &Path, unit: usize, header: &Header, needed: u128, left: u64) -> ReadError {
    let shape: Vec<String> = header
        .iter()
        .filter(|card| {
            card.name == "BITPIX" || card.name.starts_with("NAXIS") || card.name == "PCOUNT"
        })
        .map(|card| format!("{} = {}", card.name, shown(card)))
        .collect();
    ReadError::FitsTruncated {
        path: path.to_path_buf(),
        unit,
        shape: shape.join(", "),
        needed_bytes: needed,
        found_bytes: left,
    }
}
