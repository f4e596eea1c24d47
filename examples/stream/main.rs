//! Does a survey of any size stream through in bounded memory and at one speed?
//!
//!     cargo run --release --example stream -- [PAIRS] [THREADS] [DIRECTORY]
//!
//! Fits PAIRS (10,000) simulated pairs of 200 channels a line, each with noise of its own about one of
//! 300 profiles, with the default settings, and writes their table as CSV, ECSV and FITS into
//! DIRECTORY (a temporary one). Says after every tenth how fast it went, by the clock and by the processor time of
//! all threads (which other programs hardly touch), and how much memory the process holds; what Linux alone
//! tells is left out elsewhere.
#![allow(clippy::print_stdout, clippy::print_stderr)]

mod survey;

use inrush::fit::Workspace;
use inrush::report::{ReportError, Row, TableFiles, Value, columns};
use inrush::run::{BatchSettings, PairSettings, RunError, fit_spectra, pair_row};
use std::error::Error;
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};
use std::process::ExitCode;
use std::time::{Duration, Instant};
use survey::Survey;

/// No more memory than this, whatever the number of pairs.
const MOST_MEMORY_MB: f64 = 500.0;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    match run(&arguments) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn run(arguments: &[String]) -> Result<(), Box<dyn Error + Send + Sync>> {
    let pairs: u64 = arguments.first().map_or(Ok(10_000), |text| text.parse())?;
    let threads = arguments.get(1).map_or(Ok(0), |text| text.parse())?;
    let batch = BatchSettings::with_threads(threads);
    let temporary = tempfile::tempdir()?;
    let directory = (arguments.get(2)).map_or(temporary.path().to_owned(), PathBuf::from);
    let survey = Survey::draw()?;
    println!(
        "{pairs} pairs, {} threads, at most {} pairs held",
        batch.threads(),
        batch.most_held()
    );
    println!("    pairs  pairs/s  pairs/s of processor  memory/MB");
    let written = stream(&survey, pairs, &batch, &directory)?;
    for path in written {
        let megabytes = std::fs::metadata(&path)?.len() as f64 / 1e6;
        println!("{megabytes:.1} MB in {}", path.display());
    }
    if let Some(most) = memory_mb("VmHWM") {
        println!("at most {most:.0} MB of memory");
        if most > MOST_MEMORY_MB {
            return Err(format!("{most:.0} MB, expected at most {MOST_MEMORY_MB}").into());
        }
    }
    Ok(())
}

fn stream(
    survey: &Survey,
    pairs: u64,
    batch: &BatchSettings,
    directory: &Path,
) -> Result<Vec<PathBuf>, Box<dyn Error + Send + Sync>> {
    let settings = PairSettings::formal();
    let meta = vec![("program".to_owned(), Value::from("Inrush"))];
    let mut table = TableFiles::begin(directory, "pairs", &columns::results(), meta)?;
    let mut progress = Progress::new(pairs);
    let mut failed = 0u64;
    let mut writing = Duration::ZERO;
    let begun = Instant::now();
    let ended = batch.run(
        0..pairs,
        Workspace::new,
        |workspace, number| {
            let pair = survey
                .pair(number)
                .map_err(|error| RunError::Internal(error.to_string()))?;
            pair_row(&fit_spectra(pair, &settings, workspace)?)
        },
        |number, row: Result<Row, RunError>| {
            let written = if let Ok(row) = row {
                let begun = Instant::now();
                let written = table.push(&row);
                writing += begun.elapsed();
                written
            } else {
                failed += 1;
                Ok(())
            };
            progress.after(number + 1);
            match written {
                Ok(()) => ControlFlow::Continue(()),
                Err(error) => ControlFlow::Break(error),
            }
        },
    )?;
    if let ControlFlow::Break(error) = ended {
        return Err(Box::<ReportError>::new(error));
    }
    let fitted = begun.elapsed().as_secs_f64();
    let each_us = 1e6 * writing.as_secs_f64() / pairs as f64;
    println!("{failed} could not be fitted; {each_us:.0} us to write a row");
    let paths = table.finish()?;
    let closed = begun.elapsed().as_secs_f64() - fitted;
    println!("{fitted:.1} s, and {closed:.1} s to close the files");
    Ok(paths)
}

/// Speed and memory of every tenth.
struct Progress {
    tenth: u64,
    since: Instant,
    used_s: Option<f64>,
}

impl Progress {
    fn new(pairs: u64) -> Self {
        Self {
            tenth: pairs.div_ceil(10).max(1),
            since: Instant::now(),
            used_s: processor_s(),
        }
    }

    fn after(&mut self, done: u64) {
        if !done.is_multiple_of(self.tenth) {
            return;
        }
        let rate = self.tenth as f64 / self.since.elapsed().as_secs_f64();
        let memory = memory_mb("VmRSS").map_or(String::new(), |memory| format!("{memory:9.1}"));
        let used_s = processor_s();
        let of_processor = (used_s.zip(self.used_s)).map_or(String::new(), |(now, before)| {
            format!("{:20.1}", self.tenth as f64 / (now - before))
        });
        println!("{done:9}  {rate:7.1}  {of_processor}  {memory}");
        (self.since, self.used_s) = (Instant::now(), used_s);
    }
}

/// What Linux says of this process's processor time, in its hundredths of a second.
fn processor_s() -> Option<f64> {
    let status = std::fs::read_to_string("/proc/self/stat").ok()?;
    // behind the name, which may hold blanks: the 14th and 15th field of the line
    let fields = status.rsplit_once(')')?.1.split_whitespace();
    let ticks = fields.skip(11).take(2).map(str::parse::<f64>);
    Some(ticks.sum::<Result<f64, _>>().ok()? / 100.0)
}

/// What Linux says of this process's memory, MB.
fn memory_mb(key: &str) -> Option<f64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find(|line| line.starts_with(key))?;
    let kilobytes: f64 = line.split_whitespace().nth(1)?.parse().ok()?;
    Some(kilobytes * 1024e-6)
}
