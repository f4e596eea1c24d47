//! Fits the pairs of a sample that `inrush simulate sample` wrote, as `benches/against_scipy.py` asks.
//!
//! `cargo run --release --example fit_sample -- DIR` reads names of pairs from standard input, several a
//! line, and prints one JSON object a model and pair: chi2, parameters, and the seconds of the fit alone.
//! The noise is the truth's, every channel counts, and models are taken at the channels' centres.
//!
//! A line's spectra are read and their windows found before any of them is fitted. `seconds` holds the
//! fit of one model with everything that it needs but the thin line's own fit, `thin_seconds` that one.
#![allow(clippy::print_stdout, clippy::print_stderr)]

mod comparison;

use comparison::settings;
use inrush::fit::{FitSettings, ModelFit, ThinFit, Workspace, fit_pair, fit_thin};
use inrush::line::{Line, find};
use inrush::model::Model;
use inrush::numeric::Autoregression;
use inrush::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use inrush::spectrum::{Noise, Spectrum, Window};
use serde_json::json;
use std::collections::HashMap;
use std::error::Error;
use std::io::{BufRead, Write};
use std::path::{Path, PathBuf};
use std::process::ExitCode;

type Outcome<T> = Result<T, Box<dyn Error>>;
type Row = HashMap<String, String>;

const MODELS: [Model; 2] = [Model::TwoLayer, Model::Hill];

