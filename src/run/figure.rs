//! The figure of a pair: what is drawn, handed to the report.

use super::calibrate::{self, Calibration, Kind, Share};
use super::products::profile_word;
use super::{Adopted, Judged, LineOutcome, PairOutcome};
use crate::fit::ModelFit;
use crate::fit::averaged::{Averaged, Row};
use crate::fit::clump::ClumpProfile;
use crate::fit::hypotheses::Speed;
use crate::fit::posterior::{Family, FamilyPosterior, Interval, interval};
use crate::model::Model;
use crate::numeric::Estimate;
use crate::report;

/// Width of the PNG, pixels: 88 mm at 580 dots an inch.
pub(super) const WIDTH_PX: u32 = 2000;

pub(super) fn pair_figure(outcome: &PairOutcome) -> report::figure::PairFigure {
    use report::figure::{PairFigure, Panel};
    let panel = |line: &LineOutcome, thick: bool| Panel {
        line_name: line.line.name.clone(),
        velocity_km_s: line.prepared.spectrum.velocity_km_s().to_vec(),
        width_km_s: line.prepared.spectrum.width_km_s().to_vec(),
        temperature_k: line.prepared.spectrum.temperature_k().to_vec(),
        noise_k: line.prepared.noise.rms_k,
        window: line.prepared.window,
        curves: outcome
            .fit
            .models
            .iter()
            .map(|fit| curve(outcome, line, fit, thick))
            .chain(outcome.sphere.iter().map(|sphere| {
                let [of_thick, of_thin] = &sphere.profiles;
                sphere_curve(line, if thick { of_thick } else { of_thin })
            }))
            .collect(),
    };
    PairFigure {
        source: outcome.name.clone(),
        thick: panel(&outcome.thick, true),
        thin: panel(&outcome.thin, false),
        v_lsr_km_s: systemic(outcome),
        v_thin_km_s: outcome.thin_fit.line.map(|line| line.v_km_s),
        posterior: outcome
            .judged
            .as_ref()
            .and_then(|judged| posterior_part(outcome, judged)),
        numbers: figure_numbers(outcome),
        cautions: outcome
            .all_cautions()
            .into_iter()
            .map(|(_, sentence)| sentence)
            .collect(),
    }
}

fn curve(
    outcome: &PairOutcome,
    line: &LineOutcome,
    fit: &ModelFit,
    thick: bool,
) -> report::figure::Curve {
    use crate::model::Sampling;
    let spectrum = &line.prepared.spectrum;
    let profile = |sampling: &Sampling| {
        if thick {
            fit.thick_profile_k(sampling)
        } else {
            fit.thin_profile_k(sampling)
        }
    };
    let (low, high) = outcome.fit.range.map_or_else(
        || {
            (
                spectrum.velocity_km_s()[0],
                spectrum.velocity_km_s()[spectrum.len() - 1],
            )
        },
        |range| (range.low_km_s, range.high_km_s),
    );
    let steps = 600;
    let fine: Vec<f64> = (0..=steps)
        .map(|step| low + (high - low) * f64::from(step) / f64::from(steps))
        .collect();
    let temperature_k = profile(&Sampling::at(fine.clone()));
    let points = if thick {
        outcome.fit.points.0
    } else {
        outcome.fit.points.1
    };
    let channels = Sampling::new(
        spectrum.velocity_km_s().to_vec(),
        spectrum.width_km_s().to_vec(),
        points,
    );
    let residuals = profile(&channels)
        .iter()
        .zip(spectrum.temperature_k())
        .map(|(model, datum)| (datum - model) / line.prepared.noise.rms_k)
        .collect();
    report::figure::Curve {
        label: model_label(fit.model).to_owned(),
        velocity_km_s: fine,
        temperature_k,
        residuals,
    }
}

/// The best sphere, which is known in the fitted channels.
fn sphere_curve(line: &LineOutcome, profile: &ClumpProfile) -> report::figure::Curve {
    let spectrum = &line.prepared.spectrum;
    let mut residuals = vec![f64::NAN; spectrum.len()];
    let mut channel = 0;
    for (velocity, model) in profile.velocity_km_s.iter().zip(&profile.temperature_k) {
        while spectrum.velocity_km_s()[channel] < *velocity {
            channel += 1;
        }
        let datum = spectrum.temperature_k()[channel];
        residuals[channel] = (datum - model) / line.prepared.noise.rms_k;
    }
    report::figure::Curve {
        label: "sphere".to_owned(),
        velocity_km_s: profile.velocity_km_s.clone(),
        temperature_k: profile.temperature_k.clone(),
        residuals,
    }
}

