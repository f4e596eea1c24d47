//! What is known of a source into narrower priors of its sphere.

use super::priors::{ClumpPriors, Normal};
use crate::numeric::Estimate;

/// Known properties of a clump; errors are standard deviations, 0 where none is given.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct KnownClump {
    /// Kinetic temperature of the gas, K.
    pub t_kin_k: Option<Estimate>,
    /// Temperature of the dust, K: stands for the gas where its own is not known.
    pub t_dust_k: Option<Estimate>,
    /// p of density ~ r^-p.
    pub density_slope: Option<Estimate>,
    /// Full width at half maximum of the thick line's beam over the radius.
    pub beam_over_radius: Option<Estimate>,
}

/// How far, in ln, the temperature at the outer radius may be from a clump's mean: that of the gas, and the
/// dust's, which gas below 1e4 to 1e5 cm^-3 need not share.
const OF_GAS: f64 = 0.15;
const OF_DUST: f64 = 0.3;

/// How far opacity's slope may be from that of the density: abundances change with radius.
const OF_SLOPE: f64 = 0.3;

/// How far, in ln, a stated radius may be from where the molecule ends.
const OF_RADIUS: f64 = 0.3;

impl KnownClump {
    /// A beam's width over the radius from arcseconds, kiloparsecs and parsecs.
    #[must_use]
    pub fn beam_over_radius(
        beam_arcsec: f64,
        distance_kpc: Estimate,
        radius_pc: Estimate,
    ) -> Estimate {
        let arcsec_per_radian = 3600.0 * 180.0 / std::f64::consts::PI;
        let value = 1e3 * distance_kpc.value * beam_arcsec / arcsec_per_radian / radius_pc.value;
        let relative = |given: Estimate| given.err / given.value;
        Estimate {
            value,
            err: value * relative(distance_kpc).hypot(relative(radius_pc)),
        }
    }
}

impl ClumpPriors {
    /// With what is known in the place of the priors; nothing that is known widens them.
    #[must_use]
    pub fn narrowed(mut self, known: &KnownClump) -> Self {
        let ln = |given: Estimate, scatter: f64| {
            Normal::of_logarithm(given.value, (given.err / given.value).hypot(scatter))
        };
        let narrow = |prior: &mut Normal, known: Option<Normal>| {
            if let Some(known) = known.filter(|known| known.deviation < prior.deviation) {
                *prior = known;
            }
        };
        let gas = known.t_kin_k.map(|given| ln(given, OF_GAS));
        let dust = known.t_dust_k.map(|given| ln(given, OF_DUST));
        narrow(&mut self.ln_t_kin, gas.or(dust));
        let slope = known.density_slope;
        narrow(
            &mut self.opacity_slope,
            slope.map(|given| Normal::of(given.value, given.err.hypot(OF_SLOPE))),
        );
        let beam = known.beam_over_radius.map(|given| ln(given, OF_RADIUS));
        narrow(&mut self.ln_beam_over_radius, beam);
        self
    }
}
