//! One spectrum as CSV or as a one-dimensional FITS image (FITS standard 4.0, section 8.4).
//!
//! Numbers are written in full: they read back as the same bits. Velocities are radio convention,
//! LSRK; temperatures main-beam.

use std::io::Write;

use super::fits_table::{BLOCK, Header, ones_complement_sum};
use super::{ReportError, Value};
use crate::constants::SPEED_OF_LIGHT_KM_S;
use crate::spectrum::Spectrum;

/// What a spectrum's file says beside its channels.
#[derive(Clone, Debug, PartialEq)]
pub struct SpectrumHeader {
    /// Name of the source.
    pub object: String,
    /// Name of the line.
    pub line: String,
    /// Rest frequency of the velocities, GHz.
    pub rest_frequency_ghz: f64,
    /// Where the spectrum comes from, one statement each.
    pub history: Vec<String>,
}

/// Spectral axis of a FITS image.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum FitsAxis {
    /// Radio velocity, `VRAD` in m/s.
    #[default]
    Velocity,
    /// Frequency, `FREQ` in Hz, descending.
    Frequency,
}

/// Largest distance of a channel from its place on an even axis, in channels.
const EVEN: f64 = 1e-4;

/// Writes a spectrum as CSV: `#` comments, then the columns `velocity_km_s` and `tmb_k`. A masked
/// channel's temperature is empty.
///
/// # Errors
///
/// [`ReportError::Stream`] where the writer fails.
pub fn csv(
    spectrum: &Spectrum,
    header: &SpectrumHeader,
    mut writer: impl Write,
) -> Result<(), ReportError> {
    writeln!(writer, "# source: {}", one_line(&header.object))?;
    writeln!(
        writer,
        "# line: {}, {} GHz",
        one_line(&header.line),
        header.rest_frequency_ghz
    )?;
    writeln!(writer, "# velocity: radio convention, LSRK")?;
    for statement in &header.history {
        writeln!(writer, "# {}", one_line(statement))?;
    }
    writeln!(writer, "velocity_km_s,tmb_k")?;
    for (velocity, temperature) in spectrum
        .velocity_km_s()
        .iter()
        .zip(spectrum.temperature_k())
    {
        if temperature.is_nan() {
            writeln!(writer, "{velocity},")?;
        } else {
            writeln!(writer, "{velocity},{temperature}")?;
        }
    }
    writer.flush()?;
    Ok(())
}

/// Writes a spectrum as a FITS image of one axis, 64-bit reals, with CHECKSUM and DATASUM. Masked
/// channels are NaN.
///
/// # Errors
///
/// [`ReportError::UnevenAxis`] where the channels do not lie evenly, [`ReportError::Stream`] where the
/// writer fails.
pub fn fits(
    spectrum: &Spectrum,
    header: &SpectrumHeader,
    axis: FitsAxis,
    mut writer: impl Write,
) -> Result<(), ReportError> {
    let (first_km_s, step_km_s) = even_axis(spectrum)?;
    let rest_hz = header.rest_frequency_ghz * 1e9;
    let (kind, unit, value, increment) = match axis {
        FitsAxis::Velocity => ("VRAD", "m/s", first_km_s * 1e3, step_km_s * 1e3),
        // nu = nu0 (1 - v/c)
        FitsAxis::Frequency => (
            "FREQ",
            "Hz",
            rest_hz * (1.0 - first_km_s / SPEED_OF_LIGHT_KM_S),
            -rest_hz * step_km_s / SPEED_OF_LIGHT_KM_S,
        ),
    };
    let mut cards = Header::default();
    cards.logical("SIMPLE", true);
    cards.value("BITPIX", &Value::Integer(-64));
    cards.integer("NAXIS", 1);
    cards.integer("NAXIS1", spectrum.len() as u64);
    cards.text("OBJECT", &header.object);
    cards.text("BUNIT", "K");
    cards.text("CTYPE1", kind);
    cards.text("CUNIT1", unit);
    cards.value("CRPIX1", &Value::Real(1.0));
    cards.value("CRVAL1", &Value::Real(value));
    cards.value("CDELT1", &Value::Real(increment));
    cards.value("RESTFRQ", &Value::Real(rest_hz));
    cards.text("SPECSYS", "LSRK");
    cards.commentary("COMMENT", &format!("Line: {}", header.line));
    cards.commentary("COMMENT", "Main-beam temperature above the background");
    for statement in &header.history {
        cards.commentary("HISTORY", statement);
    }
    let mut data: Vec<u8> = spectrum
        .temperature_k()
        .iter()
        .flat_map(|temperature| temperature.to_be_bytes())
        .collect();
    data.resize(data.len().next_multiple_of(BLOCK), 0);
    writer.write_all(&cards.unit(ones_complement_sum(0, &data)))?;
    writer.write_all(&data)?;
    writer.flush()?;
    Ok(())
}

/// First centre and increment, km/s.
fn even_axis(spectrum: &Spectrum) -> Result<(f64, f64), ReportError> {
    let velocity = spectrum.velocity_km_s();
    let [first, .., last] = velocity else {
        // a single channel is even whatever its width
        return Ok((velocity[0], spectrum.width_km_s()[0]));
    };
    let step = (last - first) / (velocity.len() as f64 - 1.0);
    for (index, found) in velocity.iter().enumerate() {
        let expected = first + step * index as f64;
        if (found - expected).abs() > EVEN * step {
            return Err(ReportError::UnevenAxis {
                channel: index + 1,
                found_km_s: *found,
                expected_km_s: expected,
            });
        }
    }
    Ok((*first, step))
}

/// A text whose control characters, which would end a comment, are written as escapes.
fn one_line(text: &str) -> String {
    let mut result = String::with_capacity(text.len());
    for character in text.chars() {
        if character.is_control() {
            result.extend(character.escape_default());
        } else {
            result.push(character);
        }
    }
    result
}

#[cfg(test)]
mod tests {
    use super::*;

    fn header() -> SpectrumHeader {
        SpectrumHeader {
            object: "Lantern 7\nvelocity_km_s,tmb_k".to_owned(),
            line: "HCO+ 1-0".to_owned(),
            rest_frequency_ghz: 89.188_524_7,
            history: vec!["made for a test".to_owned()],
        }
    }

    #[test]
    fn a_name_cannot_end_its_comment_and_a_masked_channel_is_empty() {
        let spectrum =
            Spectrum::new(vec![-0.1, 0.0, 0.1], vec![0.1; 3], vec![1.5, f64::NAN, 0.1]).unwrap();
        let mut bytes = Vec::new();
        csv(&spectrum, &header(), &mut bytes).unwrap();
        let text = String::from_utf8(bytes).unwrap();
        let lines: Vec<&str> = text.lines().filter(|line| !line.starts_with('#')).collect();
        assert_eq!(lines, ["velocity_km_s,tmb_k", "-0.1,1.5", "0,", "0.1,0.1"]);
    }

    #[test]
    fn an_uneven_axis_is_no_fits_image() {
        let spectrum = Spectrum::new(vec![0.0, 1.0, 2.5], vec![1.0; 3], vec![0.0; 3]).unwrap();
        let error = fits(&spectrum, &header(), FitsAxis::Velocity, Vec::new()).unwrap_err();
        assert!(matches!(error, ReportError::UnevenAxis { channel: 2, .. }));
    }
}
