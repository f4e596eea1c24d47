//! A batch that outlives its process: what is done is in a journal, and a later run goes on from there.
//!
//! Killed at any moment, by a signal, a full disk or a power cut, a batch loses the items under way alone.
//! Products are made from the journal when all items are done, so they are the same bytes whether or not
//! a run was interrupted, and for any number of threads.

use super::journal::{Failure, Journal};
use super::{BatchSettings, Panicked, RunError};
use serde::Serialize;
use serde::de::DeserializeOwned;
use std::ops::ControlFlow;
use std::sync::atomic::{AtomicBool, Ordering};

/// How far a batch is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Progress {
    /// Items done, those of earlier runs included.
    pub done: u64,
    /// Items done by earlier runs.
    pub before: u64,
    /// Items in all.
    pub items: u64,
}

/// Who watches a batch, and may stop it.
pub struct Watch<'a> {
    /// Set from another thread or a signal, it lets no further item begin.
    pub stop: &'a AtomicBool,
    /// Told after every item.
    pub progress: &'a mut (dyn FnMut(Progress) + Send),
}

/// How a batch ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ended {
    /// Every item is done.
    Done,
    /// Stopped; what was being worked on is finished and in the journal.
    Stopped(Progress),
}

/// Why an item's result does not go into the journal.
enum NotDone {
    Stopped,
    Failed(RunError),
}

impl From<Panicked> for NotDone {
    fn from(panic: Panicked) -> Self {
        Self::Failed(panic.into())
    }
}

impl BatchSettings {
    /// Works on the items that are not in the journal yet, and puts every result there, in the order of
    /// `items`; an item that fails is put there as its failure.
    ///
    /// `items` are all of the run's, from the first. When `watch` stops it, items that are being worked on
    /// are finished and kept. See [`BatchSettings::run`] for `state`, threads, memory and panics.
    ///
    /// # Errors
    ///
    /// [`RunError::Journal`] where the journal cannot be written, such as on a full disk: what is in it
    /// stays there. [`RunError::Batch`] where the system gives no threads.
    pub fn run_durably<I, S, R>(
        &self,
        journal: &mut Journal<R>,
        items: impl IntoIterator<Item = I, IntoIter: Send>,
        state: impl Fn() -> S + Sync,
        work: impl Fn(&mut S, I) -> Result<R, RunError> + Sync,
        watch: Watch<'_>,
    ) -> Result<Ended, RunError>
    where
        I: Send,
        S: Send,
        R: Send + Serialize + DeserializeOwned,
    {
        let Watch { stop, progress } = watch;
        let mut so_far = Progress {
            done: journal.done(),
            before: journal.done(),
            items: journal.identity().items,
        };
        let done = usize::try_from(so_far.done).unwrap_or(usize::MAX);
        let ended = self.run(
            items.into_iter().skip(done),
            state,
            |state, item| {
                if stop.load(Ordering::Relaxed) {
                    return Err(NotDone::Stopped);
                }
                work(state, item).map_err(NotDone::Failed)
            },
            |_, result| {
                let result = match result {
                    Ok(result) => Ok(result),
                    Err(NotDone::Failed(error)) => Err(Failure::from(&error)),
                    Err(NotDone::Stopped) => return ControlFlow::Break(None),
                };
                if let Err(error) = journal.append(&result) {
                    return ControlFlow::Break(Some(error));
                }
                so_far.done += 1;
                progress(so_far);
                ControlFlow::Continue(())
            },
        )?;
        if let ControlFlow::Break(Some(error)) = ended {
            return Err(error.into());
        }
        journal.sync()?;
        Ok(match ended {
            ControlFlow::Continue(_) => Ended::Done,
            ControlFlow::Break(_) => Ended::Stopped(so_far),
        })
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests;
