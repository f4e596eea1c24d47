//! A FITS image of one spectrum: one axis longer than 1, which is spectral.

use std::path::Path;

use fitskit::{ImageData, PixelData};

use super::ReadOptions;
use super::error::{Place, ReadError};
use super::fits::{Unit, base_unit, value_unit};
use super::spectral_axis::{self, AxisProblem, Keywords, SpectralAxis};
use super::unit::AxisUnit;
use crate::spectrum::{AxisKind, RawSpectrum};

/// Reads the spectrum of an image.
pub(super) fn read(
    path: &Path,
    unit: &Unit<'_>,
    options: &ReadOptions,
) -> Result<RawSpectrum, ReadError> {
    let axis_number = spectral_axis_number(path, unit)?;
    let channels = unit.axes[axis_number - 1];
    let axis = image_axis(path, unit, axis_number, channels)?;
    let place = unit.card("BUNIT");
    let value_unit = value_unit(path, &place, unit.text("BUNIT").as_deref(), options)?;
    let values = pixels(path, unit)?;
    let mut draft = unit.draft(
        path,
        "FITS image",
        base_unit(axis.kind, axis.convention_stated),
        value_unit,
    )?;
    draft.frame = draft.frame.or(axis.frame);
    let number = unit.number;
    draft.finish(path, axis.values, values, |channel| Place::Channel {
        unit: number,
        channel: channel + 1,
    })
}

/// Number from 1 of the axis longer than 1; the first spectral one where none is longer.
fn spectral_axis_number(path: &Path, unit: &Unit<'_>) -> Result<usize, ReadError> {
    let long: Vec<usize> = (1..=unit.axes.len())
        .filter(|number| unit.axes[number - 1] > 1)
        .collect();
    match long.as_slice() {
        [one] => Ok(*one),
        [] => Err(ReadError::TooFewChannels {
            path: path.to_path_buf(),
            channels: 1,
        }),
        _ => Err(ReadError::FitsManyAxes {
            path: path.to_path_buf(),
            unit: unit.number,
            shape: unit
                .axes
                .iter()
                .map(ToString::to_string)
                .collect::<Vec<_>>()
                .join(" x "),
        }),
    }
}

/// The axis n from the keywords `CTYPEn`, `CRVALn`, `CDELTn` or `CDn_n`, `CRPIXn` and `CUNITn`.
pub(super) fn image_axis(
    path: &Path,
    unit: &Unit<'_>,
    number: usize,
    channels: usize,
) -> Result<SpectralAxis, ReadError> {
    let name = |stem: &str| format!("{stem}{number}");
    let needed = |keyword: &str| {
        unit.number(path, keyword)?
            .ok_or_else(|| unit.wrong_card(path, keyword, "no such card".into(), "a number"))
    };
    let kind = unit.text(&name("CTYPE")).unwrap_or_default();
    if !spectral_axis::is_spectral(&kind) {
        return Err(axis_type(path, unit, &name("CTYPE"), &kind));
    }
    let diagonal = format!("CD{number}_{number}");
    let increment = if let Some(increment) = unit.number(path, &diagonal)? {
        increment
    } else {
        let scale = unit.number(path, &format!("PC{number}_{number}"))?;
        needed(&name("CDELT"))? * scale.unwrap_or(1.0)
    };
    if increment == 0.0 {
        return Err(unit.wrong_card(path, &name("CDELT"), "0".into(), "a number other than 0"));
    }
    refuse_rotation(path, unit, number)?;
    let factor = axis_factor(
        path,
        &unit.card(&name("CUNIT")),
        &kind,
        unit.text(&name("CUNIT")).as_deref(),
    )?;
    let keywords = Keywords {
        kind: kind.clone(),
        reference_value: needed(&name("CRVAL"))? * factor,
        increment: increment * factor,
        reference_channel: needed(&name("CRPIX"))?,
        rest_frequency_hz: unit.rest_frequency_hz(path)?,
        velocity_reference: velocity_reference(path, unit, unit.number(path, "VELREF")?)?,
    };
    spectral_axis::decode(channels, &keywords)
        .map_err(|problem| axis_problem(path, unit, &name("CTYPE"), &kind, problem))
}

/// A VELREF, which is a small whole number.
pub(super) fn velocity_reference(
    path: &Path,
    unit: &Unit<'_>,
    stated: Option<f64>,
) -> Result<Option<u16>, ReadError> {
    let Some(stated) = stated else {
        return Ok(None);
    };
    (0..512_u16)
        .find(|code| f64::from(*code) == stated)
        .map(Some)
        .ok_or_else(|| {
            let expected = "a whole number from 0 to 511 (1 is LSRK, plus 256 for radio)";
            unit.wrong_card(path, "VELREF", stated.to_string(), expected)
        })
}

