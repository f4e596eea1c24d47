//! Whether intervals and probabilities mean what they say: pairs drawn from the priors, prepared with
//! default settings, against their truth.
//!
//! `cargo run --example calibrate -- coverage | mixed | spheres | sampler | shapes [PAIRS] [white | hanning | band-limited] [SHAPE_ERROR] [found | exact] [FIRST_SEED]`
#![allow(clippy::print_stdout, clippy::print_stderr)]

mod drawn;
mod spheres;

use drawn::{DrawnPair, draw, lines};
use inrush::fit::hypotheses::{Hypothesis, Odds, verdict};
use inrush::fit::posterior::{
    Family, PairPosterior, PosteriorSettings, SHAPE_ERROR, pair_posterior,
};
use inrush::fit::{FitSettings, fit_thin};
use inrush::line::Line;
use inrush::measure::ThinLine;
use inrush::model::Model;
use inrush::numeric::sampling::ImportanceSettings;
use inrush::numeric::{Autoregression, Estimate};
use inrush::prepare::{Expected, PrepareSettings, Prepared, prepare_pair};
use inrush::simulate::Correlation;
use inrush::spectrum::{Noise, Spectrum, Window};
use std::error::Error;
use std::process::ExitCode;
use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::time::Instant;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    match run(&arguments) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn run(arguments: &[String]) -> Result<(), Box<dyn Error>> {
    let choice = arguments.first().map_or("coverage", String::as_str);
    let pairs: usize = arguments.get(1).map_or(Ok(100), |text| text.parse())?;
    let correlation = match arguments.get(2).map_or("white", String::as_str) {
        "white" => Correlation::White,
        "hanning" => Correlation::Hanning,
        "band-limited" => Correlation::BandLimited,
        other => {
            return Err(format!("noise `{other}`, expected white, hanning or band-limited").into());
        }
    };
    let setup = Setup {
        correlation,
        shape_error: arguments
            .get(3)
            .map_or(Ok(SHAPE_ERROR), |text| text.parse())?,
        exact: arguments.get(4).is_some_and(|text| text == "exact"),
        first_seed: arguments.get(5).map_or(Ok(0), |text| text.parse())?,
    };
    match choice {
        "coverage" => coverage(pairs, setup),
        "mixed" => mixed(pairs, setup),
        "spheres" => spheres::print(setup),
        "sampler" => sampler(pairs, setup),
        "shapes" => shapes(pairs),
        other => {
            Err(format!("`{other}`, expected coverage, mixed, spheres, sampler or shapes").into())
        }
    }
}

/// How pairs are drawn and judged.
#[derive(Clone, Copy)]
pub struct Setup {
    /// Correlation of the noise.
    pub correlation: Correlation,
    /// Shape errors over the peak.
    pub shape_error: f64,
    /// Whether noise, window and thin line are given instead of found.
    pub exact: bool,
    /// Seed of the first pair; each pair has its own.
    pub first_seed: u64,
}

impl Setup {
    fn settings(self) -> PosteriorSettings {
        PosteriorSettings {
            shape_error: self.shape_error,
            ..PosteriorSettings::default()
        }
    }
}

/// What became of a pair.
struct Outcome {
    posterior: PairPosterior,
    seconds: f64,
}

fn posterior(
    thick: &Spectrum,
    thin: &Spectrum,
    lines: &(Line, Line),
    posterior_settings: &PosteriorSettings,
) -> Result<Outcome, String> {
    let text = |error: &dyn Error| error.to_string();
    let settings = PrepareSettings::default();
    let expected = |line: &Line| Expected {
        components: line.components.clone(),
        window: None,
    };
    let (thick, thin) = prepare_pair(
        (thick, &settings, &expected(&lines.0)),
        (thin, &settings, &expected(&lines.1)),
    )
    .map_err(|error| text(&error))?;
    let thin_fit = fit_thin(
        &thin,
        &lines.1,
        &FitSettings::default(),
        &mut inrush::fit::Workspace::new(),
    )
    .map_err(|error| text(&error))?;
    let began = Instant::now();
    let posterior = pair_posterior(
        &thick,
        &thin,
        (&lines.0, &lines.1),
        thin_fit.line.as_ref(),
        posterior_settings,
    )
    .map_err(|error| text(&error))?;
    Ok(Outcome {
        posterior,
        seconds: began.elapsed().as_secs_f64(),
    })
}

