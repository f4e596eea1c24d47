//! The pointings of a map: where they are, and their spectra, from cubes, from files or from FITS tables.
//!
//! Pointings are numbered row by row of the raster, columns fastest, or in the order of their table. Cubes
//! stay in their files; a block of pointings is read when it is worked on.

use super::super::pair::{open, refuse_exchanged_lines};
use super::super::{LineInput, LineSection, PairInput, RunError, RunSheet};
use crate::derive::SourceProperties;
use crate::grid::cubes::{CubePair, CubePairSettings, pair, pixel_arcsec};
use crate::line::Line;
use crate::prepare::PrepareSettings;
use crate::prepare::scale::{Conversion, to_spectrum};
use crate::read::ReadError;
use crate::read::cube::{Cube, SkyBeam};
use crate::read::pointings::{
    PointingFiles, PointingPlace, PointingSpectrum, read_pointing_spectra, read_pointings,
};
use crate::read::sky::{Sky, SkyFrame, SkyPosition};
use crate::report::sky_map::MapAxes;
use crate::spectrum::{Origin, RawSpectrum, Spectrum};
use std::ops::Range;
use std::path::Path;

/// Pointings that are worked on and kept together, or a row of a cube where that is more: little is lost when
/// a run is stopped.
const BLOCK_POINTINGS: usize = 8;

/// Rows and columns of a raster may miss their places by this share of the step.
const RASTER_TOLERANCE: f64 = 0.15;

/// Pointings are neighbours up to so many steps apart: the eight about one on a square raster.
const NEIGHBOUR_STEPS: f64 = 1.6;

/// The pointings of a run.
#[derive(Debug)]
pub struct Field {
    sites: Sites,
    spectra: Spectra,
    lines: [Line; 2],
    sections: [LineSection; 2],
    prepare: [PrepareSettings; 2],
    source: SourceProperties,
    name: Option<String>,
    beam: Option<SkyBeam>,
    notes: Vec<String>,
}

/// Where the pointings are.
#[derive(Debug)]
enum Sites {
    /// Every pixel of a plane.
    Pixels {
        sky: Sky,
        reference: SkyPosition,
        width: usize,
        height: usize,
    },
    /// A list.
    List {
        ids: Vec<String>,
        offsets_arcsec: Vec<[f64; 2]>,
        /// Position of zero offset.
        reference: Option<SkyPosition>,
        raster: Option<Raster>,
        step_arcsec: f64,
    },
}

/// Pointings that lie on rows and columns toward the north and the west.
#[derive(Debug)]
struct Raster {
    width: usize,
    height: usize,
    /// Offsets of the first column and row.
    first_arcsec: [f64; 2],
    step_arcsec: f64,
    /// Cell of every pointing.
    cells: Vec<usize>,
}

#[derive(Debug)]
enum Spectra {
    Cubes {
        pair: Box<CubePair>,
        conversions: Box<[Conversion; 2]>,
    },
    Files(Vec<PointingFiles>),
    Rows(Vec<[Result<RawSpectrum, ReadError>; 2]>),
}

/// Spectra of a block of pointings, where they are read together.
#[derive(Debug, Default)]
pub struct Block {
    first: usize,
    /// Values of both cubes in the order of their files.
    values: [Vec<f32>; 2],
}

