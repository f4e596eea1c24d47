//! `inrush check`.

use super::output::Output;
use super::values::given;
use super::{Exit, report};
use clap::Args;
use inrush::prepare::PrepareSettings;
use inrush::run::{FileCheck, Given, LineSection, NumberOrWord, RunError, RunSheet, check_file};
use inrush::spectrum::{AxisKind, BrightnessUnit, Frame, RawSpectrum};
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
    /// Main-beam efficiency, for T_A*, optionally with its error.
    #[arg(long, value_name = "ETA[,ERR]", value_parser = given, allow_hyphen_values = true)]
    eta_mb: Option<Given>,
    /// Velocity that brings the file's frame to LSRK, km/s.
    #[arg(long, value_name = "KM_S", allow_negative_numbers = true)]
    frame_offset_km_s: Option<f64>,
}

/// Checks every file; a bad one stops none of the others.
pub fn run(arguments: &CheckArguments) -> Result<Exit, RunError> {
    let mut unusable = 0;
    let mut checked = 0;
    for file in &arguments.files {
        let inputs = match inputs(arguments, file) {
            Ok(inputs) => inputs,
            Err(error) => {
                checked += 1;
                unusable += 1;
                report(&error);
                continue;
            }
        };
        for (section, which, path, settings) in inputs {
            checked += 1;
            match check_file(&section, which, &path, &settings) {
                Ok(check) => Output::data(&described(&check))?,
                Err(error) => {
                    unusable += 1;
                    report(&error);
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
            .and_then(|_| sheet.source.properties())
            .and_then(|_| sheet.derive_settings())
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

/// Facts, one a line.
struct Facts(String);

impl Facts {
    fn add(&mut self, name: &str, value: &str) {
        // writing to a string cannot fail
        let _ = writeln!(self.0, "  {name:<18}{value}");
    }
}

/// What a file holds.
fn described(check: &FileCheck) -> String {
    let mut facts = Facts(format!("{}\n", check.raw.origin.path.display()));
    stated(&check.raw, &mut facts);
    found(check, &mut facts);
    for note in &check.notes {
        facts.add("assumed", &note.to_string());
    }
    for doubt in &check.doubts {
        facts.add("doubtful", doubt);
    }
    facts.0
}

/// What the file says of itself.
fn stated(raw: &RawSpectrum, facts: &mut Facts) {
    facts.add("format", &raw.origin.format);
    if let Some(object) = &raw.object {
        facts.add("object", object);
    }
    let first = raw.axis.first().copied().unwrap_or(f64::NAN);
    let last = raw.axis.last().copied().unwrap_or(f64::NAN);
    let (factor, digits, unit) = match raw.axis_kind {
        AxisKind::Frequency => (1e-9, 6, "GHz"),
        AxisKind::RadioVelocity | AxisKind::OpticalVelocity | AxisKind::RadialVelocity => {
            (1e-3, 3, "km/s")
        }
    };
    facts.add(
        "axis",
        &format!(
            "{}, {:.digits$} to {:.digits$} {unit}",
            raw.axis_kind,
            first * factor,
            last * factor
        ),
    );
    let blank = raw.values.iter().filter(|value| value.is_nan()).count();
    facts.add(
        "channels",
        &format!("{}, {blank} of them blank", raw.axis.len()),
    );
    let scale = match raw.unit {
        BrightnessUnit::MainBeamKelvin => "T_mb",
        BrightnessUnit::AntennaKelvin => "T_A*",
        BrightnessUnit::Kelvin => "K, scale not stated",
        BrightnessUnit::JanskyPerBeam => "Jy/beam",
    };
    facts.add("temperature scale", scale);
    let frame = match &raw.frame {
        Some(Frame::Lsrk) => "LSRK",
        Some(Frame::Other(name)) => name,
        None => "not stated",
    };
    facts.add("frame", frame);
    if let Some(frequency) = raw.rest_frequency_hz {
        facts.add("rest frequency", &format!("{:.7} GHz", frequency * 1e-9));
    }
    if let Some(beam) = raw.beam {
        facts.add(
            "beam",
            &format!("{:.1} x {:.1} arcsec", beam.major, beam.minor),
        );
    }
}

/// What its channels show.
fn found(check: &FileCheck, facts: &mut Facts) {
    if let Some(line) = &check.line {
        facts.add(
            "read for",
            &format!("{} at {:.7} GHz", line.name, line.rest_frequency_ghz),
        );
    }
    if let Some(spectrum) = &check.spectrum {
        let velocity = spectrum.velocity_km_s();
        facts.add(
            "velocities",
            &format!(
                "{:.3} to {:.3} km/s (radio, LSRK), channels of {:.4} km/s",
                velocity[0],
                velocity[velocity.len() - 1],
                spectrum.channel_width_km_s()
            ),
        );
    }
    let Some(prepared) = &check.prepared else {
        return;
    };
    facts.add(
        "line window",
        &format!(
            "{:.2} to {:.2} km/s",
            prepared.window.low_km_s, prepared.window.high_km_s
        ),
    );
    let spectrum = &prepared.spectrum;
    let brightest = (spectrum.velocity_km_s().iter())
        .zip(spectrum.temperature_k())
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
    facts.add(
        "noise",
        &format!("{:.4} K a channel, {correlation}", prepared.noise.rms_k),
    );
    facts.add(
        "brightest channel",
        &format!(
            "{brightest:.3} K, {:.0} times the noise",
            brightest / prepared.noise.rms_k
        ),
    );
}
