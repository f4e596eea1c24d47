//! Celestial frames and the way between them.
//!
//! ICRS to FK5: frame bias of Mignard & Froeschle 2000, A&A 354, 732; FK5 to galactic: the pole of
//! Blaauw et al. 1960 at J2000 (Reid & Brunthaler 2004, ApJ 616, 872); FK4 at B1950 to FK5: Murray 1989,
//! A&A 218, 325, after the aberration's elliptic terms are taken off (Explanatory Supplement 1992,
//! section 3.5); proper motions are zero in the FK5. Numbers from memory; `tests/reads_cubes.rs` compares
//! with astropy.

/// Frame of longitude and latitude.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum SkyFrame {
    /// International Celestial Reference System.
    Icrs,
    /// Equatorial, FK5.
    Fk5 {
        /// Equinox, Julian year.
        equinox: f64,
    },
    /// Equatorial, FK4.
    Fk4 {
        /// Equinox, Besselian year.
        equinox: f64,
    },
    /// Galactic.
    Galactic,
}

impl std::fmt::Display for SkyFrame {
    fn fmt(&self, formatter: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Icrs => formatter.write_str("ICRS"),
            Self::Fk5 { equinox } => write!(formatter, "FK5 (J{equinox})"),
            Self::Fk4 { equinox } => write!(formatter, "FK4 (B{equinox})"),
            Self::Galactic => formatter.write_str("galactic"),
        }
    }
}

/// No conversion is known between two frames.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[error(
    "coordinates in {from} and in {to}, expected frames among ICRS, FK5 of 2000, FK4 of 1950 and galactic, or one frame"
)]
pub struct UnknownConversion {
    /// Frame of the position.
    pub from: SkyFrame,
    /// The wanted frame.
    pub to: SkyFrame,
}

/// A position on the sky.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkyPosition {
    /// Frame.
    pub frame: SkyFrame,
    /// Right ascension or galactic longitude, degrees, 0 to 360.
    pub longitude_deg: f64,
    /// Declination or galactic latitude, degrees.
    pub latitude_deg: f64,
}

type Vector = [f64; 3];
type Matrix = [[f64; 3]; 3];

impl SkyPosition {
    pub(super) fn of_vector(frame: SkyFrame, [x, y, z]: Vector) -> Self {
        Self {
            frame,
            longitude_deg: y.atan2(x).to_degrees().rem_euclid(360.0),
            latitude_deg: z.atan2(x.hypot(y)).to_degrees(),
        }
    }

    pub(super) fn vector(&self) -> Vector {
        let (sin_l, cos_l) = self.longitude_deg.to_radians().sin_cos();
        let (sin_b, cos_b) = self.latitude_deg.to_radians().sin_cos();
        [cos_b * cos_l, cos_b * sin_l, sin_b]
    }

    /// The position in another frame.
    ///
    /// # Errors
    ///
    /// [`UnknownConversion`] for equinoxes other than 2000 (FK5) and 1950 (FK4), unless both are the same.
    pub fn converted(&self, frame: SkyFrame) -> Result<Self, UnknownConversion> {
        if self.frame == frame {
            return Ok(*self);
        }
        let unknown = UnknownConversion {
            from: self.frame,
            to: frame,
        };
        let fk5 = to_fk5(self.frame, self.vector()).ok_or(unknown)?;
        let vector = from_fk5(frame, fk5).ok_or(unknown)?;
        Ok(Self::of_vector(frame, vector))
    }

    /// Angle to another position of the same frame, arcsec.
    #[must_use]
    pub fn separation_arcsec(&self, other: &Self) -> f64 {
        let (a, b) = (self.vector(), other.vector());
        let cross = [
            a[1] * b[2] - a[2] * b[1],
            a[2] * b[0] - a[0] * b[2],
            a[0] * b[1] - a[1] * b[0],
        ];
        let sine = cross.iter().map(|value| value * value).sum::<f64>().sqrt();
        let cosine: f64 = a.iter().zip(&b).map(|(a, b)| a * b).sum();
        sine.atan2(cosine).to_degrees() * 3600.0
    }

    /// Offsets east and north (arcsec) of this position from a reference of the same frame, in the plane
    /// that touches the sphere there; none from 90 degrees away.
    #[must_use]
    pub fn offsets_arcsec(&self, reference: &Self) -> Option<[f64; 2]> {
        let (sin_0, cos_0) = reference.latitude_deg.to_radians().sin_cos();
        let (sin_d, cos_d) = self.latitude_deg.to_radians().sin_cos();
        let (sin_a, cos_a) = (self.longitude_deg - reference.longitude_deg)
            .to_radians()
            .sin_cos();
        let toward = sin_0 * sin_d + cos_0 * cos_d * cos_a;
        (toward > 0.0).then(|| {
            [
                cos_d * sin_a / toward,
                (cos_0 * sin_d - sin_0 * cos_d * cos_a) / toward,
            ]
            .map(|tangent| tangent.to_degrees() * 3600.0)
        })
    }
}

