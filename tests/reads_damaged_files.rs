//! Damaged copies of small valid files of every format: each is read or refused with a message,
//! none panics, and memory stays within bounds.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.
#![allow(clippy::cast_possible_truncation)] // Random numbers are cut on purpose.

use std::fs;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::{Path, PathBuf};

use inrush::prepare::scale::{ScaleSettings, to_spectrum};
use inrush::read::{ReadOptions, spectrum_from_bytes};

const COPIES_PER_FILE: u64 = 200;
const CARD: usize = 80;
/// Far above what files of 10 kB need, far below what one wrong size card asks for.
const MEMORY_LIMIT_KB: u64 = 2_000_000;

/// `SplitMix64` (Steele, Lea & Flood 2014): small, seeded, the same everywhere.
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn below(&mut self, limit: usize) -> usize {
        (self.next() % limit.max(1) as u64) as usize
    }
}

/// Values that sizes, formats and numbers are replaced by.
const EVIL: [&str; 14] = [
    "-1",
    "0",
    "7",
    "999",
    "1000000000000",
    "9223372036854775807",
    "1E999",
    "NaN",
    "'9999999999D'",
    "'0PE'",
    "T",
    "",
    "'FREQ'",
    "-32",
];

/// One kind of damage, once.
fn damage(bytes: &mut Vec<u8>, random: &mut Random) {
    if bytes.is_empty() {
        return;
    }
    let length = bytes.len();
    match random.below(8) {
        0 => bytes.truncate(random.below(length)),
        1 => {
            let at = random.below(length);
            bytes[at] = random.next() as u8;
        }
        2 => {
            let at = random.below(length);
            bytes[at] ^= 1 << random.below(8);
        }
        3 => {
            let (start, count) = (random.below(length), random.below(200));
            bytes.drain(start..(start + count).min(length));
        }
        4 => {
            let at = random.below(length);
            let piece = bytes[at..(at + random.below(300)).min(length)].to_vec();
            bytes.splice(at..at, piece);
        }
        // A digit for another one: sizes, increments, numbers of text files.
        5 => {
            let digits: Vec<usize> = (0..length.min(6000))
                .filter(|at| bytes[*at].is_ascii_digit())
                .collect();
            if !digits.is_empty() {
                let at = digits[random.below(digits.len())];
                bytes[at] = b'0' + random.below(10) as u8;
            }
        }
        // A card's value for an evil one; in text, a line's middle.
        _ => {
            let cards: Vec<usize> = (0..length / CARD)
                .map(|card| card * CARD)
                .filter(|at| bytes[at + 8..].starts_with(b"= "))
                .collect();
            let evil = EVIL[random.below(EVIL.len())].as_bytes();
            if cards.is_empty() {
                let at = random.below(length);
                bytes.splice(at..at, evil.iter().copied());
            } else {
                let at = cards[random.below(cards.len())] + 10;
                bytes[at..at + 22].fill(b' ');
                bytes[at..at + evil.len()].copy_from_slice(evil);
            }
        }
    }
}

fn data_files() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/read");
    let mut files: Vec<PathBuf> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.extension().is_none_or(|extension| extension != "json"))
        .collect();
    files.sort();
    files
}

/// Reads and scales; both may refuse.
fn read(path: &Path, bytes: &[u8], options: &ReadOptions) -> bool {
    match spectrum_from_bytes(path, bytes, options) {
        Ok(raw) => to_spectrum(&raw, &ScaleSettings::for_line(89.188_524_7e9))
            .map_err(|error| assert!(!error.to_string().is_empty()))
            .is_ok(),
        Err(error) => {
            assert!(error.to_string().contains(&path.display().to_string()));
            assert!(error.hint().is_some());
            false
        }
    }
}

/// Peak of the virtual memory so far, kB, where the system tells.
fn peak_memory_kb() -> Option<u64> {
    let status = fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find(|line| line.starts_with("VmPeak:"))?;
    line.split_whitespace().nth(1)?.parse().ok()
}

#[test]
fn no_damage_makes_reading_panic_or_take_memory() {
    let files = data_files();
    assert!(files.len() > 50);
    let before = peak_memory_kb();
    let (mut accepted, mut refused) = (0, 0);
    for (number, path) in files.iter().enumerate() {
        let whole = fs::read(path).unwrap();
        for copy in 0..COPIES_PER_FILE {
            let seed = number as u64 * 1000 + copy;
            let mut random = Random(seed);
            let mut bytes = whole.clone();
            for _ in 0..=random.below(3) {
                damage(&mut bytes, &mut random);
            }
            let options = ReadOptions {
                columns: (copy % 4 == 0).then(|| "1:km/s,2:K".parse().unwrap()),
                select: (copy % 3 == 0).then(|| "2".parse().unwrap()),
                ..ReadOptions::default()
            };
            match catch_unwind(AssertUnwindSafe(|| read(path, &bytes, &options))) {
                Ok(true) => accepted += 1,
                Ok(false) => refused += 1,
                Err(panic) => panic!("{} with seed {seed}: {panic:?}", path.display()),
            }
        }
    }
    // Both happen often, so the damage is neither harmless nor total.
    assert!(accepted > 100 && refused > 1000, "{accepted} {refused}");
    if let (Some(before), Some(after)) = (before, peak_memory_kb()) {
        assert!(after - before < MEMORY_LIMIT_KB, "{before} to {after} kB");
    }
}
