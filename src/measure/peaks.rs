//! Peaks and dips of a smoothed line: the highest, and two with a dip between them.

use super::noise::ChannelNoise;
use super::smooth::{Extremum, Smoothed, difference};
use super::{ThinLine, TwoPeaks, estimate, highest};
use crate::constants::FWHM_PER_SIGMA;
use crate::numeric::Estimate;
use crate::spectrum::Spectrum;
use statrs::distribution::{ContinuousCDF, Normal};

/// Reach of the kernel that measures a dip, in distances between the peaks, where that is more.
const DIP_REACH: f64 = 0.5;

/// Extrema of a smoothed line.
pub(super) struct Profile<'a> {
    pub spectrum: &'a Spectrum,
    pub noise: &'a ChannelNoise<'a>,
    pub extrema: Vec<Extremum>,
    pub reach_km_s: f64,
    pub dip_sigma: f64,
}

/// Two peaks and the dip between them.
pub(super) struct Peaks<'a> {
    blue: &'a Extremum,
    dip: Extremum,
    red: &'a Extremum,
}

impl Profile<'_> {
    /// Velocity of the highest peak.
    ///
    /// Its error holds what noise moves it by and what noise would have moved it to another peak:
    /// of a peak j lower by D with standard error s, that is the share Phi(-D/s) of repeated
    /// observations.
    pub fn velocity(&self) -> Option<Estimate> {
        let top = highest(&self.extrema)?;
        let own = top.velocity_err(self.noise).powi(2);
        let normal = Normal::standard();
        let rivals: Vec<(f64, f64, f64)> = self
            .extrema
            .iter()
            .filter(|other| other.is_maximum && other.v_km_s != top.v_km_s)
            .map(|other| {
                let weights = difference(&top.value_weights, &other.value_weights);
                let standing = (top.value_k - other.value_k) / self.noise.error(&weights);
                (
                    normal.cdf(-standing),
                    other.v_km_s,
                    other.velocity_err(self.noise).powi(2),
                )
            })
            .filter(|rival| rival.0 > 1e-6)
            .collect();
        let top_share = (1.0 - rivals.iter().map(|rival| rival.0).sum::<f64>()).max(0.5);
        let total = top_share + rivals.iter().map(|rival| rival.0).sum::<f64>();
        let all = || {
            std::iter::once((top_share, top.v_km_s, own))
                .chain(rivals.iter().copied())
                .map(|(share, v, variance)| (share / total, v, variance))
        };
        let mean: f64 = all().map(|(share, v, _)| share * v).sum();
        let variance: f64 = all()
            .map(|(share, v, variance)| share * (variance + (v - mean).powi(2)))
            .sum();
        Some(estimate(top.v_km_s, variance.sqrt()))
    }

    /// The highest peak and the one that the most significant dip parts from it.
    pub fn two_peaks(&self) -> Option<Peaks<'_>> {
        let top = highest(&self.extrema)?;
        let mut best: Option<(f64, Peaks)> = None;
        for other in self.extrema.iter().filter(|other| other.is_maximum) {
            let (blue, red) = if other.v_km_s < top.v_km_s {
                (other, top)
            } else {
                (top, other)
            };
            let Some(dip) = self
                .extrema
                .iter()
                .filter(|dip| {
                    !dip.is_maximum && dip.v_km_s > blue.v_km_s && dip.v_km_s < red.v_km_s
                })
                .min_by(|a, b| a.value_k.total_cmp(&b.value_k))
            else {
                continue;
            };
            let depth = other.value_k - dip.value_k;
            let depth_err = self
                .noise
                .error(&difference(&other.value_weights, &dip.value_weights));
            let significance = depth / depth_err;
            let stands_out = other.value_k >= self.dip_sigma * other.value_err(self.noise);
            if significance >= self.dip_sigma
                && stands_out
                && best.as_ref().is_none_or(|found| significance > found.0)
            {
                let dip = self.whole_dip(blue, red).unwrap_or_else(|| dip.clone());
                best = Some((significance, Peaks { blue, dip, red }));
            }
        }
        best.map(|found| found.1)
    }

    /// The dip smoothed over its own extent: in a wide one, noise makes several minima.
    fn whole_dip(&self, blue: &Extremum, red: &Extremum) -> Option<Extremum> {
        let reach = DIP_REACH * (red.v_km_s - blue.v_km_s);
        Smoothed::new(self.spectrum, reach.max(self.reach_km_s))
            .extrema(blue.v_km_s, red.v_km_s)
            .into_iter()
            .filter(|extremum| !extremum.is_maximum)
            .min_by(|a, b| a.value_k.total_cmp(&b.value_k))
    }
}

impl Peaks<'_> {
    pub fn estimates(&self, noise: &ChannelNoise) -> TwoPeaks {
        let v = |at: &Extremum| estimate(at.v_km_s, at.velocity_err(noise));
        let k = |at: &Extremum| estimate(at.value_k, at.value_err(noise));
        TwoPeaks {
            v_blue_km_s: v(self.blue),
            v_red_km_s: v(self.red),
            v_dip_km_s: v(&self.dip),
            blue_k: k(self.blue),
            red_k: k(self.red),
            dip_k: k(&self.dip),
        }
    }

    /// `T_blue`/`T_red`.
    pub fn ratio(&self, noise: &ChannelNoise) -> Estimate {
        let ratio = self.blue.value_k / self.red.value_k;
        let weights: Vec<f64> = self
            .blue
            .value_weights
            .iter()
            .zip(&self.red.value_weights)
            .map(|(blue, red)| (blue - ratio * red) / self.red.value_k)
            .collect();
        estimate(ratio, noise.error(&weights))
    }

    /// v = s^2/(`v_red` - `v_blue`) ln[(1 + e `T_BD`/`T_D`)/(1 + e `T_RD`/`T_D`)], s = FWHM/sqrt(8 ln 2) of the
    /// thin line, `T_D` the dip's temperature, `T_BD` and `T_RD` the peaks' heights above it (Myers et
    /// al. 1996, eq. 9, from memory). `None` where the dip is not above zero.
    pub fn closed_form(&self, line: &ThinLine, noise: &ChannelNoise) -> Option<Estimate> {
        use std::f64::consts::E;
        let (dip, blue, red) = (self.dip.value_k, self.blue.value_k, self.red.value_k);
        if dip <= self.dip.value_err(noise) {
            return None;
        }
        let sigma = line.fwhm_km_s.value / FWHM_PER_SIGMA;
        let apart = self.red.v_km_s - self.blue.v_km_s;
        let (above_blue, above_red) = (1.0 + E * (blue - dip) / dip, 1.0 + E * (red - dip) / dip);
        let scale = sigma * sigma / apart;
        let v = scale * (above_blue / above_red).ln();
        // d/dT_B, d/dT_R, d/dT_D of the logarithm, with d(above)/dT_D = -e T/T_D^2.
        let by_blue = scale * E / (dip * above_blue);
        let by_red = -scale * E / (dip * above_red);
        let by_dip = -(by_blue * blue + by_red * red) / dip;
        let by_apart = -v / apart;
        let weights: Vec<f64> = (0..self.blue.value_weights.len())
            .map(|channel| {
                by_blue * self.blue.value_weights[channel]
                    + by_red * self.red.value_weights[channel]
                    + by_dip * self.dip.value_weights[channel]
                    + by_apart
                        * (self.red.velocity_weights[channel] - self.blue.velocity_weights[channel])
            })
            .collect();
        let by_width = 2.0 * v / line.fwhm_km_s.value * line.fwhm_km_s.err;
        Some(estimate(v, noise.error(&weights).hypot(by_width)))
    }
}
