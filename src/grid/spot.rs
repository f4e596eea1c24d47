//! First moment of the thick line against projected radius: the central blue spot of infall.

use super::linear::LinearFit;
use super::{Centre, Field, GridError};
use crate::numeric::Estimate;

/// How the thick line's mean velocity changes with distance from the centre.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CentralSpot {
    /// First moment at the centre, km/s.
    pub v_centre_km_s: Estimate,
    /// Its rise with projected radius, km/s per arcsec: positive where the centre is bluest.
    pub slope_km_s_arcsec: Estimate,
    /// Slope over its error, the error enlarged by the root of the reduced chi2 where that is above 1.
    pub significance: f64,
    /// The plane that is taken up: change of the moment to the east and north, km/s per arcsec.
    pub plane_km_s_arcsec: [f64; 2],
    /// chi2 over the degrees of freedom.
    pub chi2_reduced: f64,
    /// Readings.
    pub readings: usize,
}

/// Fits M = m + s b + g (p - c) by weighted least squares, b = |p - c| the projected radius.
///
/// The plane g takes up what is odd about the centre, such as rotation. Gas that falls in toward a
/// warmer centre shows its rear half blue-shifted and brighter, the more so the nearer to the centre: the
/// first moment is bluest there (Estalella et al. 2019, doi:10.1051/0004-6361/201834998, from memory).
/// A static clump has s = 0, an expanding one s < 0.
///
/// # Errors
///
/// [`GridError::TooFewReadings`] below five, [`GridError::OneLine`] where they do not spread.
pub fn central_spot(moments: &Field, centre: &Centre) -> Result<CentralSpot, GridError> {
    let [x_centre, y_centre] = centre.at_arcsec;
    let fit = LinearFit::new(moments, |x, y| {
        let (x, y) = (x - x_centre, y - y_centre);
        [1.0, x.hypot(y), x, y]
    })?;
    let estimate = |index: usize| Estimate {
        value: fit.parameters[index],
        err: fit.covariance[index][index].sqrt(),
    };
    let slope = estimate(1);
    Ok(CentralSpot {
        v_centre_km_s: estimate(0),
        slope_km_s_arcsec: slope,
        significance: slope.value / (slope.err * fit.inflation()),
        plane_km_s_arcsec: [fit.parameters[2], fit.parameters[3]],
        chi2_reduced: fit.chi2_reduced(),
        readings: moments.readings().len(),
    })
}
