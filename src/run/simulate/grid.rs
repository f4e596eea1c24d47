//! A map's truth into a folder: a pointing table with its spectra, a pair of cubes, run sheets that `inrush map`
//! takes, and the truth.
//!
//! The folder is made under a temporary name and renamed when it is whole. Rays are shared out to
//! threads; which thread makes a ray does not matter to it.

use super::folder::{file_error, fill_folder};
use super::settings_file::{self, SETTINGS};
use super::truth_table::made;
use crate::line::{Line, find};
use crate::report::cube::{CubeGrid, write_cube};
use crate::report::spectra::{self, SpectrumHeader};
use crate::report::{Kind, Row, Schema, Table, write_csv};
use crate::run::{BatchSettings, Beam, LineSection, RunError, SourceSection};
use crate::simulate::grid::{
    GridPlan, GridTruth, PointingLine, Ray, SimulatedGrid, SimulatedPointing,
};
use crate::spectrum::Spectrum;
use serde::{Deserialize, Serialize};
use std::fs::{self, File};
use std::io::BufWriter;
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};

/// Which spectra of a map are written.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum GridProducts {
    /// A pointing table and a CSV file a spectrum.
    #[default]
    Table,
    /// A FITS cube a line.
    Cubes,
    /// Both.
    Both,
}

/// A map to simulate and where it goes.
#[derive(Clone, Debug, PartialEq)]
pub struct GridRun {
    /// What it follows from.
    pub truth: GridTruth,
    /// Name of the source.
    pub name: String,
    /// The thick line, a built-in one.
    pub thick_line: String,
    /// The thin line, a built-in one.
    pub thin_line: String,
    /// Folder; must not exist, or be empty.
    pub directory: PathBuf,
    /// What is written.
    pub products: GridProducts,
    /// Threads that make rays.
    pub threads: BatchSettings,
}

/// A map that was simulated and written.
#[derive(Clone, Debug, PartialEq)]
pub struct GridFiles {
    /// The spectra.
    pub grid: SimulatedGrid,
    /// Tables, cubes and settings, in the order in which they were written.
    pub written: Vec<PathBuf>,
    /// Folder of single spectra, where there are any.
    pub spectra: Option<PathBuf>,
}

/// Name of the pointing table.
const TABLE: &str = "grid.csv";
/// Names of the run sheets.
const SHEET: &str = "map.toml";
const CUBES_SHEET: &str = "cubes.toml";
/// Name of the table of truths.
const TRUTH: &str = "truth.csv";
/// Name of the folder of spectra.
const SPECTRA: &str = "spectra";

/// Columns of the pointing table.
const POINTINGS: [(&str, &str, Kind, &str); 5] = [
    ("id", "", Kind::Text, "Name of the pointing"),
    ("dx_arcsec", "arcsec", Kind::Real, "Offset to the east"),
    ("dy_arcsec", "arcsec", Kind::Real, "Offset to the north"),
    ("thick_file", "", Kind::Text, "Spectrum of the thick line"),
    ("thin_file", "", Kind::Text, "Spectrum of the thin line"),
];

/// Columns of the truth.
const TRUTHS: [(&str, &str, Kind, &str); 14] = [
    ("id", "", Kind::Text, "Name of the pointing"),
    ("dx_arcsec", "arcsec", Kind::Real, "Offset to the east"),
    ("dy_arcsec", "arcsec", Kind::Real, "Offset to the north"),
    (
        "distance_arcsec",
        "arcsec",
        Kind::Real,
        "Distance from the clump's centre",
    ),
    ("flaw", "", Kind::Text, "What spoils it: blank or ripple"),
    (
        "v_in_km_s",
        "km/s",
        Kind::Real,
        "Inward speed of the gas at that distance in space",
    ),
    (
        "brightest_thick_k",
        "K",
        Kind::Real,
        "Brightest channel of the thick line without noise",
    ),
    (
        "brightest_thin_k",
        "K",
        Kind::Real,
        "Brightest channel of the thin line without noise",
    ),
    (
        "integral_thick_k_km_s",
        "K km/s",
        Kind::Real,
        "Integral of the thick line without noise",
    ),
    (
        "integral_thin_k_km_s",
        "K km/s",
        Kind::Real,
        "Integral of the thin line without noise",
    ),
    (
        "mean_thick_km_s",
        "km/s",
        Kind::Real,
        "First moment of the thick line without noise",
    ),
    (
        "mean_thin_km_s",
        "km/s",
        Kind::Real,
        "First moment of the thin line without noise",
    ),
    (
        "noise_thick_k",
        "K",
        Kind::Real,
        "Noise of a channel of the thick line, standard deviation",
    ),
    (
        "noise_thin_k",
        "K",
        Kind::Real,
        "Noise of a channel of the thin line, standard deviation",
    ),
];

