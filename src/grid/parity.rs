//! What of a map is even about the centre and what is odd along an axis.

use super::gradient::Vector;
use super::linear::LinearFit;
use super::{Centre, Field, GridError, Reading};
use crate::numeric::Estimate;
use crate::numeric::sampling::Point;

/// The even and the odd part of a map.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Parity {
    /// Mean of the even part, with the error of noise, the centre's uncertainty and the systematic.
    pub even: Estimate,
    /// The even part at the centre, likewise.
    pub even_at_centre: Estimate,
    /// Significance of an even part, of its mean and its change with radius together; it has the sign of
    /// the even part at the centre.
    pub even_significance: f64,
    /// Size of the odd part: change over distance, per arcsec; never negative.
    pub odd_per_arcsec: Estimate,
    /// Position angle in which the odd part increases, deg from north through east, 0 to 360.
    pub odd_angle_deg: Estimate,
    /// Significance of the odd part.
    pub odd_significance: f64,
    /// Mean of the even part in the two quarters of the map about the odd part's axis over its error,
    /// without the beam about the centre and without the systematic; `None` where there are too few
    /// readings.
    pub along: Option<f64>,
    /// The same in the two quarters across it.
    pub across: Option<f64>,
    /// chi2 over the degrees of freedom.
    pub chi2_reduced: f64,
    /// Readings.
    pub readings: usize,
    /// Weighted mean of r^2, arcsec^2.
    pub mean_square_arcsec2: f64,
}

impl Parity {
    /// The fitted even part at a distance from the centre.
    #[must_use]
    pub fn even_at(&self, radius_arcsec: f64) -> f64 {
        let change = self.even.value - self.even_at_centre.value;
        self.even.value + change * (radius_arcsec * radius_arcsec / self.mean_square_arcsec2 - 1.0)
    }

    /// The fitted odd part at offsets (east, north) from the centre.
    #[must_use]
    pub fn odd_at(&self, [east, north]: [f64; 2]) -> f64 {
        let (sin, cos) = self.odd_angle_deg.value.to_radians().sin_cos();
        self.odd_per_arcsec.value * (east * sin + north * cos)
    }
}

/// Fewest readings of a map's parity, and of that of two quarters.
const FEWEST: usize = 8;
const FEWEST_IN_QUARTERS: usize = 6;

/// Splits a map by m = e + f (r^2/<r^2> - 1) + g (p - c), weighted least squares, r the distance from the
/// centre c and <r^2> its weighted mean:
///
/// - even part e, f: e is its mean over the map once what is odd is taken off, e - f its value at the centre;
/// - odd part g, with size, position angle and significance as of [`Gradient`](super::Gradient).
///
/// Noise follows the readings' covariance ([`Field`]). A wrong centre turns an odd map into an even one:
/// g^T `C_c` g is added to the variance of e. `systematic` is what an error common to all readings does to
/// each, as that of a rest frequency; empty for none. With k its effect on (e, f), the significance of an even
/// part is that of chi2 = (e, f) (C + k k^T)^-1 (e, f)^T with two degrees of freedom. Whatever shape an odd map
/// has, it leaves e and f at zero where the readings lie evenly about the centre.
///
/// # Errors
///
/// [`GridError::TooFewReadings`] below eight, [`GridError::OneLine`] where they do not spread,
/// [`GridError::Systematic`] where there are other than one systematic a reading.
pub fn parity(
    map: &Field,
    centre: &Centre,
    systematic: &[f64],
    beam_fwhm_arcsec: f64,
) -> Result<Parity, GridError> {
    let readings = map.readings();
    if readings.len() < FEWEST {
        return Err(GridError::TooFewReadings {
            found: readings.len(),
            needed: FEWEST,
        });
    }
    if !(systematic.is_empty() || systematic.len() == readings.len()) {
        return Err(GridError::Systematic {
            found: systematic.len(),
            expected: readings.len(),
        });
    }
    let squares = |one: &Reading| {
        let (x, y) = from_centre(one, centre);
        (one.err.powi(-2), x * x + y * y)
    };
    let (weights, sum) = readings.iter().map(squares).fold((0.0, 0.0), |sums, one| {
        (sums.0 + one.0, sums.1 + one.0 * one.1)
    });
    let mean_square = sum / weights;
    let functions = |x: f64, y: f64| {
        let (x, y) = (x - centre.at_arcsec[0], y - centre.at_arcsec[1]);
        let radial = (x * x + y * y) / mean_square - 1.0;
        [1.0, x, y, radial]
    };
    let fit = LinearFit::new(map, functions)?;
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
        let noise = fit.covariance[0][0].max(0.0) * fit.inflation().powi(2);
        Some(fit.parameters[0] / (noise + by_centre(&fit, centre)).sqrt())
    };
    let even = Even::new(&fit, centre, &fit.of_values(map, functions, systematic));
    Ok(Parity {
        even: even.estimate([1.0, 0.0]),
        even_at_centre: even.estimate([1.0, -1.0]),
        even_significance: even.significance(),
        odd_per_arcsec,
        odd_angle_deg,
        odd_significance: vector.significance(fit.inflation()),
        along: in_quarters(true),
        across: in_quarters(false),
        chi2_reduced: fit.chi2_reduced(),
        readings: readings.len(),
        mean_square_arcsec2: mean_square,
    })
}

