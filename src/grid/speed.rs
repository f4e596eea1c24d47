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
    /// The mean speed: that of a speed that does not change with radius, km/s.
    pub constant_km_s: Estimate,
    /// By how much chi2 is higher at one speed (q = 0) than at the slope found, the errors' correlation
    /// allowed for.
    pub chi2_over_constant: f64,
    /// The same of free fall onto a point (q = 1/2).
    pub chi2_over_free_fall: f64,
    /// chi2 over the degrees of freedom.
    pub chi2_reduced: f64,
    /// Readings.
    pub readings: usize,
}

/// What fitted speeds do with radius.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SpeedTrend {
    /// One speed fits, free fall does not.
    Constant,
    /// Faster toward the centre.
    RisingInward,
    /// Slower toward the centre.
    FallingInward,
    /// Neither one speed nor free fall is excluded.
    Untold,
}

/// Excess of chi2 from which a slope is excluded: three standard deviations.
const EXCLUDED: f64 = 9.0;

impl SpeedProfile {
    /// Which of one speed and free fall chi2 leaves.
    #[must_use]
    pub fn trend(&self) -> SpeedTrend {
        if self.chi2_over_constant >= EXCLUDED {
            if self.slope.value > 0.0 {
                SpeedTrend::RisingInward
            } else {
                SpeedTrend::FallingInward
            }
        } else if self.chi2_over_free_fall >= EXCLUDED {
            SpeedTrend::Constant
        } else {
            SpeedTrend::Untold
        }
    }

    /// The fitted speed at a projected radius, km/s.
    #[must_use]
    pub fn at(&self, radius_arcsec: f64, beam_fwhm_arcsec: f64) -> f64 {
        let ratio = seen_radius(radius_arcsec, beam_fwhm_arcsec) / self.reference_arcsec;
        self.speed_km_s.value * ratio.powf(-self.slope.value)
    }

    /// The trend in a sentence, and what it is worth.
    #[must_use]
    pub fn sentence(&self) -> String {
        let found = match self.trend() {
            SpeedTrend::Constant => "Fitted inward speeds do not change with radius",
            SpeedTrend::RisingInward => "Fitted inward speeds rise inward",
            SpeedTrend::FallingInward => "Fitted inward speeds fall inward",
            SpeedTrend::Untold => "Fitted inward speeds do not tell one speed from free fall",
        };
        format!(
            "{found} (chi2 higher by {:.1} at one speed and by {:.1} in free fall than at the best slope). On simulated maps of clumps of 2 to 3.5 beams radius such slopes are the same for gas at one speed and in free fall: they say nothing of the gas.",
            self.chi2_over_constant, self.chi2_over_free_fall
        )
    }
}

/// Slopes that are looked through.
const LOWEST_SLOPE: f64 = -1.5;
const HIGHEST_SLOPE: f64 = 2.5;
const SLOPES: u32 = 400;
/// That of free fall onto a point.
const FREE_FALL: f64 = 0.5;

/// The rms distance from the centre of what a beam sees at a projected radius, arcsec.
fn seen_radius(projected_arcsec: f64, beam_fwhm_arcsec: f64) -> f64 {
    let beam = beam_fwhm_arcsec / FWHM_PER_SIGMA;
    (projected_arcsec * projected_arcsec + 2.0 * beam * beam).sqrt()
}

/// Fits v = v_r (r/r_r)^-q by weighted least squares, at radii
///
///   r = sqrt(b^2 + 2 s^2),   b the projected radius, s = FWHM/sqrt(8 ln 2) of the beam
///
/// which is the rms distance from the centre of what a beam sees. For each q the best v_r is that of
/// linear least squares; q is where chi2 is lowest, errors from the linear problem there. Differences of chi2,
/// to one speed and to free fall, are divided by the ratio of the slope's variance with the full covariance
/// to that of independent readings.
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
    let radius = |x: f64, y: f64| seen_radius((x - x_centre).hypot(y - y_centre), beam_fwhm_arcsec);
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
    let (lowest, slope, speed) = best;
    // one Gauss-Newton step in both parameters, which refines the slope and gives the errors
    let fit = LinearFit::new(speeds, |x, y| {
        let power = ratio(x, y).powf(-slope);
        let by_slope = -speed * power * ratio(x, y).ln();
        [power, by_slope]
    })?;
    let err = |index: usize| fit.covariance[index][index].sqrt() * fit.inflation();
    let over = |slope: f64| {
        let excess = with(slope)?.chi2 - lowest;
        Ok::<f64, GridError>((excess / fit.variance_ratio(1)).max(0.0))
    };
    let one_speed = with(0.0)?;
    let one_speed_err = one_speed.covariance[0][0].sqrt() * one_speed.inflation();
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
        constant_km_s: Estimate {
            value: one_speed.parameters[0],
            err: one_speed_err,
        },
        chi2_over_constant: over(0.0)?,
        chi2_over_free_fall: over(FREE_FALL)?,
        chi2_reduced: fit.chi2_reduced(),
        readings: readings.len(),
    })
}
