//! `inrush map`.

use super::output::Output;
use super::progress::ProgressLine;
use super::{Exit, interrupt};
use clap::Args;
use inrush::run::map::{MapEnd, MapRun, make_map};
use inrush::run::{BatchSettings, RunError, RunSheet, Watch};
use std::path::{Path, PathBuf};

/// Map a field of pointings: two cubes, a table of spectra, or FITS tables of one spectrum a row.
///
/// Example:
///
///   inrush map demo-spectra/lantern7-map/map.toml --out results
///
/// The run sheet names both lines and their files, or in [grid] a table of pointings.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "each is a switch of the command line"
)]
pub struct MapArguments {
    /// Run sheet (TOML).
    sheet: PathBuf,

    /// Directory for tables, maps and figures; must not exist, or be empty.
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// Go on with an unfinished run in that directory.
    #[arg(long)]
    resume: bool,
    /// Stop after least squares: no posteriors, no verdicts.
    #[arg(long)]
    formal: bool,
    /// Draw a page for every fitted pointing.
    #[arg(long)]
    pages: bool,
    /// Leave the figures out.
    #[arg(long, conflicts_with = "pages")]
    no_figures: bool,
    /// Seed of everything random.
    #[arg(long, value_name = "SEED", allow_negative_numbers = true)]
    seed: Option<u64>,
}

/// Makes the map and says what became of the pointings.
pub fn run(
    arguments: &MapArguments,
    threads: Option<u16>,
    output: &Output,
) -> Result<Exit, RunError> {
    let mut sheet = RunSheet::read(&arguments.sheet)?;
    let base = arguments
        .sheet
        .parent()
        .map_or_else(PathBuf::new, Path::to_owned);
    sheet.fit.formal |= arguments.formal;
    sheet.output.figures &= !arguments.no_figures;
    if let Some(seed) = arguments.seed {
        sheet.seed = seed;
    }
    let run = MapRun {
        sheet,
        base,
        directory: arguments.out.clone(),
        batch: BatchSettings::with_threads(threads.unwrap_or(0).into()),
        resume: arguments.resume,
        pages: arguments.pages,
    };
    let stop = interrupt::flag()?;
    let mut line = ProgressLine::begin(output, "blocks of pointings");
    let ended = make_map(
        &run,
        Watch {
            stop: &stop,
            progress: &mut |progress| line.show(progress),
        },
    );
    line.end();
    match ended.map_err(|error| error.of_sheet(Some(&arguments.sheet)))? {
        MapEnd::Before(record) => {
            output.note(&format!(
                "{} holds the products of this run: nothing is left to do",
                run.directory.display()
            ));
            Ok(exit(record.unusable))
        }
        MapEnd::Stopped(progress) => {
            output.note(&format!(
                "interrupted with {} of {} blocks of pointings done; the same command with --resume goes on",
                progress.done, progress.items
            ));
            Ok(Exit::Interrupted)
        }
        MapEnd::Done {
            counts,
            written,
            notes,
            motions,
        } => {
            for note in &notes {
                output.note(note);
            }
            output.note(&format!(
                "{} of {} pointings fitted; {} below the threshold of {} sigma, {} outside of the coverage, {} unusable",
                counts.fitted,
                counts.pointings,
                counts.skipped,
                run.sheet.grid.threshold_sigma,
                counts.blank,
                counts.unusable
            ));
            for problem in &counts.problems {
                Output::warning(problem);
            }
            Output::data(&motions)?;
            output.note(&format!(
                "wrote {} files into {}",
                written.len(),
                run.directory.display()
            ));
            Ok(exit(counts.unusable as u64))
        }
    }
}

fn exit(unusable: u64) -> Exit {
    if unusable == 0 {
        Exit::Done
    } else {
        Exit::SomeUnusable
    }
}