fn model_label(model: Model) -> &'static str {
    match model {
        Model::Gaussian => "Gaussian",
        Model::TwoGaussians => "two Gaussians",
        Model::Layer => "one layer",
        Model::TwoLayer => "two layers",
        Model::TwoLayerContinuum => "two layers, continuum",
        Model::Hill => "hill",
        Model::HillSurface => "hill, free surface",
    }
}

/// Systemic velocity of the posterior, or of the adopted least-squares fit.
fn systemic(outcome: &PairOutcome) -> Option<Estimate> {
    posterior_or_fit(outcome, "v_lsr_km_s")
}

/// A parameter of the adopted posterior, or of the adopted least-squares fit.
fn posterior_or_fit(outcome: &PairOutcome, name: &str) -> Option<Estimate> {
    outcome.adopted()?.estimate(name)
}

/// Points of a density, and draws that are shown.
const POINTS: u32 = 240;
const DOTS: usize = 400;

fn posterior_part(outcome: &PairOutcome, judged: &Judged) -> Option<report::figure::PosteriorPart> {
    let averaged = Averaged::new(&judged.posterior, &judged.verdict)?;
    let speeds = match outcome.standing_sphere() {
        Some(sphere) => sphere.weighted_speeds(),
        None => averaged.weighted("v_in_km_s")?,
    };
    let v_in = interval(&speeds)?;
    // a held speed has no density, and a held depth no place beside it
    averaged.deviation("v_in_km_s")?;
    let dots = averaged.deviation("tau").map_or(0, |_| DOTS);
    let models: Vec<(Model, &FamilyPosterior)> = judged
        .verdict
        .shares
        .iter()
        .filter_map(|(model, _)| Some((*model, judged.posterior.of(Family::Moving(*model))?)))
        .collect();
    // zero, what the models say, and a little more
    let ends = models.iter().filter_map(|(_, own)| own.v_in_km_s());
    let (low, high) = ends.fold((0.0f64, 0.0f64), |(low, high), own| {
        (low.min(own.interval95.0), high.max(own.interval95.1))
    });
    let (low, high) = (low.min(v_in.interval95.0), high.max(v_in.interval95.1));
    let margin = 0.12 * (high - low);
    let range_km_s = (low - margin, high + margin);
    let rows: Vec<Row<'_>> = averaged.rows(dots).collect();
    let draws: Vec<report::figure::SpeedAndDepth> = rows
        .iter()
        .filter_map(|row| {
            Some(report::figure::SpeedAndDepth {
                label: model_label(row.model).to_owned(),
                v_in_km_s: row.get("v_in_km_s")?,
                tau: row.get("tau")?,
            })
        })
        .collect();
    let detected = outcome.measures.peak_thick_k.is_some();
    let mut sentences = report::verdict_sentences(&judged.verdict, detected);
    for sentence in &mut sentences {
        sentence.push('.');
    }
    Some(report::figure::PosteriorPart {
        range_km_s,
        adopted: density(&speeds, range_km_s),
        interval68_km_s: v_in.interval68,
        interval95_km_s: v_in.interval95,
        models: models
            .iter()
            .map(|(model, own)| {
                let label = model_label(*model).to_owned();
                (label, density(&own.v_in, range_km_s))
            })
            .collect(),
        correlation: correlation(&draws),
        draws,
        sentences: vec![sentences.join(" ")],
    })
}