/// Mean and radial change of the even part: noise apart from what is common to all readings.
struct Even {
    values: Vector,
    common: [[f64; 2]; 2],
    inflation: f64,
}

impl Even {
    /// Of terms 0 and 3 of a fit; `systematic` is what the common error does to all terms.
    fn new(fit: &LinearFit, centre: &Centre, systematic: &Point) -> Self {
        let terms = [0, 3];
        let by_term = |a: usize, b: usize| systematic[terms[a]] * systematic[terms[b]];
        let mut common = [
            [by_term(0, 0), by_term(0, 1)],
            [by_term(1, 0), by_term(1, 1)],
        ];
        common[0][0] += by_centre(fit, centre);
        let covariance = terms.map(|a| terms.map(|b| fit.covariance[a][b]));
        Self {
            values: Vector {
                parts: terms.map(|term| fit.parameters[term]),
                covariance,
            },
            common,
            inflation: fit.inflation(),
        }
    }

    /// A sum of the two.
    fn estimate(&self, factors: [f64; 2]) -> Estimate {
        let [p, q] = factors;
        let sum = |c: &[[f64; 2]; 2]| p * p * c[0][0] + 2.0 * p * q * c[0][1] + q * q * c[1][1];
        let variance = sum(&self.values.covariance) + sum(&self.common);
        Estimate {
            value: p * self.values.parts[0] + q * self.values.parts[1],
            err: variance.max(0.0).sqrt(),
        }
    }

    fn significance(&self) -> f64 {
        let square = self.inflation * self.inflation;
        let mut whole = self.values;
        for a in 0..2 {
            for b in 0..2 {
                whole.covariance[a][b] = whole.covariance[a][b] * square + self.common[a][b];
            }
        }
        let [mean, radial] = whole.parts;
        whole.significance(1.0).copysign(mean - radial)
    }
}

/// What the centre's uncertainty adds to the variance of a mean.
fn by_centre(fit: &LinearFit, centre: &Centre) -> f64 {
    centre.variance_along([fit.parameters[1], fit.parameters[2]])
}

fn from_centre(reading: &Reading, centre: &Centre) -> (f64, f64) {
    let [x, y] = centre.at_arcsec;
    (reading.dx_arcsec - x, reading.dy_arcsec - y)
}

fn plane(map: &Field, centre: &Centre) -> Result<LinearFit, GridError> {
    let [x_centre, y_centre] = centre.at_arcsec;
    LinearFit::new(map, |x, y| [1.0, x - x_centre, y - y_centre])
}
