//! A truth into the files of a simulated pair: spectra, run sheet and the truth itself.
//!
//! Everything is made before the first file is written, and each file is written under a temporary
//! name and renamed. Nothing depends on the clock or on threads: the same truth gives the same bytes.

mod folder;
mod grid;
mod sample;
mod settings_file;
mod truth_file;
mod truth_table;

pub use grid::{GridFiles, GridProducts, GridRun, read_grid_settings, write_grid};
pub use sample::{SampleFiles, SampleRun, read_sample_settings, write_sample};
pub use truth_file::{parse_truth, read_truth};

use super::sheet::{Given, LineSection, SourceSection};
use super::{RunError, nearest};
use crate::line::find;
use crate::model::Model;
use crate::report::files::write_atomically;
use crate::report::spectra::{self, FitsAxis, SpectrumHeader};
use crate::simulate::{LineTruth, PairTruth, SimulatedLine, SimulatedPair, simulate_pair};
use serde::Serialize;
use std::path::{Path, PathBuf};

/// Formats that the spectra are written in.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Formats {
    /// CSV alone.
    #[default]
    Csv,
    /// FITS alone.
    Fits,
    /// Both; the run sheet names the CSV files.
    Both,
}

/// A pair to simulate and where it goes.
#[derive(Clone, Debug, PartialEq)]
pub struct PairSettings {
    /// What it follows from.
    pub truth: PairTruth,
    /// Name of the source.
    pub name: String,
    /// Directory; made where it does not exist, files of the same names are replaced.
    pub directory: PathBuf,
    /// What the file names start with: `lantern7` makes `lantern7-thick.csv`, `lantern7-thin.csv`,
    /// `lantern7.toml` and `lantern7-truth.toml`; `None` makes `thick.csv`, `thin.csv`, `pair.toml` and
    /// `truth.toml`.
    pub stem: Option<String>,
    /// Formats of the spectra.
    pub formats: Formats,
    /// Spectral axis of FITS files.
    pub fits_axis: FitsAxis,
}

/// A pair that was simulated and written.
#[derive(Clone, Debug, PartialEq)]
pub struct PairFiles {
    /// The spectra.
    pub pair: SimulatedPair,
    /// The run sheet, which `inrush fit` takes.
    pub sheet: PathBuf,
    /// Every file, in the order in which they were written.
    pub written: Vec<PathBuf>,
}

/// Simulates a pair and writes its files.
///
/// # Errors
///
/// [`RunError::Simulate`] for an impossible truth, [`RunError::Setting`] for an unusable name,
/// [`RunError::File`] and [`RunError::Report`] where a file cannot be written.
pub fn write_pair(settings: &PairSettings) -> Result<PairFiles, RunError> {
    check_names(settings)?;
    let pair = simulate_pair(&settings.truth)?;
    let files = files(settings, &pair)?;
    super::products::make_directory(&settings.directory)?;
    let mut written = Vec::with_capacity(files.len());
    for (name, bytes) in &files {
        let path = settings.directory.join(name);
        write_atomically(&path, |writer| Ok(writer.write_all(bytes)?))?;
        written.push(path);
    }
    Ok(PairFiles {
        pair,
        sheet: settings.directory.join(sheet_name(settings)),
        written,
    })
}

/// The model of a name.
///
/// # Errors
///
/// [`RunError::Setting`] with the known names.
pub fn model_named(key: &str, name: &str) -> Result<Model, RunError> {
    let names = || Model::ALL.into_iter().map(Model::name);
    Model::from_name(name).ok_or_else(|| RunError::Setting {
        key: key.to_owned(),
        message: format!(
            "model `{name}`, expected one of {}",
            names().collect::<Vec<_>>().join(", ")
        ),
        hint: nearest(name, names()).map(|name| format!("did you mean `{name}`?")),
    })
}

