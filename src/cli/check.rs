//! `inrush check`.

use super::output::Output;
use super::{Exit, report};
use clap::Args;
use inrush::prepare::PrepareSettings;
use inrush::run::{FileCheck, LineSection, NumberOrWord, RunError, RunSheet, check_file};
use inrush::spectrum::{AxisKind, BrightnessUnit, Frame};
use std::fmt::Write;
use std::path::{Path, PathBuf};

/// Read the inputs and say what they hold and what is doubtful; fits nothing.
///
/// Examples:
///
///   inrush check demo-spectra/lantern7.toml
///
///   inrush check spectrum.fits --line "HCO+ 1-0"
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct CheckArguments {
    /// Run sheets (TOML) or spectra.
    #[arg(required = true)]
    files: Vec<PathBuf>,
    /// Line that spectra given as files are read for.
    #[arg(long, value_name = "LINE")]
    line: Option<String>,
    /// Columns of a text or table, such as "1:km/s,2:K".
    #[arg(long, value_name = "AXIS,VALUE")]
    columns: Option<String>,
    /// Row of a table with one spectrum a row: a number, or COLUMN=VALUE.
    #[arg(long, value_name = "ROW")]
    row: Option<String>,
    /// Main-beam efficiency, for T_A*.
    #[arg(long, value_name = "ETA")]
    eta_mb: Option<f64>,
    /// Velocity that brings the file's frame to LSRK, km/s.
    #[arg(long, value_name = "KM_S", allow_negative_numbers = true)]
    frame_offset_km_s: Option<f64>,
}

/// Checks every file; a bad one stops none of the others.
pub fn run(arguments: &CheckArguments, output: &Output) -> Result<Exit, RunError> {
    let mut unusable = 0;
    let mut checked = 0;
    for file in &arguments.files {
        let inputs = match inputs(arguments, file) {
            Ok(inputs) => inputs,
            Err(error) => {
                checked += 1;
                unusable += 1;
                report(&error, output);
                continue;
            }
        };
        for (section, which, path, settings) in inputs {
            checked += 1;
            match check_file(&section, which, &path, &settings) {
                Ok(check) => output
                    .data(&described(&check))
                    .map_err(|source| RunError::File {
                        path: PathBuf::from("stdout"),
                        source,
                    })?,
                Err(error) => {
                    unusable += 1;
                    report(&error, output);
                }
            }
        }
    }
    Ok(match unusable {
        0 => Exit::Done,
        _ if unusable < checked => Exit::SomeUnusable,
        _ => Exit::Unusable,
    })
}