/// An axis that turns with another one is none of a single spectrum.
fn refuse_rotation(path: &Path, unit: &Unit<'_>, number: usize) -> Result<(), ReadError> {
    for other in (1..=unit.axes.len()).filter(|other| *other != number) {
        for stem in ["CD", "PC"] {
            let keyword = format!("{stem}{number}_{other}");
            if let Some(value) = unit.number(path, &keyword)?
                && value != 0.0
            {
                return Err(unit.wrong_card(
                    path,
                    &keyword,
                    value.to_string(),
                    "0: a spectral axis independent of the others",
                ));
            }
        }
    }
    Ok(())
}

/// Factor of a CUNIT to Hz or m/s; without one the axis is in these (FITS 4.0, section 8.4).
pub(super) fn axis_factor(
    path: &Path,
    place: &Place,
    kind: &str,
    stated: Option<&str>,
) -> Result<f64, ReadError> {
    let Some(text) = stated else {
        return Ok(1.0);
    };
    let unit =
        AxisUnit::parse(text).map_err(|error| super::columns::unknown_unit(path, place, error))?;
    let of_frequency = kind.trim().to_ascii_uppercase().starts_with("FREQ");
    if of_frequency != (unit.kind == AxisKind::Frequency) {
        return Err(ReadError::UnknownUnit {
            path: path.to_path_buf(),
            place: place.clone(),
            found: text.to_string(),
            expected: if of_frequency {
                "Hz, kHz, MHz, GHz, THz".into()
            } else {
                "km/s, m/s".into()
            },
            nearest: None,
        });
    }
    Ok(unit.factor)
}

fn axis_type(path: &Path, unit: &Unit<'_>, keyword: &str, found: &str) -> ReadError {
    ReadError::FitsAxisType {
        path: path.to_path_buf(),
        unit: unit.number,
        keyword: keyword.to_string(),
        found: found.to_string(),
    }
}

/// A problem of the axis as the card that caused it.
pub(super) fn axis_problem(
    path: &Path,
    unit: &Unit<'_>,
    keyword: &str,
    kind: &str,
    problem: AxisProblem,
) -> ReadError {
    match problem {
        AxisProblem::Type => axis_type(path, unit, keyword, kind),
        AxisProblem::NoRestFrequency => unit.wrong_card(
            path,
            "RESTFRQ",
            "no such card".into(),
            &format!("a rest frequency, which the axis type {kind} needs"),
        ),
        AxisProblem::OutOfRange => unit.wrong_card(
            path,
            keyword,
            format!("{kind} with channels at no possible frequency"),
            "a reference value and increment that keep all frequencies positive",
        ),
    }
}

/// Pixel values with BSCALE and BZERO applied; `NaN` where an integer pixel is BLANK.
fn pixels(path: &Path, unit: &Unit<'_>) -> Result<Vec<f64>, ReadError> {
    let scale = unit.number(path, "BSCALE")?.unwrap_or(1.0);
    let zero = unit.number(path, "BZERO")?.unwrap_or(0.0);
    let blank = unit.header.get_int("BLANK");
    let expected = unit.axes.iter().product::<usize>();
    let image = ImageData::from_header_and_data(&unit.header, unit.data).map_err(|error| {
        unit.wrong_card(
            path,
            "BITPIX",
            error.to_string(),
            "an image that can be decoded",
        )
    })?;
    let integer = |pixel: i64| {
        if Some(pixel) == blank {
            f64::NAN
        } else {
            zero + scale * pixel as f64
        }
    };
    let float = |pixel: f64| zero + scale * pixel;
    let mut values: Vec<f64> = match &image.pixels {
        PixelData::U8(pixels) => pixels.iter().map(|&pixel| integer(pixel.into())).collect(),
        PixelData::I16(pixels) => pixels.iter().map(|&pixel| integer(pixel.into())).collect(),
        PixelData::I32(pixels) => pixels.iter().map(|&pixel| integer(pixel.into())).collect(),
        PixelData::I64(pixels) => pixels.iter().map(|&pixel| integer(pixel)).collect(),
        PixelData::F32(pixels) => pixels.iter().map(|&pixel| float(pixel.into())).collect(),
        PixelData::F64(pixels) => pixels.iter().map(|&pixel| float(pixel)).collect(),
    };
    // GCOUNT and PCOUNT may state more than the pixels.
    values.truncate(expected);
    Ok(values)
}