/// The posterior of a pair whose noise, window and thin line are known: what is left is the sampler's.
fn exact(
    pair: &DrawnPair,
    lines: &(Line, Line),
    settings: &PosteriorSettings,
) -> Result<Outcome, String> {
    let sigma = pair.sigma_km_s;
    let window = Window {
        low_km_s: -4.0 * sigma,
        high_km_s: 4.0 * sigma,
    };
    let prepared = |spectrum: &Spectrum, rms_k: f64| {
        Prepared::as_given(
            spectrum.clone(),
            window,
            Noise {
                rms_k,
                channels: spectrum.len(),
                process: Autoregression::white(),
            },
        )
    };
    let known = |value: f64| Estimate {
        value,
        err: 0.1 * sigma,
    };
    let thin_line = ThinLine {
        v_km_s: known(0.0),
        fwhm_km_s: known(sigma * inrush::constants::FWHM_PER_SIGMA),
        covariance_v_fwhm: 0.0,
        peak_k: known(1.0),
    };
    let began = Instant::now();
    let posterior = pair_posterior(
        &prepared(&pair.thick, pair.noise_k.0),
        &prepared(&pair.thin, pair.noise_k.1),
        (&lines.0, &lines.1),
        Some(&thin_line),
        settings,
    )
    .map_err(|error| error.to_string())?;
    Ok(Outcome {
        posterior,
        seconds: began.elapsed().as_secs_f64(),
    })
}

/// Results of jobs 0 to `count`, in order, on every core.
fn parallel<T: Send>(count: usize, job: impl Fn(usize) -> T + Sync) -> Vec<T> {
    let next = AtomicUsize::new(0);
    let results = Mutex::new(Vec::with_capacity(count));
    let threads = std::thread::available_parallelism().map_or(1, usize::from);
    std::thread::scope(|scope| {
        for _ in 0..threads {
            scope.spawn(|| {
                loop {
                    let index = next.fetch_add(1, Ordering::Relaxed);
                    if index >= count {
                        break;
                    }
                    let result = job(index);
                    if let Ok(mut results) = results.lock() {
                        results.push((index, result));
                    }
                }
            });
        }
    });
    let mut results = results.into_inner().unwrap_or_default();
    results.sort_by_key(|(index, _)| *index);
    results.into_iter().map(|(_, result)| result).collect()
}

/// A rank of the truth in a posterior.
struct Rank {
    model: Model,
    /// Share of the posterior below the truth.
    below: f64,
    signal_to_noise: f64,
    trusted: bool,
}

/// Whether a rank belongs to a group.
type Belongs = fn(&Rank) -> bool;

const MODELS: [Model; 2] = [Model::TwoLayer, Model::Hill];

