//! Spectra of a regular grid as a FITS cube: right ascension, declination, radio velocity (FITS standard
//! 4.0, sections 8.2 and 8.4; projection TAN of Calabretta & Greisen 2002).

use std::io::Write;

use super::fits_table::{BLOCK, Header, ones_complement_sum};
use super::spectra::SpectrumHeader;
use super::{ReportError, Value};

/// Where the pixels and channels of a cube are.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CubeGrid {
    /// Pixels from east to west.
    pub columns: usize,
    /// Pixels from south to north.
    pub rows: usize,
    /// Distance of neighbouring pixels, arcsec.
    pub spacing_arcsec: f64,
    /// Right ascension of the middle of the cube, deg, ICRS.
    pub ra_deg: f64,
    /// Declination there, deg.
    pub dec_deg: f64,
    /// Full width at half maximum of the beam, major and minor axis, arcsec.
    pub beam_arcsec: [f64; 2],
    /// Position angle of the major axis, deg from north through east.
    pub beam_angle_deg: f64,
    /// Number of channels.
    pub channels: usize,
    /// Centre of the first channel, km/s.
    pub first_km_s: f64,
    /// Distance of neighbouring channels, km/s.
    pub channel_km_s: f64,
}

/// Writes a cube of 32-bit reals, with CHECKSUM and DATASUM. `value` gives that of a column (from the east), a
/// row (from the south) and a channel, NaN where there is none.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn write_cube(
    grid: &CubeGrid,
    header: &SpectrumHeader,
    value: impl Fn(usize, usize, usize) -> f64,
    mut writer: impl Write,
) -> Result<(), ReportError> {
    let mut cards = Header::default();
    cards.logical("SIMPLE", true);
    cards.value("BITPIX", &Value::Integer(-32));
    cards.integer("NAXIS", 3);
    let lengths = [grid.columns, grid.rows, grid.channels];
    for (axis, length) in lengths.into_iter().enumerate() {
        cards.integer(&format!("NAXIS{}", axis + 1), length as u64);
    }
    cards.text("OBJECT", &header.object);
    cards.text("BUNIT", "K");
    let spacing_deg = grid.spacing_arcsec / ARCSEC_PER_DEG;
    let middle = |length: usize| 0.5 * (length as f64 + 1.0);
    let axes = [
        (
            "RA---TAN",
            "deg",
            middle(grid.columns),
            grid.ra_deg,
            -spacing_deg,
        ),
        (
            "DEC--TAN",
            "deg",
            middle(grid.rows),
            grid.dec_deg,
            spacing_deg,
        ),
        (
            "VRAD",
            "m/s",
            1.0,
            grid.first_km_s * 1e3,
            grid.channel_km_s * 1e3,
        ),
    ];
    for (axis, (kind, unit, pixel, at, step)) in (1..).zip(axes) {
        cards.text(&format!("CTYPE{axis}"), kind);
        cards.text(&format!("CUNIT{axis}"), unit);
        cards.value(&format!("CRPIX{axis}"), &Value::Real(pixel));
        cards.value(&format!("CRVAL{axis}"), &Value::Real(at));
        cards.value(&format!("CDELT{axis}"), &Value::Real(step));
    }
    cards.text("RADESYS", "ICRS");
    cards.value("RESTFRQ", &Value::Real(header.rest_frequency_ghz * 1e9));
    cards.text("SPECSYS", "LSRK");
    for (keyword, value) in [
        ("BMAJ", grid.beam_arcsec[0] / ARCSEC_PER_DEG),
        ("BMIN", grid.beam_arcsec[1] / ARCSEC_PER_DEG),
        ("BPA", grid.beam_angle_deg),
    ] {
        cards.value(keyword, &Value::Real(value));
    }
    cards.commentary("COMMENT", &format!("Line: {}", header.line));
    cards.commentary("COMMENT", "Main-beam temperature above the background");
    for statement in &header.history {
        cards.commentary("HISTORY", statement);
    }
    let mut data = Vec::with_capacity(4 * lengths.iter().product::<usize>() + BLOCK);
    for channel in 0..grid.channels {
        for row in 0..grid.rows {
            for column in 0..grid.columns {
                #[expect(clippy::cast_possible_truncation, reason = "written as 32-bit reals")]
                let value = value(column, row, channel) as f32;
                data.extend(value.to_be_bytes());
            }
        }
    }
    data.resize(data.len().next_multiple_of(BLOCK), 0);
    writer.write_all(&cards.unit(ones_complement_sum(0, &data)))?;
    writer.write_all(&data)?;
    writer.flush()?;
    Ok(())
}

const ARCSEC_PER_DEG: f64 = 3600.0;