impl Field {
    /// Opens the cubes or tables of a run sheet; `scratch` is a folder for temporary files.
    ///
    /// # Errors
    ///
    /// [`RunError`] where a file or a setting cannot be used, or the two lines do not belong together.
    pub fn open(sheet: &RunSheet, base: &Path, scratch: &Path) -> Result<Self, RunError> {
        let lines = [sheet.thick.line("thick")?, sheet.thin.line("thin")?];
        refuse_exchanged_lines(&lines[0], &lines[1])?;
        let centre = sheet.grid.centre()?;
        let mut notes = Vec::new();
        let mut beam = None;
        let (sites, spectra) = if let Some(table) = &sheet.grid.pointings {
            let pointings = read_pointings(&base.join(table))?;
            let places: Vec<_> = pointings.iter().map(|pointing| pointing.place).collect();
            let ids = pointings
                .iter()
                .map(|pointing| pointing.id.clone())
                .collect();
            (list(ids, &places, centre), Spectra::Files(pointings))
        } else {
            let path = |section: &LineSection, which| {
                let file = section.file.as_ref().ok_or(RunError::NoFile { which })?;
                Ok::<_, RunError>(base.join(file))
            };
            let (thick, thin) = (path(&sheet.thick, "thick")?, path(&sheet.thin, "thin")?);
            match cubes(sheet, (&thick, &thin), scratch) {
                Ok(pair) => {
                    notes.extend(pair.notes.iter().map(ToString::to_string));
                    beam = Some(pair.beam);
                    let conversions = Box::new(conversions(sheet, &lines, &pair, &mut notes)?);
                    let sites = pixels(&pair, centre)?;
                    let pair = Box::new(pair);
                    (sites, Spectra::Cubes { pair, conversions })
                }
                Err(RunError::Read(ReadError::FitsNoSpectrum { .. })) => {
                    rows(sheet, (&thick, &thin), centre)?
                }
                Err(error) => return Err(error),
            }
        };
        Ok(Self {
            sites,
            spectra,
            prepare: [
                sheet.prepare_settings(&sheet.thick)?,
                sheet.prepare_settings(&sheet.thin)?,
            ],
            lines,
            sections: [sheet.thick.clone(), sheet.thin.clone()],
            source: sheet.source.properties()?,
            name: sheet.source.name.clone(),
            beam: beam.or_else(|| wider_beam(sheet)),
            notes,
        })
    }

    /// What was done or assumed on the way.
    pub fn notes(&self) -> &[String] {
        &self.notes
    }

    /// Beam of both lines, where it is known.
    pub fn beam(&self) -> Option<SkyBeam> {
        self.beam
    }

    /// Both lines, the thick one first.
    pub fn lines(&self) -> &[Line; 2] {
        &self.lines
    }

    /// Name of the source, of the sheet or of the files.
    pub fn name(&self) -> Option<String> {
        let object = || match &self.spectra {
            Spectra::Cubes { pair, .. } => (pair.thick.description().object.clone())
                .or_else(|| pair.thin.description().object.clone()),
            _ => None,
        };
        self.name.clone().or_else(object)
    }

    /// Pointings, those without spectra included.
    pub fn len(&self) -> usize {
        match &self.sites {
            Sites::Pixels { width, height, .. } => width * height,
            Sites::List { ids, .. } => ids.len(),
        }
    }

    /// Name of a pointing.
    pub fn id(&self, site: usize) -> String {
        match &self.sites {
            Sites::Pixels { width, .. } => format!("{}-{}", site % width + 1, site / width + 1),
            Sites::List { ids, .. } => ids[site].clone(),
        }
    }

    /// Offsets east and north of the reference position, arcsec; none for a pixel off the sky.
    pub fn offsets_arcsec(&self, site: usize) -> Option<[f64; 2]> {
        match &self.sites {
            Sites::Pixels {
                sky,
                reference,
                width,
                ..
            } => {
                let pixel = [(site % width) as f64, (site / width) as f64];
                sky.position(pixel)?.offsets_arcsec(reference)
            }
            Sites::List { offsets_arcsec, .. } => Some(offsets_arcsec[site]),
        }
    }

    /// The position of zero offset, where it is known.
    pub fn reference(&self) -> Option<SkyPosition> {
        match &self.sites {
            Sites::Pixels { reference, .. } => Some(*reference),
            Sites::List { reference, .. } => *reference,
        }
    }

    /// Columns and rows of the raster; none where the pointings lie on none.
    pub fn raster(&self) -> Option<(usize, usize)> {
        match &self.sites {
            Sites::Pixels { width, height, .. } => Some((*width, *height)),
            Sites::List { raster, .. } => {
                raster.as_ref().map(|raster| (raster.width, raster.height))
            }
        }
    }

    /// Cell of a pointing in the raster, row by row.
    pub fn cell(&self, site: usize) -> Option<usize> {
        match &self.sites {
            Sites::Pixels { .. } => Some(site),
            Sites::List { raster, .. } => raster.as_ref().map(|raster| raster.cells[site]),
        }
    }

    /// Offsets (arcsec) of the raster's first cell, and its steps along columns and rows (rows: east, north).
    pub fn axes(&self) -> Option<MapAxes> {
        match &self.sites {
            Sites::Pixels { sky, .. } => Some(MapAxes::Sky(Box::new(sky.clone()))),
            Sites::List {
                reference, raster, ..
            } => {
                let raster = raster.as_ref()?;
                let step = raster.step_arcsec;
                let on_sky = reference.and_then(|position| {
                    // The pixel, from 0, of zero offset.
                    let at = [
                        raster.first_arcsec[0] / step,
                        -raster.first_arcsec[1] / step,
                    ];
                    Sky::around(position, at, step / 3600.0).ok()
                });
                Some(on_sky.map_or(
                    MapAxes::Offsets {
                        first_arcsec: raster.first_arcsec,
                        step_arcsec: step,
                    },
                    |sky| MapAxes::Sky(Box::new(sky)),
                ))
            }
        }
    }

