//! The truth of a simulated pair as TOML: written beside the spectra, and read back to the same truth.

use super::model_named;
use crate::line::{Component, Line};
use crate::run::RunError;
use crate::simulate::{
    Axis, Baseline, Correlation, LineTruth, NoiseLevel, PairTruth, SimulatedLine, SimulatedPair,
};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use std::path::Path;

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct TruthFile {
    /// Version of Inrush that wrote it.
    version: String,
    /// Seed of the noise.
    seed: u64,
    /// Name of the source.
    name: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    isotope_ratio: Option<f64>,
    thick: LineTable,
    thin: LineTable,
    /// What follows from the rest; for people, not read back.
    #[serde(skip_serializing_if = "Option::is_none")]
    derived: Option<Derived>,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct LineTable {
    line: String,
    rest_freq_ghz: f64,
    rest_freq_err_ghz: f64,
    /// Velocity offset (km/s) and weight of each component.
    components: Vec<[f64; 2]>,
    model: String,
    correlation: Correlation,
    noise: NoiseLevel,
    parameters: BTreeMap<String, f64>,
    axis: Axis,
    baseline: Baseline,
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct Derived {
    noise_thick_k: f64,
    noise_thin_k: f64,
    peak_thick_k: f64,
    peak_thin_k: f64,
    /// The thin line's parameters, shared and linked ones included.
    thin: BTreeMap<String, f64>,
}

/// The truth as TOML.
pub(super) fn text(
    truth: &PairTruth,
    name: &str,
    pair: &SimulatedPair,
) -> Result<String, RunError> {
    let thin_names = truth.thin.model.parameters().iter();
    let file = TruthFile {
        version: env!("CARGO_PKG_VERSION").to_owned(),
        seed: truth.seed,
        name: name.to_owned(),
        isotope_ratio: truth.isotope_ratio,
        thick: table(&truth.thick),
        thin: table(&truth.thin),
        derived: Some(Derived {
            noise_thick_k: pair.thick.noise_k,
            noise_thin_k: pair.thin.noise_k,
            peak_thick_k: peak_k(&pair.thick),
            peak_thin_k: peak_k(&pair.thin),
            thin: thin_names
                .zip(&pair.thin.parameters)
                .map(|(parameter, value)| (parameter.name.to_owned(), *value))
                .collect(),
        }),
    };
    let text = toml::to_string(&file).map_err(|error| RunError::Internal(error.to_string()))?;
    Ok(format!(
        "# What these simulated spectra follow from; [derived] follows from the rest.\n\n{text}"
    ))
}

fn peak_k(line: &SimulatedLine) -> f64 {
    let values = line.noiseless.temperature_k().iter();
    values.copied().fold(f64::NEG_INFINITY, f64::max)
}

fn table(truth: &LineTruth) -> LineTable {
    LineTable {
        line: truth.line.name.clone(),
        rest_freq_ghz: truth.line.rest_frequency_ghz,
        rest_freq_err_ghz: truth.line.rest_frequency_err_ghz,
        components: truth
            .line
            .components
            .iter()
            .map(|component| [component.offset_km_s, component.weight])
            .collect(),
        model: truth.model.name().to_owned(),
        correlation: truth.correlation,
        noise: truth.noise,
        parameters: truth.parameters.clone(),
        axis: truth.axis,
        baseline: truth.baseline,
    }
}

/// Reads the truth of a simulated pair from its file.
///
/// # Errors
///
/// [`RunError::File`] where it cannot be read, else as [`parse_truth`].
pub fn read_truth(path: &Path) -> Result<PairTruth, RunError> {
    let text = std::fs::read_to_string(path).map_err(|source| RunError::File {
        path: path.to_owned(),
        source,
    })?;
    parse_truth(&text, path)
}

/// The truth of a simulated pair from TOML; `path` serves messages only.
///
/// # Errors
///
/// [`RunError::Sheet`] where the text is no truth, [`RunError::Line`] where a line is none.
pub fn parse_truth(text: &str, path: &Path) -> Result<PairTruth, RunError> {
    let file: TruthFile =
        toml::from_str(text).map_err(|error| RunError::of_toml(&error, text, path))?;
    Ok(PairTruth {
        thick: line_truth("thick", file.thick)?,
        thin: line_truth("thin", file.thin)?,
        isotope_ratio: file.isotope_ratio,
        seed: file.seed,
    })
}

fn line_truth(which: &'static str, table: LineTable) -> Result<LineTruth, RunError> {
    let components: Vec<Component> = table
        .components
        .iter()
        .map(|&[offset_km_s, weight]| Component {
            offset_km_s,
            weight,
        })
        .collect();
    let checked = Line::custom(
        &table.line,
        table.rest_freq_ghz,
        Some(table.rest_freq_err_ghz),
        Some(components.clone()),
    )
    .map_err(|error| RunError::Line { which, error })?;
    let key = format!("{which}.model");
    Ok(LineTruth {
        model: model_named(&key, &table.model)?,
        parameters: table.parameters,
        // weights as written: dividing them by their sum again could change the last bit
        line: Line {
            components,
            ..checked
        },
        axis: table.axis,
        noise: table.noise,
        correlation: table.correlation,
        baseline: table.baseline,
    })
}
