//! Pairs drawn from the priors.

use super::Setup;
use inrush::fit::posterior::{Family, ShapeErrors};
use inrush::fit::priors::Priors;
use inrush::line::{Line, find};
use inrush::model::{LineShape, Model, Sampling};
use inrush::spectrum::Spectrum;
use rand::RngExt as _;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng as _;
use rand_distr::{Distribution as _, StandardNormal};
use std::error::Error;

/// A drawn pair.
pub struct DrawnPair {
    /// What it was drawn from.
    pub family: Family,
    /// True inward speed, km/s.
    pub v_in_km_s: f64,
    /// Dispersion, km/s.
    pub sigma_km_s: f64,
    /// Peak over noise of the thick line.
    pub signal_to_noise: f64,
    /// Noise of both lines, K.
    pub noise_k: (f64, f64),
    pub thick: Spectrum,
    pub thin: Spectrum,
}

/// The band reaches this many dispersions to either side.
const BAND_SIGMAS: f64 = 25.0;

/// Lines of every pair.
pub fn lines() -> Result<(Line, Line), Box<dyn Error>> {
    Ok((find("HCO+ 1-0")?, find("H13CO+ 1-0")?))
}

/// A pair of a family with every parameter from its prior, v_lsr within a dispersion of the middle,
/// signal-to-noise uniform in its logarithm: 5 to 100 in the thick line and 0.2 to 1 of that in the
/// thin line, channels of 0.08 to 0.25 dispersions, uniform in the logarithm too.
pub fn draw(
    family: Family,
    inward: Option<bool>,
    lines: &(Line, Line),
    setup: Setup,
    seed: u64,
) -> Result<DrawnPair, Box<dyn Error>> {
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    let priors = Priors::default();
    let of = |name: &str, generator: &mut ChaCha8Rng| priors.of(name).draw(generator);
    let sigma = of("sigma_km_s", &mut generator);
    let v = sigma * (2.0 * generator.random::<f64>() - 1.0);
    let mut speed = of("v_in_over_sigma", &mut generator);
    if let Some(inward) = inward {
        speed = if inward { speed.abs() } else { -speed.abs() };
    }
    let tau = of("tau", &mut generator);
    let x = of("excess_thick_k", &mut generator);
    let y = of("excess_thick_k", &mut generator);
    let thin_peak = of("peak_thin_k", &mut generator);
    let other_peak = thin_peak * of("thin_brightness_ratio", &mut generator);
    let second = v + sigma * of("separation_over_sigma", &mut generator);
    let wide = sigma * of("sigma_ratio", &mut generator);
    let thin_width = of("thin_width_ratio", &mut generator);
    let depth = of("tau_cloud", &mut generator);
    let log_uniform = |low: f64, high: f64, generator: &mut ChaCha8Rng| {
        low * (high / low).powf(generator.random::<f64>())
    };
    let signal_to_noise = log_uniform(5.0, 100.0, &mut generator);
    let share = log_uniform(0.2, 1.0, &mut generator);
    // uniform in the logarithm, or the width of a channel would tell of the dispersion, which no fit knows
    let channel = sigma * log_uniform(0.08, 0.25, &mut generator);
    let shapes = [&lines.0, &lines.1]
        .map(|line| LineShape::new(line.rest_frequency_ghz, line.components.clone()));
    let radiation = &shapes[0].radiation;
    let t = |excess: f64| radiation.inverse(radiation.background() + excess);
    let v_in = if matches!(family, Family::Moving(_)) {
        speed * sigma
    } else {
        0.0
    };
    let axis = Axis::new(BAND_SIGMAS * sigma, channel);
    let thick = match family {
        Family::Moving(model) | Family::Still(model) => {
            let rest = match model {
                Model::TwoLayer => vec![t(x), t(x + y)],
                _ => vec![t(x)],
            };
            let parameters = [vec![v, sigma, v_in, tau], rest].concat();
            axis.values(model, &shapes[0], &parameters)
        }
        Family::Unabsorbed => axis.values(Model::Gaussian, &shapes[0], &[v, sigma, x]),
        Family::TwoClouds => {
            let front = axis.values(Model::Layer, &shapes[0], &[v, sigma, depth, t(1.0)]);
            let rear = axis.values(Model::Layer, &shapes[0], &[second, wide, depth, t(1.0)]);
            let pairs = front.iter().zip(&rear);
            pairs.map(|(f, r)| x * f + y * r * (1.0 - f)).collect()
        }
    };
    let mut thin = axis.values(
        Model::Gaussian,
        &shapes[1],
        &[v, thin_width * sigma, thin_peak],
    );
    if family == Family::TwoClouds {
        let other = axis.values(
            Model::Gaussian,
            &shapes[1],
            &[second, thin_width * wide, other_peak],
        );
        for (value, other) in thin.iter_mut().zip(other) {
            *value += other;
        }
    }
    let mut observed = |profile: Vec<f64>, ratio: f64| {
        let peak = profile
            .iter()
            .fold(0.0f64, |peak, value| peak.max(value.abs()));
        let mut means = means(&profile);
        for bump in
            shape_errors(&axis.velocity, &means, sigma, setup.shape_error).bumps(&axis.velocity)
        {
            let amplitude: f64 = StandardNormal.sample(&mut generator);
            for (value, bump) in means.iter_mut().zip(bump) {
                *value += amplitude * bump;
            }
        }
        let noise = setup.correlation.unit_noise(&mut generator, means.len());
        let values = means
            .iter()
            .zip(noise)
            .map(|(mean, noise)| mean + peak / ratio * noise)
            .collect();
        Spectrum::new(axis.velocity.clone(), vec![channel; means.len()], values)
            .map(|spectrum| (spectrum, peak / ratio))
    };
    let (thick, noise_k) = observed(thick, signal_to_noise)?;
    let (thin, thin_noise_k) = observed(thin, share * signal_to_noise)?;
    Ok(DrawnPair {
        family,
        v_in_km_s: v_in,
        sigma_km_s: sigma,
        signal_to_noise,
        noise_k: (noise_k, thin_noise_k),
        thick,
        thin,
    })
}

