//! Do rates' intervals hold, does a ranking follow the true rates, and are places as firm as they say?
//!
//!     cargo run --release --example rank_truth -- rates [SOURCES] | order [SOURCES]
//!
//! `rates` draws SOURCES (1000) pairs from the priors, each with a distance, mass, radius and slope whose
//! truths are drawn from what is given of them, and counts how many 68 and 95 % intervals of the rate hold
//! the truth. `order` simulates SOURCES (200) with a signal-to-noise ratio of 20 in both lines, ranks them, and
//! compares the order with that of the true rates; from more than 200 it takes many samples of 200 and tabulates
//! how often sources with a stated probability of a place among the first ten have one.
#![allow(clippy::print_stdout, clippy::print_stderr)]

#[path = "sources.rs"]
mod sources;

use inrush::rank::{Grade, Quantity, Source, rank_spreads};
use rand::RngExt as _;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng as _;
use sources::{Failed, Held, correlation, held, pool};
use std::process::ExitCode;

/// Sources of one sample.
const SAMPLE: usize = 200;
/// First places that are asked about.
const TOP: usize = 10;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let sources = arguments.get(1).map(|text| text.parse());
    let result = match (arguments.first().map(String::as_str), sources) {
        (Some("rates"), None) => rates(1000),
        (Some("rates"), Some(Ok(sources))) => rates(sources),
        (Some("order"), None) => order(SAMPLE),
        (Some("order"), Some(Ok(sources))) => order(sources),
        _ => Err("expected rates or order, then a number of sources".into()),
    };
    match result {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn rates(sources: usize) -> Result<(), Failed> {
    let (all, failed) = held(sources)?;
    let rates: Vec<Held> = all.iter().flatten().copied().collect();
    let share = |which: usize| {
        let hold = rates.iter().filter(|held| held[which]).count();
        100.0 * hold as f64 / rates.len() as f64
    };
    println!(
        "{} sources with a rate; {} without a constrained speed, {failed} failed",
        rates.len(),
        all.len() - rates.len()
    );
    println!("68 % intervals hold the truth in {:.1} %", share(0));
    println!("95 % intervals hold the truth in {:.1} %", share(1));
    Ok(())
}

fn order(sources: usize) -> Result<(), Failed> {
    let (pool, failed) = pool(sources)?;
    println!("{} sources, {failed} failed", pool.len());
    let all: Vec<usize> = (0..pool.len().min(SAMPLE)).collect();
    let grades = [
        Grade::Firm,
        Grade::Likely,
        Grade::Open,
        Grade::Unlikely,
        Grade::Unknown,
    ];
    for grade in grades {
        let count = all
            .iter()
            .filter(|index| pool[**index].source.finding.grade() == grade);
        println!("  {:<34}{}", grade.words(), count.count());
    }
    println!(
        "rank correlation with the true rates, first sample: {:.3}",
        correlation(&pool, &all)
    );
    let mut generator = ChaCha8Rng::seed_from_u64(5);
    let samples = if pool.len() > SAMPLE {
        10 * pool.len() / SAMPLE
    } else {
        1
    };
    // stated probability, and whether it came true
    let mut stated: Vec<(f64, bool)> = Vec::new();
    let mut correlations = Vec::new();
    for sample in 0..samples {
        let members = if samples == 1 {
            all.clone()
        } else {
            chosen(pool.len(), &mut generator)
        };
        correlations.push(correlation(&pool, &members));
        let sources: Vec<&Source> = members.iter().map(|index| &pool[*index].source).collect();
        let spreads = rank_spreads(&sources, Quantity::Rate, TOP, sample as u64);
        let mut by_truth = members.clone();
        by_truth.sort_by(|a, b| pool[*b].rate_msun_yr.total_cmp(&pool[*a].rate_msun_yr));
        for (member, spread) in members.iter().zip(spreads) {
            if let Some(spread) = spread {
                stated.push((spread.p_top, by_truth[..TOP].contains(member)));
            }
        }
    }
    let mean = correlations.iter().sum::<f64>() / correlations.len() as f64;
    println!("mean of {samples} samples of {}: {mean:.3}", all.len());
    println!("\n  stated p_top     sources   mean p_top   came true");
    for ends in [0.0, 0.02, 0.1, 0.3, 0.5, 0.7, 0.9, 1.01].windows(2) {
        let within: Vec<&(f64, bool)> = stated
            .iter()
            .filter(|(p, _)| (ends[0]..ends[1]).contains(p))
            .collect();
        if within.is_empty() {
            continue;
        }
        let count = within.len() as f64;
        println!(
            "  {:.2} to {:.2}   {:>9}   {:>10.3}   {:>9.3}",
            ends[0],
            ends[1].min(1.0),
            within.len(),
            within.iter().map(|(p, _)| p).sum::<f64>() / count,
            within.iter().filter(|(_, true_)| *true_).count() as f64 / count
        );
    }
    Ok(())
}

/// As many of a pool as make a sample, without repetition.
fn chosen(pool: usize, generator: &mut ChaCha8Rng) -> Vec<usize> {
    let mut left: Vec<usize> = (0..pool).collect();
    (0..SAMPLE.min(pool))
        .map(|_| left.swap_remove(generator.random_range(0..left.len())))
        .collect()
}
