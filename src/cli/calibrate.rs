//! `inrush calibrate`.

use super::Exit;
use super::output::Output;
use super::pair::{PairArguments, tell};
use super::progress::ProgressLine;
use clap::Args;
use inrush::report;
use inrush::run::calibrate::{
    CalibrateSettings, calibrate, calibration_summary, json_row, write_calibration,
};
use inrush::run::{BatchSettings, RunError, check_directory, read_pair};
use std::path::PathBuf;

/// Find by simulation how far the speed and the verdict of one observation can be trusted.
///
/// The pair is fitted; its best model, moving as fitted and at rest, is injected with this observation's
/// channels, noise and correlation of the noise, and fitted again. Reported are bias, scatter, how often
/// intervals hold the truth, false alarms, and the signal-to-noise ratio that finds the motion.
///
/// Example:
///
///   inrush calibrate demo-spectra/lantern7.toml --pairs 100 --out calibration
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct CalibrateArguments {
    #[command(flatten)]
    pair: PairArguments,

    /// Pairs that move, and as many at rest, at the observation's own noise; a fifth of that at seven
    /// other noise levels.
    #[arg(long, value_name = "N", help_heading = "Calibration")]
    pairs: Option<usize>,

    /// Write tables, figures and the resolved run sheet into this directory.
    #[arg(long, value_name = "DIR", help_heading = "Products")]
    out: Option<PathBuf>,
    /// Print the results as one JSON object.
    #[arg(long, help_heading = "Products")]
    json: bool,
    /// Leave the figures out.
    #[arg(long, help_heading = "Products")]
    no_figures: bool,
}

/// Calibrates the observation, prints what was found and writes its products.
pub fn run(
    arguments: &CalibrateArguments,
    threads: Option<u16>,
    output: &Output,
) -> Result<Exit, RunError> {
    let (mut sheet, base) = arguments.pair.resolve()?;
    sheet.output.figures &= !arguments.no_figures;
    if let Some(directory) = &arguments.out {
        check_directory(directory)?;
    }
    let how = CalibrateSettings {
        pairs: arguments
            .pairs
            .unwrap_or(CalibrateSettings::default().pairs),
        seed: sheet.seed,
    };
    how.check()?;
    let batch = BatchSettings::with_threads(threads.unwrap_or(0).into());
    let mut line = ProgressLine::begin(output, "pairs");
    let calibrated = read_pair(&sheet, &base).and_then(|pair| {
        let settings = sheet.pair_settings()?;
        calibrate(pair, &settings, &how, &batch, |progress| {
            line.show(progress);
        })
    });
    line.end();
    let (calibration, outcome) =
        calibrated.map_err(|error| error.of_sheet(arguments.pair.sheet()))?;
    tell(&outcome, &sheet, output);
    let text = if arguments.json {
        report::json(&json_row(&calibration)?)?
    } else {
        calibration_summary(&calibration)
    };
    let written = match &arguments.out {
        Some(directory) => write_calibration(&calibration, &outcome, &sheet, &base, directory)?,
        None => Vec::new(),
    };
    Output::data(&text)?;
    if let Some(directory) = &arguments.out {
        output.wrote(&written, directory);
    }
    Ok(Exit::Done)
}
