//! A simulated survey of any number of pairs, for timings of many of them.

use inrush::line::{Line, find};
use inrush::model::Model;
use inrush::run::{LineInput, PairInput};
use inrush::simulate::{Axis, NoiseLevel, PairTruth, SimulatedLine, simulate_pair};
use inrush::spectrum::{Spectrum, SpectrumError};
use rand::{RngExt as _, SeedableRng as _};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution as _, StandardNormal};
use std::error::Error;

/// Clumps that differ in truth; after them they come again, with other noise.
const CLUMPS: u64 = 300;

/// 200 channels.
const AXIS: Axis = Axis {
    low_km_s: -10.0,
    high_km_s: 9.9,
    channel_km_s: 0.1,
};

/// Clumps whose pairs are hills beside Gaussians.
#[derive(Debug)]
pub struct Survey {
    clumps: Vec<Clump>,
    lines: (Line, Line),
}

#[derive(Debug)]
struct Clump {
    v_in_km_s: f64,
    thick: SimulatedLine,
    thin: SimulatedLine,
}

impl Survey {
    /// Draws the clumps: dispersions of 0.3 to 0.6 km/s, inward speeds of -1 to 1 dispersion, optical
    /// depths of 0.5 to 30 and signal-to-noise ratios of 5 to 100 (both uniform in their logarithm), the
    /// thin line's half of the thick line's.
    pub fn draw() -> Result<Self, Box<dyn Error + Send + Sync>> {
        let lines = (find("HCO+ 1-0")?, find("H13CO+ 1-0")?);
        let mut generator = ChaCha8Rng::seed_from_u64(1);
        let mut between = |low: f64, high: f64| low + (high - low) * generator.random::<f64>();
        let mut clumps = Vec::new();
        for seed in 0..CLUMPS {
            let mut truth = PairTruth::new((Model::Hill, Model::Gaussian), lines.clone(), seed);
            let sigma_km_s = between(0.3, 0.6);
            let v_in_km_s = sigma_km_s * between(-1.0, 1.0);
            let tau = between(0.5f64.ln(), 30f64.ln()).exp();
            let signal_to_noise = between(5f64.ln(), 100f64.ln()).exp();
            for (name, value) in [
                ("v_lsr_km_s", between(-1.0, 1.0)),
                ("sigma_km_s", sigma_km_s),
                ("v_in_km_s", v_in_km_s),
                ("tau", tau),
                ("t_peak_k", between(8.0, 40.0)),
            ] {
                truth.thick.parameters.insert(name.to_owned(), value);
            }
            (truth.thick.axis, truth.thin.axis) = (AXIS, AXIS);
            truth.thick.noise = NoiseLevel::SignalToNoise(signal_to_noise);
            truth.thin.noise = NoiseLevel::SignalToNoise(0.5 * signal_to_noise);
            let pair = simulate_pair(&truth)?;
            clumps.push(Clump {
                v_in_km_s,
                thick: pair.thick,
                thin: pair.thin,
            });
        }
        Ok(Self { clumps, lines })
    }

    /// The true inward speed of a pair, km/s.
    #[allow(dead_code, reason = "for the bench alone")]
    pub fn v_in_km_s(&self, number: u64) -> f64 {
        self.clump(number).v_in_km_s
    }

    /// A pair with noise of its own.
    pub fn pair(&self, number: u64) -> Result<PairInput, SpectrumError> {
        let clump = self.clump(number);
        let mut generator = ChaCha8Rng::seed_from_u64(number);
        let name = name(number);
        let mut line = |line: &Line, simulated: &SimulatedLine| {
            noisy(simulated, &mut generator)
                .map(|spectrum| LineInput::in_memory(line.clone(), spectrum, &name))
        };
        Ok(PairInput {
            source: inrush::derive::SourceProperties::default(),
            thick: line(&self.lines.0, &clump.thick)?,
            thin: line(&self.lines.1, &clump.thin)?,
            name: Some(name),
        })
    }

    fn clump(&self, number: u64) -> &Clump {
        let place = usize::try_from(number % CLUMPS).unwrap_or_default();
        &self.clumps[place]
    }
}

/// The name of a pair.
pub fn name(number: u64) -> String {
    format!("pair {number}")
}

fn noisy(line: &SimulatedLine, generator: &mut ChaCha8Rng) -> Result<Spectrum, SpectrumError> {
    let noise = StandardNormal.sample_iter(generator);
    let temperature_k = (line.noiseless.temperature_k().iter().zip(noise))
        .map(|(value, noise): (_, f64)| value + line.noise_k * noise)
        .collect();
    line.noiseless.with_temperature_k(temperature_k)
}