    /// Distance of neighbouring pointings, arcsec.
    pub fn step_arcsec(&self) -> f64 {
        match &self.sites {
            Sites::Pixels { sky, .. } => sky.pixel_arcsec(),
            Sites::List { step_arcsec, .. } => *step_arcsec,
        }
    }

    /// Pointings up to a distance (arcsec) from one, itself included, with their distances, ascending by number.
    pub fn around(&self, site: usize, reach_arcsec: f64) -> Vec<(usize, f64)> {
        let Some([x, y]) = self.offsets_arcsec(site) else {
            return Vec::new();
        };
        let candidates: Vec<usize> = match &self.sites {
            Sites::Pixels { width, height, .. } => {
                // Far fewer than pixels.
                #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
                let reach = (reach_arcsec / self.step_arcsec() * 1.5).ceil() as usize + 1;
                let (column, row) = (site % width, site / width);
                let columns = column.saturating_sub(reach)..(column + reach + 1).min(*width);
                (row.saturating_sub(reach)..(row + reach + 1).min(*height))
                    .flat_map(|row| columns.clone().map(move |column| row * width + column))
                    .collect()
            }
            Sites::List { .. } => (0..self.len()).collect(),
        };
        candidates
            .into_iter()
            .filter_map(|other| {
                let [a, b] = self.offsets_arcsec(other)?;
                let distance = (a - x).hypot(b - y);
                (distance <= reach_arcsec).then_some((other, distance))
            })
            .collect()
    }

    /// The pointings next to one, the nearest first, of equal distance by number.
    pub fn neighbours(&self, site: usize) -> Vec<usize> {
        let mut near = self.around(site, NEIGHBOUR_STEPS * self.step_arcsec());
        near.retain(|(other, _)| *other != site);
        // Distances on a raster differ by rounding.
        near.sort_by(|a, b| {
            let rounded = |distance: f64| (distance / self.step_arcsec() * 1e3).round();
            rounded(a.1).total_cmp(&rounded(b.1)).then(a.0.cmp(&b.0))
        });
        near.into_iter().map(|(other, _)| other).collect()
    }

    /// Blocks of pointings, in order.
    pub fn blocks(&self) -> Vec<Range<usize>> {
        let length = match &self.sites {
            Sites::Pixels { width, .. } => width * (BLOCK_POINTINGS.div_ceil(*width)),
            Sites::List { .. } => BLOCK_POINTINGS,
        };
        (0..self.len())
            .step_by(length)
            .map(|first| first..(first + length).min(self.len()))
            .collect()
    }

    /// Reads what a block's pointings share.
    ///
    /// # Errors
    ///
    /// [`RunError::Read`] where a cube cannot be read.
    pub fn read(&self, block: &Range<usize>) -> Result<Block, RunError> {
        let mut read = Block {
            first: block.start,
            ..Block::default()
        };
        if let (Spectra::Cubes { pair, .. }, Sites::Pixels { width, .. }) =
            (&self.spectra, &self.sites)
        {
            let rows = block.start / width..block.end.div_ceil(*width);
            pair.thick.spectra(rows.clone(), &mut read.values[0])?;
            pair.thin.spectra(rows, &mut read.values[1])?;
        }
        Ok(read)
    }

    /// What the block of a single pointing holds.
    ///
    /// # Errors
    ///
    /// [`RunError::Read`] where a cube cannot be read.
    pub fn read_one(&self, site: usize) -> Result<Block, RunError> {
        let mut read = Block {
            first: site,
            ..Block::default()
        };
        if let (Spectra::Cubes { pair, .. }, Sites::Pixels { width, .. }) =
            (&self.spectra, &self.sites)
        {
            let pixel = [site % width, site / width];
            pair.thick.spectrum(pixel, &mut read.values[0])?;
            pair.thin.spectrum(pixel, &mut read.values[1])?;
        }
        Ok(read)
    }

    /// How thin lines are prepared.
    pub fn thin_preparation(&self) -> &PrepareSettings {
        &self.prepare[1]
    }