fn coverage(pairs: usize, setup: Setup) -> Result<(), Box<dyn Error>> {
    let lines = lines()?;
    let results = parallel(pairs, |index| {
        let model = MODELS[index % 2];
        let pair = draw(
            Family::Moving(model),
            None,
            &lines,
            setup,
            setup.first_seed + index as u64,
        )
        .map_err(|error| error.to_string())?;
        let settings = PosteriorSettings {
            models: vec![model],
            hypotheses: false,
            ..setup.settings()
        };
        let outcome = if setup.exact {
            exact(&pair, &lines, &settings)?
        } else {
            posterior(&pair.thick, &pair.thin, &lines, &settings)?
        };
        Ok::<_, String>((pair, outcome))
    });
    let refused: Vec<&String> = results
        .iter()
        .filter_map(|one| one.as_ref().err())
        .collect();
    let found: Vec<&(DrawnPair, Outcome)> =
        results.iter().filter_map(|one| one.as_ref().ok()).collect();
    println!("pairs {pairs}, refused {}", refused.len());
    if let Some(first) = refused.first() {
        println!("  first: {first}");
    }
    let ranks: Vec<Rank> = found
        .iter()
        .filter_map(|(pair, outcome)| rank(pair, outcome))
        .collect();
    let groups: [(&str, Belongs); 7] = [
        ("all", |_| true),
        ("two-layer", |rank| rank.model == Model::TwoLayer),
        ("hill", |rank| rank.model == Model::Hill),
        ("S/N 5 to 15", |rank| rank.signal_to_noise < 15.0),
        ("S/N 15 to 40", |rank| {
            (15.0..40.0).contains(&rank.signal_to_noise)
        }),
        ("S/N 40 to 100", |rank| rank.signal_to_noise >= 40.0),
        ("trusted", |rank| rank.trusted),
    ];
    println!(
        "| group | pairs | in 68.3 % | in 95.4 % | rank chi2 p |\n| --- | --- | --- | --- | --- |"
    );
    for (name, belongs) in &groups {
        let below: Vec<f64> = ranks
            .iter()
            .filter(|rank| belongs(rank))
            .map(|rank| rank.below)
            .collect();
        println!(
            "| {name} | {} | {:.1} | {:.1} | {:.3} |",
            below.len(),
            within(&below, 0.682_689),
            within(&below, 0.954_5),
            flatness(&below)
        );
    }
    let below: Vec<f64> = ranks.iter().map(|rank| rank.below).collect();
    println!("ranks in twentieths: {:?}", histogram(&below));
    let outcomes: Vec<&Outcome> = found.iter().map(|(_, outcome)| outcome).collect();
    costs(&outcomes);
    Ok(())
}

fn costs(found: &[&Outcome]) {
    let count = found.len().max(1) as f64;
    let seconds: f64 = found.iter().map(|outcome| outcome.seconds).sum();
    println!("mean time {:.1} ms a pair", 1e3 * seconds / count);
    let Some(first) = found.first() else {
        return;
    };
    for (index, family) in first.posterior.families.iter().enumerate() {
        let of: Vec<_> = found
            .iter()
            .map(|outcome| &outcome.posterior.families[index])
            .collect();
        let mean = |value: &dyn Fn(&inrush::fit::posterior::FamilyPosterior) -> f64| {
            of.iter().map(|one| value(one)).sum::<f64>() / count
        };
        println!(
            "{:22} evaluations {:6.0}  effective {:6.0}  ln Z err {:.3}  flagged {:.1} %",
            family.family.name(),
            mean(&|one| one.evaluations as f64),
            mean(&|one| one.quality.effective),
            mean(&|one| one.ln_evidence_err),
            100.0 * mean(&|one| f64::from(u8::from(!one.quality.holds()))),
        );
    }
}

fn rank(pair: &DrawnPair, outcome: &Outcome) -> Option<Rank> {
    let Family::Moving(model) = pair.family else {
        return None;
    };
    let posterior = outcome.posterior.of(pair.family)?;
    let below = posterior
        .v_in
        .iter()
        .filter(|(v_in, _)| *v_in < pair.v_in_km_s);
    Some(Rank {
        model,
        below: below.map(|(_, weight)| weight).sum(),
        signal_to_noise: pair.signal_to_noise,
        trusted: posterior.quality.holds(),
    })
}

/// Percent of ranks in the central part.
fn within(below: &[f64], part: f64) -> f64 {
    let inside = below
        .iter()
        .filter(|rank| (**rank - 0.5).abs() < 0.5 * part);
    100.0 * inside.count() as f64 / below.len().max(1) as f64
}

const BINS: usize = 20;

/// Which of `count` equal parts of 0 to 1 a number lies in.
fn part(number: f64, count: usize) -> usize {
    let upper = (1..count).find(|edge| number < *edge as f64 / count as f64);
    upper.unwrap_or(count) - 1
}

fn histogram(below: &[f64]) -> [usize; BINS] {
    let mut counts = [0; BINS];
    for rank in below {
        counts[part(*rank, BINS)] += 1;
    }
    counts
}

/// Probability of as uneven a histogram of ranks by chance.
fn flatness(below: &[f64]) -> f64 {
    use statrs::distribution::{ChiSquared, ContinuousCDF as _};
    let expected = below.len() as f64 / BINS as f64;
    let chi2: f64 = histogram(below)
        .iter()
        .map(|count| (*count as f64 - expected).powi(2) / expected)
        .sum();
    ChiSquared::new(BINS as f64 - 1.0).map_or(f64::NAN, |distribution| distribution.sf(chi2))
}

