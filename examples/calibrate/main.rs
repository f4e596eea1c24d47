//! Whether intervals and probabilities mean what they say: pairs drawn from the priors, prepared with
//! default settings, against their truth.
//!
//! `cargo run --example calibrate -- coverage | mixed | spheres [PAIRS] [white | hanning | band-limited]`
#![allow(clippy::print_stdout, clippy::print_stderr)]

mod drawn;

use drawn::{DrawnPair, draw, lines};
use inrush::fit::posterior::{Family, PairPosterior, PosteriorSettings, pair_posterior};
use inrush::fit::{FitSettings, fit_thin};
use inrush::line::Line;
use inrush::model::Model;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::simulate::Correlation;
use inrush::spectrum::Spectrum;
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
    match choice {
        "coverage" => coverage(pairs, correlation),
        other => Err(format!("`{other}`, expected coverage, mixed or spheres").into()),
    }
}

/// What became of a pair.
struct Outcome {
    posterior: PairPosterior,
    seconds: f64,
}

fn posterior(thick: &Spectrum, thin: &Spectrum, lines: &(Line, Line)) -> Result<Outcome, String> {
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
    let thin_fit =
        fit_thin(&thin, &lines.1, &FitSettings::default()).map_err(|error| text(&error))?;
    let began = Instant::now();
    let posterior = pair_posterior(
        &thick,
        &thin,
        (&lines.0, &lines.1),
        thin_fit.line.as_ref(),
        &PosteriorSettings::default(),
    )
    .map_err(|error| text(&error))?;
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

const MODELS: [Model; 2] = [Model::TwoLayer, Model::Hill];

fn coverage(pairs: usize, correlation: Correlation) -> Result<(), Box<dyn Error>> {
    let lines = lines()?;
    let results = parallel(pairs, |index| {
        let model = MODELS[index % 2];
        let pair = draw(
            Family::Moving(model),
            None,
            &lines,
            correlation,
            index as u64,
        )
        .map_err(|error| error.to_string())?;
        let outcome = posterior(&pair.thick, &pair.thin, &lines)?;
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
    let groups: [(&str, Box<dyn Fn(&Rank) -> bool>); 7] = [
        ("all", Box::new(|_| true)),
        ("two-layer", Box::new(|rank| rank.model == Model::TwoLayer)),
        ("hill", Box::new(|rank| rank.model == Model::Hill)),
        ("S/N 5 to 15", Box::new(|rank| rank.signal_to_noise < 15.0)),
        (
            "S/N 15 to 40",
            Box::new(|rank| (15.0..40.0).contains(&rank.signal_to_noise)),
        ),
        (
            "S/N 40 to 100",
            Box::new(|rank| rank.signal_to_noise >= 40.0),
        ),
        ("trusted", Box::new(|rank| rank.trusted)),
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
    costs(&found);
    Ok(())
}

fn costs(found: &[&(DrawnPair, Outcome)]) {
    let count = found.len().max(1) as f64;
    let seconds: f64 = found.iter().map(|(_, outcome)| outcome.seconds).sum();
    println!("mean time {:.1} ms a pair", 1e3 * seconds / count);
    let Some((_, first)) = found.first() else {
        return;
    };
    for (index, family) in first.posterior.families.iter().enumerate() {
        let of: Vec<_> = found
            .iter()
            .map(|(_, outcome)| &outcome.posterior.families[index])
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

fn histogram(below: &[f64]) -> [usize; BINS] {
    let mut counts = [0; BINS];
    for rank in below {
        counts[((rank * BINS as f64) as usize).min(BINS - 1)] += 1;
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
