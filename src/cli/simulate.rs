//! `inrush simulate`.

mod grid;
mod sample;

use super::Exit;
use super::output::Output;
use super::values::{named, number, range};
use clap::{Args, Subcommand, ValueEnum};
use grid::GridArgs;
use inrush::line::find;
use inrush::report::spectra::FitsAxis;
use inrush::run::RunError;
use inrush::run::simulate::{Formats, PairSettings, model_named, write_pair};
use inrush::simulate::{Axis, Correlation, LineTruth, NoiseLevel, PairTruth};
use sample::SampleArgs;
use std::path::PathBuf;

/// Make spectra whose truth is known.
#[derive(Debug, Args)]
pub struct SimulateArgs {
    #[command(subcommand)]
    what: What,
}

#[derive(Debug, Subcommand)]
enum What {
    Pair(Box<PairArgs>),
    Sample(Box<SampleArgs>),
    Grid(Box<GridArgs>),
}

/// What pairs, samples and maps have.
#[derive(Debug, Args)]
struct SharedArgs {
    /// Seed of the random numbers; 1 where absent.
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u64).range(..=i64::MAX.unsigned_abs()))]
    seed: Option<u64>,
    /// The thick line; HCO+ 1-0 where absent.
    #[arg(long, value_name = "LINE", help_heading = "Lines")]
    thick_line: Option<String>,
    /// The thin line; H13CO+ 1-0 where absent.
    #[arg(long, value_name = "LINE", help_heading = "Lines")]
    thin_line: Option<String>,
    /// Correlation of the noise from channel to channel: white, hanning, boxcar:N, linear, band-limited
    /// or autoregressive:COEFFICIENT; white where absent.
    #[arg(long, value_name = "KIND", value_parser = correlation, help_heading = "Noise and baseline")]
    correlation: Option<Correlation>,
}

const SEED: u64 = 1;
const THICK_LINE: &str = "HCO+ 1-0";
const THIN_LINE: &str = "H13CO+ 1-0";

