//! Two cubes of different beams and grids on one grid, at one beam.
//!
//! The finer beam is convolved to the coarser one with the elliptical Gaussian between the two; then
//! the cube that has not the chosen grid is interpolated onto it. Both keep surface brightness, which is
//! what temperatures and Jy per beam are; the values stay in the unit, and refer to the beam, of the file.
//! Planes are worked on a few at a time and go to a temporary file: memory does not grow with the cube.

mod beam;
mod convolve;
mod resample;

pub use beam::{BeamProblem, kernel};
pub use convolve::PlaneConvolution;
pub use resample::PlaneResampling;

use crate::read::ReadError;
use crate::read::cube::{Cube, SkyBeam};
use crate::read::sky::{Sky, UnknownConversion};
use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::{Path, PathBuf};

/// Memory for planes: this share of a cube, within limits.
const PLANES_SHARE: usize = 16;
const PLANES_BYTES: (usize, usize) = (2 << 20, 128 << 20);

/// Pixels that lie closer to each other than this are one: a thousandth of a pixel is far below what
/// pointing allows.
const SAME_PIXEL: f64 = 1e-3;

/// Two cubes pixel by pixel at one beam.
#[derive(Debug)]
pub struct CubePair {
    /// The optically thick line.
    pub thick: Cube,
    /// The optically thin line.
    pub thin: Cube,
    /// The beam of both.
    pub beam: SkyBeam,
    /// What was done to bring them together.
    pub notes: Vec<CubeNote>,
}

/// What was done to a cube; `Display` gives it in words.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum CubeNote {
    /// It was convolved to the other one's beam.
    #[error(
        "{}: convolved from a beam of {:.2} x {:.2} arcsec to {:.2} x {:.2} arcsec",
        path.display(), from.major_arcsec, from.minor_arcsec, to.major_arcsec, to.minor_arcsec
    )]
    Convolved {
        /// The file.
        path: PathBuf,
        /// Its beam.
        from: SkyBeam,
        /// The common beam.
        to: SkyBeam,
    },
    /// It was interpolated onto the other one's grid.
    #[error("{}: interpolated onto the pixels of {}", path.display(), onto.display())]
    Resampled {
        /// The file.
        path: PathBuf,
        /// The file whose grid it is.
        onto: PathBuf,
    },
}

/// Why two cubes cannot be brought together.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum CubeError {
    /// A beam is not known.
    #[error("{}: no beam (BMAJ), expected one: cubes are compared at one beam", path.display())]
    NoBeam {
        /// The file.
        path: PathBuf,
    },
    /// A beam that is none.
    #[error(
        "{}: a beam of {} x {} arcsec, expected full widths above 0, the major one first",
        path.display(), beam.major_arcsec, beam.minor_arcsec
    )]
    Beam {
        /// The file.
        path: PathBuf,
        /// The beam.
        beam: SkyBeam,
    },
    /// Neither beam can be convolved to the other.
    #[error(
        "beams of {:.2} x {:.2} arcsec at {:.0} deg ({}) and {:.2} x {:.2} arcsec at {:.0} deg ({}), expected one to be the wider in every direction",
        thick.major_arcsec, thick.minor_arcsec, thick.angle_deg, thick_path.display(),
        thin.major_arcsec, thin.minor_arcsec, thin.angle_deg, thin_path.display()
    )]
    CrossedBeams {
        /// The thick line's file.
        thick_path: PathBuf,
        /// Its beam.
        thick: SkyBeam,
        /// The thin line's file.
        thin_path: PathBuf,
        /// Its beam.
        thin: SkyBeam,
    },
    /// The cubes show different parts of the sky.
    #[error(
        "{} and {} have no pixel in common (their centres are {separation_arcsec:.0} arcsec apart), expected cubes that overlap",
        path.display(), other.display()
    )]
    NoOverlap {
        /// One file.
        path: PathBuf,
        /// The other one.
        other: PathBuf,
        /// Distance of their middles, arcsec.
        separation_arcsec: f64,
    },
    /// The cubes name different objects.
    #[error("`{thick}` ({}) and `{thin}` ({}), expected one source", thick_path.display(), thin_path.display())]
    DifferentSources {
        /// The thick line's file.
        thick_path: PathBuf,
        /// Its object.
        thick: String,
        /// The thin line's file.
        thin_path: PathBuf,
        /// Its object.
        thin: String,
    },
    /// Their frames cannot be converted.
    #[error("{}: {error}", path.display())]
    Frames {
        /// The file.
        path: PathBuf,
        /// Why.
        error: UnknownConversion,
    },
    /// A pixel in the middle has no position.
    #[error("{}: the middle of the image lies off the sky, expected a projection that shows it", path.display())]
    OffSky {
        /// The file.
        path: PathBuf,
    },
    /// A cube could not be read.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// There is no room for the common grid.
    #[error("{}: a temporary cube cannot be written: {reason}", scratch.display())]
    Scratch {
        /// The folder for temporary files.
        scratch: PathBuf,
        /// What the operating system says.
        reason: String,
    },
}

