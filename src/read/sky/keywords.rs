//! The cards of the two celestial axes of an image.

use std::path::Path;

use super::{Projection, Sky, SkyFrame, SkyKeywords, SkyProblem};
use crate::read::error::ReadError;
use crate::read::fits::Unit;

/// Besselian equinoxes end here: an EQUINOX before it is one of the FK4 (standard 4.0, table 25).
const FK5_FROM: f64 = 1984.0;

/// Numbers from 1 of the two celestial axes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(in crate::read) struct SkyAxes {
    pub longitude: usize,
    pub latitude: usize,
}

/// What a CTYPE of a celestial axis says.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Coordinate {
    RightAscension,
    Declination,
    GalacticLongitude,
    GalacticLatitude,
}

/// The coordinate that an axis type names, whatever its projection.
fn coordinate(kind: &str) -> Option<Coordinate> {
    let name = kind.split('-').next().unwrap_or_default();
    match name.trim().to_ascii_uppercase().as_str() {
        "RA" => Some(Coordinate::RightAscension),
        "DEC" => Some(Coordinate::Declination),
        "GLON" => Some(Coordinate::GalacticLongitude),
        "GLAT" => Some(Coordinate::GalacticLatitude),
        _ => None,
    }
}

impl SkyAxes {
    /// Which axes are celestial.
    ///
    /// # Errors
    ///
    /// There are not exactly one of longitude and one of latitude, of one frame.
    pub(in crate::read) fn find(path: &Path, unit: &Unit<'_>) -> Result<Self, ReadError> {
        let kinds: Vec<Option<Coordinate>> = (1..=unit.axes.len())
            .map(|axis| coordinate(&unit.text(&format!("CTYPE{axis}")).unwrap_or_default()))
            .collect();
        let of = |wanted: Coordinate| {
            let mut found = kinds
                .iter()
                .enumerate()
                .filter(|(_, kind)| **kind == Some(wanted));
            match (found.next(), found.next()) {
                (Some((axis, _)), None) => Some(axis + 1),
                _ => None,
            }
        };
        let celestial = kinds.iter().flatten().count();
        let equatorial = (of(Coordinate::RightAscension), of(Coordinate::Declination));
        let galactic = (
            of(Coordinate::GalacticLongitude),
            of(Coordinate::GalacticLatitude),
        );
        match (celestial, equatorial, galactic) {
            (2, (Some(longitude), Some(latitude)), _)
            | (2, _, (Some(longitude), Some(latitude))) => Ok(Self {
                longitude,
                latitude,
            }),
            _ => Err(ReadError::FitsCubeAxes {
                path: path.to_path_buf(),
                unit: unit.number,
                found: axis_types(unit),
            }),
        }
    }
}

/// The types and lengths of all axes, in words.
pub(in crate::read) fn axis_types(unit: &Unit<'_>) -> String {
    let each = unit.axes.iter().enumerate().map(|(axis, length)| {
        let kind = unit.text(&format!("CTYPE{}", axis + 1));
        format!("{} ({length})", kind.as_deref().unwrap_or("no type"))
    });
    each.collect::<Vec<_>>().join(", ")
}

/// The sky coordinates of an image with these axes.
pub(in crate::read) fn sky_of(
    path: &Path,
    unit: &Unit<'_>,
    axes: SkyAxes,
) -> Result<Sky, ReadError> {
    let SkyAxes {
        longitude,
        latitude,
    } = axes;
    let (projection, is_gls) = projection(path, unit, axes)?;
    refuse_parameters(path, unit, axes)?;
    let mut reference_deg = [0.0; 2];
    let mut reference_pixel = [0.0; 2];
    for (index, axis) in [longitude, latitude].into_iter().enumerate() {
        let factor = degrees(path, unit, axis)?;
        reference_deg[index] = factor * needed(path, unit, &format!("CRVAL{axis}"))?;
        reference_pixel[index] = needed(path, unit, &format!("CRPIX{axis}"))?;
    }
    if reference_deg[1].abs() > 90.0 {
        let found = reference_deg[1].to_string();
        let keyword = format!("CRVAL{latitude}");
        return Err(unit.wrong_card(path, &keyword, found, "a latitude from -90 to 90 degrees"));
    }
    let mut plane_latitude_deg = 0.0;
    if is_gls {
        plane_latitude_deg = std::mem::take(&mut reference_deg[1]);
    }
    let keywords = SkyKeywords {
        frame: frame(path, unit, longitude)?,
        projection,
        reference_deg,
        reference_pixel,
        matrix_deg: matrix(path, unit, axes)?,
        native_pole_longitude_deg: unit.number(path, "LONPOLE")?,
        native_pole_latitude_deg: unit.number(path, "LATPOLE")?,
        plane_latitude_deg,
    };
    Sky::new(keywords).map_err(|problem| match problem {
        SkyProblem::Singular => unit.wrong_card(
            path,
            &format!("CDELT{longitude}"),
            format!("a matrix {:?} without an inverse", keywords.matrix_deg),
            "two axes that span the sky",
        ),
        SkyProblem::NoPole => unit.wrong_card(
            path,
            "LONPOLE",
            format!("{:?}", keywords.native_pole_longitude_deg),
            "a native pole that the reference point allows",
        ),
    })
}

