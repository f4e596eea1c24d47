//! Why a run cannot be done; rendered by the command line.

use crate::fit::FitError;
use crate::line::LineError;
use crate::prepare::scale::ScaleError;
use crate::prepare::{PairError, PrepareError};
use crate::read::ReadError;
use crate::report::ReportError;
use crate::simulate::SimulateError;
use std::path::PathBuf;

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
    #[error("{evidence}: thick and thin line seem to be swapped")]
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
    /// A pair that cannot be fitted.
    #[error(transparent)]
    Fit(#[from] FitError),
    /// A truth that cannot be simulated.
    #[error(transparent)]
    Simulate(#[from] SimulateError),
    /// A product that cannot be written.
    #[error(transparent)]
    Report(#[from] ReportError),
    /// A defect of the program.
    #[error("internal error: {0}")]
    Internal(String),
}

impl RunError {
    /// A setting with what was found and expected.
    #[must_use]
    pub fn setting(key: &str, found: &str, expected: &str) -> Self {
        Self::Setting {
            key: key.to_owned(),
            message: format!("{found}, expected {expected}"),
            hint: None,
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
            Self::File { .. } => Some("check the path and its permissions".to_owned()),
            Self::Sheet { hint, .. } | Self::Setting { hint, .. } => hint.clone(),
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
            Self::Fit(error) => error.hint(),
            Self::Simulate(error) => error.hint(),
            Self::Report(error) => error.hint(),
            Self::Internal(_) => {
                Some("please report this with the input that caused it".to_owned())
            }
        }
    }
}