/// A smooth density of weighted values: Gaussian kernels of Silverman's width (1986, eq. 3.31).
fn density(values: &[(f64, f64)], (low, high): (f64, f64)) -> Vec<(f64, f64)> {
    let Some(spread) = interval(values) else {
        return Vec::new();
    };
    let total: f64 = values.iter().map(|(_, weight)| weight).sum();
    let squares: f64 = values.iter().map(|(_, weight)| weight * weight).sum();
    let half = 0.5 * (spread.interval68.1 - spread.interval68.0);
    let width = (0.9 * half * (total * total / squares).powf(-0.2)).max(1e-6 * (high - low));
    let scale = 1.0 / (total * width * std::f64::consts::TAU.sqrt());
    (0..=POINTS)
        .map(|step| {
            let v = low + (high - low) * f64::from(step) / f64::from(POINTS);
            let kernels = values.iter().map(|(value, weight)| {
                let z = (v - value) / width;
                weight * (-0.5 * z * z).exp()
            });
            (v, scale * kernels.sum::<f64>())
        })
        .collect()
}

/// Correlation of speed and logarithm of the optical depth.
fn correlation(draws: &[report::figure::SpeedAndDepth]) -> Option<f64> {
    let count = draws.len() as f64;
    let pairs = || draws.iter().map(|draw| (draw.v_in_km_s, draw.tau.ln()));
    let (v, tau) = pairs().fold((0.0, 0.0), |sum, one| (sum.0 + one.0, sum.1 + one.1));
    let (mean_v, mean_tau) = (v / count, tau / count);
    let mut sums = [0.0; 3];
    for (v, tau) in pairs() {
        let (v, tau) = (v - mean_v, tau - mean_tau);
        sums[0] += v * v;
        sums[1] += v * tau;
        sums[2] += tau * tau;
    }
    let scale = (sums[0] * sums[2]).sqrt();
    (scale > 0.0).then(|| sums[1] / scale)
}

fn figure_numbers(outcome: &PairOutcome) -> Vec<(String, String)> {
    let shown = |estimate: Estimate, unit: &str| {
        let number = report::rounded(estimate.value, estimate.err);
        if unit.is_empty() {
            number
        } else {
            format!("{number} {unit}")
        }
    };
    let mut numbers = Vec::new();
    let judged = outcome.judged.as_ref();
    let detected = outcome.measures.peak_thick_k.is_some();
    let interval = |v_in: &Interval| {
        let (low, high) = v_in.interval68;
        format!("{} km/s", report::rounded_interval(v_in.median, low, high))
    };
    let adopted = outcome.adopted();
    let slabs = judged.and_then(Judged::adopted);
    let posterior = !matches!(adopted, None | Some(Adopted::Formal(_)));
    if let Some(adopted) = adopted.as_ref().filter(|_| posterior) {
        let speed = adopted.speed().filter(|_| detected);
        let known = speed.filter(|speed| *speed != Speed::Unconstrained);
        let v_in = adopted.marginal("v_in_km_s").filter(|_| known.is_some());
        let value = v_in.map_or_else(|| "unconstrained".to_owned(), |v_in| interval(&v_in));
        let sphere = matches!(adopted, Adopted::Sphere(_));
        let label = if sphere {
            "inward speed (sphere)"
        } else {
            "inward speed"
        };
        numbers.push((label.to_owned(), value));
        if let Some(Speed::Below { limit_km_s }) = adopted.speed() {
            numbers.push((
                "limit, either way".to_owned(),
                format!("{} km/s", report::rounded_plain(limit_km_s)),
            ));
        }
        let slabs = slabs.as_ref().filter(|_| sphere);
        if let Some(v_in) = slabs.and_then(|slabs| slabs.marginal("v_in_km_s")) {
            numbers.push(("slabs, as in the literature".to_owned(), interval(&v_in)));
        }
    }
    if let Some(judged) = judged.filter(|_| slabs.is_some()) {
        let shares = &judged.verdict.shares;
        let measured = judged.speed == Speed::Measured && detected;
        if shares.len() > 1 && measured {
            numbers.push((
                "between models".to_owned(),
                format!(
                    "+- {} km/s",
                    report::rounded_plain(judged.verdict.between_models_km_s)
                ),
            ));
        }
        if shares.len() > 1 {
            let each: Vec<String> = shares
                .iter()
                .map(|(model, share)| format!("{} {share:.2}", model_label(*model)))
                .collect();
            numbers.push(("evidence".to_owned(), each.join(", ")));
        }
    } else {
        for fit in &outcome.fit.models {
            if let Some(v_in) = fit.estimate("v_in_km_s") {
                numbers.push((
                    format!("inward speed, {}", model_label(fit.model)),
                    shown(v_in, "km/s"),
                ));
            }
        }
    }
    if let Some(sphere) = outcome.sphere.as_ref().filter(|_| !outcome.sphere_stands) {
        numbers.push((
            "inward speed, sphere (not adopted)".to_owned(),
            interval(&sphere.v_in_km_s),
        ));
    }
    for (name, label) in [("v_lsr_km_s", "v_{LSR}"), ("sigma_km_s", "dispersion")] {
        if let Some(estimate) = posterior_or_fit(outcome, name) {
            numbers.push((label.to_owned(), shown(estimate, "km/s")));
        }
    }
    if let Some(delta_v) = outcome.measures.delta_v {
        numbers.push(("velocity difference".to_owned(), shown(delta_v, "")));
    }
    if posterior {
        numbers.push(("errors".to_owned(), "68 % intervals".to_owned()));
    } else if adopted.is_some() {
        numbers.push((
            "errors".to_owned(),
            "formal, one standard deviation".to_owned(),
        ));
    }
    numbers.push((
        "profile".to_owned(),
        profile_word(outcome.measures.profile).to_owned(),
    ));
    numbers
}

