//! One quantity over the sky as a FITS image (standard 4.0, sections 3, 4 and 8).

use std::io::Write;

use super::fits_table::{Header, ones_complement_sum};
use super::{ReportError, Value};
use crate::read::cube::SkyBeam;
use crate::read::sky::{Sky, SkyFrame};

const BLOCK: usize = 2880;

/// Where the pixels of a map are.
#[derive(Clone, Debug, PartialEq)]
pub enum MapAxes {
    /// On the sky.
    Sky(Sky),
    /// At offsets east and north (arcsec) from a position that is not known: those of the first pixel, and
    /// the step from one to the next, toward the west and the north.
    Offsets {
        /// Offsets of the first pixel.
        first_arcsec: [f64; 2],
        /// Step, arcsec, positive.
        step_arcsec: f64,
    },
}

/// What all maps of a run share.
#[derive(Clone, Debug, PartialEq)]
pub struct MapFrame {
    /// Columns.
    pub width: usize,
    /// Rows.
    pub height: usize,
    /// Where they are.
    pub axes: MapAxes,
    /// Beam, where it is known.
    pub beam: Option<SkyBeam>,
    /// Facts about the run: name and value.
    pub meta: Vec<(String, Value)>,
}

/// Writes a map of a quantity, `values` row by row, `NaN` where there is none.
///
/// # Errors
///
/// [`ReportError::LengthMismatch`] where the values are not as many as the pixels,
/// [`ReportError::Stream`] where they cannot be written.
pub fn write_map(
    frame: &MapFrame,
    (name, unit, description): (&str, Option<&str>, &str),
    values: &[f32],
    writer: impl Write,
) -> Result<(), ReportError> {
    let bytes = values.iter().flat_map(|value| value.to_be_bytes());
    let title = [("EXTNAME", name), ("BUNIT", unit.unwrap_or(""))];
    write_image(
        frame,
        (-32, values.len()),
        &title,
        description,
        &[],
        bytes.collect(),
        writer,
    )
}

/// Writes a map whose bits say which cautions a pixel has; `legend` names the bits from the lowest.
///
/// # Errors
///
/// As [`write_map`].
pub fn write_caution_map(
    frame: &MapFrame,
    legend: &[String],
    values: &[u64],
    writer: impl Write,
) -> Result<(), ReportError> {
    let bytes = values.iter().flat_map(|value| value.to_be_bytes());
    let title = [("EXTNAME", "cautions"), ("BUNIT", "")];
    let description = "Cautions, a bit each: BITn names the one worth 2^n";
    write_image(
        frame,
        (64, values.len()),
        &title,
        description,
        legend,
        bytes.collect(),
        writer,
    )
}

fn write_image(
    frame: &MapFrame,
    (bits, count): (i64, usize),
    title: &[(&str, &str)],
    description: &str,
    legend: &[String],
    mut data: Vec<u8>,
    mut writer: impl Write,
) -> Result<(), ReportError> {
    if count != frame.width * frame.height {
        return Err(ReportError::LengthMismatch {
            what: format!("map, {description}"),
            found: count,
            expected: frame.width * frame.height,
        });
    }
    let mut header = Header::default();
    header.logical("SIMPLE", true);
    header.value("BITPIX", &Value::Integer(bits));
    header.integer("NAXIS", 2);
    header.integer("NAXIS1", frame.width as u64);
    header.integer("NAXIS2", frame.height as u64);
    for (keyword, text) in title {
        if !text.is_empty() {
            header.text(keyword, text);
        }
    }
    match &frame.axes {
        MapAxes::Sky(sky) => sky_cards(&mut header, sky),
        MapAxes::Offsets {
            first_arcsec,
            step_arcsec,
        } => {
            for (axis, name) in [(1, "XOFFSET"), (2, "YOFFSET")] {
                let sign = if axis == 1 { -1.0 } else { 1.0 };
                header.text(&format!("CTYPE{axis}"), name);
                header.text(&format!("CUNIT{axis}"), "arcsec");
                real(&mut header, &format!("CRPIX{axis}"), 1.0);
                real(&mut header, &format!("CRVAL{axis}"), first_arcsec[axis - 1]);
                real(&mut header, &format!("CDELT{axis}"), sign * step_arcsec);
            }
        }
    }
    if let Some(beam) = frame.beam {
        real(&mut header, "BMAJ", beam.major_arcsec / 3600.0);
        real(&mut header, "BMIN", beam.minor_arcsec / 3600.0);
        real(&mut header, "BPA", beam.angle_deg);
    }
    for (bit, code) in legend.iter().enumerate() {
        header.text(&format!("BIT{bit}"), code);
    }
    header.commentary("COMMENT", description);
    for (key, value) in &frame.meta {
        header.commentary("HISTORY", &format!("{key} = {}", super::csv::cell(value)));
    }
    data.resize(data.len().next_multiple_of(BLOCK), 0);
    let sum = ones_complement_sum(0, &data);
    writer.write_all(&header.unit(sum))?;
    writer.write_all(&data)?;
    writer.flush()?;
    Ok(())
}

fn real(header: &mut Header, keyword: &str, value: f64) {
    header.value(keyword, &Value::Real(value));
}

fn sky_cards(header: &mut Header, sky: &Sky) {
    let keywords = sky.keywords();
    let (longitude, latitude) = match keywords.frame {
        SkyFrame::Galactic => ("GLON", "GLAT"),
        _ => ("RA--", "DEC-"),
    };
    let [[a, b], [c, d]] = keywords.matrix_deg;
    let [mut first, mut second] = keywords.reference_pixel;
    if keywords.plane_latitude_deg != 0.0 {
        // The same plane with its reference point on the equator.
        let determinant = a * d - b * c;
        first += b * keywords.plane_latitude_deg / determinant;
        second -= a * keywords.plane_latitude_deg / determinant;
    }
    for (axis, coordinate, value, pixel) in [
        (1, longitude, keywords.reference_deg[0], first),
        (2, latitude, keywords.reference_deg[1], second),
    ] {
        let kind = format!("{coordinate}-{}", keywords.projection.code());
        header.text(&format!("CTYPE{axis}"), &kind);
        header.text(&format!("CUNIT{axis}"), "deg");
        real(header, &format!("CRVAL{axis}"), value);
        real(header, &format!("CRPIX{axis}"), pixel);
    }
    if b == 0.0 && c == 0.0 {
        real(header, "CDELT1", a);
        real(header, "CDELT2", d);
    } else {
        for (keyword, value) in [("CD1_1", a), ("CD1_2", b), ("CD2_1", c), ("CD2_2", d)] {
            real(header, keyword, value);
        }
    }
    if let Some(angle) = keywords.native_pole_longitude_deg {
        real(header, "LONPOLE", angle);
    }
    if let Some(angle) = keywords.native_pole_latitude_deg {
        real(header, "LATPOLE", angle);
    }
    match keywords.frame {
        SkyFrame::Icrs => header.text("RADESYS", "ICRS"),
        SkyFrame::Fk5 { equinox } => {
            header.text("RADESYS", "FK5");
            real(header, "EQUINOX", equinox);
        }
        SkyFrame::Fk4 { equinox } => {
            header.text("RADESYS", "FK4");
            real(header, "EQUINOX", equinox);
        }
        SkyFrame::Galactic => {}
    }
}