fn needed(path: &Path, unit: &Unit<'_>, keyword: &str) -> Result<f64, ReadError> {
    unit.number(path, keyword)?
        .ok_or_else(|| unit.wrong_card(path, keyword, "no such card".into(), "a number"))
}

/// The projection, and whether it is written the older way as GLS.
fn projection(
    path: &Path,
    unit: &Unit<'_>,
    axes: SkyAxes,
) -> Result<(Projection, bool), ReadError> {
    let code = |axis: usize| {
        let kind = unit.text(&format!("CTYPE{axis}")).unwrap_or_default();
        let kind = kind.to_ascii_uppercase();
        kind.split_once('-')
            .map_or_else(String::new, |(_, code)| code.trim_matches('-').to_owned())
    };
    let (code, other) = (code(axes.longitude), code(axes.latitude));
    let found = match code.as_str() {
        "TAN" => Some((Projection::Tan, false)),
        "SIN" => Some((Projection::Sin, false)),
        "CAR" => Some((Projection::Car, false)),
        "SFL" => Some((Projection::Sfl, false)),
        "GLS" => Some((Projection::Sfl, true)),
        _ => None,
    };
    found.filter(|_| code == other).ok_or_else(|| {
        let keyword = format!("CTYPE{}", axes.longitude);
        let found = format!("the projections `{code}` and `{other}`");
        unit.wrong_card(
            path,
            &keyword,
            found,
            "TAN, SIN, CAR, SFL or GLS, on both axes",
        )
    })
}

/// Parameters of a projection: none of these has any that is not 0 here.
fn refuse_parameters(path: &Path, unit: &Unit<'_>, axes: SkyAxes) -> Result<(), ReadError> {
    for axis in [axes.longitude, axes.latitude] {
        for index in 0..=4 {
            let keyword = format!("PV{axis}_{index}");
            if let Some(value) = unit.number(path, &keyword)?
                && value != 0.0
            {
                let expected = "0: projections without parameters are read";
                return Err(unit.wrong_card(path, &keyword, value.to_string(), expected));
            }
        }
    }
    Ok(())
}

/// Factor of a CUNIT to degrees.
fn degrees(path: &Path, unit: &Unit<'_>, axis: usize) -> Result<f64, ReadError> {
    let keyword = format!("CUNIT{axis}");
    let Some(text) = unit.text(&keyword) else {
        return Ok(1.0);
    };
    match text.to_ascii_lowercase().as_str() {
        "deg" | "degree" | "degrees" => Ok(1.0),
        "arcmin" => Ok(1.0 / 60.0),
        "arcsec" => Ok(1.0 / 3600.0),
        "rad" => Ok(1.0_f64.to_degrees()),
        _ => Err(unit.wrong_card(
            path,
            &keyword,
            format!("`{text}`"),
            "deg, arcmin, arcsec or rad",
        )),
    }
}

