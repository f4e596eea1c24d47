//! What is blue less what is red, in the core of the thick line and in its wings apart.

use super::noise::ChannelNoise;
use super::{ThinLine, estimate};
use crate::numeric::Estimate;
use crate::prepare::Prepared;
use serde::{Deserialize, Serialize};

/// Blue less red about the thin line's velocity, over the integral of the core.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Sides {
    /// Of the core, within a width of the thin line.
    pub core: Estimate,
    /// Change of `core` where the thin line is redder by the systematic of the rest frequencies: the same
    /// error in all pointings of a map.
    pub core_systematic: f64,
    /// Of the wings, from one width to four.
    pub wings: Estimate,
}

/// Ends of the core and of the wings, in full widths of the thin line at half maximum: a Gaussian of the
/// thin line's width has 2 % of its integral beyond the first.
const CORE_END: f64 = 1.0;
const WINGS_END: f64 = 4.0;

/// Core and wings of the thick line; a line of several components, or one whose core holds blank channels
/// or is below `detection_sigma` of its error, has none.
///
/// `core = (B_c - R_c)/(B_c + R_c)` and `wings = (B_w - R_w)/(B_c + R_c)`, B and R integrals over
/// velocities below and above the thin line's v, within one FWHM (c) and from one to four (w); a channel
/// counts by the share of it that lies inside. Infall acts on the core, fast lobes on the wings: over a
/// map, parity of the two tells them apart. Errors follow from channel noise, and from changing v and the
/// width by their errors.
#[must_use]
pub fn sides(
    thick: &Prepared,
    line: &ThinLine,
    components: usize,
    rest_frequency_systematic_km_s: f64,
    detection_sigma: f64,
) -> Option<Sides> {
    if components > 1 {
        return None;
    }
    let noise = ChannelNoise::of(thick);
    let at = |v_km_s: f64, fwhm_km_s: f64| Sums::new(thick, v_km_s, fwhm_km_s);
    let (v, fwhm) = (line.v_km_s, line.fwhm_km_s);
    let sums = at(v.value, fwhm.value)?;
    if sums.total < detection_sigma * noise.error(&sums.whole) {
        return None;
    }
    let half_change = |one: Option<Sums>, other: Option<Sums>| {
        let (one, other) = (one?, other?);
        Some([
            0.5 * (one.core() - other.core()),
            0.5 * (one.wings() - other.wings()),
        ])
    };
    let shifted = |by: f64| half_change(at(v.value + by, fwhm.value), at(v.value - by, fwhm.value));
    let by_velocity = shifted(v.err)?;
    let by_width = half_change(
        at(v.value, fwhm.value + fwhm.err),
        at(v.value, (fwhm.value - fwhm.err).max(0.5 * fwhm.value)),
    )?;
    let error = |weights: &[f64], value: f64, which: usize| {
        let weights: Vec<f64> = (weights.iter().zip(&sums.whole))
            .map(|(weight, whole)| (weight - value * whole) / sums.total)
            .collect();
        let systematic = by_velocity[which].hypot(by_width[which]);
        noise.error(&weights).hypot(systematic)
    };
    let (core, wings) = (sums.core(), sums.wings());
    Some(Sides {
        core: estimate(core, error(&sums.core_sides, core, 0)),
        core_systematic: shifted(rest_frequency_systematic_km_s)?[0],
        wings: estimate(wings, error(&sums.wing_sides, wings, 1)),
    })
}

/// Weights of the channels, km/s, and the sums that they make.
struct Sums {
    whole: Vec<f64>,
    core_sides: Vec<f64>,
    wing_sides: Vec<f64>,
    total: f64,
    core_difference: f64,
    wing_difference: f64,
}

impl Sums {
    /// `None` where the core leaves the band, holds a blank channel or has no integral.
    fn new(thick: &Prepared, v_km_s: f64, fwhm_km_s: f64) -> Option<Self> {
        let spectrum = &thick.spectrum;
        let (velocity, width) = (spectrum.velocity_km_s(), spectrum.width_km_s());
        let (core_end, wings_end) = (CORE_END * fwhm_km_s, WINGS_END * fwhm_km_s);
        let (first, last) = (*velocity.first()?, *velocity.last()?);
        if v_km_s - core_end < first || v_km_s + core_end > last {
            return None;
        }
        let mut sums = Self {
            whole: vec![0.0; velocity.len()],
            core_sides: vec![0.0; velocity.len()],
            wing_sides: vec![0.0; velocity.len()],
            total: 0.0,
            core_difference: 0.0,
            wing_difference: 0.0,
        };
        for channel in 0..velocity.len() {
            let low = velocity[channel] - 0.5 * width[channel] - v_km_s;
            let high = low + width[channel];
            let inside = |from: f64, to: f64| (high.min(to) - low.max(from)).max(0.0);
            let (blue, red) = (inside(-core_end, 0.0), inside(0.0, core_end));
            let (blue_wing, red_wing) =
                (inside(-wings_end, -core_end), inside(core_end, wings_end));
            if blue + red + blue_wing + red_wing == 0.0 {
                continue;
            }
            if !spectrum.is_usable(channel) {
                if blue + red > 0.0 {
                    return None;
                }
                continue;
            }
            let value = spectrum.temperature_k()[channel];
            sums.whole[channel] = blue + red;
            sums.core_sides[channel] = blue - red;
            sums.wing_sides[channel] = blue_wing - red_wing;
            sums.total += value * (blue + red);
            sums.core_difference += value * (blue - red);
            sums.wing_difference += value * (blue_wing - red_wing);
        }
        (sums.total > 0.0).then_some(sums)
    }

    fn core(&self) -> f64 {
        self.core_difference / self.total
    }

    fn wings(&self) -> f64 {
        self.wing_difference / self.total
    }
}