fn check_names(settings: &PairSettings) -> Result<(), RunError> {
    if settings.name.trim().is_empty() {
        return Err(RunError::setting("name", "an empty name", "a name"));
    }
    let Some(stem) = &settings.stem else {
        return Ok(());
    };
    let plain = Path::new(stem).file_name() == Some(stem.as_ref());
    if plain {
        Ok(())
    } else {
        Err(RunError::setting(
            "stem",
            &format!("`{stem}`"),
            "the start of a file name, without a directory",
        ))
    }
}

/// Names and contents of every file.
fn files(
    settings: &PairSettings,
    pair: &SimulatedPair,
) -> Result<Vec<(String, Vec<u8>)>, RunError> {
    let truth = &settings.truth;
    let mut files = Vec::new();
    for (which, line, simulated) in [
        ("thick", &truth.thick, &pair.thick),
        ("thin", &truth.thin, &pair.thin),
    ] {
        let header = header(settings, line, simulated);
        let spectrum = &simulated.spectrum;
        if settings.formats != Formats::Fits {
            let mut bytes = Vec::new();
            spectra::csv(spectrum, &header, &mut bytes)?;
            files.push((spectrum_name(settings, which, "csv"), bytes));
        }
        if settings.formats != Formats::Csv {
            let mut bytes = Vec::new();
            spectra::fits(spectrum, &header, settings.fits_axis, &mut bytes)?;
            files.push((spectrum_name(settings, which, "fits"), bytes));
        }
    }
    let truth_text = truth_file::text(truth, &settings.name, pair)?;
    files.push((truth_name(settings), truth_text.into_bytes()));
    files.push((sheet_name(settings), sheet(settings)?.into_bytes()));
    Ok(files)
}

fn spectrum_name(settings: &PairSettings, which: &str, ending: &str) -> String {
    match &settings.stem {
        Some(stem) => format!("{stem}-{which}.{ending}"),
        None => format!("{which}.{ending}"),
    }
}

fn truth_name(settings: &PairSettings) -> String {
    spectrum_name(settings, "truth", "toml")
}

fn sheet_name(settings: &PairSettings) -> String {
    format!("{}.toml", settings.stem.as_deref().unwrap_or("pair"))
}

fn header(settings: &PairSettings, line: &LineTruth, simulated: &SimulatedLine) -> SpectrumHeader {
    SpectrumHeader {
        object: settings.name.clone(),
        line: line.line.name.clone(),
        rest_frequency_ghz: line.line.rest_frequency_ghz,
        history: vec![
            format!(
                "simulated by inrush {}, seed {}",
                env!("CARGO_PKG_VERSION"),
                settings.truth.seed
            ),
            format!(
                "truth: {}, noise {} K",
                truth_name(settings),
                simulated.noise_k
            ),
        ],
    }
}

/// The run sheet of a pair, without what it takes by default.
#[derive(Serialize)]
struct PairSheet {
    source: SourceSection,
    thick: LineSection,
    thin: LineSection,
}

fn sheet(settings: &PairSettings) -> Result<String, RunError> {
    let ending = match settings.formats {
        Formats::Csv | Formats::Both => "csv",
        Formats::Fits => "fits",
    };
    let section = |which: &str, line: &LineTruth| {
        let line = &line.line;
        let built_in = find(&line.name).is_ok_and(|found| found == *line);
        LineSection {
            line: Some(line.name.clone()),
            file: Some(spectrum_name(settings, which, ending).into()),
            rest_freq_ghz: (!built_in).then_some(Given::WithError([
                line.rest_frequency_ghz,
                line.rest_frequency_err_ghz,
            ])),
            components: (!built_in).then(|| {
                line.components
                    .iter()
                    .map(|component| [component.offset_km_s, component.weight])
                    .collect()
            }),
            ..LineSection::default()
        }
    };
    let sheet = PairSheet {
        source: SourceSection {
            name: Some(settings.name.clone()),
            ..SourceSection::default()
        },
        thick: section("thick", &settings.truth.thick),
        thin: section("thin", &settings.truth.thin),
    };
    let text = toml::to_string(&sheet).map_err(|error| RunError::Internal(error.to_string()))?;
    Ok(format!(
        "# Fit this pair: inrush fit {} --out DIR\n\n{text}",
        sheet_name(settings)
    ))
}
