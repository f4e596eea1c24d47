//! Batches of anything: order, memory, panics, early ends and threads.

use inrush::run::{BatchError, BatchSettings, Panicked};
use std::collections::HashSet;
use std::convert::Infallible;
use std::ops::ControlFlow;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Barrier, Mutex};
use std::thread;
use std::time::Duration;

const THREADS: [usize; 4] = [1, 2, 3, 8];

/// Goes on, whatever comes.
const ON: ControlFlow<Infallible> = ControlFlow::Continue(());

/// What a whole batch gives.
fn collected<I: Send, R: Send>(
    threads: usize,
    items: impl IntoIterator<Item = I, IntoIter: Send>,
    work: impl Fn(I) -> R + Sync,
) -> Vec<Result<R, Panicked>> {
    let mut results = Vec::new();
    let ended = BatchSettings::with_threads(threads)
        .run(
            items,
            || (),
            |(), item| Ok(work(item)),
            |number, result| {
                assert_eq!(number, results.len() as u64);
                results.push(result);
                ON
            },
        )
        .expect("threads");
    assert_eq!(ended, ControlFlow::Continue(results.len() as u64));
    results
}

#[test]
fn results_come_in_the_order_of_the_items_however_long_each_takes() {
    for threads in THREADS {
        let results = collected(threads, 0..300u64, |number| {
            // 0 to 600 us, without any order
            thread::sleep(Duration::from_micros(number * 7919 % 601));
            number * number
        });
        let expected: Vec<_> = (0..300u64).map(|number| Ok(number * number)).collect();
        assert_eq!(results, expected, "{threads} threads");
    }
}

#[test]
fn a_batch_of_nothing_ends() {
    for threads in THREADS {
        assert_eq!(collected(threads, Vec::<u8>::new(), |byte| byte), []);
    }
}

/// Something that counts how many of it exist, and the most that ever did.
struct Counted<'a> {
    now: &'a AtomicUsize,
    value: u64,
}

impl<'a> Counted<'a> {
    fn new(now: &'a AtomicUsize, most: &AtomicUsize, value: u64) -> Self {
        let count = now.fetch_add(1, Ordering::SeqCst) + 1;
        most.fetch_max(count, Ordering::SeqCst);
        Self { now, value }
    }
}

impl Drop for Counted<'_> {
    fn drop(&mut self) {
        self.now.fetch_sub(1, Ordering::SeqCst);
    }
}

#[test]
fn a_million_items_stream_through_while_few_are_held() {
    const ITEMS: u64 = 1_000_000;
    for threads in [1, 3] {
        let (now, most) = (AtomicUsize::new(0), AtomicUsize::new(0));
        let batch = BatchSettings::with_threads(threads);
        let mut sum = 0;
        let ended = batch
            .run(
                (0..ITEMS).map(|value| Counted::new(&now, &most, value)),
                || (),
                |(), item| Ok::<_, Panicked>(item),
                |number, item| {
                    let item = item.expect("no panic");
                    assert_eq!(item.value, number);
                    sum += item.value;
                    ON
                },
            )
            .expect("threads");
        assert_eq!(ended, ControlFlow::Continue(ITEMS));
        assert_eq!(sum, ITEMS * (ITEMS - 1) / 2);
        assert_eq!(now.into_inner(), 0, "all are dropped");
        assert_eq!(most.into_inner(), batch.most_held(), "{threads} threads");
    }
}

#[test]
fn one_slow_item_lets_the_others_run_ahead_only_so_far() {
    for threads in THREADS {
        let batch = BatchSettings::with_threads(threads);
        let drawn = AtomicUsize::new(0);
        let ended = batch
            .run(
                (0..2000u32).inspect(|_| {
                    drawn.fetch_add(1, Ordering::SeqCst);
                }),
                || (),
                |(), number| {
                    if number == 0 {
                        while drawn.load(Ordering::SeqCst) < batch.most_held() {
                            thread::yield_now();
                        }
                        thread::sleep(Duration::from_millis(30));
                        assert_eq!(drawn.load(Ordering::SeqCst), batch.most_held());
                    }
                    Ok::<(), Panicked>(())
                },
                |_, result| {
                    result.expect("no panic");
                    ON
                },
            )
            .expect("threads");
        assert_eq!(ended, ControlFlow::Continue(2000));
    }
}

