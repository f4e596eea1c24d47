//! A truth into spectra: profile, baseline and correlated noise of a thick and a thin line. [`grid`]
//! makes those of a map.
//!
//! Everything follows from the [`PairTruth`], its seed included: no files, no clock, no threads.
//! Each line draws its noise from a stream of its own, so changing one line leaves the other as it is.

mod correlation;
mod defaults;
mod error;
pub mod grid;
mod sample;
mod truth;

pub use correlation::Correlation;
pub use error::{PairLine, SimulateError};
pub use sample::{Kind, Range, SampleSettings, SampleTruth, Slab, Spacing};
pub use truth::{Axis, Baseline, LineTruth, NoiseLevel, PairTruth};

use crate::model::{LineShape, Sampling};
use crate::spectrum::Spectrum;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;

/// A simulated pair.
#[derive(Clone, Debug, PartialEq)]
pub struct SimulatedPair {
    /// The thick line.
    pub thick: SimulatedLine,
    /// The thin line.
    pub thin: SimulatedLine,
}

/// One simulated line.
#[derive(Clone, Debug, PartialEq)]
pub struct SimulatedLine {
    /// Line, baseline and noise.
    pub spectrum: Spectrum,
    /// The line alone, without baseline and noise.
    pub noiseless: Spectrum,
    /// Noise of one channel, K.
    pub noise_k: f64,
    /// Every parameter of the line's model, in the model's order; shared and linked ones included.
    pub parameters: Vec<f64>,
}

/// Quadrature parts a dispersion: profiles of optical depth 200 are averaged to 1e-9 of their peak.
const PARTS_PER_SIGMA: f64 = 8.0;

/// Spectra of a truth.
///
/// A channel's value is the mean of the profile over the channel, plus the baseline at its centre,
/// plus noise. Correlation is that of the noise: the line is not smoothed.
///
/// ```
/// use inrush::{line::find, model::Model, simulate::{PairTruth, simulate_pair}};
///
/// let lines = (find("HCO+ 1-0")?, find("H13CO+ 1-0")?);
/// let pair = simulate_pair(&PairTruth::new((Model::Hill, Model::Layer), lines, 7))?;
/// let thick = &pair.thick.noiseless;
/// let brightest = thick.temperature_k().iter().copied().fold(0.0, f64::max);
/// let channel = thick.temperature_k().iter().position(|value| *value == brightest);
/// assert!(channel.is_some_and(|channel| thick.velocity_km_s()[channel] < 0.0)); // infall is blue
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
///
/// # Errors
///
/// [`SimulateError`] where the truth is incomplete or impossible.
pub fn simulate_pair(truth: &PairTruth) -> Result<SimulatedPair, SimulateError> {
    let (thick, thin) = truth.parameters()?;
    truth.check(&thick, &thin)?;
    Ok(SimulatedPair {
        thick: simulate_line(&truth.thick, PairLine::Thick, thick, truth.seed)?,
        thin: simulate_line(&truth.thin, PairLine::Thin, thin, truth.seed)?,
    })
}

fn simulate_line(
    truth: &LineTruth,
    which: PairLine,
    parameters: Vec<f64>,
    seed: u64,
) -> Result<SimulatedLine, SimulateError> {
    let velocity_km_s = truth.axis.velocity_km_s();
    let width_km_s = vec![truth.axis.channel_km_s; velocity_km_s.len()];
    let profile_k = profile_k(truth, &velocity_km_s, &parameters);
    let noise_k = match truth.noise {
        NoiseLevel::RmsK(rms_k) => rms_k,
        NoiseLevel::SignalToNoise(ratio) => {
            let peak_k = profile_k
                .iter()
                .fold(0.0f64, |peak, value| peak.max(value.abs()));
            if peak_k == 0.0 {
                return Err(SimulateError::NoPeak { line: which });
            }
            peak_k / ratio
        }
    };
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    generator.set_stream(which.stream());
    let noise = truth
        .correlation
        .unit_noise(&mut generator, velocity_km_s.len());
    let baseline_k = velocity_km_s
        .iter()
        .map(|velocity| truth.baseline.at_k(velocity - truth.axis.middle_km_s()));
    let temperature_k = profile_k
        .iter()
        .zip(baseline_k)
        .zip(noise)
        .map(|((profile, baseline), noise)| profile + baseline + noise_k * noise)
        .collect();
    let made = |error| SimulateError::Spectrum { line: which, error };
    let noiseless = Spectrum::new(velocity_km_s, width_km_s, profile_k).map_err(made)?;
    let spectrum = noiseless.with_temperature_k(temperature_k).map_err(made)?;
    Ok(SimulatedLine {
        spectrum,
        noiseless,
        noise_k,
        parameters,
    })
}

