//! The numbers of docs/validation.md that simulated pairs give are those the code gives now.
//!
//! The table of spheres whole, and of the drawn pairs, which take a minute, one row each.
//! `INRUSH_WRITE_EXPECTED=1` writes the spheres' tables anew; `cargo run --example validate`
//! prints the others.
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its page cannot be read"
)]
#![allow(dead_code, reason = "the example's other tables")]

#[path = "../examples/validate/drawn.rs"]
mod drawn;
#[path = "../examples/validate/spheres.rs"]
mod spheres;
#[path = "../examples/validate/statistics.rs"]
mod statistics;

use inrush::model::Model;
use std::path::{Path, PathBuf};

const BEGIN: &str = "<!-- validate spheres -->\n";
const END: &str = "<!-- end of validate spheres -->\n";

fn path() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("docs/validation.md")
}

fn page() -> String {
    std::fs::read_to_string(path()).unwrap()
}

#[test]
fn spheres_are_as_far_from_their_truth_as_the_page_says() {
    let page = page();
    let (before, rest) = page.split_once(BEGIN).unwrap();
    let (shown, after) = rest.split_once(END).unwrap();
    let found = format!("\n{}\n", spheres::summary().unwrap());
    if std::env::var_os("INRUSH_WRITE_EXPECTED").is_some() {
        std::fs::write(path(), format!("{before}{BEGIN}{found}{END}{after}")).unwrap();
        return;
    }
    for (shown, found) in shown.lines().zip(found.lines()) {
        assert_eq!(shown, found);
    }
    assert_eq!(shown, found);
}

/// The row of the hill at a signal-to-noise ratio of 30 and that of two layers at 10.
#[test]
fn formal_errors_hold_the_truth_as_often_as_the_page_says() {
    let page = page();
    for (model, signal_to_noise) in [(Model::Hill, 30.0), (Model::TwoLayer, 10.0)] {
        let row = drawn::formal_errors_of(model, drawn::NOISES[0], signal_to_noise, drawn::PAIRS)
            .unwrap();
        assert!(page.contains(&row), "not on the page: {row}");
    }
}
