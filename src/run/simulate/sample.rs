//! Sample settings into a folder: a sample table, the truth of every pair, and their spectra.
//!
//! The folder is made under a temporary name and renamed when it is whole. Pairs are made in blocks,
//! so memory does not grow with their number; which thread makes a pair does not matter to it.

use super::folder::{file_error, fill_folder};
use super::settings_file::{self, SETTINGS};
use super::truth_table;
use crate::line::{Line, find};
use crate::report::spectra::{self, SpectrumHeader};
use crate::report::{CsvRows, ReportError, Row, Schema};
use crate::run::RunError;
use crate::run::products::make_directory;
use crate::simulate::{SampleSettings, SampleTruth, SimulatedLine, simulate_pair};
use serde::{Deserialize, Serialize};
use std::fs::{self, File};
use std::io::{BufWriter, Write};
use std::num::NonZeroUsize;
use std::ops::Range;
use std::path::{Path, PathBuf};

/// A sample to simulate and where it goes.
#[derive(Clone, Debug, PartialEq)]
pub struct SampleRun {
    /// What is drawn.
    pub settings: SampleSettings,
    /// The thick line, a built-in one.
    pub thick_line: String,
    /// The thin line, a built-in one.
    pub thin_line: String,
    /// Folder; must not exist, or be empty.
    pub directory: PathBuf,
    /// Threads that make pairs.
    pub threads: NonZeroUsize,
}

/// A sample that was simulated and written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SampleFiles {
    /// The sample table.
    pub table: PathBuf,
    /// The truth, a row a pair.
    pub truth: PathBuf,
    /// What both follow from.
    pub settings: PathBuf,
    /// Folder of the spectra.
    pub spectra: PathBuf,
}

/// Name of the sample table.
const TABLE: &str = "sample.csv";
/// Name of the table of truths.
const TRUTH: &str = "truth.csv";
/// Name of the folder of spectra.
const SPECTRA: &str = "spectra";

/// Pairs made at a time.
const BLOCK: u64 = 1000;

/// Simulates a sample and writes its folder.
///
/// # Errors
///
/// [`RunError::Simulate`] for settings that cannot be used, [`RunError::Line`] for an unknown line,
/// [`RunError::Occupied`] where the folder holds something, [`RunError::File`] and
/// [`RunError::Report`] where something cannot be written.
pub fn write_sample(run: &SampleRun) -> Result<SampleFiles, RunError> {
    run.settings.check()?;
    let line = |which, name: &str| find(name).map_err(|error| RunError::Line { which, error });
    let lines = (
        line("thick", &run.thick_line)?,
        line("thin", &run.thin_line)?,
    );
    fill_folder(&run.directory, |folder| {
        write_into(folder, run, (&lines.0, &lines.1))
    })?;
    Ok(SampleFiles {
        table: run.directory.join(TABLE),
        truth: run.directory.join(TRUTH),
        settings: run.directory.join(SETTINGS),
        spectra: run.directory.join(SPECTRA),
    })
}

fn write_into(folder: &Path, run: &SampleRun, lines: (&Line, &Line)) -> Result<(), RunError> {
    let create = |name: &str| {
        let path = folder.join(name);
        File::create(&path)
            .map(BufWriter::new)
            .map_err(|source| file_error(&path, source))
    };
    create(SETTINGS)?
        .write_all(settings_text(run)?.as_bytes())
        .map_err(ReportError::Stream)?;
    let table_schema = truth_table::sample_schema()?;
    let truth_schema = truth_table::schema()?;
    let mut table = CsvRows::begin(&table_schema, create(TABLE)?)?;
    let mut truths = CsvRows::begin(&truth_schema, create(TRUTH)?)?;
    let mut first = 0;
    while first < run.settings.pairs {
        let block = first..run.settings.pairs.min(first + BLOCK);
        let spectra = folder.join(SPECTRA).join(block_name(first));
        make_directory(&spectra)?;
        for (index, row) in
            block
                .clone()
                .zip(write_block(&spectra, run, lines, &truth_schema, &block)?)
        {
            truths.push(&row)?;
            let mut row = table_schema.row();
            row.set("id", pair_id(index))?;
            for (which, line) in [("thick", lines.0), ("thin", lines.1)] {
                let file = format!(
                    "{SPECTRA}/{}/{}",
                    block_name(first),
                    file_name(index, which)
                );
                row.set(&format!("{which}_file"), file)?;
                row.set(&format!("{which}_line"), line.name.as_str())?;
            }
            table.push(&row)?;
        }
        first = block.end;
    }
    table.finish()?;
    truths.finish()?;
    Ok(())
}

