//! Results into tables, JSON, a readable summary and figures, written to a `Write` or returned as
//! bytes.
//!
//! Nothing is computed here: values arrive ready, and leave at full precision in every file format
//! and rounded to their errors where a person reads them. [`columns`] holds the name, unit and
//! meaning of every result column; [`Row::set`] refuses a name that is not among them.

pub mod citation;
pub mod columns;
mod csv;
pub mod cube;
mod ecsv;
#[cfg(feature = "figures")]
pub mod figure;
pub mod files;
mod fits_table;
mod json;
pub mod motions;
mod paper;
pub mod ranking;
mod rounding;
pub mod sample_statistics;
mod sentence;
pub mod sky_map;
pub mod spectra;
mod summary;
mod table;
mod table_files;

pub use self::csv::{CsvRows, write_csv};
pub use ecsv::write_ecsv;
pub use fits_table::write_fits;
pub use json::{json, write_json_rows};
pub use paper::PaperTable;
pub use rounding::{rounded, rounded_interval, rounded_plain, rounded_range};
pub use sentence::verdict_sentences;
pub use summary::summary;
pub use table::{Column, Kind, Row, Schema, Table, Value};
pub use table_files::TableFiles;

use std::path::PathBuf;

/// Why a result could not be written.
#[derive(Debug, thiserror::Error)]
pub enum ReportError {
    /// A value was given for a column that the table does not have.
    #[error("no result column is named `{name}`")]
    UnknownColumn {
        /// The name given.
        name: String,
        /// The most similar name that exists.
        nearest: Option<String>,
    },
    /// Two columns of a table have one name.
    #[error("two columns are named `{name}`")]
    RepeatedColumn {
        /// The name.
        name: String,
    },
    /// A value does not fit the kind of its column.
    #[error("column `{name}` got {found}, expected {expected}")]
    WrongKind {
        /// Name of the column.
        name: String,
        /// Kind of the value.
        found: &'static str,
        /// Kind of the column.
        expected: &'static str,
    },
    /// A real value is infinite.
    #[error("column `{name}` got an infinite value, expected a finite one or none")]
    Infinite {
        /// Name of the column.
        name: String,
    },
    /// A row was made for other columns than the table's.
    #[error("a row with {found} columns does not fit a table with {expected}")]
    ForeignRow {
        /// Columns of the row.
        found: usize,
        /// Columns of the table.
        expected: usize,
    },
    /// A FITS table cannot have as many columns.
    #[error("{found} columns, expected at most 999 in a FITS table")]
    TooManyColumns {
        /// Number of columns.
        found: usize,
    },
    /// The arrays of a figure do not belong together.
    #[error("{what}: {found} values, expected {expected}")]
    LengthMismatch {
        /// Which array.
        what: String,
        /// Its length.
        found: usize,
        /// The length it should have.
        expected: usize,
    },
    /// A FITS image has one increment, but the channels do not lie evenly.
    #[error(
        "channel {channel} (counted from 1) at {found_km_s} km/s, expected {expected_km_s} km/s on an even axis"
    )]
    UnevenAxis {
        /// Channel, from 1.
        channel: usize,
        /// Its centre, km/s.
        found_km_s: f64,
        /// Where an even axis has it, km/s.
        expected_km_s: f64,
    },
    /// A figure could not be drawn.
    #[error("the figure could not be drawn as {format}: {reason}")]
    Drawing {
        /// Format: SVG, PNG or PDF.
        format: &'static str,
        /// What the drawing library said.
        reason: String,
    },
    /// A file could not be written.
    #[error("{}: cannot be written: {source}", path.display())]
    File {
        /// The file's final path.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// A stream could not be written.
    #[error("output cannot be written: {0}")]
    Stream(#[from] std::io::Error),
}

impl ReportError {
    /// What to do about it, where that can be said.
    pub fn hint(&self) -> Option<String> {
        match self {
            Self::UnknownColumn {
                nearest: Some(nearest),
                ..
            } => Some(format!("the nearest column is `{nearest}`")),
            Self::File { .. } => {
                Some("check that the directory exists, is writable and has space left".to_owned())
            }
            Self::UnevenAxis { .. } => Some("write the spectrum as CSV".to_owned()),
            Self::TooManyColumns { .. } => Some("write the table as ECSV".to_owned()),
            _ => None,
        }
    }
}