fn main() -> ExitCode {
    match answer() {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn answer() -> Outcome<()> {
    let folder = PathBuf::from(std::env::args().nth(1).ok_or("expected a folder")?);
    let sample = Sample::read(&folder)?;
    let mut output = std::io::stdout().lock();
    let mut workspace = Workspace::new();
    for names in std::io::stdin().lock().lines() {
        let pairs = names?
            .split_whitespace()
            .map(|id| Ok((id.to_owned(), sample.pair(id)?)))
            .collect::<Outcome<Vec<(String, Pair)>>>()?;
        let fits = pairs
            .iter()
            .map(|(_, pair)| pair.fit(&mut workspace))
            .collect::<Outcome<Vec<PairFits>>>()?;
        for ((id, _), fits) in pairs.iter().zip(&fits) {
            for (fit, seconds) in &fits.models {
                let line = result(id, fit, *seconds, fits.thin_seconds)?;
                writeln!(output, "{line}")?;
            }
        }
        output.flush()?;
    }
    Ok(())
}

/// One line of the answer.
fn result(id: &str, fit: &ModelFit, seconds: f64, thin_seconds: f64) -> Outcome<String> {
    let parameters: serde_json::Map<String, serde_json::Value> = fit
        .parameters
        .iter()
        .map(|parameter| (parameter.name.to_owned(), parameter.value.into()))
        .collect();
    Ok(serde_json::to_string(&json!({
        "id": id,
        "model": fit.model.name(),
        "chi2": fit.chi2,
        "parameters": parameters,
        "seconds": seconds,
        "thin_seconds": thin_seconds,
        "starts": fit.starts,
        "evaluations": fit.evaluations,
        "termination": fit.termination.text(),
    }))?)
}

/// The tables of a sample.
struct Sample {
    folder: PathBuf,
    rows: HashMap<String, (Row, Row)>,
}

impl Sample {
    fn read(folder: &Path) -> Outcome<Self> {
        let table = |name: &str| -> Outcome<Vec<Row>> {
            let mut reader = csv::Reader::from_path(folder.join(name))?;
            Ok(reader.deserialize().collect::<Result<_, _>>()?)
        };
        let rows = table("sample.csv")?
            .into_iter()
            .zip(table("truth.csv")?)
            .map(|(files, truth)| (files["id"].clone(), (files, truth)))
            .collect();
        Ok(Self {
            folder: folder.to_owned(),
            rows,
        })
    }

    fn pair(&self, id: &str) -> Outcome<Pair> {
        let (files, truth) = self.rows.get(id).ok_or_else(|| format!("no pair {id}"))?;
        let thick = spectrum(&self.folder.join(&files["thick_file"]))?;
        let thin = spectrum(&self.folder.join(&files["thin_file"]))?;
        let noise_k = [
            truth["noise_thick_k"].parse()?,
            truth["noise_thin_k"].parse()?,
        ];
        let velocity = thick.velocity_km_s();
        let middle_km_s = 0.5 * (velocity[0] + velocity[velocity.len() - 1]);
        let (thick, thin) = prepared(thick, thin, noise_k);
        Ok(Pair {
            thick,
            thin,
            lines: (find(&files["thick_line"])?, find(&files["thin_line"])?),
            settings: MODELS.map(|model| settings(model, middle_km_s)),
        })
    }
}

/// A pair, ready to be fitted.
struct Pair {
    thick: Prepared,
    thin: Prepared,
    lines: (Line, Line),
    settings: [FitSettings; 2],
}

/// What was found, and how long it took.
struct PairFits {
    models: Vec<(ModelFit, f64)>,
    thin_seconds: f64,
}

impl Pair {
    fn fit(&self, workspace: &mut Workspace) -> Outcome<PairFits> {
        let start = seconds();
        let thin_fit = fit_thin(&self.thin, &self.lines.1, &self.settings[0], workspace)?;
        let thin_seconds = seconds() - start;
        let mut models = Vec::with_capacity(self.settings.len());
        for settings in &self.settings {
            let start = seconds();
            let fit = self.fit_model(&thin_fit, settings, workspace)?;
            models.push((fit, seconds() - start));
        }
        Ok(PairFits {
            models,
            thin_seconds,
        })
    }

    fn fit_model(
        &self,
        thin_fit: &ThinFit,
        settings: &FitSettings,
        workspace: &mut Workspace,
    ) -> Outcome<ModelFit> {
        let lines = (&self.lines.0, &self.lines.1);
        let thin_line = thin_fit.line.as_ref();
        let mut fit = fit_pair(
            &self.thick,
            &self.thin,
            lines,
            thin_line,
            settings,
            workspace,
        )?;
        Ok(fit.models.swap_remove(0))
    }
}

/// Processor time of this process, s: what others do on the machine does not count.
#[cfg(unix)]
fn seconds() -> f64 {
    let time = rustix::time::clock_gettime(rustix::time::ClockId::ProcessCPUTime);
    #[expect(clippy::cast_precision_loss, reason = "hours at most")]
    let seconds = time.tv_sec as f64 + 1e-9 * time.tv_nsec as f64;
    seconds
}

/// Time since the first call, s.
#[cfg(not(unix))]
fn seconds() -> f64 {
    use std::sync::OnceLock;
    use std::time::Instant;
    static START: OnceLock<Instant> = OnceLock::new();
    START.get_or_init(Instant::now).elapsed().as_secs_f64()
}

fn spectrum(path: &Path) -> Outcome<Spectrum> {
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_path(path)?;
    let rows: Vec<(f64, f64)> = reader.deserialize().collect::<Result<_, _>>()?;
    let (velocity, temperature): (Vec<f64>, Vec<f64>) = rows.into_iter().unzip();
    let channels = velocity.len();
    let width_km_s = (velocity[channels - 1] - velocity[0]) / (channels as f64 - 1.0);
    Ok(Spectrum::new(
        velocity,
        vec![width_km_s; channels],
        temperature,
    )?)
}

/// Both lines as they are, with white noise of the truth's rms.
fn prepared(thick: Spectrum, thin: Spectrum, noise_k: [f64; 2]) -> (Prepared, Prepared) {
    let windows = windows(&thick, &thin);
    let prepared = |spectrum: Spectrum, window: Window, rms_k: f64| {
        let channels = spectrum.len();
        Prepared::as_given(
            spectrum,
            window,
            Noise {
                rms_k,
                channels,
                process: Autoregression::white(),
            },
        )
    };
    (
        prepared(thick, windows.0, noise_k[0]),
        prepared(thin, windows.1, noise_k[1]),
    )
}

/// Windows as they are found for a user, or the middle half of the band where none can be found.
fn windows(thick: &Spectrum, thin: &Spectrum) -> (Window, Window) {
    let settings = PrepareSettings {
        baseline_order: None,
        noise_order: 0,
        ..PrepareSettings::default()
    };
    let expected = Expected::default();
    let found = prepare_pair((thick, &settings, &expected), (thin, &settings, &expected));
    let middle_half = |spectrum: &Spectrum| {
        let velocity = spectrum.velocity_km_s();
        let quarter = velocity.len() / 4;
        Window {
            low_km_s: velocity[quarter],
            high_km_s: velocity[velocity.len() - 1 - quarter],
        }
    };
    match found {
        Ok((thick, thin)) => (thick.window, thin.window),
        Err(_) => (middle_half(thick), middle_half(thin)),
    }
}
