//! The spectrum that a beam sees.

use super::error::{SphereError, checked};
use super::excitation::LineField;
use super::parts_needed;
use super::rays::{Division, LANES, Ray, RayTable, annulus};
use super::shells::Shells;
use crate::constants::{BACKGROUND_TEMPERATURE, FWHM_PER_SIGMA};
use crate::line::Component;
use crate::model::RadiationTemperature;

/// Where and how widely a telescope looks; lengths in the plane of the sky at the clump.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Beam {
    /// One line of sight.
    Pencil {
        /// Its distance from the centre, pc.
        offset_pc: f64,
    },
    /// A Gaussian beam.
    Gaussian {
        /// Its full width at half maximum, pc.
        fwhm_pc: f64,
        /// Distance of its centre from the clump's, pc.
        offset_pc: f64,
    },
}

/// How finely a spectrum is computed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fineness {
    /// Rays in an annulus, 1 to 4.
    pub rays: usize,
    /// Widest annulus in standard deviations of the beam.
    pub annulus: f64,
    /// Largest change of the line-of-sight speed between two points where the source is
    /// evaluated, in dispersions.
    pub source_step: f64,
    /// Largest change of the line-of-sight speed between two points where the line profile is, in
    /// dispersions.
    pub profile_step: f64,
}

impl Default for Fineness {
    fn default() -> Self {
        Self {
            rays: 4,
            annulus: 0.5,
            source_step: 0.25,
            profile_step: 0.25,
        }
    }
}

/// Distance from its centre at which a beam ends, in its standard deviations: e^-18.
const BEAM_REACH: f64 = 6.0;

impl Beam {
    fn checked(self) -> Result<Self, SphereError> {
        let (Self::Pencil { offset_pc } | Self::Gaussian { offset_pc, .. }) = self;
        checked("offset_pc", offset_pc, offset_pc >= 0.0, "0 or more")?;
        if let Self::Gaussian { fwhm_pc, .. } = self {
            checked("fwhm_pc", fwhm_pc, fwhm_pc > 0.0, "more than 0")?;
        }
        Ok(self)
    }

    /// The rays that it sees; weights are shares of the beam, and sum to less than 1 where it
    /// reaches beyond the clump.
    fn rays(self, edges: &[f64], fineness: &Fineness) -> Vec<Ray> {
        let outer = edges[edges.len() - 1];
        match self {
            Self::Pencil { offset_pc } if offset_pc < outer => vec![Ray {
                impact_pc: offset_pc,
                weight: 1.0,
            }],
            Self::Pencil { .. } => Vec::new(),
            Self::Gaussian { fwhm_pc, offset_pc } => {
                let sigma = fwhm_pc / FWHM_PER_SIGMA;
                let nearest = (offset_pc - BEAM_REACH * sigma).max(0.0);
                let farthest = offset_pc + BEAM_REACH * sigma;
                let mut rays = Vec::new();
                let mut inner = 0.0;
                for edge in edges {
                    let count = parts_needed(edge - inner, fineness.annulus * sigma);
                    let width = (edge - inner) / count as f64;
                    for index in 0..count {
                        let a = inner + width * index as f64;
                        let b = if index + 1 == count { *edge } else { a + width };
                        if b > nearest && a < farthest {
                            rays.extend(annulus(a, b, fineness.rays).map(|ray| Ray {
                                weight: ray.weight * density(ray.impact_pc, offset_pc, sigma),
                                ..ray
                            }));
                        }
                    }
                    inner = *edge;
                }
                rays
            }
        }
    }
}

/// A beam's mean over the circle of radius p about the clump's centre, times pi.
///
/// exp(-(p^2 + d^2)/(2 s^2)) I_0(p d/s^2)/(2 s^2), d the beam's distance from the centre.
pub(super) fn density(impact_pc: f64, offset_pc: f64, sigma_pc: f64) -> f64 {
    let x = impact_pc * offset_pc / (sigma_pc * sigma_pc);
    let z = (impact_pc - offset_pc) / sigma_pc;
    (-0.5 * z * z).exp() * scaled_bessel(x) / (2.0 * sigma_pc * sigma_pc)
}