fn to_fk5(frame: SkyFrame, vector: Vector) -> Option<Vector> {
    match frame {
        SkyFrame::Icrs => Some(times(&icrs_to_fk5(), vector)),
        SkyFrame::Fk5 { equinox: 2000.0 } => Some(vector),
        SkyFrame::Galactic => Some(times(&transposed(&fk5_to_galactic()), vector)),
        SkyFrame::Fk4 { equinox: 1950.0 } => {
            let without = normalised(std::array::from_fn(|axis| {
                vector[axis] - ELLIPTIC[axis] + dot(vector, ELLIPTIC) * vector[axis]
            }));
            Some(normalised(times(&FK4_TO_FK5, without)))
        }
        _ => None,
    }
}

fn from_fk5(frame: SkyFrame, vector: Vector) -> Option<Vector> {
    match frame {
        SkyFrame::Icrs => Some(times(&transposed(&icrs_to_fk5()), vector)),
        SkyFrame::Fk5 { equinox: 2000.0 } => Some(vector),
        SkyFrame::Galactic => Some(times(&fk5_to_galactic(), vector)),
        SkyFrame::Fk4 { equinox: 1950.0 } => {
            let without = normalised(times(&transposed(&FK4_TO_FK5), vector));
            // The terms are 1.7e-6: the second step changes the result by their square.
            let mut with = without;
            for _ in 0..3 {
                with = normalised(std::array::from_fn(|axis| {
                    without[axis] + ELLIPTIC[axis] - dot(with, ELLIPTIC) * with[axis]
                }));
            }
            Some(with)
        }
        _ => None,
    }
}

/// Elliptic terms of the annual aberration at B1950, radians.
const ELLIPTIC: Vector = [-1.625_57e-6, -0.319_19e-6, -0.138_43e-6];

/// FK4 at B1950 without elliptic terms into FK5 at J2000, epoch B1950.
const FK4_TO_FK5: Matrix = [
    [
        0.999_925_679_495_687_7,
        -0.011_181_483_220_466_2,
        -0.004_859_003_815_359_2,
    ],
    [
        0.011_181_483_239_171_7,
        0.999_937_484_893_313_5,
        -0.000_027_162_594_714_2,
    ],
    [
        0.004_859_003_772_314_3,
        -0.000_027_170_293_744_0,
        0.999_988_194_602_374_2,
    ],
];

/// Right ascension and declination of the galactic pole, and galactic longitude of the celestial pole,
/// degrees, J2000.
const GALACTIC_POLE_DEG: [f64; 2] = [192.859_481_206_534_8, 27.128_251_180_856_22];
const CELESTIAL_POLE_LONGITUDE_DEG: f64 = 122.931_918_568_002_6;

fn fk5_to_galactic() -> Matrix {
    let [alpha, delta] = GALACTIC_POLE_DEG;
    let turned = product(&about_y(90.0 - delta), &about_z(alpha));
    product(&about_z(180.0 - CELESTIAL_POLE_LONGITUDE_DEG), &turned)
}

/// Offsets of the ICRS pole (eta, xi) and of the origin of right ascension, milliarcseconds.
const ICRS_ETA_MAS: f64 = -19.9;
const ICRS_XI_MAS: f64 = 9.1;
const ICRS_ORIGIN_MAS: f64 = -22.9;

fn icrs_to_fk5() -> Matrix {
    let degrees = |mas: f64| mas / 3.6e6;
    let turned = product(
        &about_y(degrees(ICRS_XI_MAS)),
        &about_z(degrees(ICRS_ORIGIN_MAS)),
    );
    product(&about_x(degrees(-ICRS_ETA_MAS)), &turned)
}

fn about_x(angle_deg: f64) -> Matrix {
    let (sin, cos) = angle_deg.to_radians().sin_cos();
    [[1.0, 0.0, 0.0], [0.0, cos, sin], [0.0, -sin, cos]]
}

fn about_y(angle_deg: f64) -> Matrix {
    let (sin, cos) = angle_deg.to_radians().sin_cos();
    [[cos, 0.0, -sin], [0.0, 1.0, 0.0], [sin, 0.0, cos]]
}

fn about_z(angle_deg: f64) -> Matrix {
    let (sin, cos) = angle_deg.to_radians().sin_cos();
    [[cos, sin, 0.0], [-sin, cos, 0.0], [0.0, 0.0, 1.0]]
}

fn dot(a: Vector, b: Vector) -> f64 {
    a.iter().zip(&b).map(|(a, b)| a * b).sum()
}

fn times(matrix: &Matrix, vector: Vector) -> Vector {
    std::array::from_fn(|row| dot(matrix[row], vector))
}

fn product(a: &Matrix, b: &Matrix) -> Matrix {
    std::array::from_fn(|row| {
        std::array::from_fn(|column| (0..3).map(|k| a[row][k] * b[k][column]).sum())
    })
}

fn transposed(matrix: &Matrix) -> Matrix {
    std::array::from_fn(|row| std::array::from_fn(|column| matrix[column][row]))
}

fn normalised(vector: Vector) -> Vector {
    let length = dot(vector, vector).sqrt();
    vector.map(|value| value / length)
}
