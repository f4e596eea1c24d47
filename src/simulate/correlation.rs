//! Noise whose channels are correlated as smoothing, oversampling or a receiver leaves them.

use rand::Rng;
use rand_distr::{Distribution, StandardNormal};
use serde::{Deserialize, Serialize};
use std::fmt;

/// How the noise of one channel goes with that of its neighbours.
///
/// Whatever the kind, every channel's noise has the stated rms: it is that after correlation.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Correlation {
    /// Independent channels.
    #[default]
    White,
    /// Smoothed by 1/4, 1/2, 1/4 (Hanning): 2/3 at lag 1, 1/6 at lag 2.
    Hanning,
    /// A running mean over channels: 1 - k/n at lag k.
    Boxcar {
        /// Channels in the mean, n.
        channels: usize,
    },
    /// Each independent channel cut in two, values by linear interpolation between the centres of the
    /// independent ones: 0.75, 0.3, 0.05 at lags 1, 2, 3, in the mean over both halves.
    Linear,
    /// The same by band-limited interpolation: sin(pi k/2)/(pi k/2) at lag k, to 0.001.
    BandLimited,
    /// Autoregressive of order 1: `coefficient`^k at lag k.
    Autoregressive {
        /// Correlation of neighbours, between -1 and 1.
        coefficient: f64,
    },
}

/// As options name it.
impl fmt::Display for Correlation {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::White => formatter.write_str("white"),
            Self::Hanning => formatter.write_str("hanning"),
            Self::Boxcar { channels } => write!(formatter, "boxcar:{channels}"),
            Self::Linear => formatter.write_str("linear"),
            Self::BandLimited => formatter.write_str("band-limited"),
            Self::Autoregressive { coefficient } => {
                write!(formatter, "autoregressive:{coefficient}")
            }
        }
    }
}

/// Independent channels on either side that band-limited interpolation takes in.
const REACH: usize = 512;

impl Correlation {
    /// Most channels that a running mean may take in.
    pub const WIDEST_BOXCAR: usize = 1000;

    /// Noise of unit rms in `channels` channels.
    pub fn unit_noise(self, generator: &mut impl Rng, channels: usize) -> Vec<f64> {
        let mut draw = || -> f64 { StandardNormal.sample(generator) };
        if let Self::Autoregressive { coefficient } = self {
            // x_i = a x_(i-1) + sqrt(1 - a^2) w_i, from the stationary distribution on
            let innovation = (1.0 - coefficient * coefficient).sqrt();
            let first = if channels > 0 { vec![draw()] } else { vec![] };
            return (1..channels).fold(first, |mut noise, channel| {
                let next = coefficient * noise[channel - 1] + innovation * draw();
                noise.push(next);
                noise
            });
        }
        let kernels = self.kernels();
        let phases = kernels.len();
        let independent = channels.div_ceil(phases) + kernels[0].len() - 1;
        let white: Vec<f64> = (0..independent).map(|_| draw()).collect();
        (0..channels)
            .map(|channel| {
                let kernel = &kernels[channel % phases];
                dot(kernel, &white[channel / phases..])
            })
            .collect()
    }

    /// Correlation of two channels `lag` apart, in the mean over channels.
    pub fn at_lag(self, lag: usize) -> f64 {
        if let Self::Autoregressive { coefficient } = self {
            return coefficient.powi(i32::try_from(lag).unwrap_or(i32::MAX));
        }
        let kernels = self.kernels();
        let phases = kernels.len();
        let covariance = (0..phases).map(|phase| {
            let other = phase + lag;
            let shift = other / phases;
            let shifted = kernels[phase].get(shift..).unwrap_or_default();
            dot(shifted, &kernels[other % phases])
        });
        covariance.sum::<f64>() / phases as f64
    }

    /// Weights on independent deviates, one kernel for every channel that an independent one is cut
    /// into, all of one length and of unit sum of squares.
    fn kernels(self) -> Vec<Vec<f64>> {
        let kernels = match self {
            Self::White | Self::Autoregressive { .. } => vec![vec![1.0]],
            Self::Hanning => vec![vec![0.25, 0.5, 0.25]],
            Self::Boxcar { channels } => vec![vec![1.0; channels]],
            Self::Linear => vec![vec![0.25, 0.75, 0.0], vec![0.0, 0.75, 0.25]],
            Self::BandLimited => vec![interpolation(-0.25), interpolation(0.25)],
        };
        kernels.into_iter().map(unit_energy).collect()
    }
}

/// sin(pi x)/(pi x) about an offset in independent channels, tapered by a Hann window.
fn interpolation(offset: f64) -> Vec<f64> {
    (0..=2 * REACH)
        .map(|index| {
            let x = std::f64::consts::PI * (index as f64 - REACH as f64 - offset);
            let taper = (0.5 * x / (REACH as f64 + 1.0)).cos();
            x.sin() / x * taper * taper
        })
        .collect()
}

fn unit_energy(kernel: Vec<f64>) -> Vec<f64> {
    let norm = dot(&kernel, &kernel).sqrt();
    kernel.into_iter().map(|weight| weight / norm).collect()
}

/// Sum of products over the shorter length.
fn dot(first: &[f64], second: &[f64]) -> f64 {
    first.iter().zip(second).map(|(a, b)| a * b).sum()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Correlations worked out by hand from each definition.
    #[test]
    fn correlations_are_those_of_the_definitions() {
        let pi = std::f64::consts::PI;
        let cases: [(Correlation, [f64; 4], f64); 6] = [
            (Correlation::White, [1.0, 0.0, 0.0, 0.0], 1e-15),
            (
                Correlation::Hanning,
                [1.0, 2.0 / 3.0, 1.0 / 6.0, 0.0],
                1e-15,
            ),
            (
                Correlation::Boxcar { channels: 4 },
                [1.0, 0.75, 0.5, 0.25],
                1e-15,
            ),
            (Correlation::Linear, [1.0, 0.75, 0.3, 0.05], 1e-15),
            // the taper over 512 channels widens the band a little
            (
                Correlation::BandLimited,
                [1.0, 2.0 / pi, 0.0, -2.0 / (3.0 * pi)],
                1e-3,
            ),
            (
                Correlation::Autoregressive { coefficient: -0.5 },
                [1.0, -0.5, 0.25, -0.125],
                1e-15,
            ),
        ];
        for (correlation, expected, tolerance) in cases {
            for (lag, expected) in expected.into_iter().enumerate() {
                let found = correlation.at_lag(lag);
                assert!(
                    (found - expected).abs() < tolerance,
                    "{correlation:?} at lag {lag}: {found}, expected {expected}"
                );
            }
        }
    }
}