#[test]
fn a_panic_is_the_error_of_its_item_alone() {
    for threads in THREADS {
        let results = collected(threads, 0..200u32, |number| {
            assert!(number % 10 != 3, "item {number} is bad");
            if number == 100 {
                std::panic::panic_any(number);
            }
            number
        });
        for (number, result) in (0..200u32).zip(results) {
            let panicked = |message: &str| Panicked {
                message: message.to_owned(),
            };
            let expected = match number {
                100 => Err(panicked("a panic without a message")),
                _ if number % 10 == 3 => Err(panicked(&format!("item {number} is bad"))),
                _ => Ok(number),
            };
            assert_eq!(result, expected, "{threads} threads");
        }
    }
}

#[test]
fn a_thread_keeps_its_state_until_a_panic_spoils_it() {
    let made = AtomicUsize::new(0);
    let mut counts = Vec::new();
    let _ = BatchSettings::with_threads(1)
        .run(
            0..8,
            || {
                made.fetch_add(1, Ordering::SeqCst);
                0
            },
            |count: &mut u32, number| {
                *count += 1;
                assert_ne!(number, 4, "spoilt");
                Ok::<u32, Panicked>(*count)
            },
            |_, count| {
                counts.push(count.ok());
                ON
            },
        )
        .expect("threads");
    let expected = [1, 2, 3, 4, 0, 1, 2, 3].map(|count| (count > 0).then_some(count));
    assert_eq!(counts, expected);
    assert_eq!(made.into_inner(), 2);
}

/// Every item waits until as many are worked on at a time as there are threads: a batch with fewer
/// threads would not end.
#[test]
fn as_many_threads_work_as_were_asked_for_and_each_has_one_state() {
    for threads in THREADS {
        let made = AtomicUsize::new(0);
        let all_at_work = Barrier::new(threads);
        let seen = Mutex::new(HashSet::new());
        let ended = BatchSettings::with_threads(threads)
            .run(
                0..20 * threads,
                || made.fetch_add(1, Ordering::SeqCst),
                |_, _| {
                    all_at_work.wait();
                    seen.lock().expect("a lock").insert(thread::current().id());
                    Ok::<(), Panicked>(())
                },
                |_, _| ON,
            )
            .expect("threads");
        assert_eq!(ended, ControlFlow::Continue(20 * threads as u64));
        assert_eq!(seen.into_inner().expect("a lock").len(), threads);
        assert_eq!(made.into_inner(), threads);
    }
}

#[test]
fn the_sink_ends_an_endless_batch() {
    for threads in THREADS {
        let batch = BatchSettings::with_threads(threads);
        let begun = AtomicUsize::new(0);
        let mut received = 0;
        let ended = batch
            .run(
                0u64..,
                || (),
                |(), number| {
                    begun.fetch_add(1, Ordering::SeqCst);
                    Ok::<u64, Panicked>(number)
                },
                |number, _| {
                    received += 1;
                    if number == 1000 {
                        ControlFlow::Break("the disk is full")
                    } else {
                        ControlFlow::Continue(())
                    }
                },
            )
            .expect("threads");
        assert_eq!(ended, ControlFlow::Break("the disk is full"));
        assert_eq!(received, 1001);
        assert!(begun.into_inner() <= 1000 + batch.most_held());
    }
}

#[test]
fn panics_of_the_items_and_of_the_sink_reach_the_caller() {
    let message = |result: thread::Result<Result<ControlFlow<Infallible, u64>, BatchError>>| {
        let payload = result.expect_err("a panic");
        payload.downcast_ref::<&str>().map(|&text| text.to_owned())
    };
    for threads in THREADS {
        let batch = BatchSettings::with_threads(threads);
        let of_sink = catch_unwind(AssertUnwindSafe(|| {
            batch.run(
                0..,
                || (),
                |(), number: i32| Ok::<i32, Panicked>(number),
                |number, _| {
                    assert!(number != 50, "sink");
                    ON
                },
            )
        }));
        assert_eq!(message(of_sink), Some("sink".to_owned()));
        let of_items = catch_unwind(AssertUnwindSafe(|| {
            batch.run(
                (0..).inspect(|&number| assert!(number != 500, "items")),
                || (),
                |(), number: i32| Ok::<i32, Panicked>(number),
                |_, _| ON,
            )
        }));
        assert_eq!(message(of_items), Some("items".to_owned()));
    }
}

#[test]
fn no_number_of_threads_is_one_a_core() {
    let cores = thread::available_parallelism().expect("cores").get();
    assert_eq!(BatchSettings::default().threads(), cores);
    assert_eq!(BatchSettings::with_threads(0), BatchSettings::default());
    assert_eq!(BatchSettings::with_threads(5).threads(), 5);
}