/// Simulates a map and writes its folder.
///
/// # Errors
///
/// [`RunError::Simulate`] for a truth that cannot be used, [`RunError::Line`] for an unknown line,
/// [`RunError::Occupied`] where the folder holds something, [`RunError::File`] and
/// [`RunError::Report`] where something cannot be written.
pub fn write_grid(run: &GridRun) -> Result<GridFiles, RunError> {
    if run.name.trim().is_empty() {
        return Err(RunError::setting("name", "an empty name", "a name"));
    }
    let line = |which, name: &str| find(name).map_err(|error| RunError::Line { which, error });
    let lines = (
        line("thick", &run.thick_line)?,
        line("thin", &run.thin_line)?,
    );
    let plan = GridPlan::new(&run.truth, (&lines.0, &lines.1))?;
    let mut grid = None;
    let mut written = Vec::new();
    fill_folder(&run.directory, |folder| {
        let made = plan.observe(&rays(&plan, &run.threads)?)?;
        written = write_into(folder, run, &plan, &made, [&lines.0, &lines.1])?;
        grid = Some(made);
        Ok(())
    })?;
    let grid = grid.ok_or_else(|| RunError::Internal("a folder without its map".to_owned()))?;
    Ok(GridFiles {
        grid,
        written: written
            .iter()
            .map(|name| run.directory.join(name))
            .collect(),
        spectra: (run.products != GridProducts::Cubes).then(|| run.directory.join(SPECTRA)),
    })
}

/// All rays, made by the threads of a batch.
fn rays(plan: &GridPlan, threads: &BatchSettings) -> Result<Vec<Ray>, RunError> {
    let mut rays = Vec::with_capacity(plan.rays());
    let ended = threads.run(
        0..plan.rays(),
        || (),
        |(), index| Ok::<Ray, RunError>(plan.ray(index)),
        |_, ray| match ray {
            Ok(ray) => {
                rays.push(ray);
                ControlFlow::Continue(())
            }
            Err(error) => ControlFlow::Break(error),
        },
    )?;
    match ended {
        ControlFlow::Continue(_) => Ok(rays),
        ControlFlow::Break(error) => Err(error),
    }
}

fn write_into(
    folder: &Path,
    run: &GridRun,
    plan: &GridPlan,
    grid: &SimulatedGrid,
    lines: [&Line; 2],
) -> Result<Vec<&'static str>, RunError> {
    let mut written = Vec::new();
    if run.products != GridProducts::Cubes {
        write_table(folder, run, grid, lines)?;
        written.push(TABLE);
    }
    if run.products != GridProducts::Table {
        for (which, line) in ["thick", "thin"].into_iter().zip(lines) {
            let name = cube_name(which);
            let mut file = create(folder, name)?;
            let place = cube_grid(&run.truth, grid);
            let columns = run.truth.columns;
            // pixels run from east to west, pointings from west to east
            let value = |column: usize, row: usize, channel: usize| {
                let pointing = &grid.pointings[row * columns + columns - 1 - column];
                line_of(pointing, which).temperature_k[channel]
            };
            write_cube(&place, &header(run, line, None), value, &mut file)?;
            written.push(name);
        }
    }
    let schema = made(&TRUTHS)?;
    let mut truths = Table::new(schema.clone());
    for (index, pointing) in grid.pointings.iter().enumerate() {
        truths.push(truth_row(&schema, index, run, plan, grid, pointing)?)?;
    }
    write_csv(&truths, create(folder, TRUTH)?)?;
    written.push(TRUTH);
    let mut text = |name: &'static str, text: String| {
        let path = folder.join(name);
        fs::write(&path, text).map_err(|source| file_error(&path, source))?;
        written.push(name);
        Ok::<(), RunError>(())
    };
    if run.products != GridProducts::Cubes {
        text(SHEET, sheet(run, lines, true)?)?;
    }
    if run.products != GridProducts::Table {
        text(CUBES_SHEET, sheet(run, lines, false)?)?;
    }
    text(SETTINGS, settings_text(run)?)?;
    Ok(written)
}

