//! What of a map is even about the centre and what is odd along an axis.

use super::gradient::Vector;
use super::linear::LinearFit;
use super::{Centre, Field, GridError, Reading};
use crate::numeric::Estimate;
use crate::numeric::sampling::padded;

/// The even and the odd part of a map.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Parity {
    /// Mean of the even part.
    pub even: Part,
    /// Size of the odd part: change over distance, per arcsec; never negative.
    pub odd_per_arcsec: Estimate,
    /// Position angle in which the odd part increases, deg from north through east, 0 to 360.
    pub odd_angle_deg: Estimate,
    /// Significance of the odd part.
    pub odd_significance: f64,
    /// Mean of the even part in the two quarters of the map about the odd part's axis, and in the two
    /// across it, both without the beam about the centre; `None` where there are too few readings.
    pub along: Option<Part>,
    /// See `along`.
    pub across: Option<Part>,
    /// chi2 over the degrees of freedom.
    pub chi2_reduced: f64,
    /// Readings.
    pub readings: usize,
}

/// A mean with what its error consists of.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Part {
    /// Value and standard error: noise, the centre's uncertainty, and the systematic.
    pub mean: Estimate,
    /// Mean over its error, the noise enlarged by the root of the reduced chi2 where that is above 1.
    pub significance: f64,
}

/// Fewest readings of a map's parity, and of that of two quarters.
const FEWEST: usize = 8;
const FEWEST_IN_QUARTERS: usize = 6;

/// Splits a map by a plane about the centre, m = e + g (p - c), weighted least squares:
///
/// - even part e, the mean once what is odd is taken off;
///   variance = noise + g^T C_c g + systematic^2, C_c the covariance of the centre: a wrong centre turns an
///   odd map into an even one;
/// - odd part g, with size, position angle and significance as of [`Gradient`](super::Gradient).
///
/// Noise follows the readings' covariance ([`Field`]). `systematic` is an error common to all readings,
/// as that of a rest frequency. The same fit to opposite quarters of the map tells whether what is even
/// is so on all sides. Whatever shape an odd map has, it leaves e at zero where the readings lie evenly
/// about the centre.
///
/// # Errors
///
/// [`GridError::TooFewReadings`] below eight, [`GridError::OneLine`] where they do not spread.
pub fn parity(
    map: &Field,
    centre: &Centre,
    systematic: f64,
    beam_fwhm_arcsec: f64,
) -> Result<Parity, GridError> {
    let found = map.readings().len();
    if found < FEWEST {
        return Err(GridError::TooFewReadings {
            found,
            needed: FEWEST,
        });
    }
    let fit = plane(map, centre)?;
    let vector = Vector::of_plane(&fit);
    let (odd_per_arcsec, odd_angle_deg) = vector.size_and_angle();
    let (sin, cos) = odd_angle_deg.value.to_radians().sin_cos();
    let in_quarters = |along: bool| {
        let part = map.map(|one| {
            let (x, y) = from_centre(one, centre);
            let (lengthwise, crosswise) = ((x * sin + y * cos).abs(), (x * cos - y * sin).abs());
            let outside = x.hypot(y) > 0.5 * beam_fwhm_arcsec;
            (outside && (lengthwise > crosswise) == along).then_some(*one)
        });
        if part.readings().len() < FEWEST_IN_QUARTERS {
            return None;
        }
        let fit = plane(&part, centre).ok()?;
        Some(even_part(&fit, centre, systematic))
    };
    Ok(Parity {
        even: even_part(&fit, centre, systematic),
        odd_per_arcsec,
        odd_angle_deg,
        odd_significance: vector.significance(fit.inflation()),
        along: in_quarters(true),
        across: in_quarters(false),
        chi2_reduced: fit.chi2_reduced(),
        readings: found,
    })
}

fn from_centre(reading: &Reading, centre: &Centre) -> (f64, f64) {
    let [x, y] = centre.at_arcsec;
    (reading.dx_arcsec - x, reading.dy_arcsec - y)
}

fn plane(map: &Field, centre: &Centre) -> Result<LinearFit, GridError> {
    let [x_centre, y_centre] = centre.at_arcsec;
    LinearFit::new(map, 3, |x, y| padded(&[1.0, x - x_centre, y - y_centre]))
}

fn even_part(fit: &LinearFit, centre: &Centre, systematic: f64) -> Part {
    let value = fit.parameters[0];
    let noise = fit.covariance[0][0].max(0.0);
    let other = centre.variance_along([fit.parameters[1], fit.parameters[2]]) + systematic.powi(2);
    Part {
        mean: Estimate {
            value,
            err: (noise + other).sqrt(),
        },
        significance: value / (noise * fit.inflation().powi(2) + other).sqrt(),
    }
}
