//! Why a run cannot be done; rendered by the command line.

use super::{BatchError, JournalError, JudgeError, Panicked};
use crate::derive::DeriveError;
use crate::fit::FitError;
use crate::grid::cubes::CubeError;
use crate::line::LineError;
use crate::prepare::scale::ScaleError;
use crate::prepare::{PairError, PrepareError};
use crate::read::ReadError;
use crate::report::ReportError;
use crate::simulate::SimulateError;
use std::path::{Path, PathBuf};

/// Why a run cannot be done.
#[derive(Debug, thiserror::Error)]
pub enum RunError {
    /// A run sheet or directory that cannot be read or made.
    #[error("{}: {source}", path.display())]
    File {
        /// The file.
        path: PathBuf,
        /// Why.
        source: std::io::Error,
    },
    /// A run sheet that is not there.
    #[error("{}: no such file, expected a run sheet", path.display())]
    NoSheet {
        /// The file.
        path: PathBuf,
    },
    /// Something else in an output directory's place.
    #[error("{}: a file, expected a directory or nothing", path.display())]
    NotADirectory {
        /// What stands there.
        path: PathBuf,
    },
    /// An output directory that holds something already.
    #[error("{}: a directory that holds files, expected an empty one or nothing", path.display())]
    Occupied {
        /// The directory.
        path: PathBuf,
    },
    /// A file that is no run sheet.
    #[error("{}{}: {message}", path.display(), line.map_or(String::new(), |line| format!(":{line}")))]
    Sheet {
        /// The file.
        path: PathBuf,
        /// Line, from 1.
        line: Option<usize>,
        /// What was found and expected.
        message: String,
        /// What to do.
        hint: Option<String>,
    },
    /// A directory without results.
    #[error("{}: no table of results, expected one of {expected}", path.display())]
    NoResults {
        /// The directory.
        path: PathBuf,
        /// Names of tables.
        expected: String,
    },
    /// A sample table that is none.
    #[error("{}:{line}: {message}", path.display())]
    Sample {
        /// The table.
        path: PathBuf,
        /// Line, from 1.
        line: u64,
        /// What was found and expected.
        message: String,
        /// What to do.
        hint: Option<String>,
    },
    /// Something in a run sheet that cannot be used, or is missing there.
    #[error("{}: {error}", path.display())]
    InSheet {
        /// The run sheet.
        path: PathBuf,
        /// What.
        error: Box<RunError>,
    },
    /// A setting that cannot be used.
    #[error("{key}: {message}")]
    Setting {
        /// The key of the run sheet.
        key: String,
        /// What was found and expected.
        message: String,
        /// What to do.
        hint: Option<String>,
    },
    /// A pair without one of its files.
    #[error("no file of the {which} line, expected `[{which}] file` in the run sheet or --{which}")]
    NoFile {
        /// `thick` or `thin`.
        which: &'static str,
    },
    /// A line without a name.
    #[error(
        "no name of the {which} line, expected `[{which}] line` in the run sheet or --{which}-line"
    )]
    NoLine {
        /// `thick` or `thin`.
        which: &'static str,
    },
    /// A line that is not known.
    #[error("{which} line: {error}")]
    Line {
        /// `thick` or `thin`.
        which: &'static str,
        /// Why.
        error: LineError,
    },
    /// Thick and thin line in each other's place.
    #[error("{evidence}, expected the other way round: thick and thin line seem to be swapped")]
    Swapped {
        /// What speaks for it.
        evidence: String,
    },
    /// A file that cannot be read.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// A spectrum that cannot be brought onto the common scale.
    #[error(transparent)]
    Scale(#[from] ScaleError),
    /// A spectrum that cannot be prepared.
    #[error("{}: {error}", path.display())]
    Prepare {
        /// Its file.
        path: PathBuf,
        /// Why.
        error: PrepareError,
    },
    /// Two spectra that do not make a pair.
    #[error("{} and {}: {error}", thick.display(), thin.display())]
    Pair {
        /// The thick line's file.
        thick: PathBuf,
        /// The thin line's file.
        thin: PathBuf,
        /// Why.
        error: FitError,
    },
    /// A pair that cannot be fitted.
    #[error(transparent)]
    Fit(#[from] FitError),
    /// A pair that cannot be judged.
    #[error(transparent)]
    Judge(#[from] JudgeError),
    /// A property of the source that no source has, or a setting of what is derived from it.
    #[error(transparent)]
    Derive(#[from] DeriveError),
    /// A truth that cannot be simulated.
    #[error(transparent)]
    Simulate(#[from] SimulateError),
    /// A product that cannot be written.
    #[error(transparent)]
    Report(#[from] ReportError),
    /// Many pairs that cannot be worked on.
    #[error(transparent)]
    Batch(#[from] BatchError),
    /// A journal of finished items that cannot be used.
    #[error(transparent)]
    Journal(#[from] JournalError),
    /// Two cubes that do not belong together.
    #[error(transparent)]
    Cubes(#[from] CubeError),
    /// Two tables of pointings without a position that is in both.
    #[error("{} and {}: no position in both, expected rows of the same positions", thick.display(), thin.display())]
    NoCommonPositions {
        /// The thick line's file.
        thick: PathBuf,
        /// The thin line's file.
        thin: PathBuf,
    },
    /// No pointing of a map has a result.
    #[error("none of {pointings} pointings can be used; the first: {first}")]
    NoPointing {
        /// Pointings with spectra.
        pointings: usize,
        /// Why the first cannot be used.
        first: String,
    },
    /// A defect of the program.
    #[error("internal error: {0}")]
    Internal(String),
}

impl From<Panicked> for RunError {
    fn from(panic: Panicked) -> Self {
        Self::Internal(panic.message)
    }
}

impl RunError {
    /// The same error with the run sheet it stands in, where there is one and the error does not
    /// name a file.
    #[must_use]
    pub fn of_sheet(self, sheet: Option<&Path>) -> Self {
        match (sheet, self) {
            (
                Some(path),
                error @ (Self::NoFile { .. }
                | Self::NoLine { .. }
                | Self::Line { .. }
                | Self::Setting { .. }
                | Self::Judge(_)
                | Self::Derive(_)),
            ) => Self::InSheet {
                path: path.to_owned(),
                error: Box::new(error),
            },
            (_, error) => error,
        }
    }

    /// TOML that is not what was expected of it, with the line where the parser says so.
    pub(super) fn of_toml(error: &toml::de::Error, text: &str, path: &Path) -> Self {
        Self::Sheet {
            path: path.to_owned(),
            line: error.span().map(|span| line_at(text, span.start)),
            message: error.message().to_owned(),
            hint: None,
        }
    }

    /// A setting with what was found and expected.
    #[must_use]
    pub fn setting(key: &str, found: &str, expected: &str) -> Self {
        Self::Setting {
            key: key.to_owned(),
            message: format!("{found}, expected {expected}"),
            hint: None,
        }
    }

    /// The same with what to do about it.
    #[must_use]
    pub(super) fn hinted(self, text: &str) -> Self {
        match self {
            Self::Setting { key, message, .. } => Self::Setting {
                key,
                message,
                hint: Some(text.to_owned()),
            },
            other => other,
        }
    }

    /// An error of fitting: with the files where it is about the spectra, not a setting.
    pub(super) fn of_fit(error: FitError, (thick, thin): (PathBuf, PathBuf)) -> Self {
        match error {
            FitError::NoCommonVelocities { .. } | FitError::TooFewChannels { .. } => {
                Self::Pair { thick, thin, error }
            }
            other => Self::Fit(other),
        }
    }

    pub(super) fn of_pair(error: PairError, paths: (PathBuf, PathBuf)) -> Self {
        let path = match error.line {
            crate::prepare::PairLine::Thick => paths.0,
            crate::prepare::PairLine::Thin => paths.1,
        };
        Self::Prepare {
            path,
            error: error.error,
        }
    }

    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        match self {
            Self::File { .. } | Self::NoSheet { .. } => {
                Some("check the path and its permissions".to_owned())
            }
            Self::NoResults { .. } => {
                Some("give what was --out of a run, or columns with --for".to_owned())
            }
            Self::NotADirectory { .. } => {
                Some("give --out another name, or move the file away".to_owned())
            }
            Self::Occupied { .. } => {
                Some("give --out another name: what is there is left as it is".to_owned())
            }
            Self::InSheet { error, .. } => error.hint(),
            Self::Sheet { hint, .. } | Self::Sample { hint, .. } | Self::Setting { hint, .. } => {
                hint.clone()
            }
            Self::NoFile { .. } => {
                Some("inrush fit --help shows both ways to give a pair".to_owned())
            }
            Self::NoLine { .. } => Some("inrush lines shows the built-in lines".to_owned()),
            Self::Line { error, .. } => error.hint(),
            Self::Swapped { .. } => {
                Some("exchange the files or the lines of thick and thin".to_owned())
            }
            Self::Read(error) => error.hint(),
            Self::Scale(error) => error.hint(),
            Self::Prepare { error, .. } => error.hint(),
            Self::Pair { error, .. } | Self::Fit(error) => error.hint(),
            Self::Judge(error) => error.hint(),
            Self::Derive(error) => error.hint(),
            Self::Simulate(error) => error.hint(),
            Self::Report(error) => error.hint(),
            Self::Batch(error) => error.hint(),
            Self::Journal(error) => Some(error.hint()),
            Self::Cubes(error) => error.hint(),
            Self::NoCommonPositions { .. } => {
                Some("check that both tables are of one source".to_owned())
            }
            Self::NoPointing { .. } => Some("check files and lines of the run sheet".to_owned()),
            Self::Internal(_) => {
                Some("please report this with the input that caused it".to_owned())
            }
        }
    }
}

/// The line, from 1, that a byte of a text stands in.
pub(super) fn line_at(text: &str, byte: usize) -> usize {
    1 + text
        .bytes()
        .take(byte)
        .filter(|byte| *byte == b'\n')
        .count()
}