impl CubeError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::NoBeam { .. } => "give beam_arcsec in the line's section of the run sheet".into(),
            Self::Beam { .. } => "BMAJ and BMIN are in degrees; beam_arcsec is in arcsec".into(),
            Self::CrossedBeams { .. } => {
                "convolve one of the cubes to a beam that holds the other".into()
            }
            Self::NoOverlap { .. } => "check that both cubes are of one source".into(),
            Self::DifferentSources { .. } => {
                "check the files; name the source in the run sheet where both names are of one"
                    .into()
            }
            Self::Frames { .. } => "bring both cubes to one frame".into(),
            Self::OffSky { .. } => "check CRPIX, CRVAL and CDELT".into(),
            Self::Read(error) => return error.hint(),
            Self::Scratch { .. } => "make room in the output folder".into(),
        })
    }
}

/// What is given of two cubes beside their files.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct CubePairSettings {
    /// Beams of the thick and the thin line, in place of the files'.
    pub beams: [Option<SkyBeam>; 2],
    /// Whether cubes of different OBJECT are refused.
    pub one_object: bool,
}

/// Brings two cubes to one beam and one grid: the grid of the cube with the coarser beam, of two alike the
/// thick line's. `scratch` is a folder for temporary files.
///
/// # Errors
///
/// [`CubeError`] where beams, positions or files do not allow it.
pub fn pair(
    thick: Cube,
    thin: Cube,
    settings: &CubePairSettings,
    scratch: &Path,
) -> Result<CubePair, CubeError> {
    if settings.one_object {
        one_object(&thick, &thin)?;
    }
    let [thick_beam, thin_beam] = [
        beam_of(&thick, settings.beams[0])?,
        beam_of(&thin, settings.beams[1])?,
    ];
    let crossed = |problem| match problem {
        BeamProblem::NotWider => CubeError::CrossedBeams {
            thick_path: path_of(&thick),
            thick: thick_beam,
            thin_path: path_of(&thin),
            thin: thin_beam,
        },
    };
    let mut notes = Vec::new();
    let (thick, thin, beam) = match kernel(&thin_beam, &thick_beam) {
        Ok(missing) => {
            let beams = (thin_beam, thick_beam);
            let thin = onto(thin, missing, beams, &thick, scratch, &mut notes)?;
            (thick, thin, thick_beam)
        }
        Err(_) => {
            let missing = kernel(&thick_beam, &thin_beam).map_err(crossed)?;
            let beams = (thick_beam, thin_beam);
            let thick = onto(thick, missing, beams, &thin, scratch, &mut notes)?;
            (thick, thin, thin_beam)
        }
    };
    Ok(CubePair {
        thick,
        thin,
        beam,
        notes,
    })
}

fn path_of(cube: &Cube) -> PathBuf {
    cube.description().origin.path.clone()
}

fn one_object(thick: &Cube, thin: &Cube) -> Result<(), CubeError> {
    let plain = |name: &str| -> String {
        let kept = name.chars().filter(|letter| letter.is_alphanumeric());
        kept.collect::<String>().to_ascii_lowercase()
    };
    match (&thick.description().object, &thin.description().object) {
        (Some(one), Some(other)) if plain(one) != plain(other) => {
            Err(CubeError::DifferentSources {
                thick_path: path_of(thick),
                thick: one.clone(),
                thin_path: path_of(thin),
                thin: other.clone(),
            })
        }
        _ => Ok(()),
    }
}

fn beam_of(cube: &Cube, given: Option<SkyBeam>) -> Result<SkyBeam, CubeError> {
    let path = path_of(cube);
    let Some(beam) = given.or(cube.beam()) else {
        return Err(CubeError::NoBeam { path });
    };
    let possible = beam.minor_arcsec > 0.0
        && beam.major_arcsec >= beam.minor_arcsec
        && beam.major_arcsec.is_finite()
        && beam.angle_deg.is_finite();
    if possible {
        Ok(beam)
    } else {
        Err(CubeError::Beam { path, beam })
    }
}

