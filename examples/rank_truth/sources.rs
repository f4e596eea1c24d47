//! Sources of known truth through the whole chain: how rates' intervals hold it, and findings to be ranked.
#![allow(dead_code, reason = "an example and a test use their parts")]

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
use inrush::rank::{Quantity, Source, compare};
use inrush::run::rank::PairRecord;
use inrush::run::{BatchSettings, LineInput, PairInput, PairSettings, RunError, fit_spectra};
use inrush::simulate::{Correlation, Kind, Range, SampleSettings, Spacing, simulate_pair};
use inrush::spectrum::Spectrum;
use std::error::Error;
use std::ops::ControlFlow;

/// What `drawn.rs` is told.
#[derive(Clone, Copy)]
pub struct Setup {
    /// Correlation of the noise.
    pub correlation: Correlation,
    /// Departure of the profiles from the models.
    pub shape_error: f64,
}

pub type Failed = Box<dyn Error + Send + Sync>;

fn input(lines: &(Line, Line), spectra: (Spectrum, Spectrum), given: &Given) -> PairInput {
    let line = |line: &Line, spectrum| LineInput::in_memory(line.clone(), spectrum, "simulated");
    PairInput {
        name: None,
        source: given.properties.clone(),
        thick: line(&lines.0, spectra.0),
        thin: line(&lines.1, spectra.1),
    }
}

/// Works on numbers 0 to `count` on all cores; results in order, and how many failed.
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

/// Whether the 68 and the 95 % interval of a source's rate hold the truth.
pub type Held = [bool; 2];

/// Pairs drawn from the priors with what is given of their sources: what their intervals hold, `None` without a
/// rate, and how many failed.
pub fn held(sources: usize) -> Result<(Vec<Option<Held>>, usize), Failed> {
    let lines = drawn::lines().map_err(|error| error.to_string())?;
    let setup = Setup {
        correlation: Correlation::White,
        shape_error: SHAPE_ERROR,
    };
    let settings = PairSettings::default();
    each(sources, |workspace, number| {
        let model = [Model::TwoLayer, Model::Hill][number % 2];
        let seed = 1000 + number as u64;
        let pair = drawn::draw(Family::Moving(model), None, &lines, setup, seed)
            .map_err(|error| error.to_string())?;
        let given = Given::draw(seed)?;
        let truth = given.rate_msun_yr(pair.v_in_km_s);
        let input = input(&lines, (pair.thick, pair.thin), &given);
        let outcome = fit_spectra(input, &settings, workspace)?;
        let rate = outcome.derived.get(Derived::MassRate);
        Ok(rate.map(|rate| {
            [rate.interval68, rate.interval95].map(|[low, high]| {
                low.is_none_or(|low| low <= truth) && high.is_none_or(|high| truth <= high)
            })
        }))
    })
}

/// A source, and its true rate.
pub struct Ranked {
    pub source: Source,
    pub rate_msun_yr: f64,
}

/// Sources with a signal-to-noise ratio of 20 in both lines, 70 % of them infalling, 15 % at rest, 15 % expanding,
/// and how many failed.
pub fn pool(sources: usize) -> Result<(Vec<Ranked>, usize), Failed> {
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
    each(sources, |workspace, number| {
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
    })
}

/// Rank correlation of places and true rates, positive where the first has the largest.
pub fn correlation(pool: &[Ranked], members: &[usize]) -> f64 {
    let mut order = members.to_vec();
    order.sort_by(|a, b| compare(&pool[*a].source, &pool[*b].source, Quantity::Rate));
    let places: Vec<f64> = (0..order.len()).map(|place| -(place as f64)).collect();
    let rates: Vec<f64> = order
        .iter()
        .map(|index| pool[*index].rate_msun_yr)
        .collect();
    spearman(&places, &rates).unwrap_or(f64::NAN)
}
