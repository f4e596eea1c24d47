//! Local quadratic smoothing of a profile, its extrema, and what noise does to them.
//!
//! At every velocity a parabola is fitted to the channels around with triweight weights
//! (1 - (u/c)^2)^3; its value there is the smoothed profile. It is linear in the channels, so the
//! errors of heights and positions follow from the channels' covariance.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::noise::ChannelNoise;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::spectrum::Spectrum;
use std::ops::Range;

/// Step of numerical derivatives of the smoothed profile, in half-widths of the kernel.
const DERIVATIVE_STEP: f64 = 0.02;

/// Most steps toward an extremum; three are usual.
const MOST_STEPS: usize = 60;

/// Error of an extremum's position, in half-widths of the kernel.
const POSITION_ERROR: f64 = 1e-12;

/// Slopes that are evaluated together when extrema are looked for.
const AT_ONCE: usize = 4;

/// A profile smoothed over `reach_km_s` to either side.
pub(super) struct Smoothed<'a> {
    spectrum: &'a Spectrum,
    reach_km_s: f64,
    channels: Vec<Channel>,
}

/// A usable channel.
#[derive(Clone, Copy)]
struct Channel {
    v_km_s: f64,
    width_km_s: f64,
    temperature_k: f64,
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
        let channels = (0..spectrum.len())
            .filter(|&channel| spectrum.is_usable(channel))
            .map(|channel| Channel {
                v_km_s: spectrum.velocity_km_s()[channel],
                width_km_s: spectrum.width_km_s()[channel],
                temperature_k: spectrum.temperature_k()[channel],
            })
            .collect();
        Self {
            spectrum,
            reach_km_s: reach_km_s.max(least),
            channels,
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
        let [value] = self.values(self.reached(v, v), [v]);
        (!value.is_nan()).then_some(value)
    }

    /// The usable channels that the kernel reaches from a range of velocities.
    fn reached(&self, low: f64, high: f64) -> Range<usize> {
        let (low, high) = (low - self.reach_km_s, high + self.reach_km_s);
        let first = self.channels.partition_point(|one| one.v_km_s <= low);
        let after = self.channels[first..].partition_point(|one| one.v_km_s < high);
        first..first + after
    }

