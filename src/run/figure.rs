//! The figure of a pair: what is drawn, handed to the report.

use super::products::profile_word;
use super::{LineOutcome, PairOutcome};
use crate::fit::ModelFit;
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
            .collect(),
    };
    let adopted = outcome.fit.adopted();
    PairFigure {
        source: outcome.name.clone(),
        thick: panel(&outcome.thick, true),
        thin: panel(&outcome.thin, false),
        v_lsr_km_s: adopted.and_then(|fit| fit.estimate("v_lsr_km_s")),
        v_thin_km_s: outcome.thin_fit.line.map(|line| line.v_km_s),
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
    for fit in &outcome.fit.models {
        if let Some(v_in) = fit.estimate("v_in_km_s") {
            numbers.push((
                format!("inward speed, {}", model_label(fit.model)),
                shown(v_in, "km/s"),
            ));
        }
    }
    let adopted = outcome.fit.adopted();
    for (name, label) in [("v_lsr_km_s", "v_{LSR}"), ("sigma_km_s", "dispersion")] {
        if let Some(estimate) = adopted.and_then(|fit| fit.estimate(name)) {
            numbers.push((label.to_owned(), shown(estimate, "km/s")));
        }
    }
    if let Some(delta_v) = outcome.measures.delta_v {
        numbers.push(("velocity difference".to_owned(), shown(delta_v, "")));
    }
    if adopted.is_some() {
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
