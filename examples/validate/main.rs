//! The numbers of docs/validation.md that come from simulated pairs, as its tables.
//!
//! `cargo run --example validate -- spheres | pairs | formal | published`: collapsing
//! spheres in summary or a row a pair; formal errors, and one slab model fitted to the other's
//! profiles, on pairs drawn from the models.
#![allow(clippy::print_stdout, clippy::print_stderr)]

mod drawn;
mod spheres;
mod statistics;

use std::error::Error;
use std::process::ExitCode;

fn main() -> ExitCode {
    let choice = std::env::args().nth(1).unwrap_or_default();
    match tables(&choice) {
        Ok(text) => {
            print!("{text}");
            ExitCode::SUCCESS
        }
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn tables(choice: &str) -> Result<String, Box<dyn Error>> {
    match choice {
        "spheres" => spheres::summary(),
        "pairs" => Ok(spheres::rows(&spheres::results(&[])?)),
        "formal" => drawn::formal_errors(),
        "published" => drawn::published_behaviour(),
        _ => Err("expected one of spheres, pairs, formal, published".into()),
    }
}
