//! Cubes made on the spot.
#![allow(dead_code)] // Each test file uses its part.

pub mod clump;

use std::fmt::Display;
use std::path::{Path, PathBuf};

/// Cards of a header: keyword and value as it stands in the card.
pub type Cards = Vec<(String, String)>;

pub fn card(keyword: &str, value: impl Display) -> (String, String) {
    (keyword.to_owned(), value.to_string())
}

pub fn text(keyword: &str, value: &str) -> (String, String) {
    (keyword.to_owned(), format!("'{value:<8}'"))
}

/// A FITS image of single precision with these axes, a value a pixel (indices in the order of the axes).
pub fn image(axes: &[usize], cards: &Cards, value: impl Fn(&[usize]) -> f64) -> Vec<u8> {
    let mut lines = vec![
        format!("{:<8}= {:>20}", "SIMPLE", "T"),
        format!("{:<8}= {:>20}", "BITPIX", -32),
        format!("{:<8}= {:>20}", "NAXIS", axes.len()),
    ];
    for (number, length) in axes.iter().enumerate() {
        lines.push(format!(
            "{:<8}= {length:>20}",
            format!("NAXIS{}", number + 1)
        ));
    }
    for (keyword, value) in cards {
        lines.push(format!("{keyword:<8}= {value:>20}"));
    }
    lines.push("END".to_owned());
    let mut bytes: Vec<u8> = lines
        .iter()
        .flat_map(|line| format!("{line:<80}").into_bytes())
        .collect();
    bytes.resize(bytes.len().next_multiple_of(2880), b' ');
    let mut index = vec![0; axes.len()];
    for _ in 0..axes.iter().product() {
        #[allow(clippy::cast_possible_truncation)]
        let pixel = value(&index) as f32;
        bytes.extend(pixel.to_be_bytes());
        for (place, length) in index.iter_mut().zip(axes) {
            *place += 1;
            if *place < *length {
                break;
            }
            *place = 0;
        }
    }
    bytes.resize(bytes.len().next_multiple_of(2880), 0);
    bytes
}

/// A cube around an invented position: square pixels, velocities in km/s.
#[derive(Clone, Debug)]
pub struct Plan {
    pub width: usize,
    pub height: usize,
    pub channels: usize,
    pub pixel_arcsec: f64,
    /// Position of the middle pixel, degrees.
    pub centre_deg: [f64; 2],
    /// Shift of the grid against its middle, pixels.
    pub shift: [f64; 2],
    pub first_km_s: f64,
    pub channel_km_s: f64,
    /// Major and minor axis (arcsec) and angle (degrees).
    pub beam: Option<[f64; 3]>,
    pub rest_hz: f64,
    pub object: Option<&'static str>,
}

impl Default for Plan {
    fn default() -> Self {
        Self {
            width: 21,
            height: 19,
            channels: 5,
            pixel_arcsec: 9.0,
            centre_deg: [210.5, -31.25],
            shift: [0.0, 0.0],
            first_km_s: -2.0,
            channel_km_s: 0.5,
            beam: Some([27.0, 27.0, 0.0]),
            rest_hz: 89.188_524_7e9,
            object: None,
        }
    }
}

impl Plan {
    pub fn cards(&self) -> Cards {
        let mut cards = vec![
            text("CTYPE1", "RA---TAN"),
            card("CRVAL1", self.centre_deg[0]),
            card("CRPIX1", (self.width as f64 + 1.0) / 2.0 + self.shift[0]),
            card("CDELT1", -self.pixel_arcsec / 3600.0),
            text("CTYPE2", "DEC--TAN"),
            card("CRVAL2", self.centre_deg[1]),
            card("CRPIX2", (self.height as f64 + 1.0) / 2.0 + self.shift[1]),
            card("CDELT2", self.pixel_arcsec / 3600.0),
            text("CTYPE3", "VRAD"),
            text("CUNIT3", "km/s"),
            card("CRVAL3", self.first_km_s),
            card("CRPIX3", "1.0"),
            card("CDELT3", self.channel_km_s),
            card("RESTFRQ", self.rest_hz),
            text("SPECSYS", "LSRK"),
            text("BUNIT", "K"),
        ];
        if let Some([major, minor, angle]) = self.beam {
            cards.push(card("BMAJ", major / 3600.0));
            cards.push(card("BMIN", minor / 3600.0));
            cards.push(card("BPA", angle));
        }
        if let Some(object) = self.object {
            cards.push(text("OBJECT", object));
        }
        cards
    }

    /// East and north of the middle (arcsec) of a pixel.
    pub fn offsets(&self, x: usize, y: usize) -> [f64; 2] {
        let from_middle = |index: usize, count: usize, shift: f64| {
            index as f64 - (count as f64 - 1.0) / 2.0 - shift
        };
        [
            -self.pixel_arcsec * from_middle(x, self.width, self.shift[0]),
            self.pixel_arcsec * from_middle(y, self.height, self.shift[1]),
        ]
    }

    /// Writes the cube with a value (K) for offsets (arcsec) and channel.
    pub fn write(
        &self,
        folder: &Path,
        name: &str,
        value: impl Fn([f64; 2], usize) -> f64,
    ) -> PathBuf {
        let axes = [self.width, self.height, self.channels];
        let bytes = image(&axes, &self.cards(), |index| {
            value(self.offsets(index[0], index[1]), index[2])
        });
        let path = folder.join(name);
        std::fs::write(&path, bytes).unwrap();
        path
    }
}