/// Make the spectra of one pair, its truth and its run sheet.
///
/// Examples:
///
///   inrush simulate pair --out simulated
///
///   inrush simulate pair --out simulated --model two-layer --set tau=5 --noise-k 0.05
///
/// The first makes a blue two-peaked HCO+ 1-0 and an H13CO+ 1-0. Options without a line's name hold for
/// both lines.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct PairArgs {
    /// Directory for the files; files of the same names are replaced.
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// What the file names start with: STEM-thick.csv, STEM.toml, STEM-truth.toml.
    #[arg(long, value_name = "STEM")]
    stem: Option<String>,
    /// Name of the source.
    #[arg(long, value_name = "NAME", default_value = "Simulated clump")]
    name: String,
    /// Files of the spectra.
    #[arg(long, value_enum, default_value_t = Format::Csv)]
    format: Format,
    /// Spectral axis of FITS files.
    #[arg(long, value_enum, default_value_t = FitsAxisName::Velocity)]
    fits_axis: FitsAxisName,
    #[command(flatten)]
    shared: SharedArgs,

    /// Model of the thick line.
    #[arg(
        long,
        value_name = "MODEL",
        default_value = "hill",
        help_heading = "Lines"
    )]
    model: String,
    /// Model of the thin line: gaussian, two-gaussians or layer.
    #[arg(
        long,
        value_name = "MODEL",
        default_value = "layer",
        help_heading = "Lines"
    )]
    thin_model: String,
    /// A parameter of the thick line's model; velocity and dispersion hold for the thin line too.
    #[arg(long = "set", value_name = "NAME=VALUE", value_parser = assignment, allow_hyphen_values = true, help_heading = "Lines")]
    parameters: Vec<(String, f64)>,
    /// A parameter of the thin line's model.
    #[arg(long = "set-thin", value_name = "NAME=VALUE", value_parser = assignment, allow_hyphen_values = true, help_heading = "Lines")]
    thin_parameters: Vec<(String, f64)>,
    /// Optical depth of the thin layer by the abundance ratio of the two species.
    #[arg(long, value_name = "RATIO", help_heading = "Lines")]
    isotope_ratio: Option<f64>,

    /// Width of the channels, km/s.
    #[arg(
        long,
        value_name = "KM_S",
        allow_hyphen_values = true,
        help_heading = "Channels"
    )]
    channel_km_s: Option<f64>,
    /// Width of the thin line's channels, km/s.
    #[arg(
        long,
        value_name = "KM_S",
        allow_hyphen_values = true,
        help_heading = "Channels"
    )]
    channel_thin_km_s: Option<f64>,
    /// First and last channel, km/s; 20 dispersions about the line where absent.
    #[arg(long, value_name = "LOW,HIGH", value_parser = range, allow_hyphen_values = true, help_heading = "Channels")]
    range_km_s: Option<[f64; 2]>,

    /// Noise of one channel, K.
    #[arg(
        long,
        value_name = "K",
        conflicts_with = "signal_to_noise",
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    noise_k: Option<f64>,
    /// Peak over noise; 60 for the thick and 30 for the thin line where nothing is given.
    #[arg(
        long,
        value_name = "RATIO",
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    signal_to_noise: Option<f64>,
    /// Noise of one channel of the thin line, K.
    #[arg(
        long,
        value_name = "K",
        conflicts_with = "signal_to_noise_thin",
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    noise_thin_k: Option<f64>,
    /// Peak over noise of the thin line.
    #[arg(
        long,
        value_name = "RATIO",
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    signal_to_noise_thin: Option<f64>,
    /// Offset of the baseline in the middle of the band, K.
    #[arg(
        long,
        value_name = "K",
        default_value_t = 0.0,
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    baseline_offset_k: f64,
    /// Slope of the baseline, K per km/s.
    #[arg(
        long,
        value_name = "SLOPE",
        default_value_t = 0.0,
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    baseline_slope: f64,
    /// Curvature of the baseline, K per (km/s)^2.
    #[arg(
        long,
        value_name = "CURVATURE",
        default_value_t = 0.0,
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    baseline_curvature: f64,
    /// Amplitude of a sinusoidal ripple, K.
    #[arg(
        long,
        value_name = "K",
        default_value_t = 0.0,
        requires = "ripple_period_km_s",
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    ripple_k: f64,
    /// Period of the ripple, km/s.
    #[arg(
        long,
        value_name = "KM_S",
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    ripple_period_km_s: Option<f64>,
    /// Phase of the ripple in the middle of the band, degrees.
    #[arg(
        long,
        value_name = "DEGREES",
        default_value_t = 0.0,
        allow_hyphen_values = true,
        help_heading = "Noise and baseline"
    )]
    ripple_phase_deg: f64,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum Format {
    /// CSV.
    Csv,
    /// FITS images.
    Fits,
    /// CSV and FITS; the run sheet names the CSV files.
    Both,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum FitsAxisName {
    /// Radio velocity.
    Velocity,
    /// Frequency.
    Frequency,
}

/// Simulates and writes.
pub fn run(
    arguments: &SimulateArgs,
    threads: Option<u16>,
    output: &Output,
) -> Result<Exit, RunError> {
    match &arguments.what {
        What::Pair(pair) => run_pair(pair, output),
        What::Sample(sample) => sample::run(sample, threads, output),
        What::Grid(grid) => grid::run(grid, threads, output),
    }
}

fn run_pair(pair: &PairArgs, output: &Output) -> Result<Exit, RunError> {
    let files = write_pair(&pair.settings()?)?;
    for path in &files.written {
        output.note(&format!("wrote {}", path.display()));
    }
    output.note(&format!(
        "noise {:.4} K thick, {:.4} K thin; fit it with: inrush fit {}",
        files.pair.thick.noise_k,
        files.pair.thin.noise_k,
        files.sheet.display()
    ));
    Ok(Exit::Done)
}

impl PairArgs {
    /// What is simulated and where it goes.
    ///
    /// # Errors
    ///
    /// [`RunError`] for a line or a model that does not exist.
    pub fn settings(&self) -> Result<PairSettings, RunError> {
        Ok(PairSettings {
            truth: self.truth()?,
            name: self.name.clone(),
            directory: self.out.clone(),
            stem: self.stem.clone(),
            formats: match self.format {
                Format::Csv => Formats::Csv,
                Format::Fits => Formats::Fits,
                Format::Both => Formats::Both,
            },
            fits_axis: match self.fits_axis {
                FitsAxisName::Velocity => FitsAxis::Velocity,
                FitsAxisName::Frequency => FitsAxis::Frequency,
            },
        })
    }

    fn truth(&self) -> Result<PairTruth, RunError> {
        let shared = &self.shared;
        let line = |which, name: &Option<String>, default| {
            find(name.as_deref().unwrap_or(default))
                .map_err(|error| RunError::Line { which, error })
        };
        let lines = (
            line("thick", &shared.thick_line, THICK_LINE)?,
            line("thin", &shared.thin_line, THIN_LINE)?,
        );
        let models = (
            model_named("--model", &self.model)?,
            model_named("--thin-model", &self.thin_model)?,
        );
        let mut truth = PairTruth::new(models, lines, shared.seed.unwrap_or(SEED));
        if let Some(ratio) = self.isotope_ratio {
            truth.link(ratio);
        }
        truth.thick.parameters.extend(self.parameters.clone());
        truth.thin.parameters.extend(self.thin_parameters.clone());
        truth.centre_axes();
        self.set_observation(&mut truth.thick);
        self.set_observation(&mut truth.thin);
        if let Some(width_km_s) = self.channel_thin_km_s {
            truth.thin.axis.channel_km_s = width_km_s;
        }
        if let Some(noise) = level(self.noise_thin_k, self.signal_to_noise_thin) {
            truth.thin.noise = noise;
        }
        Ok(truth)
    }

    /// Channels, noise and baseline as far as they hold for both lines.
    fn set_observation(&self, line: &mut LineTruth) {
        let [low_km_s, high_km_s] = self
            .range_km_s
            .unwrap_or([line.axis.low_km_s, line.axis.high_km_s]);
        line.axis = Axis {
            low_km_s,
            high_km_s,
            channel_km_s: self.channel_km_s.unwrap_or(line.axis.channel_km_s),
        };
        if let Some(noise) = level(self.noise_k, self.signal_to_noise) {
            line.noise = noise;
        }
        line.correlation = self.shared.correlation.unwrap_or_default();
        line.baseline.offset_k = self.baseline_offset_k;
        line.baseline.slope_k_per_km_s = self.baseline_slope;
        line.baseline.curvature_k_per_km2_s2 = self.baseline_curvature;
        line.baseline.ripple_k = self.ripple_k;
        line.baseline.ripple_period_km_s = self.ripple_period_km_s.unwrap_or_default();
        line.baseline.ripple_phase_deg = self.ripple_phase_deg;
    }
}

fn level(noise_k: Option<f64>, signal_to_noise: Option<f64>) -> Option<NoiseLevel> {
    noise_k
        .map(NoiseLevel::RmsK)
        .or(signal_to_noise.map(NoiseLevel::SignalToNoise))
}

/// A setting in place of another, where it is given.
fn replace<T>(setting: &mut T, given: Option<T>) {
    if let Some(given) = given {
        *setting = given;
    }
}

fn assignment(text: &str) -> Result<(String, f64), String> {
    named(text, number)
}

fn correlation(text: &str) -> Result<Correlation, String> {
    let (kind, value) = match text.split_once(':') {
        Some((kind, value)) => (kind, Some(value)),
        None => (text, None),
    };
    match (kind, value) {
        ("white", None) => Ok(Correlation::White),
        ("hanning", None) => Ok(Correlation::Hanning),
        ("linear", None) => Ok(Correlation::Linear),
        ("band-limited", None) => Ok(Correlation::BandLimited),
        ("boxcar", Some(channels)) => channels
            .parse()
            .map(|channels| Correlation::Boxcar { channels })
            .map_err(|_| format!("boxcar of `{channels}`, expected a number of channels")),
        ("autoregressive", Some(coefficient)) => Ok(Correlation::Autoregressive {
            coefficient: number(coefficient)?,
        }),
        _ => Err(
            "expected white, hanning, boxcar:N, linear, band-limited or autoregressive:COEFFICIENT"
                .to_owned(),
        ),
    }
}
