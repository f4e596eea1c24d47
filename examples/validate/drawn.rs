//! Pairs drawn from the slab models themselves, prepared and fitted with default settings.

use super::spheres::TRANSPARENT;
use super::statistics::{percent, rms, spread};
use inrush::fit::Workspace;
use inrush::fit::{Caution, FitSettings, Judgement, PairFacts, cautions, fit_pair, fit_thin};
use inrush::line::{Line, find};
use inrush::measure::{MeasureSettings, measure};
use inrush::model::Model;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::simulate::{Axis, Correlation, NoiseLevel, PairTruth, simulate_pair};
use rand::{RngExt as _, SeedableRng as _};
use rand_chacha::ChaCha8Rng;
use std::error::Error;
use std::fmt::Write as _;

/// Pairs drawn for each row of a table.
pub const PAIRS: u64 = 400;

/// Dispersion of every pair, km/s: speeds then reach 0.2 km/s.
const SIGMA_KM_S: f64 = 0.2;
/// Channel width, km/s.
const CHANNEL_KM_S: f64 = 0.04;
/// The band reaches this many dispersions to either side.
const BAND_SIGMAS: f64 = 25.0;
/// Optical depth from which a pair counts as thick.
const THICK: f64 = 2.0;

/// A fitted speed of a drawn pair, km/s.
struct Drawn {
    truth: f64,
    tau: f64,
    value: f64,
    err: Option<f64>,
    tau_found: f64,
    two_peaks: bool,
    /// Whether residuals exceed the noise.
    poor: bool,
    /// Whether a minimum of the other sign is near enough for a caution.
    cautioned: bool,
}

impl Drawn {
    fn within(&self, errors: f64) -> bool {
        self.err
            .is_some_and(|err| (self.value - self.truth).abs() < errors * err)
    }

    fn error(&self) -> f64 {
        self.value - self.truth
    }
}

/// A truth drawn over v_in = -sigma to sigma, tau = 0.5 to 30 (uniform in its logarithm) and
/// temperatures of 5 to 40 K.
fn draw(
    model: Model,
    lines: &(Line, Line),
    (signal_to_noise, correlation): (f64, Correlation),
    seed: u64,
) -> PairTruth {
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    let mut between = |low: f64, high: f64| low + (high - low) * generator.random::<f64>();
    let mut truth = PairTruth::new((model, Model::Gaussian), lines.clone(), seed);
    let mut set = |name: &str, value: f64| {
        truth.thick.parameters.insert(name.to_owned(), value);
    };
    set("sigma_km_s", SIGMA_KM_S);
    set("v_in_km_s", SIGMA_KM_S * between(-1.0, 1.0));
    set("tau", between(0.5_f64.ln(), 30.0_f64.ln()).exp());
    if model == Model::Hill {
        set("t_peak_k", between(5.0, 40.0));
    } else {
        let front_k = between(4.0, 10.0);
        set("t_front_k", front_k);
        set("t_rear_k", front_k + between(2.0, 20.0));
    }
    let axis = Axis {
        low_km_s: -BAND_SIGMAS * SIGMA_KM_S,
        high_km_s: BAND_SIGMAS * SIGMA_KM_S,
        channel_km_s: CHANNEL_KM_S,
    };
    truth.thick.noise = NoiseLevel::SignalToNoise(signal_to_noise);
    truth.thin.noise = NoiseLevel::SignalToNoise(0.5 * signal_to_noise);
    for line in [&mut truth.thick, &mut truth.thin] {
        line.axis = axis;
        line.correlation = correlation;
    }
    truth
}

/// Speeds that models find in a drawn pair; `None` where the pair is refused.
fn fitted(
    truth: &PairTruth,
    lines: &(Line, Line),
    models: &[Model],
) -> Result<Option<Vec<Drawn>>, Box<dyn Error>> {
    let pair = simulate_pair(truth)?;
    let settings = PrepareSettings::default();
    let expected = |line: &Line| Expected {
        components: line.components.clone(),
        window: None,
    };
    let Ok((thick, thin)) = prepare_pair(
        (&pair.thick.spectrum, &settings, &expected(&lines.0)),
        (&pair.thin.spectrum, &settings, &expected(&lines.1)),
    ) else {
        return Ok(None);
    };
    let settings = FitSettings {
        models: models.to_vec(),
        ..FitSettings::default()
    };
    let thin_fit = fit_thin(&thin, &lines.1, &settings, &mut Workspace::new())?;
    let thin_line = thin_fit.line;
    let measures = measure(
        &thick,
        &thin,
        thin_line.as_ref(),
        0.0,
        &MeasureSettings::default(),
    );
    let fit = fit_pair(
        &thick,
        &thin,
        (&lines.0, &lines.1),
        thin_line.as_ref(),
        &settings,
        &mut Workspace::new(),
    )?;
    let cautions = cautions(&PairFacts {
        thick: &thick,
        thin: &thin,
        thin_fit: &thin_fit,
        measures: &measures,
        fit: &fit,
        judgement: Judgement::NotAsked,
        sphere: None,
    });
    let drawn = fit.models.iter().filter_map(|model| {
        let speed = model.parameter("v_in_km_s")?;
        Some(Drawn {
            truth: truth.thick.parameters["v_in_km_s"],
            tau: truth.thick.parameters["tau"],
            value: speed.value,
            err: speed.err,
            tau_found: model.parameter("tau")?.value,
            two_peaks: measures.two_peaks.is_some(),
            poor: cautions.iter().any(|caution| match caution {
                Caution::PoorFit { fits } => fits.iter().any(|(of, _)| *of == model.model),
                _ => false,
            }),
            cautioned: cautions.iter().any(|caution| {
                matches!(caution, Caution::SecondMinimum { model: of, .. } if *of == model.model)
            }),
        })
    });
    Ok(Some(drawn.collect()))
}