    /// Smoothed temperatures at several velocities, K, from a range of channels that holds all that
    /// the kernel reaches; `NaN` where too few are usable.
    fn values<const N: usize>(&self, channels: Range<usize>, at: [f64; N]) -> [f64; N] {
        dispatch(Values {
            channels: &self.channels[channels],
            per_reach: 1.0 / self.reach_km_s,
            at,
        })
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

    /// Slopes at several velocities, K per km/s, from a range of channels as in [`Self::values`].
    fn slopes(&self, channels: Range<usize>, at: [f64; AT_ONCE]) -> [f64; AT_ONCE] {
        let step = DERIVATIVE_STEP * self.reach_km_s;
        let beside: [f64; 2 * AT_ONCE] = std::array::from_fn(|i| {
            if i < AT_ONCE {
                at[i] + step
            } else {
                at[i - AT_ONCE] - step
            }
        });
        let values = self.values(channels, beside);
        std::array::from_fn(|i| (values[i] - values[i + AT_ONCE]) / (2.0 * step))
    }

    /// All extrema within a range, ascending in velocity; maxima and minima alternate.
    pub fn extrema(&self, low: f64, high: f64) -> Vec<Extremum> {
        let step = self.reach_km_s / 8.0;
        let margin = DERIVATIVE_STEP * self.reach_km_s;
        let mut found = Vec::new();
        let mut before = (f64::NAN, f64::NAN);
        let mut steps = 0_u32;
        let mut v = low;
        while v < high {
            let at: [f64; AT_ONCE] = std::array::from_fn(|_| {
                let v = (low + step * f64::from(steps)).min(high);
                steps += 1;
                v
            });
            v = at[AT_ONCE - 1];
            let channels = self.reached(at[0] - margin, v + margin);
            for (v, slope) in at.into_iter().zip(self.slopes(channels, at)) {
                let (v_before, slope_before) = before;
                if !slope.is_nan()
                    && !slope_before.is_nan()
                    && v > v_before
                    && slope_before.signum() != slope.signum()
                {
                    found.extend(self.refine([before, (v, slope)]));
                }
                before = (v, slope);
            }
        }
        found
    }

    /// The extremum between two velocities of opposite slopes.
    ///
    /// The secant's root of a bracket w is off by about w^2/reach: each step looks at four velocities
    /// as far around it, or at four that divide the bracket where that is nearer.
    fn refine(&self, bracket: [(f64, f64); 2]) -> Option<Extremum> {
        let [(mut low, mut at_low), (mut high, mut at_high)] = bracket;
        let reach = self.reach_km_s;
        let wide = 0.1 * reach;
        let margin = wide + DERIVATIVE_STEP * reach;
        let channels = self.reached(low - margin, high + margin);
        let is_maximum = at_low > 0.0;
        let mut v = 0.5 * (low + high);
        for _ in 0..MOST_STEPS {
            let width = high - low;
            let error = width * width / reach;
            v = ((low * at_high - high * at_low) / (at_high - at_low)).clamp(low, high);
            if error <= POSITION_ERROR * reach {
                break;
            }
            let at: [f64; AT_ONCE] = if error > 0.1 * width {
                std::array::from_fn(|i| low + width * (i as f64 + 1.0) / (AT_ONCE as f64 + 1.0))
            } else {
                [-1.0, -0.1, 0.1, 1.0].map(|part| (v + part * error).clamp(low, high))
            };
            for (v, slope) in at.into_iter().zip(self.slopes(channels.clone(), at)) {
                if slope.is_nan() {
                    return None;
                }
                if (slope > 0.0) == is_maximum {
                    (low, at_low) = (v, slope);
                } else {
                    (high, at_high) = (v, slope);
                    break;
                }
            }
            if at_high == 0.0 {
                v = high;
                break;
            }
        }
        let step = DERIVATIVE_STEP * reach;
        let beside = [wide + step, wide - step, -wide + step, -wide - step];
        let [a, b, c, d] = self.values(channels.clone(), beside.map(|from| v + from));
        let curvature = ((a - b) - (c - d)) / (4.0 * step * wide);
        if (curvature < 0.0) != is_maximum || curvature == 0.0 || curvature.is_nan() {
            return None;
        }
        let count = self.spectrum.len();
        let mut value_weights = vec![0.0; count];
        self.add_weights(v, 1.0, &mut value_weights)?;
        // slope(v) = 0 moves by dv = -d(slope)/curvature.
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

/// The kernel behind [`Smoothed::values`]: no fused multiply-add, so that every copy gives the same.
struct Values<'a, const N: usize> {
    channels: &'a [Channel],
    per_reach: f64,
    at: [f64; N],
}

impl<const N: usize> Kernel for Values<'_, N> {
    type Output = [f64; N];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; N] {
        let mut moments = [[0.0; N]; 5];
        let mut sums = [[0.0; N]; 3];
        let mut reached = [0.0; N];
        for channel in self.channels {
            for lane in 0..N {
                let u = (channel.v_km_s - self.at[lane]) * self.per_reach;
                let rest = 1.0 - u * u;
                let rest = if rest > 0.0 { rest } else { 0.0 };
                let k = rest * rest * rest * channel.width_km_s;
                reached[lane] += if k > 0.0 { 1.0 } else { 0.0 };
                let mut term = k;
                for moment in &mut moments {
                    moment[lane] += term;
                    term *= u;
                }
                let mut term = k * channel.temperature_k;
                for sum in &mut sums {
                    sum[lane] += term;
                    term *= u;
                }
            }
        }
        std::array::from_fn(|lane| {
            let moments = Moments {
                sums: moments.map(|moment| moment[lane]),
                channels: reached[lane],
            };
            let (row, determinant) = moments.cofactors();
            let value = row[0] * sums[0][lane] + row[1] * sums[1][lane] + row[2] * sums[2][lane];
            if moments.leave_open(determinant) {
                f64::NAN
            } else {
                value / determinant
            }
        })
    }
}

/// Moments of the kernel weights, `sum` k u^j for j = 0 to 4.
#[derive(Default)]
struct Moments {
    sums: [f64; 5],
    channels: f64,
}

impl Moments {
    fn add(&mut self, u: f64, k: f64) {
        let mut term = k;
        for sum in &mut self.sums {
            *sum += term;
            term *= u;
        }
        self.channels += 1.0;
    }

    /// First row of the inverse of the moment matrix: the parabola's value at u = 0. `None` where
    /// channels on one side only, or fewer than four, leave the parabola open.
    fn value_row(&self) -> Option<[f64; 3]> {
        let (row, determinant) = self.cofactors();
        (!self.leave_open(determinant)).then(|| row.map(|cofactor| cofactor / determinant))
    }

    /// The same row times the determinant, and the determinant.
    #[inline(always)]
    fn cofactors(&self) -> ([f64; 3], f64) {
        let [s0, s1, s2, s3, s4] = self.sums;
        let (a, b, c) = (s2 * s4 - s3 * s3, s2 * s3 - s1 * s4, s1 * s3 - s2 * s2);
        ([a, b, c], s0 * a + s1 * b + s2 * c)
    }

    /// Whether the channels leave the parabola open.
    #[inline(always)]
    fn leave_open(&self, determinant: f64) -> bool {
        let s0 = self.sums[0];
        self.channels < 4.0 || determinant <= 1e-6 * s0 * s0 * s0
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
