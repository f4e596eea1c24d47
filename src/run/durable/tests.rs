use super::*;
use crate::run::{JOURNAL, JournalError, Opened, RECORD, RunIdentity, RunRecord};
use std::path::Path;
use std::sync::atomic::AtomicU64;

const ITEMS: u64 = 300;

fn identity(settings: &str) -> RunIdentity {
    RunIdentity::new("test", ITEMS, settings, "inputs".to_owned())
}

type Results = Journal<(u64, f64)>;

fn open(directory: &Path, resume: bool) -> Results {
    match Journal::open(directory, identity("settings"), resume).unwrap() {
        Opened::Journal(journal) => journal,
        Opened::Finished(record) => panic!("finished: {record:?}"),
    }
}

/// Item 7 fails, item 11 panics, all others have a number that no decimal of few digits holds.
fn work(item: u64) -> Result<(u64, f64), RunError> {
    match item {
        7 => Err(RunError::NoFile { which: "thick" }),
        11 => panic!("eleven"),
        12 => Ok((item, f64::NAN)),
        _ => Ok((item, (item as f64).sin())),
    }
}

/// Works until `stop_at` items are done, or to the end; how it ended and how often an item was begun.
fn run(journal: &mut Results, threads: usize, stop_at: u64) -> (Ended, u64) {
    let (stop, begun) = (AtomicBool::new(false), AtomicU64::new(0));
    let ended = BatchSettings::with_threads(threads)
        .run_durably(
            journal,
            0..ITEMS,
            || (),
            |(), item| {
                begun.fetch_add(1, Ordering::Relaxed);
                work(item)
            },
            Watch {
                stop: &stop,
                progress: &mut |progress| {
                    stop.fetch_or(progress.done >= stop_at, Ordering::Relaxed);
                },
            },
        )
        .unwrap();
    (ended, begun.into_inner())
}

/// What is in a journal, as text.
fn content(journal: &Results) -> String {
    let results = journal.results().unwrap().map(Result::unwrap);
    let results: Vec<_> = results.map(|(_, result)| result).collect();
    format!("{results:?}")
}

fn whole() -> (String, Vec<u8>) {
    let directory = tempfile::tempdir().unwrap();
    let mut journal = open(directory.path(), false);
    assert_eq!(run(&mut journal, 1, u64::MAX), (Ended::Done, ITEMS));
    let bytes = std::fs::read(directory.path().join(JOURNAL)).unwrap();
    (content(&journal), bytes)
}

#[test]
fn every_result_comes_back_bit_for_bit_and_failures_with_their_reason() {
    let (text, _) = whole();
    assert!(text.contains("Err(Failure { message: \"no file of the thick line"));
    assert!(text.contains("internal error: eleven"));
    assert!(text.contains(&format!("Ok((299, {:?}))", 299_f64.sin())));
    assert!(text.contains("Ok((12, NaN))"));
}

#[test]
fn any_result_is_read_again_at_its_place() {
    let directory = tempfile::tempdir().unwrap();
    let mut journal = open(directory.path(), false);
    run(&mut journal, 1, u64::MAX);
    let all: Vec<_> = (journal.results().unwrap()).map(Result::unwrap).collect();
    for (place, result) in all.iter().rev() {
        assert_eq!(
            format!("{:?}", journal.at(*place).unwrap()),
            format!("{result:?}")
        );
    }
}

#[test]
fn a_stopped_batch_goes_on_where_it_stopped_for_any_number_of_threads() {
    let (expected, bytes) = whole();
    for threads in [1, 2, 3] {
        let directory = tempfile::tempdir().unwrap();
        let held = BatchSettings::with_threads(threads).most_held() as u64;
        let mut begun_in_all = 0;
        for stop_at in [40, 41, 200, u64::MAX] {
            let mut journal = open(directory.path(), true);
            let before = journal.done();
            let (ended, begun) = run(&mut journal, threads, stop_at);
            begun_in_all += begun;
            match ended {
                // what was under way when it was stopped may have been all that was left
                Ended::Done => assert!(
                    stop_at.saturating_add(held) >= ITEMS,
                    "{stop_at} with {threads} threads"
                ),
                Ended::Stopped(progress) => {
                    assert_eq!(progress.done, journal.done());
                    assert_eq!(progress.before, before);
                    assert!(progress.done >= stop_at && progress.done < ITEMS);
                    // what was begun is kept, but what overtook an item that the stop held back
                    assert!(begun - (progress.done - before) < threads as u64);
                }
            }
        }
        assert!(begun_in_all - ITEMS < 3 * threads as u64);
        assert_eq!(content(&open(directory.path(), true)), expected);
        assert!(std::fs::read(directory.path().join(JOURNAL)).unwrap() == bytes);
    }
}

