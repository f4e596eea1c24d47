//! `inrush simulate sample`.

use super::{Exit, Output, RunError, SharedArgs, THICK_LINE, THIN_LINE, replace};
use crate::cli::values::{number, numbers};
use clap::Args;
use inrush::run::simulate::{SampleRun, read_sample_settings, write_sample};
use inrush::simulate::{Kind, Range, SampleSettings, Slab, Spacing};
use std::collections::BTreeMap;
use std::num::NonZeroUsize;
use std::path::PathBuf;

/// Make the spectra of many pairs with different truths, a sample table and a table of the truths.
///
/// Examples:
///
///   inrush simulate sample --out sample --pairs 1000
///
///   inrush simulate sample --out sample --kinds infall,static=0.5 --models hill --signal-to-noise 20,50
///
/// Every quantity is drawn from a RANGE: LOW,HIGH, or one value. The words in brackets say whether
/// values lie evenly or by factors; log:LOW,HIGH and even:LOW,HIGH choose. A pair is the same in a larger
/// sample.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct SampleArgs {
    /// Directory for the files; must not exist, or be empty.
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// Number of pairs; 100 where absent.
    #[arg(long, value_name = "N", allow_hyphen_values = true)]
    pairs: Option<u64>,
    /// Settings in a file, such as a sample's settings.toml; options stand above them.
    #[arg(long, value_name = "FILE")]
    settings: Option<PathBuf>,
    #[command(flatten)]
    shared: SharedArgs,

    /// What pairs show, with weights: infall, expansion, static, two-clouds, gaussian; all alike where
    /// absent.
    #[arg(long, value_name = "NAME[=WEIGHT],...", value_parser = kinds, allow_hyphen_values = true, help_heading = "Truth")]
    kinds: Option<Weights<Kind>>,
    /// Models of infall, expansion and static pairs, with weights: hill, two-layer; both alike where
    /// absent.
    #[arg(long, value_name = "NAME[=WEIGHT],...", value_parser = models, allow_hyphen_values = true, help_heading = "Truth")]
    models: Option<Weights<Slab>>,
    /// Inward speed over dispersion: infall has the positive part, expansion the negative one [even:-1,1].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    v_in_sigmas: Option<GivenRange>,
    /// Optical depth of a half or layer [log:0.5,30].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    tau: Option<GivenRange>,
    /// Excitation temperatures, K; of two layers the colder is in front [even:5,40].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    temperature_k: Option<GivenRange>,
    /// Velocity dispersion, km/s [log:0.15,1].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    sigma_km_s: Option<GivenRange>,
    /// Systemic velocity, km/s [even:-20,20].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    v_lsr_km_s: Option<GivenRange>,
    /// Peak of the thin line, K [log:0.1,3].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    peak_thin_k: Option<GivenRange>,
    /// Distance of two clouds over the first one's dispersion [even:1.5,4].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    separation_sigmas: Option<GivenRange>,
    /// Peak of the second cloud over the first one's, in each line [even:0.3,1].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Truth")]
    second_over_first: Option<GivenRange>,

    /// Channels of each line; 200 where absent.
    #[arg(
        long,
        value_name = "N",
        allow_hyphen_values = true,
        help_heading = "Channels"
    )]
    channels: Option<usize>,
    /// Channel width over dispersion [log:0.1,0.3].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, conflicts_with = "channel_km_s", help_heading = "Channels")]
    channel_sigmas: Option<GivenRange>,
    /// Channel width, km/s, in place of that over dispersion [even].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Channels")]
    channel_km_s: Option<GivenRange>,
    /// Middle of the band less systemic velocity, over dispersion [even:-1,1].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Channels")]
    band_offset_sigmas: Option<GivenRange>,

    /// Peak over noise of the thick line [log:5,100].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Noise and baseline")]
    signal_to_noise: Option<GivenRange>,
    /// Peak over noise of the thin line [log:5,100].
    #[arg(long, value_name = "RANGE", value_parser = given_range, allow_hyphen_values = true, help_heading = "Noise and baseline")]
    signal_to_noise_thin: Option<GivenRange>,
}

type Weights<K> = BTreeMap<K, f64>;

/// A range as given: without a word, values lie as the quantity's do by default.
#[derive(Clone, Copy, Debug)]
struct GivenRange {
    ends: [f64; 2],
    spacing: Option<Spacing>,
}

impl GivenRange {
    fn with(self, spacing: Spacing) -> Range {
        let [low, high] = self.ends;
        Range {
            low,
            high,
            spacing: self.spacing.unwrap_or(spacing),
        }
    }
}

