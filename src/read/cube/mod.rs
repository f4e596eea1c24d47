//! FITS cubes of spectra: two celestial axes and a spectral one, in any order, others of length 1.
//!
//! A cube stays in its file: spectra are read by rows of the sky, planes by channels, so that memory does
//! not grow with the cube. Packed files (gzip, tile compression) are unpacked into a nameless temporary
//! file first. Values are single precision, in the file's unit, blank pixels `NaN`.

mod pixels;
mod tiles;
mod unpack;

use std::fs::File;
use std::io;
use std::ops::Range;
use std::path::Path;

use super::error::ReadError;
use super::fits::{self, Content, Unit, base_unit, value_unit};
use super::fits_image::image_axis;
use super::sky::{Sky, SkyAxes, axis_types, sky_of};
use super::spectral_axis;
use super::{ReadOptions, bytes};
use crate::spectrum::{Origin, RawSpectrum};
use pixels::{Order, Pixels, Scaling, Stored};

/// Elliptical Gaussian beam on the sky.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkyBeam {
    /// Full width at half maximum of the major axis, arcsec.
    pub major_arcsec: f64,
    /// Of the minor axis, arcsec.
    pub minor_arcsec: f64,
    /// Angle of the major axis from north through east, degrees.
    pub angle_deg: f64,
}

/// A cube in its file.
#[derive(Debug)]
pub struct Cube {
    description: RawSpectrum,
    sky: Sky,
    beam: Option<SkyBeam>,
    counts: [usize; 3],
    pixels: Pixels,
}

impl Cube {
    /// Opens a cube; packed files are unpacked into a temporary file in the folder `scratch`.
    ///
    /// # Errors
    ///
    /// [`ReadError`] where the file is no cube of spectra, is shorter than its header says, or is packed in a
    /// way that cannot be undone right.
    pub fn open(path: &Path, options: &ReadOptions, scratch: &Path) -> Result<Self, ReadError> {
        let file = bytes::open(path)?;
        let mut file = unpack::gunzipped(path, file, scratch)?;
        let length = file
            .metadata()
            .map_err(|error| unreadable(path, &error))?
            .len();
        unpack::refuse_other_content(path, &mut file, length)?;
        let units = fits::scan(path, &mut file, length)?;
        let unit = choose(path, &units, options)?;
        if unit.content() == Content::TileCompressed {
            let (image, file) = tiles::unpacked(path, unit, &mut file, scratch)?;
            return Self::of_image(path, &image, file, options);
        }
        Self::of_image(path, unit, file, options)
    }

    fn of_image(
        path: &Path,
        unit: &Unit<'_>,
        file: File,
        options: &ReadOptions,
    ) -> Result<Self, ReadError> {
        let sky_axes = SkyAxes::find(path, unit)?;
        let spectral = spectral_axis(path, unit, sky_axes)?;
        let sky = sky_of(path, unit, sky_axes)?;
        let axis = image_axis(path, unit, spectral, unit.axes[spectral - 1])?;
        let place = unit.card("BUNIT");
        let value_unit = value_unit(path, &place, unit.text("BUNIT").as_deref(), options)?;
        let mut draft = unit.draft(
            path,
            "FITS cube",
            base_unit(axis.kind, axis.convention_stated),
            value_unit,
        )?;
        draft.frame = draft.frame.or(axis.frame);
        let description = draft.without_values(path, axis.values)?;
        let beam = match description.beam {
            None => None,
            Some(beam) => Some(SkyBeam {
                major_arcsec: beam.major,
                minor_arcsec: beam.minor,
                angle_deg: unit.number(path, "BPA")?.unwrap_or(0.0),
            }),
        };
        let bitpix = unit.header.get_int("BITPIX").unwrap_or(0);
        let stored = Stored::from_bitpix(bitpix).ok_or_else(|| {
            let expected = "8, 16, 32, 64, -32 or -64";
            unit.wrong_card(path, "BITPIX", bitpix.to_string(), expected)
        })?;
        let scaling = Scaling {
            scale: unit.number(path, "BSCALE")?.unwrap_or(1.0) * value_unit.factor,
            zero: unit.number(path, "BZERO")?.unwrap_or(0.0) * value_unit.factor,
            blank: unit.header.get_int("BLANK"),
        };
        let places = [sky_axes.longitude, sky_axes.latitude, spectral];
        let counts = places.map(|axis| unit.axes[axis - 1]);
        // The product of all axes is no more than the file's length: see `fits::scan`.
        let strides = places.map(|axis| {
            let faster = unit.axes[..axis - 1].iter();
            faster.map(|length| *length as u64).product()
        });
        Ok(Self {
            description,
            sky,
            beam,
            counts,
            pixels: Pixels::new(file, unit.place.start, (stored, scaling), counts, strides),
        })
    }