/// e^-x I_0(x) of x >= 0, within 2e-7 (Abramowitz & Stegun 1964, 9.8.1 and 9.8.2).
fn scaled_bessel(x: f64) -> f64 {
    const NEAR: [f64; 7] = [
        0.004_581_3,
        0.036_076_8,
        0.265_973_2,
        1.206_749_2,
        3.089_942_4,
        3.515_622_9,
        1.0,
    ];
    const FAR: [f64; 9] = [
        0.003_923_77,
        -0.016_476_33,
        0.026_355_37,
        -0.020_577_06,
        0.009_162_81,
        -0.001_575_65,
        0.002_253_19,
        0.013_285_92,
        0.398_942_28,
    ];
    let polynomial = |coefficients: &[f64], y: f64| {
        coefficients
            .iter()
            .fold(0.0, |sum, coefficient| sum * y + coefficient)
    };
    if x < 3.75 {
        (-x).exp() * polynomial(&NEAR, (x / 3.75).powi(2))
    } else {
        polynomial(&FAR, 3.75 / x) / x.sqrt()
    }
}

/// Brightness above the background, K (radiation temperature), at velocities in km/s relative to
/// the clump; positive recedes.
///
/// T(v) = sum over the beam of I(p, v) - J(T_bg), I from the transfer equation along the ray at p,
/// with tau the sum over the line's components (shares and offsets as in [`Component`]), whose
/// excitation is the same.
///
/// # Errors
///
/// [`SphereError::Impossible`] for a beam that is none.
pub fn emergent(
    shells: &Shells,
    field: &LineField,
    components: &[Component],
    beam: Beam,
    velocity_km_s: &[f64],
    fineness: &Fineness,
) -> Result<Vec<f64>, SphereError> {
    let rays = beam.checked()?.rays(&shells.table.edge_pc, fineness);
    let mut velocities = velocity_km_s.to_vec();
    velocities.resize(velocity_km_s.len().next_multiple_of(LANES), 0.0);
    let division = Division {
        passage: fineness.source_step,
        part: fineness.profile_step,
    };
    let table = RayTable::new(shells, &rays, &velocities, components, division);
    let background_k =
        RadiationTemperature::new(field.frequency_ghz).at(BACKGROUND_TEMPERATURE.value);
    let mut spectrum = table.emergent(&field.edges, &field.density_cm3, background_k);
    spectrum.truncate(velocity_km_s.len());
    Ok(spectrum)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn scaled_bessel_function_agrees_with_its_series() {
        // e^-x sum (x/2)^2k/(k!)^2
        for x in [0.0, 0.3, 2.0, 3.74, 3.76, 8.0, 20.0] {
            let (mut term, mut sum) = (1.0, 1.0);
            for k in 1..200 {
                term *= (0.5 * x / f64::from(k)).powi(2);
                sum += term;
            }
            let exact = sum * f64::exp(-x);
            assert!((scaled_bessel(x) - exact).abs() < 2e-7, "{x}");
        }
    }

    #[test]
    fn a_beam_within_a_wide_sphere_sees_all_of_its_share() {
        let edges = [0.1, 0.4, 1.0];
        for (fwhm_pc, offset_pc) in [(0.2, 0.0), (0.3, 0.3), (0.05, 0.5)] {
            let beam = Beam::Gaussian { fwhm_pc, offset_pc };
            let sum: f64 = beam
                .rays(&edges, &Fineness::default())
                .iter()
                .map(|ray| ray.weight)
                .sum();
            assert!((sum - 1.0).abs() < 1e-5, "{fwhm_pc} {offset_pc}: {sum}");
        }
    }
}
