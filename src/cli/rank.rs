//! `inrush rank`.

use super::output::Output;
use super::progress::ProgressLine;
use super::{Exit, interrupt};
use clap::Args;
use inrush::run::rank::{DEFAULT_TOP, RankEnd, RankRun, Ranking, rank};
use inrush::run::{BatchSettings, RunError, RunSheet, Watch};
use std::path::PathBuf;

/// Rank a sample of sources.
///
/// Examples:
///
///   inrush rank demo-spectra/survey/sample.csv --out ranked
///
///   inrush rank sample.csv --out ranked --resume
///
/// The sample table is CSV with the columns id, thick_file, thin_file, thick_line, thin_line; then, where known, the
/// properties of the sources (distance_kpc, distance_kpc_err, mass_msun, ...) and their group.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "each is a switch of the command line"
)]
pub struct RankArguments {
    /// Sample table (CSV).
    table: PathBuf,
    /// Directory for the products; must not exist, be empty, or hold this run.
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// Go on with an unfinished run in that directory.
    #[arg(long)]
    resume: bool,

    /// Run sheet (TOML) with what holds for every source: scale, preparing, fitting.
    #[arg(long, value_name = "FILE", help_heading = "Fitting")]
    sheet: Option<PathBuf>,
    /// Models, separated by commas, as of `inrush fit`.
    #[arg(
        long,
        value_name = "MODELS",
        value_delimiter = ',',
        help_heading = "Fitting"
    )]
    models: Vec<String>,
    /// Stop after least squares: no posterior, no hypotheses.
    #[arg(long, help_heading = "Fitting")]
    formal: bool,
    /// Seed of everything random.
    #[arg(
        long,
        value_name = "SEED",
        allow_negative_numbers = true,
        help_heading = "Fitting"
    )]
    seed: Option<u64>,

    /// Say how probable each source is to be among the first N.
    #[arg(long, value_name = "N", default_value_t = DEFAULT_TOP, help_heading = "Products")]
    top: usize,
    /// Write the table of a paper, as LaTeX and ECSV.
    #[arg(long, help_heading = "Products")]
    latex: bool,
    /// Leave the figures out.
    #[arg(long, help_heading = "Products")]
    no_figures: bool,
}

/// Ranks the sample, prints its first places and says what was written.
pub fn run(
    arguments: &RankArguments,
    threads: Option<u16>,
    output: &Output,
) -> Result<Exit, RunError> {
    let run = arguments.resolve()?;
    let stop = interrupt::flag()?;
    let batch = BatchSettings::with_threads(threads.map_or(0, usize::from));
    let mut line = ProgressLine::begin(output, "line pairs");
    let ended = rank(
        &run,
        &batch,
        Watch {
            stop: &stop,
            progress: &mut |progress| line.show(progress),
        },
    );
    line.end();
    Ok(match ended? {
        RankEnd::Finished(ranking) => tell(&ranking, &run, output)?,
        RankEnd::Stopped(progress) => {
            output.note(&format!(
                "interrupted with {} of {} line pairs done; the same command with --resume goes on",
                progress.done, progress.items
            ));
            Exit::Interrupted
        }
        RankEnd::Before(record) => {
            output.note(&format!(
                "{} holds the products of this run: nothing is left to do",
                run.directory.display()
            ));
            exit(record.unusable)
        }
    })
}

fn exit(unusable: u64) -> Exit {
    if unusable == 0 {
        Exit::Done
    } else {
        Exit::SomeUnusable
    }
}

fn tell(ranking: &Ranking, run: &RankRun, output: &Output) -> Result<Exit, RunError> {
    if !ranking.unused.is_empty() {
        output.note(&format!(
            "{}: columns that nothing is done with: {}",
            run.table.display(),
            ranking.unused.join(", ")
        ));
    }
    for (note, count) in &ranking.notes {
        output.note(&format!("{count} spectra: {note}"));
    }
    for (id, line_pair, failure) in &ranking.failures {
        Output::warning(&format!("{id}, {line_pair}: {}", failure.message));
    }
    Output::data(&ranking.text)?;
    output.wrote(&ranking.files.paths, &run.directory);
    Ok(exit(ranking.failures.len() as u64))
}

impl RankArguments {
    fn resolve(&self) -> Result<RankRun, RunError> {
        let mut sheet = (self.sheet.as_deref())
            .map(RunSheet::read)
            .transpose()?
            .unwrap_or_default();
        if !self.models.is_empty() {
            sheet.fit.models.clone_from(&self.models);
        }
        if let Some(seed) = self.seed {
            sheet.seed = seed;
        }
        sheet.fit.formal |= self.formal;
        sheet.output.figures &= !self.no_figures;
        Ok(RankRun {
            table: self.table.clone(),
            directory: self.out.clone(),
            sheet,
            top: self.top,
            latex: self.latex,
            resume: self.resume,
        })
    }
}
