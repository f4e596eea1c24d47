//! Many pairs: each goes the way of one pair.

use super::{
    BatchError, BatchSettings, PairInput, PairOutcome, PairSettings, RunError, RunSheet, fit_pair,
    fit_spectra,
};
use crate::fit::Workspace;
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// One pair of a batch: its files are read by the thread that fits it.
#[derive(Clone, Debug)]
pub enum PairJob {
    /// Spectra in memory.
    Spectra {
        /// The pair.
        pair: Box<PairInput>,
        /// How it is fitted; most pairs share their settings.
        settings: Arc<PairSettings>,
    },
    /// A run sheet in memory.
    Sheet {
        /// The sheet.
        sheet: Box<RunSheet>,
        /// What its paths are relative to.
        base: PathBuf,
    },
    /// A run sheet's file; its paths are relative to its folder.
    File(PathBuf),
}

impl PairJob {
    /// Reads what is not in memory, prepares, measures and fits.
    ///
    /// # Errors
    ///
    /// [`RunError`] for settings, files or spectra that cannot be used.
    pub fn fit(self, workspace: &mut Workspace) -> Result<PairOutcome, RunError> {
        match self {
            Self::Spectra { pair, settings } => fit_spectra(*pair, &settings, workspace),
            Self::Sheet { sheet, base } => fit_pair(&sheet, &base, workspace),
            Self::File(path) => {
                let base = path.parent().unwrap_or(Path::new(""));
                fit_pair(&RunSheet::read(&path)?, base, workspace)
                    .map_err(|error| error.of_sheet(Some(&path)))
            }
        }
    }
}

/// Fits many pairs and hands what `finish` makes of each outcome to `sink`, in the order of `pairs`,
/// each with its number from 0; a pair that cannot be fitted is handed on as its error.
///
/// `finish` runs on the thread that fitted the pair, such as [`pair_row`](super::pair_row), so that
/// spectra and fits need not be kept. See [`BatchSettings::run`] for threads, memory, panics and an
/// early end.
///
/// # Errors
///
/// [`BatchError`] where the system gives no threads. Errors of pairs go to `sink`.
pub fn fit_pairs<R, B>(
    batch: &BatchSettings,
    pairs: impl IntoIterator<Item = PairJob, IntoIter: Send>,
    finish: impl Fn(PairOutcome) -> Result<R, RunError> + Sync,
    sink: impl FnMut(u64, Result<R, RunError>) -> ControlFlow<B> + Send,
) -> Result<ControlFlow<B, u64>, BatchError>
where
    R: Send,
    B: Send,
{
    batch.run(
        pairs,
        Workspace::new,
        |workspace, pair: PairJob| finish(pair.fit(workspace)?),
        sink,
    )
}