fn frame(path: &Path, unit: &Unit<'_>, longitude: usize) -> Result<SkyFrame, ReadError> {
    let kind = unit.text(&format!("CTYPE{longitude}")).unwrap_or_default();
    if coordinate(&kind) == Some(Coordinate::GalacticLongitude) {
        return Ok(SkyFrame::Galactic);
    }
    let equinox = match unit.number(path, "EQUINOX")? {
        Some(equinox) => Some(equinox),
        None => unit.number(path, "EPOCH")?,
    };
    let stated = match unit.text("RADESYS") {
        Some(system) => Some(system),
        None => unit.text("RADECSYS"),
    };
    match (
        stated.as_deref().map(str::to_ascii_uppercase).as_deref(),
        equinox,
    ) {
        (Some("ICRS"), _) | (None, None) => Ok(SkyFrame::Icrs),
        (Some("FK5"), equinox) => Ok(SkyFrame::Fk5 {
            equinox: equinox.unwrap_or(2000.0),
        }),
        (Some("FK4"), equinox) => Ok(SkyFrame::Fk4 {
            equinox: equinox.unwrap_or(1950.0),
        }),
        (None, Some(equinox)) if equinox < FK5_FROM => Ok(SkyFrame::Fk4 { equinox }),
        (None, Some(equinox)) => Ok(SkyFrame::Fk5 { equinox }),
        (Some(other), _) => {
            Err(unit.wrong_card(path, "RADESYS", format!("`{other}`"), "ICRS, FK5 or FK4"))
        }
    }
}

/// Degrees in the plane a pixel, from CD, PC with CDELT, or CDELT with CROTA.
fn matrix(path: &Path, unit: &Unit<'_>, axes: SkyAxes) -> Result<[[f64; 2]; 2], ReadError> {
    let both = [axes.longitude, axes.latitude];
    let factors = [degrees(path, unit, both[0])?, degrees(path, unit, both[1])?];
    for stem in ["CD", "PC"] {
        refuse_coupling(path, unit, axes, stem)?;
    }
    if let Some(matrix) = stated_matrix(path, unit, both, "CD", 0.0)? {
        return Ok(std::array::from_fn(|row| {
            matrix[row].map(|value| factors[row] * value)
        }));
    }
    let steps = [
        factors[0] * needed(path, unit, &format!("CDELT{}", both[0]))?,
        factors[1] * needed(path, unit, &format!("CDELT{}", both[1]))?,
    ];
    if let Some(matrix) = stated_matrix(path, unit, both, "PC", 1.0)? {
        return Ok(std::array::from_fn(|row| {
            matrix[row].map(|value| steps[row] * value)
        }));
    }
    // The angle stands with the latitude (Paper II, section 6.1).
    let angle = unit.number(path, &format!("CROTA{}", both[1]))?;
    let (sin, cos) = angle.unwrap_or(0.0).to_radians().sin_cos();
    Ok([
        [steps[0] * cos, -steps[1] * sin],
        [steps[0] * sin, steps[1] * cos],
    ])
}

/// The part of a matrix that couples both axes; none where no card of it is there.
fn stated_matrix(
    path: &Path,
    unit: &Unit<'_>,
    both: [usize; 2],
    stem: &str,
    diagonal: f64,
) -> Result<Option<[[f64; 2]; 2]>, ReadError> {
    let mut matrix = [[diagonal, 0.0], [0.0, diagonal]];
    let mut stated = false;
    for (row, i) in both.into_iter().enumerate() {
        for (column, j) in both.into_iter().enumerate() {
            // PC001002 is how a draft of the standard wrote it.
            let keywords = [format!("{stem}{i}_{j}"), format!("{stem}{i:03}{j:03}")];
            for keyword in keywords {
                if let Some(value) = unit.number(path, &keyword)? {
                    matrix[row][column] = value;
                    stated = true;
                }
            }
        }
    }
    Ok(stated.then_some(matrix))
}

/// Sky axes that turn with another one are none of a cube.
fn refuse_coupling(
    path: &Path,
    unit: &Unit<'_>,
    axes: SkyAxes,
    stem: &str,
) -> Result<(), ReadError> {
    let is_sky = |axis: usize| axis == axes.longitude || axis == axes.latitude;
    let count = unit.axes.len().min(9);
    for i in 1..=count {
        for j in (1..=count).filter(|j| is_sky(i) != is_sky(*j)) {
            let keyword = format!("{stem}{i}_{j}");
            if let Some(value) = unit.number(path, &keyword)?
                && value != 0.0
            {
                let expected = "0: sky axes independent of the others";
                return Err(unit.wrong_card(path, &keyword, value.to_string(), expected));
            }
        }
    }
    Ok(())
}