type Input = (LineSection, &'static str, PathBuf, PrepareSettings);

/// The spectra of a run sheet, or the one spectrum of a file.
fn inputs(arguments: &CheckArguments, file: &Path) -> Result<Vec<Input>, RunError> {
    if file
        .extension()
        .is_some_and(|extension| extension == "toml")
    {
        let sheet = RunSheet::read(file)?;
        sheet
            .fit_settings()
            .map_err(|error| error.of_sheet(Some(file)))?;
        let base = file.parent().map_or_else(PathBuf::new, Path::to_owned);
        let sheet = &sheet;
        return [(&sheet.thick, "thick"), (&sheet.thin, "thin")]
            .into_iter()
            .map(|(section, which)| {
                let missing = || RunError::NoFile { which }.of_sheet(Some(file));
                let path = section.file.as_ref().ok_or_else(missing)?;
                let settings = sheet
                    .prepare_settings(section)
                    .map_err(|error| error.of_sheet(Some(file)))?;
                Ok((section.clone(), which, base.join(path), settings))
            })
            .collect();
    }
    let section = LineSection {
        line: arguments.line.clone(),
        columns: arguments.columns.clone(),
        row: arguments.row.clone().map(NumberOrWord::Word),
        eta_mb: arguments.eta_mb,
        frame_offset_km_s: arguments.frame_offset_km_s,
        ..LineSection::default()
    };
    Ok(vec![(
        section,
        "given",
        file.to_owned(),
        PrepareSettings::default(),
    )])
}

/// What a file holds, a fact a line.
fn described(check: &FileCheck) -> String {
    let raw = &check.raw;
    let mut text = format!("{}\n", raw.origin.path.display());
    let mut fact = |name: &str, value: String| {
        let _ = writeln!(text, "  {name:<18}{value}");
    };
    fact("format", raw.origin.format.clone());
    if let Some(object) = &raw.object {
        fact("object", object.clone());
    }
    let (first, last) = (
        raw.axis.first().copied().unwrap_or(f64::NAN),
        raw.axis.last().copied().unwrap_or(f64::NAN),
    );
    fact(
        "axis",
        match raw.axis_kind {
            AxisKind::Frequency => {
                format!("frequency, {:.6} to {:.6} GHz", first * 1e-9, last * 1e-9)
            }
            AxisKind::RadioVelocity => format!(
                "radio velocity, {:.3} to {:.3} km/s",
                first * 1e-3,
                last * 1e-3
            ),
            AxisKind::OpticalVelocity => format!(
                "optical velocity, {:.3} to {:.3} km/s",
                first * 1e-3,
                last * 1e-3
            ),
            AxisKind::RadialVelocity => format!(
                "relativistic velocity, {:.3} to {:.3} km/s",
                first * 1e-3,
                last * 1e-3
            ),
        },
    );
    let blank = raw.values.iter().filter(|value| value.is_nan()).count();
    fact(
        "channels",
        format!("{}, {blank} of them blank", raw.axis.len()),
    );
    fact(
        "temperature scale",
        match raw.unit {
            BrightnessUnit::MainBeamKelvin => "T_mb",
            BrightnessUnit::AntennaKelvin => "T_A*",
            BrightnessUnit::Kelvin => "K, scale not stated",
            BrightnessUnit::JanskyPerBeam => "Jy/beam",
        }
        .to_owned(),
    );
    fact(
        "frame",
        match &raw.frame {
            Some(Frame::Lsrk) => "LSRK".to_owned(),
            Some(Frame::Other(name)) => name.clone(),
            None => "not stated".to_owned(),
        },
    );
    if let Some(frequency) = raw.rest_frequency_hz {
        fact("rest frequency", format!("{:.7} GHz", frequency * 1e-9));
    }
    if let Some(beam) = raw.beam {
        fact(
            "beam",
            format!("{:.1} x {:.1} arcsec", beam.major, beam.minor),
        );
    }
    if let Some(line) = &check.line {
        fact(
            "read for",
            format!("{} at {:.7} GHz", line.name, line.rest_frequency_ghz),
        );
    }
    if let Some(spectrum) = &check.spectrum {
        let velocity = spectrum.velocity_km_s();
        fact(
            "velocities",
            format!(
                "{:.3} to {:.3} km/s (radio, LSRK), channels of {:.4} km/s",
                velocity[0],
                velocity[velocity.len() - 1],
                spectrum.channel_width_km_s()
            ),
        );
    }
    if let Some(prepared) = &check.prepared {
        fact(
            "line window",
            format!(
                "{:.2} to {:.2} km/s",
                prepared.window.low_km_s, prepared.window.high_km_s
            ),
        );
        let brightest = prepared
            .spectrum
            .velocity_km_s()
            .iter()
            .zip(prepared.spectrum.temperature_k())
            .filter(|(v, t)| prepared.window.contains(**v) && !t.is_nan())
            .map(|(_, t)| *t)
            .fold(f64::NEG_INFINITY, f64::max);
        let process = &prepared.noise.process;
        let correlation = if process.is_white() {
            "white".to_owned()
        } else {
            format!(
                "correlation {:.2} between neighbours",
                process.adjacent_correlation()
            )
        };
        fact(
            "noise",
            format!("{:.4} K a channel, {correlation}", prepared.noise.rms_k),
        );
        fact(
            "brightest channel",
            format!(
                "{brightest:.3} K, {:.0} times the noise",
                brightest / prepared.noise.rms_k
            ),
        );
    }
    for note in &check.notes {
        fact("assumed", note.to_string());
    }
    for doubt in &check.doubts {
        fact("doubtful", doubt.clone());
    }
    text
}