/// Shape errors of a noiseless line.
fn shape_errors(velocity: &[f64], profile: &[f64], sigma: f64, share: f64) -> ShapeErrors {
    let sum = |power: i32| -> f64 {
        let terms = velocity.iter().zip(profile);
        terms.map(|(v, t)| t * v.powi(power)).sum()
    };
    let middle = sum(1) / sum(0);
    let peak = profile.iter().copied().fold(0.0, f64::max);
    ShapeErrors {
        deviation_k: share * peak,
        middle_km_s: middle,
        reach_km_s: 1.5 * (sum(2) / sum(0) - middle * middle).sqrt(),
        sigma_km_s: sigma,
    }
}

/// Parts of a channel.
const PARTS: usize = 8;

/// More channels than any drawn band has.
const MOST_CHANNELS: u32 = 10_000;

/// Channels, and the parts of them that profiles are averaged over.
struct Axis {
    velocity: Vec<f64>,
    parts: Sampling,
}

impl Axis {
    fn new(reach: f64, channel: f64) -> Self {
        let velocity: Vec<f64> = (0..MOST_CHANNELS)
            .map(|index| -reach + f64::from(index) * channel)
            .take_while(|v| *v <= reach)
            .collect();
        let parts = velocity
            .iter()
            .flat_map(|v| {
                (0..PARTS).map(move |part| v + channel * ((part as f64 + 0.5) / PARTS as f64 - 0.5))
            })
            .collect();
        Self {
            velocity,
            parts: Sampling::at(parts),
        }
    }

    fn values(&self, model: Model, shape: &LineShape, parameters: &[f64]) -> Vec<f64> {
        let mut value = vec![0.0; self.parts.len()];
        model.evaluate(shape, &self.parts, parameters, &mut value, None);
        value
    }
}

/// Means over the channels.
fn means(values: &[f64]) -> Vec<f64> {
    let parts = values.chunks_exact(PARTS);
    parts
        .map(|parts| parts.iter().sum::<f64>() / PARTS as f64)
        .collect()
}
