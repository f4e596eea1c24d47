//! Local quadratic smoothing of a profile, its extrema, and what noise does to them.
//!
//! At every velocity a parabola is fitted to the channels around with triweight weights
//! (1 - (u/c)^2)^3; its value there is the smoothed profile. It is linear in the channels, so the
//! errors of heights and positions follow from the channels' covariance.

use super::noise::ChannelNoise;
use crate::spectrum::Spectrum;

/// Step of numerical derivatives of the smoothed profile, in half-widths of the kernel.
const DERIVATIVE_STEP: f64 = 0.02;

/// Most steps toward an extremum; regula falsi takes about eight.
const MOST_STEPS: usize = 60;

/// Width of the last bracket of an extremum, in half-widths of the kernel.
const BRACKET: f64 = 1e-12;

/// A profile smoothed over `reach_km_s` to either side.
pub(super) struct Smoothed<'a> {
    spectrum: &'a Spectrum,
    reach_km_s: f64,
}

/// A maximum or minimum of the smoothed profile.
#[derive(Clone, Debug)]
pub(super) struct Extremum {
    pub v_km_s: f64,
    pub value_k: f64,
    pub is_maximum: bool,
    /// d(value)/d(channel), dimensionless.
    pub value_weights: Vec<f64>,
    /// d(velocity)/d(channel), km/s per K.
    pub velocity_weights: Vec<f64>,
}

impl<'a> Smoothed<'a> {
    /// `reach_km_s` is widened to what a parabola needs, 2.5 channels.
    pub fn new(spectrum: &'a Spectrum, reach_km_s: f64) -> Self {
        let least = 2.5 * spectrum.channel_width_km_s();
        Self {
            spectrum,
            reach_km_s: reach_km_s.max(least),
        }
    }

    /// Reach of the kernel to either side, km/s.
    pub fn reach_km_s(&self) -> f64 {
        self.reach_km_s
    }

    /// Calls `take` with every usable channel near v, its distance u from v in reaches and its
    /// kernel weight.
    fn near(&self, v: f64, mut take: impl FnMut(usize, f64, f64)) {
        let velocity = self.spectrum.velocity_km_s();
        let width = self.spectrum.width_km_s();
        let reach = self.reach_km_s;
        let first = velocity.partition_point(|&x| x <= v - reach);
        for channel in first..velocity.len() {
            let u = (velocity[channel] - v) / reach;
            if u >= 1.0 {
                break;
            }
            if self.spectrum.is_usable(channel) {
                let rest = 1.0 - u * u;
                take(channel, u, rest * rest * rest * width[channel]);
            }
        }
    }

    /// Smoothed temperature at v, K; `None` where too few channels are usable.
    pub fn value(&self, v: f64) -> Option<f64> {
        let temperature = self.spectrum.temperature_k();
        let mut moments = Moments::default();
        let mut sums = [0.0; 3];
        self.near(v, |channel, u, k| {
            moments.add(u, k);
            let term = k * temperature[channel];
            sums[0] += term;
            sums[1] += term * u;
            sums[2] += term * u * u;
        });
        let [a, b, c] = moments.value_row()?;
        Some(a * sums[0] + b * sums[1] + c * sums[2])
    }

    /// Weights of all channels at v, times `factor`, added to `weights`.
    pub fn add_weights(&self, v: f64, factor: f64, weights: &mut [f64]) -> Option<()> {
        let mut moments = Moments::default();
        self.near(v, |_, u, k| moments.add(u, k));
        let [a, b, c] = moments.value_row()?;
        self.near(v, |channel, u, k| {
            weights[channel] += factor * k * (a + u * (b + u * c));
        });
        Some(())
    }

    fn slope(&self, v: f64) -> Option<f64> {
        let step = DERIVATIVE_STEP * self.reach_km_s;
        Some((self.value(v + step)? - self.value(v - step)?) / (2.0 * step))
    }

