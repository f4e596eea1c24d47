//! The one place that joins the stages: a run sheet in, results and products out.

mod adopted;
mod batch;
pub mod calibrate;
mod check;
mod cite;
mod durable;
mod error;
#[cfg(feature = "figures")]
mod figure;
mod journal;
mod judge;
pub mod map;
mod pair;
mod pairs;
mod products;
pub mod rank;
mod sheet;
pub mod simulate;

pub use adopted::Adopted;
pub use batch::{BatchError, BatchSettings, Panicked};
pub use check::{FileCheck, check_file};
pub use cite::{cite_all, cite_columns, cite_results};
pub use durable::{Ended, Progress, Watch};
pub use error::RunError;
pub use journal::{
    Failure, JOURNAL, Journal, JournalError, JournalPlace, Kept, Opened, RECORD, RunIdentity,
    RunRecord, inputs_sha256,
};
pub use judge::{JudgeError, Judged, VerdictSettings};
pub use pair::{
    LineInput, LineOutcome, PairInput, PairOutcome, PairSettings, fit_pair, fit_spectra, read_pair,
};
pub use pairs::{PairJob, fit_pairs};
pub use products::{check_directory, pair_row, pair_summary, write_products};
pub use sheet::{
    Beam, DeriveSection, FitSection, Given, GridSection, LineSection, NumberOrWord, OddsSection,
    OutputSection, PrepareSection, RangeOrWord, Record, RunSheet, SourceSection,
};

/// The name most like a text, where one is like it at all.
pub(crate) fn nearest<'a>(text: &str, names: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    const ALIKE: f64 = 0.5;
    names
        .map(|name| (strsim::normalized_damerau_levenshtein(name, text), name))
        .filter(|(likeness, _)| *likeness >= ALIKE)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, name)| name)
}