    /// The pair of a pointing; none outside of the coverage of either line.
    ///
    /// # Errors
    ///
    /// [`RunError`] where a spectrum cannot be used.
    pub fn pair(&self, site: usize, block: &Block) -> Result<Option<PairInput>, RunError> {
        let both = match &self.spectra {
            Spectra::Cubes { pair, conversions } => {
                let of = |line: usize, cube: &Cube| {
                    let channels = cube.channels();
                    let values = &block.values[line][(site - block.first) * channels..][..channels];
                    self.of_cube(line, cube, &conversions[line], values)
                };
                [of(0, &pair.thick), of(1, &pair.thin)]
            }
            Spectra::Files(files) => {
                let file = &files[site];
                let of = |line: usize, path: &Path| {
                    let section = LineSection {
                        file: Some(path.to_owned()),
                        ..self.sections[line].clone()
                    };
                    let prepare = self.prepare[line].clone();
                    open(
                        &section,
                        WHICH[line],
                        self.lines[line].clone(),
                        prepare,
                        Path::new(""),
                    )
                };
                [Some(of(0, &file.thick)?), Some(of(1, &file.thin)?)]
            }
            Spectra::Rows(rows) => {
                let of = |line: usize| {
                    let raw = rows[site][line].as_ref().map_err(Clone::clone)?;
                    let settings = self.sections[line].scale_settings(&self.lines[line]);
                    let scaled = to_spectrum(raw, &settings)?;
                    Ok::<_, RunError>(Some(LineInput {
                        calibration_error: scaled.calibration_error,
                        ..self.input(line, scaled.spectrum, raw.origin.clone())
                    }))
                };
                [of(0)?, of(1)?]
            }
        };
        let [Some(thick), Some(thin)] = both else {
            return Ok(None);
        };
        Ok(Some(PairInput {
            name: Some(self.id(site)),
            source: self.source.clone(),
            thick,
            thin,
        }))
    }

    fn of_cube(
        &self,
        line: usize,
        cube: &Cube,
        conversion: &Conversion,
        values: &[f32],
    ) -> Option<LineInput> {
        // All blank is outside of the coverage.
        let spectrum = (conversion.spectrum(values.iter().copied().map(f64::from))).ok()?;
        Some(LineInput {
            calibration_error: conversion.calibration_error(),
            ..self.input(line, spectrum, cube.description().origin.clone())
        })
    }

    fn input(&self, line: usize, spectrum: Spectrum, origin: Origin) -> LineInput {
        LineInput {
            line: self.lines[line].clone(),
            spectrum,
            prepare: self.prepare[line].clone(),
            origin,
            sha256: None,
            object: None,
            notes: Vec::new(),
            calibration_error: 0.0,
        }
    }

    /// The weighted mean of thin spectra, channel by channel over what is there; none where their velocities
    /// are not the same.
    ///
    /// # Errors
    ///
    /// [`RunError::Read`] where a cube cannot be read.
    pub fn thin_mean(
        &self,
        sites: impl IntoIterator<Item = (usize, f64)>,
    ) -> Result<Option<Spectrum>, RunError> {
        let mut mean: Option<(Spectrum, Vec<f64>, Vec<f64>)> = None;
        let mut values = Vec::new();
        for (site, weight) in sites {
            let spectrum = match &self.spectra {
                Spectra::Cubes { pair, conversions } => {
                    let width = pair.thin.width();
                    pair.thin
                        .spectrum([site % width, site / width], &mut values)?;
                    let numbers = values.iter().copied().map(f64::from);
                    conversions[1].spectrum(numbers).ok()
                }
                // A spectrum that cannot be used has been told of with its own pointing.
                _ => (self.pair(site, &Block::default()).ok().flatten())
                    .map(|pair| pair.thin.spectrum),
            };
            let Some(spectrum) = spectrum else {
                continue;
            };
            let (first, sums, weights) = mean.get_or_insert_with(|| {
                let zeros = vec![0.0; spectrum.len()];
                (spectrum.clone(), zeros.clone(), zeros)
            });
            if first.velocity_km_s() != spectrum.velocity_km_s() {
                return Ok(None);
            }
            for (channel, value) in spectrum.temperature_k().iter().enumerate() {
                if !value.is_nan() {
                    sums[channel] += weight * value;
                    weights[channel] += weight;
                }
            }
        }
        Ok(mean.and_then(|(first, sums, weights)| {
            let values = sums.iter().zip(&weights).map(|(sum, weight)| sum / weight);
            first.with_temperature_k(values.collect()).ok()
        }))
    }
}