/// Pairs of every hypothesis with equal odds: how often infall is true in each tenth of p_infall.
fn mixed(pairs: usize, setup: Setup) -> Result<(), Box<dyn Error>> {
    let lines = lines()?;
    let results = parallel(pairs, |index| {
        let (family, inward) = match (index % 4, index / 4 % 6) {
            (0, kind) => (Family::Moving(MODELS[kind % 2]), Some(true)),
            (1, kind) => (Family::Moving(MODELS[kind % 2]), Some(false)),
            (2, kind) => match kind % 3 {
                0 => (Family::Still(Model::TwoLayer), None),
                1 => (Family::Still(Model::Hill), None),
                _ => (Family::Unabsorbed, None),
            },
            _ => (Family::TwoClouds, None),
        };
        let seed = 1_000_000 + setup.first_seed + index as u64;
        let pair = draw(family, inward, &lines, setup, seed).map_err(|error| error.to_string())?;
        let outcome = posterior(&pair.thick, &pair.thin, &lines, &setup.settings())?;
        let verdict =
            verdict(&outcome.posterior, &Odds::default()).map_err(|error| error.to_string())?;
        Ok::<_, String>((Hypothesis::ALL[index % 4], pair, verdict, outcome))
    });
    let found: Vec<_> = results.iter().filter_map(|one| one.as_ref().ok()).collect();
    println!("pairs {pairs}, refused {}", pairs - found.len());
    let outcomes: Vec<&Outcome> = found.iter().map(|(_, _, _, outcome)| outcome).collect();
    costs(&outcomes);
    for hypothesis in Hypothesis::ALL {
        println!(
            "| p_{} | pairs | mean p | true |\n| --- | --- | --- | --- |",
            hypothesis.name()
        );
        for tenth in 0..10 {
            let of: Vec<_> = found
                .iter()
                .map(|(truth, _, verdict, _)| {
                    (*truth == hypothesis, verdict.probability(hypothesis))
                })
                .filter(|(_, p)| part(*p, 10) == tenth)
                .collect();
            let count = of.len().max(1) as f64;
            let mean = of.iter().map(|(_, p)| p).sum::<f64>() / count;
            let share = of.iter().filter(|(truth, _)| *truth).count() as f64 / count;
            println!(
                "| {:.1} to {:.1} | {} | {mean:.3} | {share:.3} |",
                tenth as f64 / 10.0,
                (tenth + 1) as f64 / 10.0,
                of.len()
            );
        }
    }
    println!("| truth | pairs | p_infall > 0.9 | favoured is true |\n| --- | --- | --- | --- |");
    for hypothesis in Hypothesis::ALL {
        let of: Vec<_> = found
            .iter()
            .filter(|(truth, ..)| *truth == hypothesis)
            .collect();
        let sure = of
            .iter()
            .filter(|(_, _, verdict, _)| verdict.probability(Hypothesis::Infall) > 0.9);
        let right = of
            .iter()
            .filter(|(truth, _, verdict, _)| verdict.favoured() == *truth);
        println!(
            "| {} | {} | {} | {} |",
            hypothesis.name(),
            of.len(),
            sure.count(),
            right.count()
        );
    }
    Ok(())
}

