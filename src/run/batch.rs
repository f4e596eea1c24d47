//! Many items through one function on several cores, results in the order of the inputs.
//!
//! Items are drawn from their iterator as threads become free, so that a stream of any length needs
//! the memory of [`BatchSettings::most_held`] items. An item that fails is a result like any other; a
//! panic is turned into the item's error. The threads belong to the batch and end with it: nothing is
//! global. Results do not depend on the number of threads as long as the work on an item depends on
//! the item alone.

use std::any::Any;
use std::collections::VecDeque;
use std::num::NonZeroUsize;
use std::ops::ControlFlow;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::{Receiver, Sender, TryRecvError, channel};
use std::sync::{Mutex, PoisonError};

/// Items a thread that may be drawn before the oldest of them is done: threads do not wait for one that
/// takes as long as many others.
const HELD_PER_THREAD: usize = 64;

/// How a batch is run.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct BatchSettings {
    /// Threads; `None` takes one for each core that the process may use.
    pub threads: Option<NonZeroUsize>,
}

/// Why a batch cannot be run.
#[derive(Debug, thiserror::Error)]
pub enum BatchError {
    /// The system gives no threads.
    #[error("{threads} threads could not be started: {reason}")]
    Threads {
        /// Threads asked for.
        threads: usize,
        /// What the system said.
        reason: String,
    },
}

impl BatchError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        match self {
            Self::Threads { .. } => Some("use fewer threads, as in --threads 1".to_owned()),
        }
    }
}

/// A panic while one item was worked on: a defect of the program.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("{message}")]
pub struct Panicked {
    /// What the panic said.
    pub message: String,
}

impl Panicked {
    fn new(payload: &(dyn Any + Send)) -> Self {
        let message = (payload.downcast_ref::<&str>().copied())
            .or_else(|| payload.downcast_ref::<String>().map(String::as_str))
            .unwrap_or("a panic without a message");
        Self {
            message: message.to_owned(),
        }
    }
}

impl BatchSettings {
    /// A number of threads; 0 takes one for each core that the process may use.
    #[must_use]
    pub const fn with_threads(threads: usize) -> Self {
        Self {
            threads: NonZeroUsize::new(threads),
        }
    }

    /// Threads that a batch has.
    #[must_use]
    pub fn threads(&self) -> usize {
        self.threads
            .or_else(|| std::thread::available_parallelism().ok())
            .map_or(1, NonZeroUsize::get)
    }

    /// Most items that are drawn and not yet handed on: waiting, worked on, or done before an earlier one.
    #[must_use]
    pub fn most_held(&self) -> usize {
        self.threads() * HELD_PER_THREAD
    }

    /// Works on every item and hands the results to `sink` in the order of `items`, each with its
    /// number from 0, as soon as it and all before it are done.
    ///
    /// `state` makes what a thread keeps from item to item, such as a workspace; it is made anew after a
    /// panic. `sink` ends the batch early by [`ControlFlow::Break`]: items that are being worked on are
    /// finished and dropped, no other is begun. `items` and `sink` are called from one thread, which works
    /// on items too while there is nothing to draw or hand on: what takes long or needs much memory, such
    /// as a file's content, belongs into `work`. A panic of `items` or `sink` goes through to the caller.
    ///
    /// Returns the number of items, or what `sink` broke with.
    ///
    /// ```
    /// use inrush::run::{BatchSettings, Panicked};
    /// use std::ops::ControlFlow;
    ///
    /// let mut roots = Vec::new();
    /// let ended = BatchSettings::with_threads(2).run(
    ///     [9.0, -1.0, 4.0],
    ///     || (),
    ///     |(), number: f64| {
    ///         assert!(number >= 0.0, "no root of {number}");
    ///         Ok::<f64, Panicked>(number.sqrt())
    ///     },
    ///     |_, root| {
    ///         roots.push(root.map_err(|panic| panic.message));
    ///         ControlFlow::<()>::Continue(())
    ///     },
    /// )?;
    /// assert_eq!(ended, ControlFlow::Continue(3));
    /// assert_eq!(roots, [Ok(3.0), Err("no root of -1".to_owned()), Ok(2.0)]);
    /// # Ok::<(), inrush::run::BatchError>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`BatchError::Threads`] where the system gives none. Errors of items go to `sink`.
    pub fn run<I, S, R, E, B>(
        &self,
        items: impl IntoIterator<Item = I, IntoIter: Send>,
        state: impl Fn() -> S + Sync,
        work: impl Fn(&mut S, I) -> Result<R, E> + Sync,
        sink: impl FnMut(u64, Result<R, E>) -> ControlFlow<B> + Send,
    ) -> Result<ControlFlow<B, u64>, BatchError>
    where
        I: Send,
        S: Send,
        R: Send,
        E: Send + From<Panicked>,
        B: Send,
    {
        let (threads, most_held) = (self.threads(), self.most_held());
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .thread_name(|index| format!("batch-{index}"))
            .build()
            .map_err(|error| BatchError::Threads {
                threads,
                reason: error.to_string(),
            })?;
        let items = items.into_iter();
        let workers = Workers::new(threads, state, work);
        Ok(pool.install(|| work_in_order(items, &workers, most_held, sink)))
    }
}

