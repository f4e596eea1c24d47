//! Weighted linear least squares over a field, with errors from the full covariance of its readings.

use super::{Field, GridError};
use crate::numeric::sampling::matrix::{MOST_DIMENSIONS, Matrix, Point, inverse, padded};

/// Sums of functions of place, fitted to a field.
///
/// Weights are 1/err^2, as for independent readings; the covariance of the parameters is
/// (X^T W X)^-1 X^T W C W X (X^T W X)^-1 with the full covariance C. Weighting by C^-1 instead would
/// amplify whatever small structure the functions leave out, as C is nearly singular where a beam is
/// oversampled.
#[derive(Clone, Debug)]
pub(super) struct LinearFit {
    pub parameters: Point,
    pub covariance: Matrix,
    pub chi2: f64,
    pub degrees_of_freedom: usize,
    /// (X^T W X)^-1.
    inverse: Matrix,
}

impl LinearFit {
    /// Fits functions, given their values at an offset.
    pub fn new<const TERMS: usize>(
        field: &Field,
        functions: impl Fn(f64, f64) -> [f64; TERMS],
    ) -> Result<Self, GridError> {
        let terms = TERMS;
        let readings = field.readings();
        if readings.len() <= terms {
            return Err(GridError::TooFewReadings {
                found: readings.len(),
                needed: terms + 1,
            });
        }
        let rows: Vec<Point> = readings
            .iter()
            .map(|one| padded(&functions(one.dx_arcsec, one.dy_arcsec)))
            .collect();
        let mut normal = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
        let mut right = [0.0; MOST_DIMENSIONS];
        for (row, reading) in rows.iter().zip(readings) {
            let weight = reading.err.powi(-2);
            for a in 0..terms {
                right[a] += weight * row[a] * reading.value;
                for b in 0..terms {
                    normal[a][b] += weight * row[a] * row[b];
                }
            }
        }
        let inverse = inverse(&normal, terms).ok_or(GridError::OneLine {
            found: readings.len(),
        })?;
        let parameters = product(&inverse, &right);
        let mut spread = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
        field.each_covariance(|i, j, covariance| {
            let weight = covariance * (readings[i].err * readings[j].err).powi(-2);
            for a in 0..terms {
                for b in 0..terms {
                    spread[a][b] += weight * rows[i][a] * rows[j][b];
                }
            }
        });
        let chi2 = rows
            .iter()
            .zip(readings)
            .map(|(row, one)| ((one.value - dot(row, &parameters)) / one.err).powi(2))
            .sum();
        Ok(Self {
            parameters,
            covariance: sandwich(&inverse, &spread),
            chi2,
            degrees_of_freedom: readings.len() - terms,
            inverse,
        })
    }

    /// What the same fit, of the same `functions`, makes of other values at the places of a field; of
    /// nothing where there are none.
    pub fn of_values<const TERMS: usize>(
        &self,
        field: &Field,
        functions: impl Fn(f64, f64) -> [f64; TERMS],
        values: &[f64],
    ) -> Point {
        let mut right = [0.0; MOST_DIMENSIONS];
        for (one, value) in field.readings().iter().zip(values) {
            let row = padded(&functions(one.dx_arcsec, one.dy_arcsec));
            for (sum, function) in right.iter_mut().zip(row) {
                *sum += one.err.powi(-2) * function * value;
            }
        }
        product(&self.inverse, &right)
    }

    /// How much larger the variance of a parameter is by the readings' covariance, and by what the functions do
    /// not follow, than it were of independent readings that follow them: differences of chi2 divided by it
    /// count as those of independent readings.
    pub fn variance_ratio(&self, index: usize) -> f64 {
        self.covariance[index][index] / self.inverse[index][index] * self.inflation().powi(2)
    }

    /// chi2 over the degrees of freedom.
    pub fn chi2_reduced(&self) -> f64 {
        self.chi2 / self.degrees_of_freedom as f64
    }

    /// How much larger errors are than the readings' own say, where the functions do not follow the map:
    /// the root of the reduced chi2, at least 1.
    pub fn inflation(&self) -> f64 {
        self.chi2_reduced().max(1.0).sqrt()
    }
}

fn dot(a: &Point, b: &Point) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

fn product(matrix: &Matrix, vector: &Point) -> Point {
    matrix.map(|row| dot(&row, vector))
}

/// A B A for a symmetric A.
fn sandwich(outer: &Matrix, inner: &Matrix) -> Matrix {
    let mut half = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for (row, result) in inner.iter().zip(&mut half) {
        *result = product(outer, row);
    }
    // rows of `half` are those of B A; the columns are taken through A
    let mut whole = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
    for a in 0..MOST_DIMENSIONS {
        for b in 0..MOST_DIMENSIONS {
            whole[a][b] = (0..MOST_DIMENSIONS).map(|k| outer[a][k] * half[k][b]).sum();
        }
    }
    whole
}