/// A run sheet without what it takes by default: of the pointing table, or of the cubes, which hold beam and
/// place.
#[derive(Serialize)]
struct MapSheet {
    source: SourceSection,
    thick: LineSection,
    thin: LineSection,
    #[serde(skip_serializing_if = "Option::is_none")]
    grid: Option<MapGrid>,
}

#[derive(Serialize)]
struct MapGrid {
    pointings: &'static str,
    centre_deg: [f64; 2],
}

fn sheet(run: &GridRun, lines: [&Line; 2], of_table: bool) -> Result<String, RunError> {
    let truth = &run.truth;
    let section = |which: &str, line: &Line| {
        let mut section = LineSection {
            line: Some(line.name.clone()),
            ..LineSection::default()
        };
        if of_table {
            let [major, minor] = truth.beam_arcsec;
            section.beam_arcsec = Some(if major == minor {
                Beam::Round(major)
            } else {
                Beam::Elliptical([major, minor])
            });
            section.beam_angle_deg = (major != minor).then_some(truth.beam_angle_deg);
        } else {
            section.file = Some(cube_name(which).into());
        }
        section
    };
    let sheet = MapSheet {
        source: SourceSection {
            name: Some(run.name.clone()),
            ..SourceSection::default()
        },
        thick: section("thick", lines[0]),
        thin: section("thin", lines[1]),
        grid: of_table.then_some(MapGrid {
            pointings: TABLE,
            centre_deg: [truth.ra_deg, truth.dec_deg],
        }),
    };
    let text = toml::to_string(&sheet).map_err(|error| RunError::Internal(error.to_string()))?;
    let name = if of_table { SHEET } else { CUBES_SHEET };
    Ok(format!("# Map it: inrush map {name} --out DIR\n\n{text}"))
}

fn create(folder: &Path, name: &str) -> Result<BufWriter<File>, RunError> {
    let path = folder.join(name);
    File::create(&path)
        .map(BufWriter::new)
        .map_err(|source| file_error(&path, source))
}

fn cube_name(which: &str) -> &'static str {
    if which == "thick" {
        "thick-cube.fits"
    } else {
        "thin-cube.fits"
    }
}

fn line_of<'a>(pointing: &'a SimulatedPointing, which: &str) -> &'a PointingLine {
    if which == "thick" {
        &pointing.thick
    } else {
        &pointing.thin
    }
}

fn cube_grid(truth: &GridTruth, grid: &SimulatedGrid) -> CubeGrid {
    CubeGrid {
        columns: truth.columns,
        rows: truth.rows,
        spacing_arcsec: truth.spacing_arcsec,
        ra_deg: truth.ra_deg,
        dec_deg: truth.dec_deg,
        beam_arcsec: truth.beam_arcsec,
        beam_angle_deg: truth.beam_angle_deg,
        channels: grid.velocity_km_s.len(),
        first_km_s: grid.velocity_km_s[0],
        channel_km_s: grid.channel_km_s,
    }
}

/// Name of a pointing, by its number from 0.
fn pointing_id(index: usize) -> String {
    format!("p{:04}", index + 1)
}

fn write_table(
    folder: &Path,
    run: &GridRun,
    grid: &SimulatedGrid,
    lines: [&Line; 2],
) -> Result<(), RunError> {
    let spectra = folder.join(SPECTRA);
    fs::create_dir(&spectra).map_err(|source| file_error(&spectra, source))?;
    let schema = made(&POINTINGS)?;
    let mut table = Table::new(schema.clone());
    for (index, pointing) in grid.pointings.iter().enumerate() {
        let id = pointing_id(index);
        let mut row = schema.row();
        row.set("id", id.as_str())?;
        row.set("dx_arcsec", pointing.dx_arcsec)?;
        row.set("dy_arcsec", pointing.dy_arcsec)?;
        for (which, line) in ["thick", "thin"].into_iter().zip(lines) {
            let file = format!("{SPECTRA}/{id}-{which}.csv");
            let header = header(run, line, Some(&id));
            let path = folder.join(&file);
            let bytes = spectrum_csv(grid, line_of(pointing, which), &header)?;
            fs::write(&path, bytes).map_err(|source| file_error(&path, source))?;
            row.set(&format!("{which}_file"), file)?;
        }
        table.push(row)?;
    }
    write_csv(&table, create(folder, TABLE)?)?;
    Ok(())
}

