//! Fitted inward speed against radius.

use super::linear::LinearFit;
use super::{Centre, Field, GridError};
use crate::constants::FWHM_PER_SIGMA;
use crate::numeric::Estimate;

/// How the inward speed goes with radius.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SpeedProfile {
    /// Slope q of v = v_r (r/r_r)^-q, its error enlarged by the root of the reduced chi2 where that is
    /// above 1.
    pub slope: Estimate,
    /// Speed at the reference radius, km/s, with its error enlarged likewise.
    pub speed_km_s: Estimate,
    /// The reference radius: the mean of the readings' radii, arcsec.
    pub reference_arcsec: f64,
    /// chi2 over the degrees of freedom.
    pub chi2_reduced: f64,
}

/// Slopes that are looked through.
const LOWEST_SLOPE: f64 = -1.5;
const HIGHEST_SLOPE: f64 = 2.5;
const SLOPES: u32 = 400;

/// Fits v = v_r (r/r_r)^-q by weighted least squares, at radii
///
///   r = sqrt(b^2 + 2 s^2),   b the projected radius, s = FWHM/sqrt(8 ln 2) of the beam
///
/// which is the rms distance from the centre of what a beam sees. For each q the best v_r is that of
/// linear least squares; q is where chi2 is lowest, errors from the linear problem there.
///
/// The slope is that of the fitted speeds, not of the gas: speeds along the line of sight fall outward by
/// themselves, and slab fits have errors that change with radius. On simulated maps it does not tell one
/// speed from free fall (docs/validation.md).
///
/// # Errors
///
/// [`GridError::TooFewReadings`] below four, [`GridError::OneLine`] where all have the same radius or
/// nothing determines q.
pub fn speed_profile(
    speeds: &Field,
    centre: &Centre,
    beam_fwhm_arcsec: f64,
) -> Result<SpeedProfile, GridError> {
    let [x_centre, y_centre] = centre.at_arcsec;
    let beam = beam_fwhm_arcsec / FWHM_PER_SIGMA;
    let radius = |x: f64, y: f64| {
        let square = (x - x_centre).powi(2) + (y - y_centre).powi(2);
        (square + 2.0 * beam * beam).sqrt()
    };
    let readings = speeds.readings();
    let sum: f64 = (readings.iter())
        .map(|one| radius(one.dx_arcsec, one.dy_arcsec))
        .sum();
    let reference_arcsec = sum / readings.len().max(1) as f64;
    let ratio = |x: f64, y: f64| radius(x, y) / reference_arcsec;
    let with = |slope: f64| LinearFit::new(speeds, |x, y| [ratio(x, y).powf(-slope)]);
    let mut best = (f64::INFINITY, 0.0, 0.0);
    for step in 0..=SLOPES {
        let slope =
            LOWEST_SLOPE + (HIGHEST_SLOPE - LOWEST_SLOPE) * f64::from(step) / f64::from(SLOPES);
        let fit = with(slope)?;
        if fit.chi2 < best.0 {
            best = (fit.chi2, slope, fit.parameters[0]);
        }
    }
    let (_, slope, speed) = best;
    // one Gauss-Newton step in both parameters, which refines the slope and gives the errors
    let fit = LinearFit::new(speeds, |x, y| {
        let power = ratio(x, y).powf(-slope);
        let by_slope = -speed * power * ratio(x, y).ln();
        [power, by_slope]
    })?;
    let err = |index: usize| fit.covariance[index][index].sqrt() * fit.inflation();
    let slope = Estimate {
        // the linear problem is of v itself: what it gives beside v_r is a change of the slope
        value: slope + fit.parameters[1],
        err: err(1),
    };
    Ok(SpeedProfile {
        slope,
        speed_km_s: Estimate {
            value: fit.parameters[0],
            err: err(0),
        },
        reference_arcsec,
        chi2_reduced: fit.chi2_reduced(),
    })
}
