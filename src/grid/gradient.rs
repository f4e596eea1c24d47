//! A plane through velocities on the sky: size and direction of the velocity gradient.

use super::linear::LinearFit;
use super::{Field, GridError};
use crate::numeric::Estimate;
use statrs::distribution::{ChiSquared, ContinuousCDF};

/// A velocity gradient.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Gradient {
    /// Velocity at the centre, km/s.
    pub v_centre_km_s: Estimate,
    /// Velocity over distance to the east, km/s per arcsec.
    pub east_km_s_arcsec: Estimate,
    /// Velocity over distance to the north, km/s per arcsec.
    pub north_km_s_arcsec: Estimate,
    /// Covariance of the two.
    pub covariance: f64,
    /// Size, km/s per arcsec; never negative, and so too large on average where it is not significant.
    pub size_km_s_arcsec: Estimate,
    /// Position angle in which velocity increases, deg from north through east, 0 to 360.
    pub angle_deg: Estimate,
    /// Significance of a size above 0, in standard deviations of a normal variable, errors enlarged by the
    /// root of the reduced chi2 where that is above 1.
    pub significance: f64,
    /// chi2 of the plane over the degrees of freedom: above 1 the velocities are no plane.
    pub chi2_reduced: f64,
    /// Readings.
    pub readings: usize,
}

/// Fits v = v_c + a (x - x_c) + b (y - y_c) by weighted least squares.
///
/// Size G = sqrt(a^2 + b^2), position angle atan2(a, b); errors to first order from the covariance of
/// (a, b), which follows from that of the readings (see [`Field`]). The significance is that of
/// chi2 = (a, b) C^-1 (a, b)^T with two degrees of freedom. Goodman et al. 1993 (doi:10.1086/172465), from
/// memory; the full covariance is ours.
///
/// ```
/// use inrush::grid::{Field, Reading, gradient};
///
/// let readings = (0..9).map(|i| {
///     let (dx_arcsec, dy_arcsec) = (10.0 * f64::from(i % 3), 10.0 * f64::from(i / 3));
///     Reading { dx_arcsec, dy_arcsec, value: 7.0 + 0.02 * dx_arcsec, err: 0.1 }
/// });
/// let found = gradient(&Field::new(readings.collect(), 0.0)?, [10.0, 10.0])?;
/// assert!((found.size_km_s_arcsec.value - 0.02).abs() < 1e-12);
/// assert!((found.angle_deg.value - 90.0).abs() < 1e-9); // velocity increases to the east
/// # Ok::<(), inrush::grid::GridError>(())
/// ```
///
/// # Errors
///
/// [`GridError::TooFewReadings`] below four, [`GridError::OneLine`] where all lie on one line.
pub fn gradient(velocities: &Field, centre_arcsec: [f64; 2]) -> Result<Gradient, GridError> {
    let [x_centre, y_centre] = centre_arcsec;
    let fit = LinearFit::new(velocities, |x, y| [1.0, x - x_centre, y - y_centre])?;
    let estimate = |index: usize| Estimate {
        value: fit.parameters[index],
        err: fit.covariance[index][index].sqrt(),
    };
    let (east, north) = (estimate(1), estimate(2));
    let covariance = fit.covariance[1][2];
    let vector = Vector::of_plane(&fit);
    let (size_km_s_arcsec, angle_deg) = vector.size_and_angle();
    Ok(Gradient {
        v_centre_km_s: estimate(0),
        east_km_s_arcsec: east,
        north_km_s_arcsec: north,
        covariance,
        size_km_s_arcsec,
        angle_deg,
        significance: vector.significance(fit.inflation()),
        chi2_reduced: fit.chi2_reduced(),
        readings: velocities.readings().len(),
    })
}

/// A vector on the sky, to the east and north, with its covariance.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Vector {
    pub parts: [f64; 2],
    pub covariance: [[f64; 2]; 2],
}

impl Vector {
    /// The slopes of a plane, its second and third term.
    pub fn of_plane(fit: &LinearFit) -> Self {
        Self {
            parts: [fit.parameters[1], fit.parameters[2]],
            covariance: [
                [fit.covariance[1][1], fit.covariance[1][2]],
                [fit.covariance[2][1], fit.covariance[2][2]],
            ],
        }
    }

    /// Length and position angle in deg, 0 to 360, with errors to first order.
    pub fn size_and_angle(&self) -> (Estimate, Estimate) {
        let [a, b] = self.parts;
        let size = a.hypot(b);
        let error = |slopes: [f64; 2]| {
            let [[aa, ab], [_, bb]] = self.covariance;
            let [p, q] = slopes;
            (p * p * aa + 2.0 * p * q * ab + q * q * bb).max(0.0).sqrt()
        };
        let square = size * size;
        (
            Estimate {
                value: size,
                err: error([a / size, b / size]),
            },
            Estimate {
                value: a.atan2(b).to_degrees().rem_euclid(360.0),
                err: error([b / square, -a / square]).to_degrees().min(180.0),
            },
        )
    }

    /// Significance of a length above 0, errors being `inflation` times as large.
    pub fn significance(&self, inflation: f64) -> f64 {
        let [a, b] = self.parts;
        let [[aa, ab], [_, bb]] = self.covariance;
        let determinant = aa * bb - ab * ab;
        if determinant <= 0.0 {
            return 0.0;
        }
        let chi2 = (a * a * bb - 2.0 * a * b * ab + b * b * aa) / determinant;
        significance_of(chi2 / inflation.powi(2), 2)
    }
}

/// Deviations of a normal variable, either sign, that are as rare as a chi2 of some degrees of freedom.
pub(super) fn significance_of(chi2: f64, degrees_of_freedom: u32) -> f64 {
    let Ok(distribution) = ChiSquared::new(f64::from(degrees_of_freedom)) else {
        return 0.0;
    };
    let rarity = distribution.sf(chi2);
    if rarity <= FAR {
        // the tail of either distribution is exp(-chi2/2) but for factors that no longer matter
        return chi2.sqrt();
    }
    std::f64::consts::SQRT_2 * statrs::function::erf::erfc_inv(rarity)
}

/// Probability below which the inverse is not asked.
const FAR: f64 = 1e-250;
