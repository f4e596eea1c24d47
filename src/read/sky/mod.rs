//! Sky coordinates of a FITS image: pixels into positions and back.
//!
//! Sources: FITS standard 4.0, section 8; Calabretta & Greisen 2002, A&A 395, 1077 (Paper II),
//! section 2.4. Projections: TAN, SIN (without slant), CAR, SFL; the older GLS is SFL whose reference
//! point lies on the equator, with the latitude of the header as an offset in the plane.
//! Pixels count from 0 here, along the axis of longitude first.

mod frame;
mod keywords;

pub use frame::{SkyFrame, SkyPosition, UnknownConversion};
pub(super) use keywords::{SkyAxes, axis_types, sky_of};

use mapproj::cylindrical::car::Car;
use mapproj::pseudocyl::sfl::Sfl;
use mapproj::zenithal::sin::Sin;
use mapproj::zenithal::tan::Tan;
use mapproj::{CanonicalProjection, ProjXY, XYZ};

/// How the sky is projected onto the plane of the image.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Projection {
    /// Gnomonic.
    Tan,
    /// Orthographic.
    Sin,
    /// Plate carree.
    Car,
    /// Sanson-Flamsteed.
    Sfl,
}

impl Projection {
    /// The code of the standard.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::Tan => "TAN",
            Self::Sin => "SIN",
            Self::Car => "CAR",
            Self::Sfl => "SFL",
        }
    }

    /// Whether the reference point is the native pole; else it is where equator and prime meridian meet.
    fn is_zenithal(self) -> bool {
        matches!(self, Self::Tan | Self::Sin)
    }

    fn project(self, point: &XYZ) -> Option<ProjXY> {
        match self {
            Self::Tan => Tan.proj(point),
            Self::Sin => Sin.proj(point),
            Self::Car => Car.proj(point),
            Self::Sfl => Sfl.proj(point),
        }
    }

    fn unproject(self, place: &ProjXY) -> Option<XYZ> {
        match self {
            Self::Tan => Tan.unproj(place),
            Self::Sin => Sin.unproj(place),
            Self::Car => Car.unproj(place),
            Self::Sfl => Sfl.unproj(place),
        }
    }
}

/// What the keywords of the two celestial axes say.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkyKeywords {
    /// Frame of longitude and latitude.
    pub frame: SkyFrame,
    /// Projection.
    pub projection: Projection,
    /// CRVAL of longitude and latitude, degrees.
    pub reference_deg: [f64; 2],
    /// CRPIX of both, counted from 1.
    pub reference_pixel: [f64; 2],
    /// Degrees in the plane a pixel: rows are longitude and latitude, columns the pixels of their axes.
    pub matrix_deg: [[f64; 2]; 2],
    /// LONPOLE, degrees; none takes the default.
    pub native_pole_longitude_deg: Option<f64>,
    /// LATPOLE, degrees; none takes the default.
    pub native_pole_latitude_deg: Option<f64>,
    /// Latitude (degrees) added to the plane's second coordinate: what GLS has in place of a reference
    /// latitude.
    pub plane_latitude_deg: f64,
}

/// The sky coordinates of an image.
#[derive(Clone, Debug, PartialEq)]
pub struct Sky {
    keywords: SkyKeywords,
    inverse: [[f64; 2]; 2],
    /// Celestial into native unit vectors.
    rotation: [[f64; 3]; 3],
}

/// Why keywords describe no sky coordinates.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SkyProblem {
    /// The matrix has no inverse.
    Singular,
    /// No native pole agrees with reference point and LONPOLE.
    NoPole,
}