/// Simulates and writes.
pub fn run(
    arguments: &SampleArgs,
    threads: Option<u16>,
    output: &Output,
) -> Result<Exit, RunError> {
    let run = arguments.run(threads)?;
    let files = write_sample(&run)?;
    for path in [&files.table, &files.truth, &files.settings] {
        output.note(&format!("wrote {}", path.display()));
    }
    output.note(&format!(
        "wrote the spectra of {} pairs into {}",
        run.settings.pairs,
        files.spectra.display()
    ));
    Ok(Exit::Done)
}

impl SampleArgs {
    fn run(&self, threads: Option<u16>) -> Result<SampleRun, RunError> {
        let (settings, thick_line, thin_line) = match &self.settings {
            Some(path) => read_sample_settings(path)?,
            None => (SampleSettings::default(), None, None),
        };
        let line = |option: &Option<String>, file: Option<String>, default: &str| {
            option.clone().or(file).unwrap_or(default.to_owned())
        };
        let threads = threads
            .and_then(|threads| NonZeroUsize::new(threads.into()))
            .or_else(|| std::thread::available_parallelism().ok())
            .unwrap_or(NonZeroUsize::MIN);
        Ok(SampleRun {
            settings: self.over(settings),
            thick_line: line(&self.shared.thick_line, thick_line, THICK_LINE),
            thin_line: line(&self.shared.thin_line, thin_line, THIN_LINE),
            directory: self.out.clone(),
            threads,
        })
    }

    /// Settings with what is given as options.
    fn over(&self, mut settings: SampleSettings) -> SampleSettings {
        replace(&mut settings.pairs, self.pairs);
        replace(&mut settings.seed, self.shared.seed);
        replace(&mut settings.channels, self.channels);
        replace(&mut settings.correlation, self.shared.correlation);
        replace(&mut settings.kinds, self.kinds.clone());
        replace(&mut settings.models, self.models.clone());
        for (range, given) in [
            (&mut settings.v_in_sigmas, self.v_in_sigmas),
            (&mut settings.tau, self.tau),
            (&mut settings.temperature_k, self.temperature_k),
            (&mut settings.sigma_km_s, self.sigma_km_s),
            (&mut settings.v_lsr_km_s, self.v_lsr_km_s),
            (&mut settings.peak_thin_k, self.peak_thin_k),
            (&mut settings.separation_sigmas, self.separation_sigmas),
            (&mut settings.second_over_first, self.second_over_first),
            (&mut settings.channel_sigmas, self.channel_sigmas),
            (&mut settings.band_offset_sigmas, self.band_offset_sigmas),
            (&mut settings.signal_to_noise, self.signal_to_noise),
            (
                &mut settings.signal_to_noise_thin,
                self.signal_to_noise_thin,
            ),
        ] {
            if let Some(given) = given {
                *range = given.with(range.spacing);
            }
        }
        if self.channel_sigmas.is_some() {
            settings.channel_km_s = None;
        }
        if let Some(given) = self.channel_km_s {
            settings.channel_km_s = Some(given.with(Spacing::Even));
        }
        settings
    }
}

fn given_range(text: &str) -> Result<GivenRange, String> {
    let (spacing, ends) = match text.split_once(':') {
        Some(("log", ends)) => (Some(Spacing::Log), ends),
        Some(("even", ends)) => (Some(Spacing::Even), ends),
        Some((word, _)) => return Err(format!("`{word}:`, expected log: or even:")),
        None => (None, text),
    };
    let ends = match numbers(ends)?[..] {
        [low, high] => [low, high],
        [value] => [value, value],
        _ => return Err("expected LOW,HIGH or one value".to_owned()),
    };
    Ok(GivenRange { ends, spacing })
}

fn kinds(text: &str) -> Result<Weights<Kind>, String> {
    weights(text, Kind::ALL.map(|kind| (kind.name(), kind)))
}

fn models(text: &str) -> Result<Weights<Slab>, String> {
    weights(text, Slab::ALL.map(|slab| (slab.name(), slab)))
}

/// Names with weights, 1 where none is given.
fn weights<K: Ord + Copy, const N: usize>(
    text: &str,
    known: [(&str, K); N],
) -> Result<Weights<K>, String> {
    let mut weights = Weights::new();
    for part in text.split(',') {
        let (name, weight) = match part.split_once('=') {
            Some((name, weight)) => (name.trim(), number(weight)?),
            None => (part.trim(), 1.0),
        };
        let Some((_, key)) = known.iter().find(|(known, _)| *known == name) else {
            let names = known.map(|(name, _)| name).join(", ");
            return Err(format!("`{name}`, expected {names}"));
        };
        if weights.insert(*key, weight).is_some() {
            return Err(format!("`{name}` twice, expected each name once"));
        }
    }
    Ok(weights)
}