/// Default draws against many more: differences of ln Z and of quantiles of v_in.
fn sampler(pairs: usize, setup: Setup) -> Result<(), Box<dyn Error>> {
    let lines = lines()?;
    let many = PosteriorSettings {
        sampling: ImportanceSettings {
            round: 3000,
            fewest_rounds: 4,
            most_rounds: 12,
            effective: 15_000.0,
            ..ImportanceSettings::default()
        },
        seed: 99,
        ..setup.settings()
    };
    let results = parallel(pairs, |index| {
        let families = [Family::Moving(MODELS[index / 2 % 2]), Family::TwoClouds];
        let pair = draw(families[index % 2], None, &lines, setup, index as u64)
            .map_err(|error| error.to_string())?;
        let few = posterior(&pair.thick, &pair.thin, &lines, &setup.settings())?;
        let many = posterior(&pair.thick, &pair.thin, &lines, &many)?;
        Ok::<_, String>((pair.signal_to_noise, few.posterior, many.posterior))
    });
    for (index, result) in results.iter().enumerate() {
        let Ok((signal_to_noise, few, many)) = result else {
            continue;
        };
        let best = many
            .families
            .iter()
            .map(|one| one.ln_evidence)
            .fold(f64::NEG_INFINITY, f64::max);
        for (few, many) in few.families.iter().zip(&many.families) {
            let apart = few.ln_evidence - many.ln_evidence;
            let ends = |one: &inrush::fit::posterior::FamilyPosterior| one.v_in_km_s();
            let moved = match (ends(few), ends(many)) {
                (Some(a), Some(b)) => {
                    let width = b.interval68.1 - b.interval68.0;
                    format!(
                        "{:+.2} {:+.2} {:+.2}",
                        (a.interval95.0 - b.interval95.0) / width,
                        (a.median - b.median) / width,
                        (a.interval95.1 - b.interval95.1) / width
                    )
                }
                _ => String::new(),
            };
            println!(
                "{index},{signal_to_noise:.0},{},{:.2},{apart:+.3},{:.3},{:.0},{:.2},{:.0},{:.2},{},{moved}",
                few.family.name(),
                many.ln_evidence - best,
                few.ln_evidence_err,
                few.quality.effective,
                few.quality.tail_shape.unwrap_or(-1.0),
                many.quality.effective,
                many.quality.tail_shape.unwrap_or(-1.0),
                few.quality.holds(),
            );
        }
    }
    Ok(())
}

/// How far slab models are from each other: the best fit of one to the other's profiles without
/// noise to speak of, residuals over the peak.
fn shapes(pairs: usize) -> Result<(), Box<dyn Error>> {
    let lines = lines()?;
    let setup = Setup {
        correlation: Correlation::White,
        shape_error: 0.0,
        exact: false,
        first_seed: 0,
    };
    for made in MODELS {
        let fitted = MODELS
            .into_iter()
            .find(|model| *model != made)
            .unwrap_or(made);
        let mut found: Vec<(f64, f64)> = parallel(pairs, |index| {
            let seed = 2_000_000 + index as u64;
            let pair = draw(Family::Moving(made), None, &lines, setup, seed).ok()?;
            if pair.signal_to_noise < 30.0 {
                return None;
            }
            let settings = PrepareSettings::default();
            let expected = Expected::default();
            let (thick, thin) = prepare_pair(
                (&pair.thick, &settings, &expected),
                (&pair.thin, &settings, &expected),
            )
            .ok()?;
            let fit_settings = FitSettings {
                models: vec![fitted],
                free_thin_sigma: true,
                ..FitSettings::default()
            };
            let thin_fit = fit_thin(
                &thin,
                &lines.1,
                &fit_settings,
                &mut inrush::fit::Workspace::new(),
            )
            .ok()?;
            let lines = (&lines.0, &lines.1);
            let fit = inrush::fit::fit_pair(
                &thick,
                &thin,
                lines,
                thin_fit.line.as_ref(),
                &fit_settings,
                &mut inrush::fit::Workspace::new(),
            )
            .ok()?;
            let fit = fit.models.first()?;
            let window = thick.window;
            let velocity = thick.spectrum.velocity_km_s();
            let channels = velocity.iter().filter(|v| window.contains(**v)).count() as f64;
            let excess = (fit.chi2 - fit.degrees_of_freedom as f64).max(0.0);
            Some((
                (excess / channels).sqrt() / pair.signal_to_noise,
                pair.signal_to_noise,
            ))
        })
        .into_iter()
        .flatten()
        .collect();
        found.sort_by(|a, b| a.0.total_cmp(&b.0));
        let at = |share: f64| found[part(share, found.len())].0;
        println!(
            "{} fitted by {}: {} pairs, rms residual over the peak: 16 % {:.3}, median {:.3}, 84 % {:.3}",
            made.name(),
            fitted.name(),
            found.len(),
            at(0.16),
            at(0.5),
            at(0.84)
        );
    }
    Ok(())
}