/// A spectrum's file. A blank one has no channel with a number, which no [`Spectrum`] may be.
fn spectrum_csv(
    grid: &SimulatedGrid,
    line: &PointingLine,
    header: &SpectrumHeader,
) -> Result<Vec<u8>, RunError> {
    let channels = grid.velocity_km_s.len();
    let blank = line.temperature_k.iter().all(|value| value.is_nan());
    let temperature_k = if blank {
        vec![0.0; channels]
    } else {
        line.temperature_k.clone()
    };
    let spectrum = Spectrum::new(
        grid.velocity_km_s.clone(),
        vec![grid.channel_km_s; channels],
        temperature_k,
    )
    .map_err(|error| RunError::Internal(error.to_string()))?;
    let spectrum = if blank {
        spectrum.map_temperature_k(|_, _| f64::NAN)
    } else {
        spectrum
    };
    let mut bytes = Vec::new();
    spectra::csv(&spectrum, header, &mut bytes)?;
    Ok(bytes)
}

fn header(run: &GridRun, line: &Line, id: Option<&str>) -> SpectrumHeader {
    let pointing = id.map_or(String::new(), |id| format!(", pointing {id}"));
    SpectrumHeader {
        object: run.name.clone(),
        line: line.name.clone(),
        rest_frequency_ghz: line.rest_frequency_ghz,
        history: vec![
            format!(
                "simulated by inrush {}, seed {}{pointing}",
                env!("CARGO_PKG_VERSION"),
                run.truth.seed
            ),
            format!("truth: {TRUTH}, {SETTINGS}"),
        ],
    }
}

fn truth_row(
    schema: &Schema,
    index: usize,
    run: &GridRun,
    plan: &GridPlan,
    grid: &SimulatedGrid,
    pointing: &SimulatedPointing,
) -> Result<Row, RunError> {
    let centre = run.truth.centre_arcsec;
    let distance = (pointing.dx_arcsec - centre[0]).hypot(pointing.dy_arcsec - centre[1]);
    let mut row = schema.row();
    row.set("id", pointing_id(index))?;
    row.set("dx_arcsec", pointing.dx_arcsec)?;
    row.set("dy_arcsec", pointing.dy_arcsec)?;
    row.set("distance_arcsec", distance)?;
    if let Some(flaw) = pointing.flaw {
        row.set("flaw", flaw.name())?;
    }
    if distance <= run.truth.clump.radius_arcsec {
        row.set("v_in_km_s", plan.inward_km_s(distance))?;
    }
    for which in ["thick", "thin"] {
        let line = line_of(pointing, which);
        let values = || line.noiseless_k.iter();
        let sum: f64 = values().sum();
        let moment: f64 = (values().zip(&grid.velocity_km_s))
            .map(|(value, velocity)| value * velocity)
            .sum();
        let brightest_k = values().fold(0.0f64, |peak, value| peak.max(*value));
        row.set(&format!("brightest_{which}_k"), brightest_k)?;
        row.set(&format!("integral_{which}_k_km_s"), sum * grid.channel_km_s)?;
        if sum > 0.0 {
            row.set(&format!("mean_{which}_km_s"), moment / sum)?;
        }
        row.set(&format!("noise_{which}_k"), line.noise_k)?;
    }
    Ok(row)
}

/// The file of settings.
#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct SettingsFile {
    /// Version of Inrush that wrote it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    version: Option<String>,
    /// Name of the thick line.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    thick_line: Option<String>,
    /// Name of the thin line.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    thin_line: Option<String>,
    #[serde(default)]
    grid: GridTruth,
}

fn settings_text(run: &GridRun) -> Result<String, RunError> {
    let file = SettingsFile {
        version: Some(env!("CARGO_PKG_VERSION").to_owned()),
        thick_line: Some(run.thick_line.clone()),
        thin_line: Some(run.thin_line.clone()),
        grid: run.truth.clone(),
    };
    settings_file::text(&file, "map", "grid")
}

/// Truth of a map from its file of settings, and the names of its thick and thin line where it has
/// them.
///
/// # Errors
///
/// [`RunError::File`] where it cannot be read, [`RunError::Sheet`] where it holds no settings.
pub fn read_grid_settings(
    path: &Path,
) -> Result<(GridTruth, Option<String>, Option<String>), RunError> {
    let file: SettingsFile = settings_file::read(path)?;
    Ok((file.grid, file.thick_line, file.thin_line))
}