/// A cube convolved by a Gaussian of this covariance (east, north; arcsec^2) on another one's grid.
fn onto(
    cube: Cube,
    missing: Option<[[f64; 2]; 2]>,
    (from, to): (SkyBeam, SkyBeam),
    grid: &Cube,
    scratch: &Path,
    notes: &mut Vec<CubeNote>,
) -> Result<Cube, CubeError> {
    let path = path_of(&cube);
    let frames = |error| CubeError::Frames {
        path: path.clone(),
        error,
    };
    let size = (grid.width(), grid.height());
    let mut places = Vec::with_capacity(size.0 * size.1);
    let mut same = (cube.width(), cube.height()) == size;
    for y in 0..size.1 {
        for x in 0..size.0 {
            let here = [x as f64, y as f64];
            let place = match grid.sky().position(here) {
                Some(position) => cube.sky().pixel(position).map_err(frames)?,
                None => None,
            };
            same &= place.is_some_and(|place| {
                (place[0] - here[0]).abs() < SAME_PIXEL && (place[1] - here[1]).abs() < SAME_PIXEL
            });
            places.push(place);
        }
    }
    let resampling = PlaneResampling::new((cube.width(), cube.height()), &places);
    if !resampling.reaches_any() {
        let separation_arcsec = separation(&cube, grid).map_err(frames)?;
        return Err(CubeError::NoOverlap {
            path,
            other: path_of(grid),
            separation_arcsec,
        });
    }
    if same && missing.is_none() {
        return Ok(cube);
    }
    let convolution = match missing {
        None => None,
        Some(missing) => {
            notes.push(CubeNote::Convolved {
                path: path.clone(),
                from,
                to,
            });
            let pixels = covariance_in_pixels(&cube, missing)?;
            Some(PlaneConvolution::new((cube.width(), cube.height()), pixels))
        }
    };
    if !same {
        notes.push(CubeNote::Resampled {
            path,
            onto: path_of(grid),
        });
    }
    let resampling = (!same).then_some(resampling);
    let sky = grid.sky().clone();
    let file = write_planes(&cube, convolution, resampling.as_ref(), scratch)?;
    Ok(cube.regridded(file, sky, size, Some(to)))
}

/// Writes every plane, convolved and on the new grid, to a temporary file.
fn write_planes(
    cube: &Cube,
    mut convolution: Option<PlaneConvolution>,
    resampling: Option<&PlaneResampling>,
    scratch: &Path,
) -> Result<File, CubeError> {
    let no_room = |error: io::Error| CubeError::Scratch {
        scratch: scratch.to_owned(),
        reason: error.to_string(),
    };
    let plane = cube.width() * cube.height();
    let plane_bytes = plane * size_of::<f32>();
    let budget =
        (plane_bytes * cube.channels() / PLANES_SHARE).clamp(PLANES_BYTES.0, PLANES_BYTES.1);
    let together = (budget / plane_bytes.max(1)).max(1);
    let file = tempfile::tempfile_in(scratch).map_err(no_room)?;
    let mut writer = BufWriter::with_capacity(1 << 18, file);
    let mut planes = Vec::new();
    let mut moved = Vec::new();
    for first in (0..cube.channels()).step_by(together) {
        let last = (first + together).min(cube.channels());
        cube.planes(first..last, &mut planes)?;
        for values in planes.chunks_exact_mut(plane) {
            if let Some(convolution) = &mut convolution {
                convolution.apply(values);
            }
            let values = match resampling {
                Some(resampling) => {
                    resampling.apply(values, &mut moved);
                    &moved[..]
                }
                None => values,
            };
            for value in values {
                writer.write_all(&value.to_be_bytes()).map_err(no_room)?;
            }
        }
    }
    (writer.into_inner()).map_err(|error| no_room(error.into_error()))
}

fn middle(cube: &Cube) -> [f64; 2] {
    [cube.width(), cube.height()].map(|count| (count as f64 - 1.0) / 2.0)
}

fn separation(one: &Cube, other: &Cube) -> Result<f64, UnknownConversion> {
    let (Some(a), Some(b)) = (
        one.sky().position(middle(one)),
        other.sky().position(middle(other)),
    ) else {
        return Ok(f64::NAN);
    };
    Ok(b.converted(a.frame)?.separation_arcsec(&a))
}

/// A covariance on the sky (east, north; arcsec^2) in pixels (columns, rows) about the image's middle.
fn covariance_in_pixels(cube: &Cube, sky: [[f64; 2]; 2]) -> Result<[[f64; 2]; 2], CubeError> {
    let off = || CubeError::OffSky {
        path: path_of(cube),
    };
    let [[a, b], [c, d]] = pixel_arcsec(cube.sky(), middle(cube)).ok_or_else(off)?;
    let determinant = a * d - b * c;
    if determinant == 0.0 {
        return Err(off());
    }
    // inverse times covariance times transposed inverse
    let inverse = [
        [d / determinant, -b / determinant],
        [-c / determinant, a / determinant],
    ];
    let half: [[f64; 2]; 2] = std::array::from_fn(|i| {
        std::array::from_fn(|j| inverse[i][0] * sky[0][j] + inverse[i][1] * sky[1][j])
    });
    Ok(std::array::from_fn(|i| {
        std::array::from_fn(|j| half[i][0] * inverse[j][0] + half[i][1] * inverse[j][1])
    }))
}

/// Arcseconds east (first row) and north that a step along columns and rows is, about a pixel; none off
/// the sky.
#[must_use]
pub fn pixel_arcsec(sky: &Sky, [x, y]: [f64; 2]) -> Option<[[f64; 2]; 2]> {
    let here = sky.position([x, y])?;
    let step = |dx: f64, dy: f64| {
        let after = sky.position([x + dx, y + dy])?.offsets_arcsec(&here)?;
        let before = sky.position([x - dx, y - dy])?.offsets_arcsec(&here)?;
        Some([after[0] - before[0], after[1] - before[1]])
    };
    let (column, row) = (step(0.5, 0.0)?, step(0.0, 0.5)?);
    Some([[column[0], row[0]], [column[1], row[1]]])
}