const WHICH: [&str; 2] = ["thick", "thin"];

/// The wider of the beams that a sheet gives for both lines.
fn wider_beam(sheet: &RunSheet) -> Option<SkyBeam> {
    let beams = [sheet.thick.sky_beam()?, sheet.thin.sky_beam()?];
    beams
        .into_iter()
        .max_by(|a, b| a.major_arcsec.total_cmp(&b.major_arcsec))
}

fn cubes(
    sheet: &RunSheet,
    (thick, thin): (&Path, &Path),
    scratch: &Path,
) -> Result<CubePair, RunError> {
    let open = |path: &Path, section: &LineSection| {
        Ok::<_, RunError>(Cube::open(path, &section.read_options()?, scratch)?)
    };
    let settings = CubePairSettings {
        beams: [sheet.thick.sky_beam(), sheet.thin.sky_beam()],
        one_object: sheet.source.name.is_none(),
    };
    let (thick, thin) = (open(thick, &sheet.thick)?, open(thin, &sheet.thin)?);
    Ok(pair(thick, thin, &settings, scratch)?)
}

fn conversions(
    sheet: &RunSheet,
    lines: &[Line; 2],
    pair: &CubePair,
    notes: &mut Vec<String>,
) -> Result<[Conversion; 2], RunError> {
    let mut of = |section: &LineSection, line: &Line, cube: &Cube| {
        let conversion = Conversion::new(cube.description(), &section.scale_settings(line))?;
        let path = cube.description().origin.path.display();
        notes.extend(
            conversion
                .notes()
                .iter()
                .map(|note| format!("{path}: {note}")),
        );
        Ok::<_, RunError>(conversion)
    };
    Ok([
        of(&sheet.thick, &lines[0], &pair.thick)?,
        of(&sheet.thin, &lines[1], &pair.thin)?,
    ])
}

fn pixels(pair: &CubePair, centre: Option<SkyPosition>) -> Result<Sites, RunError> {
    let (sky, width, height) = (pair.thick.sky(), pair.thick.width(), pair.thick.height());
    let middle = [width, height].map(|count| (count as f64 - 1.0) / 2.0);
    let off_sky = || {
        RunError::from(crate::grid::cubes::CubeError::OffSky {
            path: pair.thick.description().origin.path.clone(),
        })
    };
    let reference = match centre {
        Some(centre) => centre.converted(sky.frame()).map_err(|error| {
            RunError::from(crate::grid::cubes::CubeError::Frames {
                path: pair.thick.description().origin.path.clone(),
                error,
            })
        })?,
        None => sky.position(middle).ok_or_else(off_sky)?,
    };
    pixel_arcsec(sky, middle).ok_or_else(off_sky)?;
    Ok(Sites::Pixels {
        sky: sky.clone(),
        reference,
        width,
        height,
    })
}

/// Two tables of one spectrum a row: rows of one position are a pair.
fn rows(
    sheet: &RunSheet,
    (thick, thin): (&Path, &Path),
    centre: Option<SkyPosition>,
) -> Result<(Sites, Spectra), RunError> {
    let thick_rows = read_pointing_spectra(thick, &sheet.thick.read_options()?)?;
    let mut thin_rows: Vec<Option<PointingSpectrum>> =
        read_pointing_spectra(thin, &sheet.thin.read_options()?)?
            .into_iter()
            .map(Some)
            .collect();
    let mut ids = Vec::new();
    let mut places = Vec::new();
    let mut spectra = Vec::new();
    for row in thick_rows {
        let twin = thin_rows
            .iter_mut()
            .find(|other| (other.as_ref()).is_some_and(|other| same_place(other.place, row.place)));
        if let Some(twin) = twin.and_then(Option::take) {
            ids.push(row.id);
            places.push(row.place);
            spectra.push([row.spectrum, twin.spectrum]);
        }
    }
    if ids.is_empty() {
        return Err(RunError::NoCommonPositions {
            thick: thick.to_owned(),
            thin: thin.to_owned(),
        });
    }
    Ok((list(ids, &places, centre), Spectra::Rows(spectra)))
}