impl Sky {
    /// The coordinates that keywords describe.
    ///
    /// # Errors
    ///
    /// [`SkyProblem`] where the keywords contradict each other.
    pub fn new(keywords: SkyKeywords) -> Result<Self, SkyProblem> {
        let [[a, b], [c, d]] = keywords.matrix_deg;
        let determinant = a * d - b * c;
        if !(determinant.is_finite() && determinant != 0.0) {
            return Err(SkyProblem::Singular);
        }
        let inverse = [
            [d / determinant, -b / determinant],
            [-c / determinant, a / determinant],
        ];
        Ok(Self {
            rotation: rotation(&keywords).ok_or(SkyProblem::NoPole)?,
            keywords,
            inverse,
        })
    }

    /// A plane around a position: TAN, square pixels of `step_deg`, north up and east to the left, the
    /// position at the pixel `reference` (from 0).
    ///
    /// # Errors
    ///
    /// [`SkyProblem`] for a step of 0.
    pub fn around(
        position: SkyPosition,
        reference: [f64; 2],
        step_deg: f64,
    ) -> Result<Self, SkyProblem> {
        Self::new(SkyKeywords {
            frame: position.frame,
            projection: Projection::Tan,
            reference_deg: [position.longitude_deg, position.latitude_deg],
            reference_pixel: reference.map(|pixel| pixel + 1.0),
            matrix_deg: [[-step_deg, 0.0], [0.0, step_deg]],
            native_pole_longitude_deg: None,
            native_pole_latitude_deg: None,
            plane_latitude_deg: 0.0,
        })
    }

    /// The keywords.
    #[must_use]
    pub fn keywords(&self) -> &SkyKeywords {
        &self.keywords
    }

    /// The frame.
    #[must_use]
    pub fn frame(&self) -> SkyFrame {
        self.keywords.frame
    }

    /// The position of a pixel (from 0, centres at whole numbers); none outside of the projection.
    #[must_use]
    pub fn position(&self, pixel: [f64; 2]) -> Option<SkyPosition> {
        let [x, y] = self.plane_deg(pixel);
        let place = ProjXY::new(x.to_radians(), y.to_radians());
        let point = self.keywords.projection.unproject(&place)?;
        let native = if self.keywords.projection.is_zenithal() {
            [-point.z(), point.y(), point.x()]
        } else {
            [point.x(), point.y(), point.z()]
        };
        let celestial: [f64; 3] = std::array::from_fn(|column| {
            (0..3)
                .map(|row| self.rotation[row][column] * native[row])
                .sum()
        });
        Some(SkyPosition::of_vector(self.keywords.frame, celestial))
    }

    /// The pixel (from 0) of a position, which is converted to this frame; none where the projection does
    /// not show it.
    ///
    /// # Errors
    ///
    /// [`UnknownConversion`] between frames of other equinoxes.
    pub fn pixel(&self, position: SkyPosition) -> Result<Option<[f64; 2]>, UnknownConversion> {
        let celestial = position.converted(self.keywords.frame)?.vector();
        let [x, y, z]: [f64; 3] = std::array::from_fn(|row| {
            (0..3)
                .map(|column| self.rotation[row][column] * celestial[column])
                .sum()
        });
        let point = if self.keywords.projection.is_zenithal() {
            XYZ::new_renorming_if_necessary(z, y, -x)
        } else {
            XYZ::new_renorming_if_necessary(x, y, z)
        };
        let Some(place) = self.keywords.projection.project(&point) else {
            return Ok(None);
        };
        let (x, y) = (place.x().to_degrees(), place.y().to_degrees());
        let y = y - self.keywords.plane_latitude_deg;
        let [[a, b], [c, d]] = self.inverse;
        let [first, second] = self.keywords.reference_pixel;
        Ok(Some([
            a * x + b * y + first - 1.0,
            c * x + d * y + second - 1.0,
        ]))
    }

    /// Degrees in the plane of a pixel.
    fn plane_deg(&self, pixel: [f64; 2]) -> [f64; 2] {
        let [first, second] = self.keywords.reference_pixel;
        let (i, j) = (pixel[0] + 1.0 - first, pixel[1] + 1.0 - second);
        let [[a, b], [c, d]] = self.keywords.matrix_deg;
        [
            a * i + b * j,
            c * i + d * j + self.keywords.plane_latitude_deg,
        ]
    }