/// Draws, works and hands on, in a thread of the pool.
fn work_in_order<I, S, R, E, B, Make, Work>(
    items: impl Iterator<Item = I>,
    workers: &Workers<S, Make, Work>,
    most_held: usize,
    mut sink: impl FnMut(u64, Result<R, E>) -> ControlFlow<B>,
) -> ControlFlow<B, u64>
where
    I: Send,
    S: Send,
    R: Send,
    E: Send + From<Panicked>,
    Make: Fn() -> S + Sync,
    Work: Fn(&mut S, I) -> Result<R, E> + Sync,
{
    let mut items = items.fuse();
    let (sender, receiver) = channel();
    rayon::in_place_scope_fifo(|scope| {
        let _ending = workers.ends_with_this();
        let mut held: VecDeque<Option<Result<R, E>>> = VecDeque::with_capacity(most_held);
        let mut handed_on = 0;
        loop {
            while held.len() < most_held
                && let Some(item) = items.next()
            {
                let number = handed_on + held.len() as u64;
                let sender = &sender;
                scope.spawn_fifo(move |_| workers.work_on(number, item, sender));
                held.push_back(None);
            }
            if held.is_empty() {
                return ControlFlow::Continue(handed_on);
            }
            let Some((number, result)) = receive_or_work(&receiver) else {
                continue;
            };
            // less than `most_held`
            let place = usize::try_from(number - handed_on).unwrap_or(usize::MAX);
            held[place] = Some(result.unwrap_or_else(|panic| Err(panic.into())));
            while let Some(result) = held.front_mut().and_then(Option::take) {
                held.pop_front();
                if let ControlFlow::Break(reason) = sink(handed_on, result) {
                    return ControlFlow::Break(reason);
                }
                handed_on += 1;
            }
        }
    })
}

/// An item's number and its result, or the panic in place of it.
type Done<R, E> = (u64, Result<Result<R, E>, Panicked>);

/// The next result; `None` where an item was worked on in this thread meanwhile.
fn receive_or_work<R, E>(receiver: &Receiver<Done<R, E>>) -> Option<Done<R, E>> {
    match receiver.try_recv() {
        Ok(done) => Some(done),
        Err(TryRecvError::Empty) => match rayon::yield_now() {
            Some(rayon::Yield::Executed) => None,
            // Other threads work on all that is left.
            _ => receiver.recv().ok(),
        },
        Err(TryRecvError::Disconnected) => None,
    }
}

/// What the threads of a batch share.
struct Workers<S, Make, Work> {
    make: Make,
    work: Work,
    /// One a thread; taken out while an item is worked on.
    states: Vec<Mutex<Option<S>>>,
    ended: AtomicBool,
}

impl<S, Make: Fn() -> S, Work> Workers<S, Make, Work> {
    fn new(threads: usize, make: Make, work: Work) -> Self {
        Self {
            make,
            work,
            states: (0..threads).map(|_| Mutex::new(None)).collect(),
            ended: AtomicBool::new(false),
        }
    }

    fn work_on<I, R, E>(&self, number: u64, item: I, sender: &Sender<Done<R, E>>)
    where
        Work: Fn(&mut S, I) -> Result<R, E>,
    {
        if self.ended.load(Ordering::Relaxed) {
            return;
        }
        let slot = &self.states[rayon::current_thread_index().unwrap_or(0)];
        let slot = || slot.lock().unwrap_or_else(PoisonError::into_inner);
        let kept = slot().take();
        // A state that a panic left half changed is dropped.
        let result = catch_unwind(AssertUnwindSafe(|| {
            let mut state = kept.unwrap_or_else(&self.make);
            let result = (self.work)(&mut state, item);
            *slot() = Some(state);
            result
        }));
        let result = result.map_err(|payload| Panicked::new(&*payload));
        // Nobody listens after an early end.
        let _ = sender.send((number, result));
    }

    /// Lets no item be begun after the guard is gone, whether by an early end or by a panic.
    fn ends_with_this(&self) -> Ending<'_> {
        Ending(&self.ended)
    }
}

struct Ending<'a>(&'a AtomicBool);

impl Drop for Ending<'_> {
    fn drop(&mut self) {
        self.0.store(true, Ordering::Relaxed);
    }
}
