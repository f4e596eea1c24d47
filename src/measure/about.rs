//! Sums of the thick line over channels to either side of the thin line's velocity.

use super::noise::ChannelNoise;
use super::smooth::Smoothed;
use super::{Span, ThinLine, estimate};
use crate::numeric::Estimate;
use crate::spectrum::Spectrum;

/// Sums of the thick line about the thin line's velocity.
pub(super) struct About<'a> {
    spectrum: &'a Spectrum,
    noise: &'a ChannelNoise<'a>,
    channels: Vec<usize>,
    centre_km_s: f64,
    centre_err_km_s: f64,
    /// Temperature at the centre, K.
    at_centre_k: f64,
    integral: f64,
}

impl<'a> About<'a> {
    /// `None` where the centre is outside the span or the integral is not significant.
    pub fn new(
        spectrum: &'a Spectrum,
        noise: &'a ChannelNoise<'a>,
        smoothed: &Smoothed,
        span: Span,
        line: &ThinLine,
        detection_sigma: f64,
    ) -> Option<Self> {
        let centre_km_s = line.v_km_s.value + span.offset_km_s;
        if centre_km_s <= span.window.low_km_s || centre_km_s >= span.window.high_km_s {
            return None;
        }
        let channels: Vec<usize> = (0..spectrum.len())
            .filter(|&channel| {
                spectrum.is_usable(channel)
                    && span.window.contains(spectrum.velocity_km_s()[channel])
            })
            .collect();
        let mut weights = vec![0.0; spectrum.len()];
        let mut integral = 0.0;
        for &channel in &channels {
            weights[channel] = spectrum.width_km_s()[channel];
            integral += weights[channel] * spectrum.temperature_k()[channel];
        }
        if integral < detection_sigma * noise.error(&weights) {
            return None;
        }
        Some(Self {
            spectrum,
            noise,
            channels,
            centre_km_s,
            centre_err_km_s: line.v_km_s.err,
            at_centre_k: smoothed.value(centre_km_s)?,
            integral,
        })
    }

    /// Sum over channels of a function of velocity from the centre, times T dv.
    fn sum(&self, of: impl Fn(usize) -> f64) -> f64 {
        self.channels
            .iter()
            .map(|&channel| {
                of(channel)
                    * self.spectrum.temperature_k()[channel]
                    * self.spectrum.width_km_s()[channel]
            })
            .sum()
    }

    /// Error from the channels' weights and from the centre's uncertainty.
    fn error(&self, weight: impl Fn(usize) -> f64, by_centre: f64) -> f64 {
        let mut weights = vec![0.0; self.spectrum.len()];
        for &channel in &self.channels {
            weights[channel] = weight(channel) * self.spectrum.width_km_s()[channel];
        }
        self.noise
            .error(&weights)
            .hypot(by_centre * self.centre_err_km_s)
    }

    /// Share of a channel that is blue of the centre minus the share that is red of it.
    fn side(&self, channel: usize) -> f64 {
        let from_centre = self.spectrum.velocity_km_s()[channel] - self.centre_km_s;
        (-2.0 * from_centre / self.spectrum.width_km_s()[channel]).clamp(-1.0, 1.0)
    }

    /// A = (`I_blue` - `I_red`)/(`I_blue` + `I_red`); dA/dv = 2 T(v)/I (Jackson et al. 2019).
    pub fn asymmetry(&self) -> Option<Estimate> {
        let value = self.sum(|channel| self.side(channel)) / self.integral;
        let err = self.error(
            |channel| (self.side(channel) - value) / self.integral,
            2.0 * self.at_centre_k / self.integral,
        );
        err.is_finite().then_some(estimate(value, err))
    }

    /// Change of A by `dA/dv` where v is redder by `systematic_km_s`.
    pub fn asymmetry_systematic(&self, systematic_km_s: f64) -> f64 {
        2.0 * self.at_centre_k / self.integral * systematic_km_s
    }

    /// `m_3`/`m_2`^(3/2) with `m_k` = `sum_i` `T_i` `dv_i` (`v_i` - v)^k/`sum_i` `T_i` `dv_i`, v the thin line's velocity
    /// (not the mean): `None` where noise leaves no positive second moment.
    pub fn skewness(&self) -> Option<Estimate> {
        let from_centre =
            |channel: usize| self.spectrum.velocity_km_s()[channel] - self.centre_km_s;
        let moment = |k: i32| self.sum(|channel| from_centre(channel).powi(k)) / self.integral;
        let (m1, m2, m3) = (moment(1), moment(2), moment(3));
        let m2_err = self.error(
            |channel| (from_centre(channel).powi(2) - m2) / self.integral,
            0.0,
        );
        if m2 <= 3.0 * m2_err {
            return None;
        }
        let width = m2.sqrt();
        let value = m3 / (m2 * width);
        let err = self.error(
            |channel| {
                let u = from_centre(channel);
                ((u.powi(3) - m3) / (m2 * width) - 1.5 * value * (u * u - m2) / m2) / self.integral
            },
            -3.0 / width + 3.0 * value * m1 / m2,
        );
        Some(estimate(value, err))
    }
}