    /// The same spectra on another grid: `file` holds single-precision big-endian planes, `width` columns
    /// fastest, then rows, then this cube's channels, in the unit of [`Cube::description`].
    #[must_use]
    pub fn regridded(
        &self,
        file: File,
        sky: Sky,
        (width, height): (usize, usize),
        beam: Option<SkyBeam>,
    ) -> Self {
        let counts = [width, height, self.counts[2]];
        let scaling = Scaling {
            scale: 1.0,
            zero: 0.0,
            blank: None,
        };
        let strides = [1, width as u64, width as u64 * height as u64];
        Self {
            description: self.description.clone(),
            sky,
            beam,
            counts,
            pixels: Pixels::new(file, 0, (Stored::F32, scaling), counts, strides),
        }
    }

    /// What the file states of every spectrum, without values.
    #[must_use]
    pub fn description(&self) -> &RawSpectrum {
        &self.description
    }

    /// Sky coordinates of columns and rows.
    #[must_use]
    pub fn sky(&self) -> &Sky {
        &self.sky
    }

    /// Beam that the file states.
    #[must_use]
    pub fn beam(&self) -> Option<SkyBeam> {
        self.beam
    }

    /// Pixels along longitude.
    #[must_use]
    pub fn width(&self) -> usize {
        self.counts[0]
    }

    /// Pixels along latitude.
    #[must_use]
    pub fn height(&self) -> usize {
        self.counts[1]
    }

    /// Channels of each spectrum.
    #[must_use]
    pub fn channels(&self) -> usize {
        self.counts[2]
    }

    /// Reads the spectra of some rows: row by row, column by column, channels fastest, in the file's order
    /// of channels; `into` is resized.
    ///
    /// # Errors
    ///
    /// [`ReadError::Unreadable`] where the file cannot be read.
    pub fn spectra(&self, rows: Range<usize>, into: &mut Vec<f32>) -> Result<(), ReadError> {
        let ranges = [0..self.counts[0], rows, 0..self.counts[2]];
        (self.pixels.read(&ranges, Order::Spectra, into)).map_err(|error| self.unreadable(&error))
    }

    /// Reads the spectrum of one pixel.
    ///
    /// # Errors
    ///
    /// [`ReadError::Unreadable`] where the file cannot be read.
    pub fn spectrum(&self, [x, y]: [usize; 2], into: &mut Vec<f32>) -> Result<(), ReadError> {
        let ranges = [x..x + 1, y..y + 1, 0..self.counts[2]];
        (self.pixels.read(&ranges, Order::Spectra, into)).map_err(|error| self.unreadable(&error))
    }

    /// Reads the planes of some channels: channel by channel, row by row, columns fastest; `into` is resized.
    ///
    /// # Errors
    ///
    /// [`ReadError::Unreadable`] where the file cannot be read.
    pub fn planes(&self, channels: Range<usize>, into: &mut Vec<f32>) -> Result<(), ReadError> {
        let ranges = [0..self.counts[0], 0..self.counts[1], channels];
        (self.pixels.read(&ranges, Order::Planes, into)).map_err(|error| self.unreadable(&error))
    }

    fn unreadable(&self, error: &io::Error) -> ReadError {
        let Origin { path, .. } = &self.description.origin;
        unreadable(path, error)
    }
}

fn unreadable(path: &Path, error: &io::Error) -> ReadError {
    ReadError::Unreadable {
        path: path.to_path_buf(),
        reason: error.to_string(),
    }
}

/// The unit that holds the cube: the caller's, or the only image; tables beside it are passed over.
fn choose<'u, 'a>(
    path: &Path,
    units: &'u [Unit<'a>],
    options: &ReadOptions,
) -> Result<&'u Unit<'a>, ReadError> {
    let is_image =
        |unit: &&Unit<'a>| matches!(unit.content(), Content::Image | Content::TileCompressed);
    if let Some(number) = options.hdu {
        return units
            .get(number)
            .filter(is_image)
            .ok_or_else(|| fits::no_spectrum(path, units));
    }
    fits::only(path, units, |unit| is_image(&unit))
}

/// Number from 1 of the one axis that is spectral; all but it and the sky's are of length 1.
fn spectral_axis(path: &Path, unit: &Unit<'_>, sky: SkyAxes) -> Result<usize, ReadError> {
    let wrong = || ReadError::FitsCubeAxes {
        path: path.to_path_buf(),
        unit: unit.number,
        found: axis_types(unit),
    };
    let mut spectral = None;
    for axis in 1..=unit.axes.len() {
        if axis == sky.longitude || axis == sky.latitude {
            continue;
        }
        let kind = unit.text(&format!("CTYPE{axis}")).unwrap_or_default();
        if spectral_axis::is_spectral(&kind) {
            if spectral.replace(axis).is_some() {
                return Err(wrong());
            }
        } else if unit.axes[axis - 1] != 1 {
            return Err(wrong());
        }
    }
    spectral.ok_or_else(wrong)
}
