//! A ranking outlives its process: killed, interrupted or out of space at any moment, it goes on where it
//! stopped, and its products are those of a run without interruption.
#![cfg(unix)]
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its data cannot be made"
)]

mod command;

use command::Folder;
use inrush::run::JOURNAL;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

const PAIRS: &str = "14";

fn simulated() -> Folder {
    let folder = Folder::new();
    let run = folder.inrush(&[
        "simulate",
        "sample",
        "--out",
        "s",
        "--pairs",
        PAIRS,
        "--signal-to-noise",
        "20,50",
        "--seed",
        "4",
        "--quiet",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    folder
}

const RANK: [&str; 7] = [
    "rank",
    "s/sample.csv",
    "--out",
    "r",
    "--threads",
    "2",
    "--resume",
];

fn begin(folder: &Folder) -> Child {
    Command::new(env!("CARGO_BIN_EXE_inrush"))
        .args(RANK)
        .current_dir(folder.path())
        .stdin(Stdio::null())
        .stdout(Stdio::null())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap()
}

fn journal_length(folder: &Folder) -> u64 {
    std::fs::metadata(folder.path().join("r").join(JOURNAL)).map_or(0, |data| data.len())
}

/// Waits until the journal is longer than it was, so that something was done.
fn wait_for_work(folder: &Folder, before: u64) {
    let begun = Instant::now();
    while journal_length(folder) <= before.max(600) {
        assert!(
            begun.elapsed() < Duration::from_secs(60),
            "nothing was done"
        );
        std::thread::sleep(Duration::from_millis(5));
    }
}

/// Every product with its bytes.
fn products(folder: &Folder, out: &str) -> Vec<(String, Vec<u8>)> {
    let files = folder.files().into_iter();
    let own = files.filter_map(|name| name.strip_prefix(&format!("{out}/")).map(str::to_owned));
    own.map(|name| {
        let bytes = folder.read(&format!("{out}/{name}"));
        (name, bytes)
    })
    .collect()
}

#[test]
fn a_killed_or_interrupted_ranking_goes_on_to_the_same_bytes() {
    let folder = simulated();
    let whole = folder.inrush(&["rank", "s/sample.csv", "--out", "whole", "--threads", "1"]);
    assert!(whole.code <= 1, "{}", whole.stderr);

    // killed twice, at different moments
    for pause_ms in [0, 90] {
        let before = journal_length(&folder);
        let mut child = begin(&folder);
        wait_for_work(&folder, before);
        std::thread::sleep(Duration::from_millis(pause_ms));
        child.kill().unwrap(); // SIGKILL
        child.wait().unwrap();
    }
    // what is unfinished is neither begun anew nor mixed with other settings
    let anew = folder.inrush(&["rank", "s/sample.csv", "--out", "r"]);
    assert_eq!(anew.code, 2);
    assert!(
        anew.stderr.contains("of an unfinished run") && anew.stderr.contains("--resume"),
        "{}",
        anew.stderr
    );
    let other = folder.inrush(&[
        "rank",
        "s/sample.csv",
        "--out",
        "r",
        "--resume",
        "--models",
        "hill",
    ]);
    assert_eq!(other.code, 2);
    assert!(
        other.stderr.contains("of a run with other settings"),
        "{}",
        other.stderr
    );

    // interrupted as by Ctrl-C
    let before = journal_length(&folder);
    let child = begin(&folder);
    wait_for_work(&folder, before);
    let sent = Command::new("kill")
        .args(["-INT", &child.id().to_string()])
        .status()
        .unwrap();
    assert!(sent.success());
    let output = child.wait_with_output().unwrap();
    let stderr = String::from_utf8(output.stderr).unwrap();
    assert_eq!(output.status.code(), Some(130), "{stderr}");
    assert!(stderr.contains("--resume goes on"), "{stderr}");

    let done = folder.inrush(&RANK);
    assert_eq!(done.code, whole.code, "{}", done.stderr);
    assert_eq!(done.stdout, whole.stdout);
    assert!(!folder.path().join("r").join(JOURNAL).exists());
    let (expected, found) = (products(&folder, "whole"), products(&folder, "r"));
    assert!(expected.len() > 10, "{}", expected.len());
    for (expected, found) in expected.iter().zip(&found) {
        assert_eq!(expected.0, found.0);
        assert!(expected.1 == found.1, "{} differs", found.0);
    }
    assert_eq!(expected.len(), found.len());

    // finished: going on has nothing to do, other inputs are refused
    let again = folder.inrush(&RANK);
    assert_eq!(again.code, whole.code);
    assert!(
        again.stderr.contains("nothing is left to do"),
        "{}",
        again.stderr
    );
    let mut table = folder.read("s/sample.csv");
    table.extend(b"# another remark\n");
    folder.write("s/sample.csv", &table);
    let changed = folder.inrush(&["rank", "s/sample.csv", "--out", "r"]);
    assert_eq!(changed.code, 2);
    assert!(
        changed.stderr.contains("of a run with other inputs"),
        "{}",
        changed.stderr
    );
}

#[test]
fn a_full_disk_loses_nothing() {
    let folder = simulated();
    let arguments = "rank s/sample.csv --formal --no-figures";
    let run = |out: &str, before: &str| {
        let program = env!("CARGO_BIN_EXE_inrush");
        let script = format!("{before} exec {program} {arguments} --resume --out {out}");
        let output = Command::new("sh")
            .args(["-c", &script])
            .current_dir(folder.path())
            .output()
            .unwrap();
        (
            output.status.code().unwrap(),
            String::from_utf8(output.stderr).unwrap(),
        )
    };
    let (code, stderr) = run("whole", "");
    assert!(code <= 1, "{stderr}");
    // no file longer than 32 blocks of 512 or 1024 bytes, told by an error instead of a signal
    let (full, stderr) = run("r", "trap '' XFSZ; ulimit -f 32;");
    assert_eq!(full, 2, "{stderr}");
    assert!(
        stderr.contains(JOURNAL) && stderr.contains("go on with --resume"),
        "{stderr}"
    );
    let kept = journal_length(&folder);
    assert!(kept > 1000, "{kept}");
    assert_eq!(run("r", "").0, code);
    for name in ["ranking.csv", "ranking.fits", "statistics.csv"] {
        assert!(
            folder.read(&format!("r/{name}")) == folder.read(&format!("whole/{name}")),
            "{name}"
        );
    }
}

#[test]
fn a_directory_with_other_files_is_left_alone() {
    let folder = simulated();
    folder.write("r/notes.txt", b"mine");
    let run = folder.inrush(&RANK);
    assert_eq!(run.code, 2);
    assert!(
        run.stderr.contains("a directory that holds files"),
        "{}",
        run.stderr
    );
    assert_eq!(
        folder
            .files()
            .iter()
            .filter(|name| name.starts_with("r/"))
            .count(),
        1
    );
}
