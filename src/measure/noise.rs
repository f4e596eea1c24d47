//! Standard errors of sums over channels, from channel noise, its correlation and the baseline.

use crate::numeric::polynomial::{Factor, ScaledAxis};
use crate::prepare::Prepared;

/// Terms of the highest baseline.
const TERMS: usize = 4;

/// The covariance of one prepared spectrum's channels, in units of their noise.
pub(super) struct ChannelNoise<'a> {
    rms_k: f64,
    /// Correlation at lags 0, 1, ... up to where it is negligible.
    correlation: Vec<f64>,
    velocity_km_s: &'a [f64],
    baseline: Option<BaselineNoise>,
}

/// What a baseline fitted on the line-free channels adds: with P its basis in those channels and R
/// the correlation, R P and P^T R P.
struct BaselineNoise {
    factor: Factor,
    with_channels: Vec<[f64; TERMS]>,
    with_itself: [[f64; TERMS]; TERMS],
}

impl<'a> ChannelNoise<'a> {
    pub fn of(prepared: &'a Prepared) -> Self {
        let velocity = prepared.spectrum.velocity_km_s();
        let process = &prepared.noise.process;
        let mut correlation = process.significant_autocorrelation(velocity.len());
        if correlation.is_empty() {
            correlation.push(1.0);
        }
        let baseline = prepared
            .baseline
            .order
            .and_then(|order| BaselineNoise::new(prepared, order, &correlation));
        Self {
            rms_k: prepared.noise.rms_k,
            correlation,
            velocity_km_s: velocity,
            baseline,
        }
    }

    /// Standard error of `sum_i` `w_i` `T_i`.
    ///
    /// A baseline fitted on the line-free channels f is itself a sum over them,
    /// b(v) = p(v)^T (P^T P)^-1 P^T `T_f`; subtracted, it leaves the weights w - P s with
    /// s = (P^T P)^-1 `sum_i` `w_i` `p_i`: the variance is w^T R w - 2 w^T R P s + s^T P^T R P s.
    pub fn error(&self, weights: &[f64]) -> f64 {
        let Some(first) = weights.iter().position(|&weight| weight != 0.0) else {
            return 0.0;
        };
        let last = weights.iter().rposition(|&weight| weight != 0.0);
        let held = first..last.unwrap_or(first) + 1;
        let inner = &weights[held.clone()];
        let mut variance = 0.0;
        for (lag, value) in self.correlation.iter().enumerate().take(inner.len()) {
            let pairs = if lag == 0 { 1.0 } else { 2.0 };
            let product: f64 = inner[lag..].iter().zip(inner).map(|(a, b)| a * b).sum();
            variance += pairs * value * product;
        }
        if let Some(baseline) = &self.baseline {
            let axis = baseline.factor.axis();
            let (mut moment, mut with_baseline) = ([0.0; TERMS], [0.0; TERMS]);
            for channel in held {
                let weight = weights[channel];
                let basis = axis.basis(self.velocity_km_s[channel]);
                for term in 0..TERMS {
                    moment[term] += weight * basis[term];
                    with_baseline[term] += weight * baseline.with_channels[channel][term];
                }
            }
            let share = baseline.factor.solve(moment);
            for a in 0..baseline.factor.terms() {
                variance -= 2.0 * share[a] * with_baseline[a];
                for b in 0..baseline.factor.terms() {
                    variance += share[a] * share[b] * baseline.with_itself[a][b];
                }
            }
        }
        self.rms_k * variance.max(0.0).sqrt()
    }
}

