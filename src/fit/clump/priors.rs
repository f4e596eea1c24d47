//! What is assumed of a spherical clump before its lines are looked at.

use rand::Rng;
use rand_distr::{Distribution, StandardNormal};

/// A normal density of a number, or of its natural logarithm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Normal {
    /// Mean: of the logarithm where the number is positive by nature.
    pub mean: f64,
    /// Standard deviation.
    pub deviation: f64,
}

impl Normal {
    /// Of a number.
    #[must_use]
    pub const fn of(mean: f64, deviation: f64) -> Self {
        Self { mean, deviation }
    }

    /// Of the logarithm of a positive number, by its median.
    #[must_use]
    pub fn of_logarithm(median: f64, deviation: f64) -> Self {
        Self {
            mean: median.ln(),
            deviation,
        }
    }

    /// ln of the density.
    #[must_use]
    pub fn ln_density(&self, value: f64) -> f64 {
        let z = (value - self.mean) / self.deviation;
        -0.5 * z * z - self.deviation.ln() - 0.918_938_533_204_672_8
    }

    /// A draw.
    pub fn draw(&self, generator: &mut impl Rng) -> f64 {
        let z: f64 = StandardNormal.sample(generator);
        self.mean + self.deviation * z
    }
}

/// Priors of a clump. What is known of a source narrows them.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ClumpPriors {
    /// ln of the dispersion, km/s.
    pub ln_sigma: Normal,
    /// Inward speed at the outer radius over the dispersion, either sign.
    pub v_in_over_sigma: Normal,
    /// ln of the thick line's optical depth from the surface to a tenth of the radius.
    pub ln_depth: Normal,
    /// a of opacity ~ r^-a.
    pub opacity_slope: Normal,
    /// ln of collisions over spontaneous emissions at the outer radius.
    pub ln_collision_ratio: Normal,
    /// How much steeper that ratio is than the opacity.
    pub excess_slope: Normal,
    /// m of J(T) - J(T_bg) ~ r^-m.
    pub temperature_slope: Normal,
    /// ln of the gas temperature at the outer radius, K.
    pub ln_t_kin: Normal,
    /// ln of thick over thin opacity.
    pub ln_isotope_ratio: Normal,
    /// ln of beam FWHM over outer radius.
    pub ln_beam_over_radius: Normal,
    /// g of opacity ~ E^-g, E how near the excitation comes to that of the gas.
    pub opacity_response: Normal,
    /// How much of the thick line's trapping the thin line's levels see: 0 by its own alone, 1 as much.
    pub shared_trapping: Normal,
    /// Deviation of the thin line's brightness from that of the same gas: calibration and excitation.
    pub thin_scale: f64,
}

impl ClumpPriors {
    /// Priors for a thick line, nothing else known.
    ///
    /// Spontaneous emission outruns collisions the more, the higher the frequency: A ~ nu^3, and levels of
    /// higher J have more ways to be reached. A line to the ground state loses opacity where upper levels
    /// fill; of others that is open.
    #[must_use]
    pub fn of_line(frequency_ghz: f64, to_ground: bool) -> Self {
        let ratio = 0.04 * (89.0 / frequency_ghz).powi(2);
        Self {
            ln_sigma: Normal::of_logarithm(0.6, 0.8),
            v_in_over_sigma: Normal::of(0.0, 1.0),
            ln_depth: Normal::of_logarithm(10.0, 1.2),
            opacity_slope: Normal::of(1.7, 0.6),
            ln_collision_ratio: Normal::of_logarithm(ratio, 2.0),
            excess_slope: Normal::of(0.1, 0.5),
            temperature_slope: Normal::of(0.15, 0.25),
            ln_t_kin: Normal::of_logarithm(18.0, 0.5),
            ln_isotope_ratio: Normal::of_logarithm(50.0, 0.5),
            ln_beam_over_radius: Normal::of_logarithm(0.7, 0.7),
            opacity_response: Normal::of(if to_ground { 0.4 } else { 0.0 }, 0.7),
            shared_trapping: Normal::of(0.4, 0.5),
            thin_scale: 0.2,
        }
    }
}