fn lines() -> Result<(Line, Line), Box<dyn Error>> {
    Ok((find("HCO+ 1-0")?, find("H13CO+ 1-0")?))
}

/// Kinds of noise.
pub const NOISES: [(&str, Correlation); 3] = [
    ("white", Correlation::White),
    ("Hanning", Correlation::Hanning),
    ("oversampled twice", Correlation::BandLimited),
];

/// Head of the table of formal errors.
pub const FORMAL_HEAD: &str = "| model | noise | S/N | pairs | in err | in 2 err | tau > 2: in err | in 2 err | error/sigma: median (16 to 84 %) | wrong sign beyond 2 err | of these without caution |\n| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |\n";

/// How often formal errors contain the truth where the model is right.
///
/// # Errors
///
/// As [`formal_errors_of`].
pub fn formal_errors() -> Result<String, Box<dyn Error>> {
    let mut text = FORMAL_HEAD.to_owned();
    for model in [Model::Hill, Model::TwoLayer] {
        for noise in NOISES {
            for signal_to_noise in [10.0, 30.0, 100.0] {
                text += &formal_errors_of(model, noise, signal_to_noise, PAIRS)?;
            }
        }
    }
    Ok(text)
}

/// One row of it.
///
/// # Errors
///
/// Where a pair cannot be simulated or fitted at all.
pub fn formal_errors_of(
    model: Model,
    (name, correlation): (&str, Correlation),
    signal_to_noise: f64,
    pairs: u64,
) -> Result<String, Box<dyn Error>> {
    let lines = lines()?;
    let mut all = Vec::new();
    for seed in 0..pairs {
        let truth = draw(model, &lines, (signal_to_noise, correlation), seed);
        all.extend(fitted(&truth, &lines, &[model])?.into_iter().flatten());
    }
    Ok(formal_row((model.name(), name, signal_to_noise), &all))
}

fn formal_row(head: (&str, &str, f64), all: &[Drawn]) -> String {
    let with: Vec<&Drawn> = all.iter().filter(|one| one.err.is_some()).collect();
    let thick: Vec<&Drawn> = with.iter().copied().filter(|one| one.tau > THICK).collect();
    // Positive where the speed is overestimated, whichever its sign.
    let outward: Vec<f64> = all
        .iter()
        .map(|one| one.error() * one.truth.signum() / SIGMA_KM_S)
        .collect();
    let wrong: Vec<&&Drawn> = with
        .iter()
        .filter(|one| {
            one.value * one.truth < 0.0 && one.err.is_some_and(|err| one.value.abs() > 2.0 * err)
        })
        .collect();
    let (model, noise, signal_to_noise) = head;
    format!(
        "| {model} | {noise} | {signal_to_noise} | {} | {} | {} | {} | {} | {} | {} | {} |\n",
        with.len(),
        percent(&with, |one| one.within(1.0)),
        percent(&with, |one| one.within(2.0)),
        percent(&thick, |one| one.within(1.0)),
        percent(&thick, |one| one.within(2.0)),
        spread(&outward),
        wrong.len(),
        wrong.iter().filter(|one| !one.cautioned).count(),
    )
}

/// One slab model fitted to the other's profiles: infall only.
///
/// # Errors
///
/// As [`formal_errors`].
pub fn published_behaviour() -> Result<String, Box<dyn Error>> {
    const MODELS: [Model; 2] = [Model::Hill, Model::TwoLayer];
    let lines = lines()?;
    let mut text = String::from(
        "| profiles of | S/N | thick line | fitted | pairs | v_in/v_true: median (16 to 84 %) | wrong sign | of these tau found below 0.5 | without caution | rms error, km/s | of the right sign |\n| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |\n",
    );
    for made in MODELS {
        for signal_to_noise in [30.0, 100.0] {
            let mut found: Vec<Vec<Drawn>> = Vec::new();
            for seed in 0..PAIRS {
                let mut truth = draw(made, &lines, (signal_to_noise, Correlation::White), seed);
                let infall = truth.thick.parameters["v_in_km_s"].abs();
                truth
                    .thick
                    .parameters
                    .insert("v_in_km_s".to_owned(), infall);
                found.extend(fitted(&truth, &lines, &MODELS)?);
            }
            for two_peaks in [true, false] {
                for (index, model) in MODELS.iter().enumerate() {
                    let chosen: Vec<&Drawn> = found
                        .iter()
                        .map(|models| &models[index])
                        .filter(|one| one.two_peaks == two_peaks && one.tau > THICK)
                        .collect();
                    let ratio: Vec<f64> = chosen.iter().map(|one| one.value / one.truth).collect();
                    let error: Vec<f64> = chosen.iter().map(|one| one.error()).collect();
                    let (wrong, right): (Vec<&Drawn>, Vec<&Drawn>) =
                        chosen.iter().partition(|one| one.value * one.truth < 0.0);
                    let error_of_right: Vec<f64> = right.iter().map(|one| one.error()).collect();
                    let _ = writeln!(
                        text,
                        "| {} | {signal_to_noise} | {} | {} | {} | {} | {} | {} | {} | {:.3} | {:.3} |",
                        made.name(),
                        if two_peaks { "two peaks" } else { "one peak" },
                        model.name(),
                        chosen.len(),
                        spread(&ratio),
                        wrong.len(),
                        wrong
                            .iter()
                            .filter(|one| one.tau_found < TRANSPARENT)
                            .count(),
                        wrong
                            .iter()
                            .filter(|one| !one.cautioned && !one.poor)
                            .count(),
                        rms(&error),
                        rms(&error_of_right),
                    );
                }
            }
        }
    }
    Ok(text)
}
