//! Standard errors of sums over channels, from channel noise, its correlation and the baseline.

use crate::numeric::Autoregression;
use crate::numeric::polynomial::{Factor, ScaledAxis};
use crate::prepare::Prepared;

/// The covariance of one prepared spectrum's channels.
pub(super) struct ChannelNoise<'a> {
    rms_k: f64,
    process: &'a Autoregression,
    velocity_km_s: &'a [f64],
    baseline: Option<(Factor, Vec<usize>)>,
}

impl<'a> ChannelNoise<'a> {
    pub fn of(prepared: &'a Prepared) -> Self {
        let spectrum = &prepared.spectrum;
        let velocity = spectrum.velocity_km_s();
        let baseline = prepared.baseline.order.and_then(|order| {
            let free: Vec<usize> = (0..spectrum.len())
                .filter(|&channel| {
                    spectrum.is_usable(channel) && !prepared.window.contains(velocity[channel])
                })
                .collect();
            let axis = ScaledAxis::new(*velocity.first()?, *velocity.last()?);
            let factor = Factor::new(axis, order, free.iter().map(|&i| velocity[i]))?;
            Some((factor, free))
        });
        Self {
            rms_k: prepared.noise.rms_k,
            process: &prepared.noise.process,
            velocity_km_s: velocity,
            baseline,
        }
    }

    /// Standard error of `sum_i` `w_i` `T_i`.
    ///
    /// A baseline fitted on the line-free channels f is itself a sum over them,
    /// b(v) = p(v)^T (P^T P)^-1 P^T `T_f`; subtracted, it gives those channels the weights
    /// `w_f` = -`p_f`^T (P^T P)^-1 `sum_i` `w_i` `p_i`.
    pub fn error(&self, weights: &[f64]) -> f64 {
        let Some((factor, free)) = &self.baseline else {
            return self.rms_k * self.process.variance_of_sum(weights).max(0.0).sqrt();
        };
        let axis = factor.axis();
        let mut moment = [0.0; 4];
        for (&v, &weight) in self.velocity_km_s.iter().zip(weights) {
            if weight != 0.0 {
                for (sum, basis) in moment.iter_mut().zip(axis.basis(v)) {
                    *sum += weight * basis;
                }
            }
        }
        let solution = factor.solve(moment);
        let mut all = weights.to_vec();
        for &channel in free {
            let basis = axis.basis(self.velocity_km_s[channel]);
            let share: f64 = (0..factor.terms()).map(|k| basis[k] * solution[k]).sum();
            all[channel] -= share;
        }
        self.rms_k * self.process.variance_of_sum(&all).max(0.0).sqrt()
    }
}
