//! One quantity over a map: values, errors, and how noise goes together from place to place.

use super::GridError;

/// A value at one pointing.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Reading {
    /// Offset to the east, arcsec.
    pub dx_arcsec: f64,
    /// Offset to the north, arcsec.
    pub dy_arcsec: f64,
    /// The value.
    pub value: f64,
    /// Its standard error, in the same unit.
    pub err: f64,
}

/// A quantity at the pointings that have it.
///
/// Errors of two readings a distance d apart have the correlation 2^(-2 d^2/w^2), that of white noise
/// smoothed by a Gaussian of full width w. Where spectra were gridded from a fast scan, w is the width of
/// the gridding kernel; two beams of width w overlap by the same share, so the beam is the careful choice
/// where nothing is known. w = 0 stands for pointings observed one by one.
#[derive(Clone, Debug, PartialEq)]
pub struct Field {
    readings: Vec<Reading>,
    noise_fwhm_arcsec: f64,
}

/// Distance, in full widths, beyond which noise is independent: the correlation is 0.001 there.
const REACH: f64 = 2.2;

impl Field {
    /// Checks and takes the readings.
    ///
    /// # Errors
    ///
    /// [`GridError::Reading`] for one that is not finite or has no positive error,
    /// [`GridError::NoiseWidth`] for a negative width.
    pub fn new(readings: Vec<Reading>, noise_fwhm_arcsec: f64) -> Result<Self, GridError> {
        if !(noise_fwhm_arcsec >= 0.0 && noise_fwhm_arcsec.is_finite()) {
            return Err(GridError::NoiseWidth {
                found_arcsec: noise_fwhm_arcsec,
            });
        }
        for (number, reading) in readings.iter().enumerate() {
            let numbers = [reading.dx_arcsec, reading.dy_arcsec, reading.value];
            if !(numbers.iter().all(|number| number.is_finite())
                && reading.err > 0.0
                && reading.err.is_finite())
            {
                return Err(GridError::Reading {
                    number: number + 1,
                    reading: *reading,
                });
            }
        }
        Ok(Self {
            readings,
            noise_fwhm_arcsec,
        })
    }

    /// The readings.
    #[must_use]
    pub fn readings(&self) -> &[Reading] {
        &self.readings
    }

    /// Full width of the noise's kernel, arcsec.
    #[must_use]
    pub fn noise_fwhm_arcsec(&self) -> f64 {
        self.noise_fwhm_arcsec
    }

    /// The same places and noise with other values and errors; readings for which there is `None` are left
    /// out.
    pub(super) fn map(&self, change: impl Fn(&Reading) -> Option<Reading>) -> Self {
        Self {
            readings: self.readings.iter().filter_map(change).collect(),
            noise_fwhm_arcsec: self.noise_fwhm_arcsec,
        }
    }

    /// Calls `take` with every pair of readings whose errors go together and their covariance; each pair
    /// once in either order, and each reading with itself.
    pub(super) fn each_covariance(&self, mut take: impl FnMut(usize, usize, f64)) {
        let all = &self.readings;
        let reach = REACH * self.noise_fwhm_arcsec;
        let mut by_height: Vec<usize> = (0..all.len()).collect();
        by_height.sort_by(|a, b| all[*a].dy_arcsec.total_cmp(&all[*b].dy_arcsec));
        for (place, &i) in by_height.iter().enumerate() {
            take(i, i, all[i].err * all[i].err);
            for &j in &by_height[place + 1..] {
                let north = all[j].dy_arcsec - all[i].dy_arcsec;
                if north > reach || self.noise_fwhm_arcsec == 0.0 {
                    break;
                }
                let square = north * north + (all[j].dx_arcsec - all[i].dx_arcsec).powi(2);
                if square > reach * reach {
                    continue;
                }
                let correlation = (-2.0 * square / self.noise_fwhm_arcsec.powi(2)).exp2();
                let covariance = correlation * all[i].err * all[j].err;
                take(i, j, covariance);
                take(j, i, covariance);
            }
        }
    }
}
