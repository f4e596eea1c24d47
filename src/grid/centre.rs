//! Where a clump's centre is, from the brightness of its thin line.

use super::{Field, GridError, Reading};

/// A place on the sky with its errors.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Centre {
    /// Offset to the east and north, arcsec.
    pub at_arcsec: [f64; 2],
    /// Covariance, arcsec^2.
    pub covariance: [[f64; 2]; 2],
}

impl Centre {
    /// A place that is known.
    #[must_use]
    pub fn known(at_arcsec: [f64; 2]) -> Self {
        Self {
            at_arcsec,
            covariance: [[0.0; 2]; 2],
        }
    }

    /// Variance of a component along a direction (east, north), times its square.
    pub(super) fn variance_along(&self, [east, north]: [f64; 2]) -> f64 {
        let [[xx, xy], [_, yy]] = self.covariance;
        east * east * xx + 2.0 * east * north * xy + north * north * yy
    }
}

/// Significance from which a reading's brightness counts.
const BRIGHT: f64 = 3.0;

/// The mean place, weighted by the square of the thin line's integral:
///
///   c = sum I_i^2 p_i/sum I_i^2 over readings above 3 of their errors; dc/dI_i = 2 I_i (p_i - c)/sum I^2
///
/// Squares let the bright middle decide, so that it matters little where the map ends. The weight is
/// ours. Errors hold noise alone: a clump that is not symmetric has no one centre.
///
/// # Errors
///
/// [`GridError::NoCentre`] where nothing is bright.
pub fn centre(integrals: &Field) -> Result<Centre, GridError> {
    let bright = integrals.map(|one| (one.value > BRIGHT * one.err).then_some(*one));
    let readings = bright.readings();
    if readings.is_empty() {
        return Err(GridError::NoCentre {
            found: integrals.readings().len(),
        });
    }
    let total: f64 = readings.iter().map(|one| one.value * one.value).sum();
    let mean = |of: fn(&Reading) -> f64| {
        readings
            .iter()
            .map(|one| one.value * one.value * of(one))
            .sum::<f64>()
            / total
    };
    let at_arcsec = [mean(|one| one.dx_arcsec), mean(|one| one.dy_arcsec)];
    let slopes: Vec<[f64; 2]> = readings
        .iter()
        .map(|one| {
            let from = [one.dx_arcsec - at_arcsec[0], one.dy_arcsec - at_arcsec[1]];
            from.map(|offset| 2.0 * one.value * offset / total)
        })
        .collect();
    let mut covariance = [[0.0; 2]; 2];
    bright.each_covariance(|i, j, value| {
        for a in 0..2 {
            for b in 0..2 {
                covariance[a][b] += slopes[i][a] * slopes[j][b] * value;
            }
        }
    });
    Ok(Centre {
        at_arcsec,
        covariance,
    })
}
