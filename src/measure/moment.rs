//! First moment of a line over a range of velocities.

use super::noise::ChannelNoise;
use crate::numeric::Estimate;
use crate::prepare::Prepared;
use crate::spectrum::Window;

/// Mean velocity of a line weighted by its brightness, over a range of velocities.
///
/// `M = sum_i w_i T_i v_i / sum_i w_i T_i` with w the channel widths (km/s); its error follows to first
/// order from channel noise, its correlation and the baseline: dM/dT_i = w_i (v_i - M)/sum w T.
/// `None` where the integral over the range is below `detection_sigma` of its error.
///
/// Over a map the range has to be the same everywhere: a moment depends on what is left out.
#[must_use]
pub fn first_moment(prepared: &Prepared, range: Window, detection_sigma: f64) -> Option<Estimate> {
    let noise = ChannelNoise::of(prepared);
    let spectrum = &prepared.spectrum;
    let velocity = spectrum.velocity_km_s();
    let counts = |channel: usize| spectrum.is_usable(channel) && range.contains(velocity[channel]);
    let mut weights: Vec<f64> = (0..spectrum.len())
        .map(|channel| {
            if counts(channel) {
                spectrum.width_km_s()[channel]
            } else {
                0.0
            }
        })
        .collect();
    let terms = || {
        let channels = (0..spectrum.len()).filter(|&channel| weights[channel] > 0.0);
        channels.map(|channel| {
            (
                channel,
                weights[channel] * spectrum.temperature_k()[channel],
            )
        })
    };
    let integral: f64 = terms().map(|(_, term)| term).sum();
    let threshold = detection_sigma * noise.error(&weights);
    if integral.is_nan() || integral <= threshold {
        return None;
    }
    let moment = terms()
        .map(|(channel, term)| term * velocity[channel])
        .sum::<f64>()
        / integral;
    for (weight, v) in weights.iter_mut().zip(velocity) {
        *weight *= (v - moment) / integral;
    }
    Some(Estimate {
        value: moment,
        err: noise.error(&weights),
    })
}