    /// All extrema within a range, ascending in velocity; maxima and minima alternate.
    pub fn extrema(&self, low: f64, high: f64) -> Vec<Extremum> {
        let step = self.reach_km_s / 8.0;
        let mut found = Vec::new();
        let mut before: Option<(f64, f64)> = None;
        let mut steps = 0_u32;
        let mut v = low;
        while v < high {
            v = (low + step * f64::from(steps)).min(high);
            steps += 1;
            let Some(slope) = self.slope(v) else {
                before = None;
                continue;
            };
            if let Some((v_before, slope_before)) = before
                && slope_before.signum() != slope.signum()
            {
                found.extend(self.refine(v_before, v, slope_before > 0.0));
            }
            before = Some((v, slope));
        }
        found
    }

    /// The extremum in a bracket of opposite slopes, by regula falsi that halves the weight of an end
    /// that stays.
    fn refine(&self, mut low: f64, mut high: f64, is_maximum: bool) -> Option<Extremum> {
        let (mut at_low, mut at_high) = (self.slope(low)?, self.slope(high)?);
        let mut v = 0.5 * (low + high);
        for _ in 0..MOST_STEPS {
            if high - low <= BRACKET * self.reach_km_s || at_low == at_high {
                break;
            }
            let next = (low * at_high - high * at_low) / (at_high - at_low);
            let moved = (next - v).abs();
            v = next.clamp(low, high);
            let slope = self.slope(v)?;
            if slope == 0.0 || moved <= BRACKET * self.reach_km_s {
                break;
            }
            if (slope > 0.0) == is_maximum {
                low = v;
                at_low = slope;
                at_high *= 0.5;
            } else {
                high = v;
                at_high = slope;
                at_low *= 0.5;
            }
        }
        let wide = 0.1 * self.reach_km_s;
        let curvature = (self.slope(v + wide)? - self.slope(v - wide)?) / (2.0 * wide);
        if (curvature < 0.0) != is_maximum || curvature == 0.0 {
            return None;
        }
        let count = self.spectrum.len();
        let mut value_weights = vec![0.0; count];
        self.add_weights(v, 1.0, &mut value_weights)?;
        // slope(v) = 0 moves by dv = -d(slope)/curvature.
        let step = DERIVATIVE_STEP * self.reach_km_s;
        let factor = -1.0 / (2.0 * step * curvature);
        let mut velocity_weights = vec![0.0; count];
        self.add_weights(v + step, factor, &mut velocity_weights)?;
        self.add_weights(v - step, -factor, &mut velocity_weights)?;
        Some(Extremum {
            v_km_s: v,
            value_k: self.value(v)?,
            is_maximum,
            value_weights,
            velocity_weights,
        })
    }
}

/// Moments of the kernel weights, `sum` k u^j for j = 0 to 4.
#[derive(Default)]
struct Moments {
    sums: [f64; 5],
    channels: usize,
}

impl Moments {
    fn add(&mut self, u: f64, k: f64) {
        let mut term = k;
        for sum in &mut self.sums {
            *sum += term;
            term *= u;
        }
        self.channels += 1;
    }

    /// First row of the inverse of the moment matrix: the parabola's value at u = 0. `None` where
    /// channels on one side only, or fewer than four, leave the parabola open.
    fn value_row(&self) -> Option<[f64; 3]> {
        let [s0, s1, s2, s3, s4] = self.sums;
        let (a, b, c) = (s2 * s4 - s3 * s3, s2 * s3 - s1 * s4, s1 * s3 - s2 * s2);
        let determinant = s0 * a + s1 * b + s2 * c;
        if self.channels < 4 || determinant <= 1e-6 * s0 * s0 * s0 {
            return None;
        }
        Some([a / determinant, b / determinant, c / determinant])
    }
}

impl Extremum {
    pub fn value_err(&self, noise: &ChannelNoise) -> f64 {
        noise.error(&self.value_weights)
    }

    pub fn velocity_err(&self, noise: &ChannelNoise) -> f64 {
        noise.error(&self.velocity_weights)
    }
}

/// `first` - `second`, channel by channel.
pub(super) fn difference(first: &[f64], second: &[f64]) -> Vec<f64> {
    first.iter().zip(second).map(|(a, b)| a - b).collect()
}