/// Name of a pair: the same in every sample.
fn pair_id(index: u64) -> String {
    format!("pair-{:07}", index + 1)
}

fn file_name(index: u64, which: &str) -> String {
    format!("{}-{which}.csv", pair_id(index))
}

/// Folder of a block's spectra.
fn block_name(first: u64) -> String {
    format!("{:04}", first / BLOCK)
}

/// Makes the pairs of a block and writes their spectra; their truths, in order.
fn write_block(
    folder: &Path,
    run: &SampleRun,
    lines: (&Line, &Line),
    schema: &Schema,
    block: &Range<u64>,
) -> Result<Vec<Row>, RunError> {
    let share = (block.end - block.start).div_ceil(run.threads.get() as u64);
    let shares = block
        .clone()
        .step_by(usize::try_from(share).unwrap_or(usize::MAX))
        .map(|start| start..block.end.min(start + share));
    std::thread::scope(|scope| {
        let threads: Vec<_> = shares
            .map(|share| {
                scope.spawn(move || {
                    share
                        .map(|index| write_pair(folder, run, lines, schema, index))
                        .collect::<Result<Vec<Row>, RunError>>()
                })
            })
            .collect();
        let mut rows = Vec::new();
        for thread in threads {
            let made = thread
                .join()
                .map_err(|_| RunError::Internal("a thread that simulates failed".to_owned()))?;
            rows.extend(made?);
        }
        Ok(rows)
    })
}

fn write_pair(
    folder: &Path,
    run: &SampleRun,
    lines: (&Line, &Line),
    schema: &Schema,
    index: u64,
) -> Result<Row, RunError> {
    let drawn = run.settings.pair(lines, index)?;
    let pair = simulate_pair(&drawn.truth)?;
    for (which, line, simulated) in [
        ("thick", lines.0, &pair.thick),
        ("thin", lines.1, &pair.thin),
    ] {
        let path = folder.join(file_name(index, which));
        let mut bytes = Vec::new();
        let header = header(run, index, line, &drawn, simulated);
        spectra::csv(&simulated.spectrum, &header, &mut bytes)?;
        fs::write(&path, bytes).map_err(|source| file_error(&path, source))?;
    }
    truth_table::row(schema, &pair_id(index), &drawn, &pair)
}

fn header(
    run: &SampleRun,
    index: u64,
    line: &Line,
    drawn: &SampleTruth,
    simulated: &SimulatedLine,
) -> SpectrumHeader {
    SpectrumHeader {
        object: pair_id(index),
        line: line.name.clone(),
        rest_frequency_ghz: line.rest_frequency_ghz,
        history: vec![
            format!(
                "simulated by inrush {}, pair {} of seed {}",
                env!("CARGO_PKG_VERSION"),
                index + 1,
                run.settings.seed
            ),
            format!(
                "truth: {TRUTH}, {}, noise {} K",
                drawn.kind.name(),
                simulated.noise_k
            ),
        ],
    }
}

/// The file of settings.
#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct SettingsFile {
    /// Version of Inrush that wrote it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    version: Option<String>,
    /// Name of the thick line.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    thick_line: Option<String>,
    /// Name of the thin line.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    thin_line: Option<String>,
    #[serde(default)]
    sample: SampleSettings,
}

fn settings_text(run: &SampleRun) -> Result<String, RunError> {
    let file = SettingsFile {
        version: Some(env!("CARGO_PKG_VERSION").to_owned()),
        thick_line: Some(run.thick_line.clone()),
        thin_line: Some(run.thin_line.clone()),
        sample: run.settings.clone(),
    };
    settings_file::text(&file, "sample", "sample")
}

/// Settings of a sample from its file, and the names of its thick and thin line where it has them.
///
/// # Errors
///
/// [`RunError::File`] where it cannot be read, [`RunError::Sheet`] where it holds no settings.
pub fn read_sample_settings(
    path: &Path,
) -> Result<(SampleSettings, Option<String>, Option<String>), RunError> {
    let file: SettingsFile = settings_file::read(path)?;
    Ok((file.sample, file.thick_line, file.thin_line))
}
