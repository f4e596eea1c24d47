//! Radiation temperature J(T), its slope and its inverse.

use crate::constants::{BACKGROUND_TEMPERATURE, photon_temperature_k};

/// Radiation temperature at one frequency.
///
/// J(T) = x / (e^(x/T) - 1), x = h nu / k (`photon_k`, K). It is what replaces T in the transfer
/// equation when intensities are written as brightness temperatures.
///
/// ```
/// let scale = inrush::model::RadiationTemperature::new(89.1885247);
/// assert!((scale.at(10.0) - 8.012028773672958).abs() < 1e-12); // astropy 8.0.2, BlackBody
/// ```
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RadiationTemperature {
    photon_k: f64,
}

impl RadiationTemperature {
    /// The scale at a frequency in GHz.
    #[must_use]
    pub fn new(frequency_ghz: f64) -> Self {
        Self {
            photon_k: photon_temperature_k(frequency_ghz),
        }
    }

    /// J(T) in K of T in K; 0 at T <= 0.
    #[must_use]
    pub fn at(&self, temperature_k: f64) -> f64 {
        if temperature_k <= 0.0 {
            return 0.0;
        }
        self.photon_k / (self.photon_k / temperature_k).exp_m1()
    }

    /// dJ/dT, without unit.
    #[must_use]
    pub fn slope(&self, temperature_k: f64) -> f64 {
        if temperature_k <= 0.0 {
            return 0.0;
        }
        let half = 0.5 * self.photon_k / temperature_k;
        let ratio = half / half.sinh();
        ratio * ratio
    }

    /// J of the cosmic background (2.72548 K; Fixsen 2009), K.
    #[must_use]
    pub fn background(&self) -> f64 {
        self.at(BACKGROUND_TEMPERATURE.value)
    }

    /// T of a given J, K; 0 at J <= 0.
    #[must_use]
    pub fn inverse(&self, radiation_k: f64) -> f64 {
        if radiation_k <= 0.0 {
            return 0.0;
        }
        self.photon_k / (self.photon_k / radiation_k).ln_1p()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn radiation_temperature_agrees_with_a_black_body_of_another_library() {
        // astropy 8.0.2 BlackBody, converted with the exact SI constants.
        let cases = [
            (89.188_524_7, 2.725, 1.123_340_904_661_981_3),
            (89.188_524_7, 5.0, 3.161_507_113_538_551_7),
            (89.188_524_7, 15.0, 12.961_461_759_864_106),
            (89.188_524_7, 50.0, 47.890_345_227_882_32),
        ];
        for (frequency, temperature, expected) in cases {
            let found = RadiationTemperature::new(frequency).at(temperature);
            assert!(
                (found / expected - 1.0).abs() < 1e-13,
                "{frequency} {temperature}: {found}"
            );
        }
    }

    #[test]
    fn inverse_undoes_and_slope_is_the_difference_quotient() {
        for frequency in [72.0, 89.2, 356.7] {
            let scale = RadiationTemperature::new(frequency);
            for temperature in [2.72548, 4.0, 20.0, 300.0] {
                assert!((scale.inverse(scale.at(temperature)) / temperature - 1.0).abs() < 1e-13);
                let step = 1e-4 * temperature;
                let quotient =
                    (scale.at(temperature + step) - scale.at(temperature - step)) / (2.0 * step);
                assert!((scale.slope(temperature) - quotient).abs() < 1e-7);
            }
        }
    }
}