/// Whether rows of both lines were taken at one position: to a second of arc.
fn same_place(one: PointingPlace, other: PointingPlace) -> bool {
    match (one, other) {
        (PointingPlace::Offset(a), PointingPlace::Offset(b)) => {
            (a[0] - b[0]).hypot(a[1] - b[1]) < 1.0
        }
        (PointingPlace::Sky(a), PointingPlace::Sky(b)) => icrs(a).separation_arcsec(&icrs(b)) < 1.0,
        _ => false,
    }
}

fn icrs([longitude_deg, latitude_deg]: [f64; 2]) -> SkyPosition {
    SkyPosition {
        frame: SkyFrame::Icrs,
        longitude_deg,
        latitude_deg,
    }
}

/// Pointings of a table; sky positions become offsets from the given centre, or from the middle of all.
fn list(ids: Vec<String>, places: &[PointingPlace], centre: Option<SkyPosition>) -> Sites {
    let middle = || {
        let sky: Vec<[f64; 2]> = places
            .iter()
            .filter_map(|place| match place {
                PointingPlace::Sky(at) => Some(*at),
                PointingPlace::Offset(_) => None,
            })
            .collect();
        let between = |axis: usize| {
            let values = || sky.iter().map(|at| at[axis]);
            let (low, high) = (
                values().fold(f64::INFINITY, f64::min),
                values().fold(f64::NEG_INFINITY, f64::max),
            );
            f64::midpoint(low, high)
        };
        (!sky.is_empty()).then(|| icrs([between(0), between(1)]))
    };
    let reference = centre.or_else(middle);
    let offsets_arcsec: Vec<[f64; 2]> = places
        .iter()
        .map(|place| match (place, reference) {
            (PointingPlace::Offset(at), _) => *at,
            (PointingPlace::Sky(at), Some(reference)) => {
                (icrs(*at).offsets_arcsec(&reference)).unwrap_or([f64::NAN; 2])
            }
            (PointingPlace::Sky(_), None) => [f64::NAN; 2],
        })
        .collect();
    let step_arcsec = least_distance(&offsets_arcsec);
    Sites::List {
        raster: raster(&offsets_arcsec, step_arcsec),
        ids,
        offsets_arcsec,
        reference,
        step_arcsec,
    }
}

/// The median distance of a pointing to the one nearest to it.
fn least_distance(offsets: &[[f64; 2]]) -> f64 {
    let nearest: Vec<f64> = (offsets.iter().enumerate())
        .map(|(index, at)| {
            (offsets.iter().enumerate())
                .filter(|(other, _)| *other != index)
                .map(|(_, other)| (at[0] - other[0]).hypot(at[1] - other[1]))
                .fold(f64::INFINITY, f64::min)
        })
        .filter(|distance| distance.is_finite())
        .collect();
    if nearest.is_empty() {
        1.0
    } else {
        crate::numeric::robust::median(&nearest)
    }
}

/// The rows and columns that pointings lie on, where they lie on any.
fn raster(offsets: &[[f64; 2]], step_arcsec: f64) -> Option<Raster> {
    let fold = |axis: usize, by: fn(f64, f64) -> f64, from: f64| {
        offsets.iter().map(|at| at[axis]).fold(from, by)
    };
    // Columns run toward the west.
    let first_arcsec = [
        fold(0, f64::max, f64::NEG_INFINITY),
        fold(1, f64::min, f64::INFINITY),
    ];
    let mut places = Vec::with_capacity(offsets.len());
    let mut most = [0_usize; 2];
    for at in offsets {
        let steps = [
            (first_arcsec[0] - at[0]) / step_arcsec,
            (at[1] - first_arcsec[1]) / step_arcsec,
        ];
        if steps
            .iter()
            .map(|step| (step - step.round()).abs())
            .any(|off| off.is_nan() || off > RASTER_TOLERANCE)
        {
            return None;
        }
        // Not negative, and no more than the field is wide.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        let place = steps.map(|step| step.round() as usize);
        most = [most[0].max(place[0]), most[1].max(place[1])];
        places.push(place);
    }
    let [width, height] = most.map(|most| most + 1);
    // A few pointings far apart are no raster.
    if width.saturating_mul(height) > 16 * offsets.len() + 64 {
        return None;
    }
    let cells: Vec<usize> = places.iter().map(|[x, y]| y * width + x).collect();
    let mut once = cells.clone();
    once.sort_unstable();
    once.dedup();
    (once.len() == cells.len()).then_some(Raster {
        width,
        height,
        first_arcsec,
        step_arcsec,
        cells,
    })
}