#[test]
fn a_torn_end_is_cut_off_wherever_it_is_torn() {
    let (expected, bytes) = whole();
    for length in (0..bytes.len())
        .step_by(97)
        .chain(bytes.len() - 30..bytes.len())
    {
        let directory = tempfile::tempdir().unwrap();
        let mut torn = bytes[..length].to_vec();
        if length % 2 == 0 {
            torn.extend([0x5a; 40]);
        }
        std::fs::write(directory.path().join(JOURNAL), torn).unwrap();
        if length < 17 && length % 2 == 0 {
            continue; // not the first line of a journal
        }
        let mut journal = open(directory.path(), true);
        let kept = journal.done();
        let (ended, begun) = run(&mut journal, 2, u64::MAX);
        assert_eq!((ended, begun), (Ended::Done, ITEMS - kept), "{length}");
        assert_eq!(content(&journal), expected, "{length}");
        // a tail as long as a result loses that result at most
        let share = kept as f64 / ITEMS as f64;
        assert!(share > length as f64 / bytes.len() as f64 - 0.2, "{length}");
    }
}

#[test]
fn a_damaged_result_is_worked_on_again_with_all_behind_it() {
    let (expected, bytes) = whole();
    let directory = tempfile::tempdir().unwrap();
    let mut damaged = bytes.clone();
    damaged[bytes.len() / 2] ^= 1;
    std::fs::write(directory.path().join(JOURNAL), damaged).unwrap();
    let mut journal = open(directory.path(), true);
    assert!((100..200).contains(&journal.done()), "{}", journal.done());
    run(&mut journal, 2, u64::MAX);
    assert_eq!(content(&journal), expected);
}

#[test]
fn another_run_is_refused_with_its_difference() {
    let directory = tempfile::tempdir().unwrap();
    run(&mut open(directory.path(), false), 1, 20);
    let base = identity("settings");
    let changed = |change: fn(&mut RunIdentity)| {
        let mut changed = base.clone();
        change(&mut changed);
        changed
    };
    for (other, expected) in [
        (identity("other"), "other settings"),
        (changed(|run| run.command = "map".into()), "another command"),
        (
            changed(|run| run.version = "0.0.0".into()),
            "another version",
        ),
        (
            changed(|run| run.inputs_sha256 = "x".into()),
            "other inputs",
        ),
        (changed(|run| run.items = 1), "another number of items"),
    ] {
        let error = Results::open(directory.path(), other, true).unwrap_err();
        assert!(error.to_string().contains(expected), "{error}");
        assert!(error.hint().unwrap().contains("--out"));
    }
    let error = Results::open(directory.path(), base, false).unwrap_err();
    let found = matches!(
        error,
        RunError::Journal(JournalError::Unfinished {
            done: 20..,
            items: ITEMS,
            ..
        })
    );
    assert!(found, "{error}");
    assert!(error.hint().unwrap().contains("--resume"));
}

#[test]
fn a_journal_in_use_is_refused() {
    let directory = tempfile::tempdir().unwrap();
    let _held = open(directory.path(), false);
    let error = Results::open(directory.path(), identity("settings"), true).unwrap_err();
    assert!(matches!(
        error,
        RunError::Journal(JournalError::InUse { .. })
    ));
}

#[test]
fn a_finished_run_leaves_its_record_and_is_made_again_or_said_to_be_there() {
    let directory = tempfile::tempdir().unwrap();
    let mut journal = open(directory.path(), false);
    run(&mut journal, 2, u64::MAX);
    let record = journal.finish(2).unwrap();
    assert!(!directory.path().join(JOURNAL).exists());
    assert_eq!(
        RunRecord::read(directory.path()).unwrap(),
        Some(record.clone())
    );
    match Results::open(directory.path(), identity("settings"), true).unwrap() {
        Opened::Finished(found) => assert_eq!(found, record),
        Opened::Journal(_) => panic!("begun again"),
    }
    let error = Results::open(directory.path(), identity("other"), false).unwrap_err();
    assert!(error.to_string().contains(RECORD), "{error}");
    assert_eq!(open(directory.path(), false).done(), 0);
}

#[test]
fn foreign_files_are_left_alone() {
    let directory = tempfile::tempdir().unwrap();
    std::fs::write(directory.path().join("notes.txt"), "mine").unwrap();
    let error = Results::open(directory.path(), identity("settings"), true).unwrap_err();
    assert!(matches!(error, RunError::Occupied { .. }), "{error}");
    let path = directory.path().join(JOURNAL);
    std::fs::write(&path, "a diary of somebody else, long enough").unwrap();
    let error = Results::open(directory.path(), identity("settings"), true).unwrap_err();
    assert!(
        error.to_string().contains("another kind of file"),
        "{error}"
    );
    assert!(
        std::fs::read_to_string(path)
            .unwrap()
            .starts_with("a diary")
    );
}