    /// Geometric mean of a pixel's sides, arcsec.
    #[must_use]
    pub fn pixel_arcsec(&self) -> f64 {
        let [[a, b], [c, d]] = self.keywords.matrix_deg;
        (a * d - b * c).abs().sqrt() * 3600.0
    }
}

/// Celestial into native unit vectors (Paper II, equations 5 and 8 to 10).
fn rotation(keywords: &SkyKeywords) -> Option<[[f64; 3]; 3]> {
    let zenithal = keywords.projection.is_zenithal();
    let [longitude, latitude] = keywords.reference_deg;
    if !(longitude.is_finite() && latitude.abs() <= 90.0) {
        return None;
    }
    let native_latitude = if zenithal { 90.0 } else { 0.0 };
    let default = if latitude >= native_latitude {
        0.0
    } else {
        180.0
    };
    let pole_longitude = keywords.native_pole_longitude_deg.unwrap_or(default);
    let (alpha, delta) = if zenithal {
        (longitude, latitude)
    } else {
        let nearest = keywords.native_pole_latitude_deg.unwrap_or(90.0);
        celestial_pole(longitude, latitude, pole_longitude, nearest)?
    };
    let (sin_a, cos_a) = alpha.to_radians().sin_cos();
    let (sin_d, cos_d) = delta.to_radians().sin_cos();
    let (sin_p, cos_p) = pole_longitude.to_radians().sin_cos();
    Some([
        [
            -sin_a * sin_p - cos_a * cos_p * sin_d,
            cos_a * sin_p - sin_a * cos_p * sin_d,
            cos_p * cos_d,
        ],
        [
            sin_a * cos_p - cos_a * sin_p * sin_d,
            -cos_a * cos_p - sin_a * sin_p * sin_d,
            sin_p * cos_d,
        ],
        [cos_a * cos_d, sin_a * cos_d, sin_d],
    ])
}

/// Celestial longitude and latitude (degrees) of the native pole where the reference point is at native
/// longitude and latitude 0; of two solutions that nearest to the latitude `nearest`.
fn celestial_pole(
    longitude: f64,
    latitude: f64,
    pole_longitude: f64,
    nearest: f64,
) -> Option<(f64, f64)> {
    // What rounding may leave of a cosine beyond 1, and of a pole beyond 90 degrees.
    const ROUNDING: f64 = 1e-10;
    let (sin_p, cos_p) = pole_longitude.to_radians().sin_cos();
    let (sin_0, cos_0) = latitude.to_radians().sin_cos();
    let middle = 0.0_f64.atan2(cos_p);
    let cosine = sin_0 / (1.0 - sin_p * sin_p).sqrt();
    if cosine.is_nan() || cosine.abs() > 1.0 + ROUNDING {
        return None;
    }
    let half = cosine.clamp(-1.0, 1.0).acos();
    let delta = [middle + half, middle - half]
        .map(|delta| {
            let turned = delta.to_degrees().rem_euclid(360.0);
            if turned > 180.0 {
                turned - 360.0
            } else {
                turned
            }
        })
        .into_iter()
        .filter(|delta| delta.abs() <= 90.0 + ROUNDING)
        .min_by(|a, b| (a - nearest).abs().total_cmp(&(b - nearest).abs()))?
        .clamp(-90.0, 90.0);
    let (sin_d, cos_d) = delta.to_radians().sin_cos();
    let alpha = if latitude.abs() >= 90.0 {
        longitude
    } else if delta >= 90.0 - ROUNDING {
        longitude + pole_longitude - 180.0
    } else if delta <= -90.0 + ROUNDING {
        longitude - pole_longitude
    } else {
        let sine = sin_p / cos_0;
        let cosine = -sin_d * sin_0 / (cos_d * cos_0);
        longitude - sine.atan2(cosine).to_degrees()
    };
    Some((alpha, delta))
}