/// Means of the profile over the channels, K: channels are cut into parts narrow against the
/// dispersion, and each part is averaged by Gauss-Legendre quadrature.
fn profile_k(truth: &LineTruth, velocity_km_s: &[f64], parameters: &[f64]) -> Vec<f64> {
    let narrowest_km_s = truth
        .model
        .parameters()
        .iter()
        .zip(parameters)
        .filter(|(parameter, _)| parameter.name.starts_with("sigma"))
        .map(|(_, value)| *value)
        .fold(f64::INFINITY, f64::min);
    let width_km_s = truth.axis.channel_km_s;
    let parts = truth::parts(width_km_s, narrowest_km_s);
    let part_km_s = width_km_s / parts as f64;
    let centres = velocity_km_s
        .iter()
        .flat_map(|velocity| {
            (0..parts)
                .map(move |part| velocity - 0.5 * width_km_s + part_km_s * (part as f64 + 0.5))
        })
        .collect();
    let widths = vec![part_km_s; parts * velocity_km_s.len()];
    let sampling = Sampling::new(centres, widths, Sampling::MOST_POINTS);
    let shape = LineShape::new(truth.line.rest_frequency_ghz, truth.line.components.clone());
    let mut value = vec![0.0; sampling.len()];
    truth
        .model
        .evaluate(&shape, &sampling, parameters, &mut value, None);
    value
        .chunks_exact(parts)
        .map(|parts| parts.iter().sum::<f64>() / parts.len() as f64)
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::line::find;
    use crate::model::Model;

    /// The part of a channel that quadrature works on, against the same cut into 16.
    #[test]
    fn parts_of_a_channel_are_narrow_enough_at_optical_depth_200() {
        let line = find("HCO+ 1-0").unwrap();
        let shape = LineShape::new(line.rest_frequency_ghz, line.components);
        let (part_km_s, finer) = (1.0 / PARTS_PER_SIGMA, 16u32);
        let centres: Vec<f64> = (-60..=60).map(|i| part_km_s * f64::from(i)).collect();
        let fine_centres = centres
            .iter()
            .flat_map(|centre| {
                (0..finer).map(move |i| {
                    centre + part_km_s * ((f64::from(i) + 0.5) / f64::from(finer) - 0.5)
                })
            })
            .collect();
        let values = |centres: Vec<f64>, width_km_s: f64| {
            let widths = vec![width_km_s; centres.len()];
            let sampling = Sampling::new(centres, widths, Sampling::MOST_POINTS);
            let mut value = vec![0.0; sampling.len()];
            let parameters = [0.0, 1.0, 0.7, 200.0, 16.0];
            Model::Hill.evaluate(&shape, &sampling, &parameters, &mut value, None);
            value
        };
        let coarse = values(centres, part_km_s);
        let fine = values(fine_centres, part_km_s / f64::from(finer));
        let peak = coarse.iter().copied().fold(0.0, f64::max);
        let mut worst = 0.0f64;
        for (coarse, fine) in coarse.iter().zip(fine.chunks_exact(finer as usize)) {
            let mean = fine.iter().sum::<f64>() / f64::from(finer);
            worst = worst.max((coarse - mean).abs());
        }
        assert!(worst < 1e-9 * peak, "{}", worst / peak);
    }
}
