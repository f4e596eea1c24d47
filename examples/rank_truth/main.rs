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

#[path = "../calibrate/drawn.rs"]
mod drawn;
mod given;

use given::Given;
use inrush::derive::Quantity as Derived;
use inrush::fit::Workspace;
use inrush::fit::posterior::{Family, SHAPE_ERROR};
use inrush::line::Line;
use inrush::model::Model;
use inrush::numeric::samples::spearman;
use inrush::rank::{Grade, Quantity, Source, compare, rank_spreads};
use inrush::run::rank::PairRecord;
use inrush::run::{
    BatchSettings, LineInput, PairInput, PairOutcome, PairSettings, RunError, fit_spectra,
};
use inrush::simulate::{Correlation, Kind, Range, SampleSettings, Spacing, simulate_pair};
use inrush::spectrum::Spectrum;
use rand::RngExt as _;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng as _;
use std::error::Error;
use std::ops::ControlFlow;
use std::process::ExitCode;

/// What `drawn.rs` is told.
#[derive(Clone, Copy)]
pub struct Setup {
    /// Correlation of the noise.
    pub correlation: Correlation,
    /// Departure of the profiles from the models.
    pub shape_error: f64,
}

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

type Failed = Box<dyn Error + Send + Sync>;

fn input(lines: &(Line, Line), spectra: (Spectrum, Spectrum), given: &Given) -> PairInput {
    let line = |line: &Line, spectrum| LineInput::in_memory(line.clone(), spectrum, "simulated");
    PairInput {
        name: None,
        source: given.properties.clone(),
        thick: line(&lines.0, spectra.0),
        thin: line(&lines.1, spectra.1),
    }
}

/// Works on numbers 0 to `count` on all cores; results in order, failures counted.
fn each<R: Send>(
    count: usize,
    work: impl Fn(&mut Workspace, usize) -> Result<R, Failed> + Sync,
) -> Result<(Vec<R>, usize), Failed> {
    let (mut results, mut failed) = (Vec::new(), 0);
    let _ = BatchSettings::default().run(
        0..count,
        Workspace::new,
        |workspace, number| {
            work(workspace, number).map_err(|error| RunError::Internal(error.to_string()))
        },
        |_, result| {
            match result {
                Ok(result) => results.push(result),
                Err(_) => failed += 1,
            }
            ControlFlow::<()>::Continue(())
        },
    )?;
    Ok((results, failed))
}

fn rates(sources: usize) -> Result<(), Failed> {
    let lines = drawn::lines().map_err(|error| error.to_string())?;
    let setup = Setup {
        correlation: Correlation::White,
        shape_error: SHAPE_ERROR,
    };
    let settings = PairSettings::default();
    let (all, failed) = each(sources, |workspace, number| {
        let model = [Model::TwoLayer, Model::Hill][number % 2];
        let seed = 1000 + number as u64;
        let pair = drawn::draw(Family::Moving(model), None, &lines, setup, seed)
            .map_err(|error| error.to_string())?;
        let given = Given::draw(seed)?;
        let truth = given.rate_msun_yr(pair.v_in_km_s);
        let outcome: PairOutcome = fit_spectra(
            input(&lines, (pair.thick, pair.thin), &given),
            &settings,
            workspace,
        )?;
        let rate = outcome.derived.get(Derived::MassRate);
        Ok(rate.map(|rate| {
            [rate.interval68, rate.interval95].map(|[low, high]| {
                low.is_none_or(|low| low <= truth) && high.is_none_or(|high| truth <= high)
            })
        }))
    })?;
    let rates: Vec<[bool; 2]> = all.iter().flatten().copied().collect();
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

/// A source, and its true rate.
struct Ranked {
    source: Source,
    rate_msun_yr: f64,
}

fn pool(sources: usize) -> Result<Vec<Ranked>, Failed> {
    let lines = drawn::lines().map_err(|error| error.to_string())?;
    let twenty = Range {
        low: 20.0,
        high: 20.0,
        spacing: Spacing::Even,
    };
    let sample = SampleSettings {
        kinds: [
            (Kind::Infall, 0.7),
            (Kind::Static, 0.15),
            (Kind::Expansion, 0.15),
        ]
        .into(),
        signal_to_noise: twenty,
        signal_to_noise_thin: twenty,
        seed: 11,
        ..SampleSettings::default()
    };
    let settings = PairSettings::default();
    let (ranked, failed) = each(sources, |workspace, number| {
        let truth = sample.pair((&lines.0, &lines.1), number as u64)?.truth;
        let pair = simulate_pair(&truth)?;
        let given = Given::draw(number as u64)?;
        let v_in = truth.thick.parameters.get("v_in_km_s").copied();
        let spectra = (pair.thick.spectrum, pair.thin.spectrum);
        let outcome = fit_spectra(input(&lines, spectra, &given), &settings, workspace)?;
        let record = PairRecord::of(&outcome, &given.properties, 1)?;
        Ok(Ranked {
            source: Source {
                id: format!("{number:05}"),
                finding: record.finding,
            },
            rate_msun_yr: given.rate_msun_yr(v_in.unwrap_or(0.0)),
        })
    })?;
    println!("{} sources, {failed} failed", ranked.len());
    Ok(ranked)
}

fn order(sources: usize) -> Result<(), Failed> {
    let pool = pool(sources)?;
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

/// Rank correlation of places and true rates, positive where the first has the largest.
fn correlation(pool: &[Ranked], members: &[usize]) -> f64 {
    let mut order = members.to_vec();
    order.sort_by(|a, b| compare(&pool[*a].source, &pool[*b].source, Quantity::Rate));
    let places: Vec<f64> = (0..order.len()).map(|place| -(place as f64)).collect();
    let rates: Vec<f64> = order
        .iter()
        .map(|index| pool[*index].rate_msun_yr)
        .collect();
    spearman(&places, &rates).unwrap_or(f64::NAN)
}

/// As many of a pool as make a sample, without repetition.
fn chosen(pool: usize, generator: &mut ChaCha8Rng) -> Vec<usize> {
    let mut left: Vec<usize> = (0..pool).collect();
    (0..SAMPLE.min(pool))
        .map(|_| left.swap_remove(generator.random_range(0..left.len())))
        .collect()
}