impl BaselineNoise {
    fn new(prepared: &Prepared, order: usize, correlation: &[f64]) -> Option<Self> {
        let spectrum = &prepared.spectrum;
        let velocity = spectrum.velocity_km_s();
        let axis = ScaledAxis::new(*velocity.first()?, *velocity.last()?);
        let free: Vec<bool> = (0..velocity.len())
            .map(|channel| spectrum.is_usable(channel) && prepared.is_line_free(velocity[channel]))
            .collect();
        let in_free = (0..velocity.len()).filter(|&i| free[i]);
        let factor = Factor::new(axis, order, in_free.map(|i| velocity[i]))?;
        let basis: Vec<[f64; TERMS]> = velocity
            .iter()
            .zip(&free)
            .map(|(&v, is_free)| {
                if *is_free {
                    axis.basis(v)
                } else {
                    [0.0; TERMS]
                }
            })
            .collect();
        let mut with_channels = vec![[0.0; TERMS]; basis.len()];
        for (lag, value) in correlation.iter().enumerate() {
            for late in lag..basis.len() {
                let early = late - lag;
                for term in 0..factor.terms() {
                    with_channels[late][term] += value * basis[early][term];
                    if lag > 0 {
                        with_channels[early][term] += value * basis[late][term];
                    }
                }
            }
        }
        let mut with_itself = [[0.0; TERMS]; TERMS];
        for (own, others) in basis.iter().zip(&with_channels) {
            for a in 0..factor.terms() {
                for b in 0..factor.terms() {
                    with_itself[a][b] += own[a] * others[b];
                }
            }
        }
        Some(Self {
            factor,
            with_channels,
            with_itself,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::Autoregression;
    use crate::prepare::Baseline;
    use crate::spectrum::{Noise, Spectrum, Window};

    /// The same by definition: each channel's weight with the baseline's share taken off, summed over
    /// all pairs of channels.
    #[test]
    fn errors_are_those_of_the_full_sum_over_channels() {
        let count = 90;
        let velocity: Vec<f64> = (0..count).map(|i| 0.2 * f64::from(i) - 7.0).collect();
        let mut values = vec![0.5; velocity.len()];
        values[10] = f64::NAN;
        let window = |low_km_s, high_km_s| Window {
            low_km_s,
            high_km_s,
        };
        for (reflections, order) in [
            (vec![], None),
            (vec![], Some(1)),
            (vec![0.6, -0.2], Some(3)),
        ] {
            let prepared = Prepared {
                spectrum: Spectrum::new(velocity.clone(), vec![0.2; values.len()], values.clone())
                    .unwrap(),
                window: window(-1.0, 3.0),
                window_automatic: true,
                window_cuts_line: false,
                other_signal: vec![window(6.0, 7.5)],
                baseline: Baseline {
                    order,
                    values_k: vec![0.0; values.len()],
                    channels: 60,
                    clipped: 0,
                },
                noise: Noise {
                    rms_k: 0.3,
                    channels: 60,
                    process: Autoregression::from_reflections(&reflections),
                },
            };
            let weights: Vec<f64> = velocity
                .iter()
                .map(|&v| {
                    if (0.0..2.0).contains(&v) {
                        1.0 + v
                    } else {
                        0.0
                    }
                })
                .collect();
            let mut all = weights.clone();
            if let Some(order) = order {
                let axis = ScaledAxis::new(velocity[0], velocity[velocity.len() - 1]);
                let free: Vec<usize> = (0..velocity.len())
                    .filter(|&i| i != 10 && prepared.is_line_free(velocity[i]))
                    .collect();
                let factor = Factor::new(axis, order, free.iter().map(|&i| velocity[i])).unwrap();
                let mut moment = [0.0; 4];
                for (&v, weight) in velocity.iter().zip(&weights) {
                    for (sum, basis) in moment.iter_mut().zip(axis.basis(v)) {
                        *sum += weight * basis;
                    }
                }
                let share = factor.solve(moment);
                for i in free {
                    let basis = axis.basis(velocity[i]);
                    all[i] -= (0..=order).map(|k| basis[k] * share[k]).sum::<f64>();
                }
            }
            let expected = 0.3 * prepared.noise.process.variance_of_sum(&all).sqrt();
            let found = ChannelNoise::of(&prepared).error(&weights);
            assert!((found / expected - 1.0).abs() < 1e-10, "{order:?}");
        }
    }
}