/// The figure of a calibration.
pub(super) fn calibration_figure(calibration: &Calibration) -> report::figure::CalibrationFigure {
    let speeds = |moving: bool| {
        let own = calibration
            .injections
            .iter()
            .filter(|one| one.noise_factor == 1.0 && (one.kind == Kind::Moving) == moving);
        own.filter_map(|one| one.found.as_ref().ok()?.v_in_km_s)
            .collect()
    };
    let share = |share: Share| {
        let (low, high) = share.interval95();
        (share.value().unwrap_or(0.0), low, high)
    };
    let points = calibration.levels.iter().map(|level| {
        let moving = &level.moving;
        let speed = moving.bias_km_s.zip(moving.scatter_km_s);
        report::figure::CalibrationPoint {
            signal_to_noise: level.signal_to_noise,
            speed_km_s: speed.map(|(bias, scatter)| (calibration.v_in_km_s + bias, scatter)),
            found: share(moving.found),
            false_alarms: share(level.at_rest.found),
        }
    });
    let errors = if calibration.formal {
        "formal errors"
    } else {
        "posteriors"
    };
    let pairs = calibration.own().map_or(0, |own| own.moving.pairs);
    report::figure::CalibrationFigure {
        source: calibration.source.clone(),
        injected: format!(
            "{} and {}: {pairs} pairs of the {} model as fitted and {pairs} of it at rest, with this observation's noise and channels, fitted again ({errors})",
            calibration.lines.0,
            calibration.lines.1,
            model_label(calibration.model)
        ),
        true_v_in_km_s: calibration.v_in_km_s,
        moving_km_s: speeds(true),
        at_rest_km_s: speeds(false),
        signal_to_noise: calibration.signal_to_noise,
        points: points.collect(),
        found: calibrate::found_label(calibration),
        numbers: calibration_numbers(calibration),
    }
}

fn calibration_numbers(calibration: &Calibration) -> Vec<(String, String)> {
    let Some(own) = calibration.own() else {
        return Vec::new();
    };
    let moving = &own.moving;
    let mut numbers = Vec::new();
    let mut add = |label: &str, value: String| numbers.push((label.to_owned(), value));
    if let (Some(bias), Some(err)) = (moving.bias_km_s, moving.bias_err_km_s) {
        add("bias", format!("{} km/s", report::rounded(bias, err)));
    }
    for (label, value) in [
        ("scatter", moving.scatter_km_s),
        ("stated error", moving.stated_km_s),
    ] {
        if let Some(value) = value {
            add(label, format!("{} km/s", report::rounded_plain(value)));
        }
    }
    add("truth in 68 %", calibrate::percent(moving.in68));
    add("truth in 95 %", calibrate::percent(moving.in95));
    add("false alarms", calibrate::percent(own.at_rest.found));
    add("half found from", calibrate::needed(calibration, 0.5));
    add(
        "nine in ten from",
        calibrate::needed(calibration, calibrate::NINE_IN_TEN),
    );
    numbers
}
