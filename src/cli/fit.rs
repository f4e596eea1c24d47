//! `inrush fit`.

use super::Exit;
use super::output::Output;
use super::pair::{PairArguments, tell};
use clap::Args;
use inrush::fit::Workspace;
use inrush::report;
use inrush::run::{RunError, check_directory, fit_pair, pair_row, pair_summary, write_products};
use std::path::PathBuf;

/// Fit one pair of lines.
///
/// Examples:
///
///   inrush fit demo-spectra/lantern7.toml --out results
///
///   inrush fit --thick thick.csv --thin thin.fits --thick-line "HCO+ 1-0" --thin-line "H13CO+ 1-0"
///
/// Options stand above the run sheet.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct FitArguments {
    #[command(flatten)]
    pair: PairArguments,

    /// Draws behind each interval of derived quantities.
    #[arg(long, value_name = "N", help_heading = "Source")]
    draws: Option<usize>,

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

/// Fits the pair, prints its results and writes its products.
pub fn run(arguments: &FitArguments, output: &Output) -> Result<Exit, RunError> {
    let (mut sheet, base) = arguments.pair.resolve()?;
    if let Some(draws) = arguments.draws {
        sheet.derive.draws = draws;
    }
    sheet.output.figures &= !arguments.no_figures;
    if let Some(directory) = &arguments.out {
        check_directory(directory)?;
    }
    let outcome = fit_pair(&sheet, &base, &mut Workspace::new())
        .map_err(|error| error.of_sheet(arguments.pair.sheet()))?;
    tell(&outcome, &sheet, output);
    let text = if arguments.json {
        report::json(&pair_row(&outcome)?)?
    } else {
        pair_summary(&outcome)?
    };
    let written = match &arguments.out {
        Some(directory) => write_products(&outcome, &sheet, &base, directory)?,
        None => Vec::new(),
    };
    Output::data(&text)?;
    if let Some(directory) = &arguments.out {
        output.wrote(&written, directory);
    }
    Ok(Exit::Done)
}
