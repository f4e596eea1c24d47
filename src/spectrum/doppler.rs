//! Doppler conversions between frequency and the three velocity conventions. Pure functions.
//!
//! Sources: FITS standard 4.0, section 8.4; Greisen, Calabretta, Valdes & Allen 2006,
//! A&A 446, 747, doi:10.1051/0004-6361:20053818 (FITS Paper III), tables 1 and 3.
//!
//! With nu the frequency, `nu0` the rest frequency and c the speed of light:
//!
//! - radio        v = c (nu0 - nu) / nu0
//! - optical      v = c (nu0 - nu) / nu
//! - relativistic v = c (nu0^2 - nu^2) / (nu0^2 + nu^2)

use crate::constants::SPEED_OF_LIGHT_KM_S;

/// Radio-convention velocity (km/s) of a frequency (Hz), v = c (nu0 - nu)/nu0.
///
/// ```
/// // astropy 8.0.2, doppler_radio
/// let v = inrush::spectrum::doppler::radio_velocity_km_s(89.185e9, 89.1885247e9);
/// assert!((v - 11.847695432433614).abs() < 1e-9);
/// ```
pub fn radio_velocity_km_s(frequency_hz: f64, rest_frequency_hz: f64) -> f64 {
    SPEED_OF_LIGHT_KM_S * (rest_frequency_hz - frequency_hz) / rest_frequency_hz
}

/// Optical-convention velocity (km/s) of a frequency (Hz), v = c (nu0 - nu)/nu.
pub fn optical_velocity_km_s(frequency_hz: f64, rest_frequency_hz: f64) -> f64 {
    SPEED_OF_LIGHT_KM_S * (rest_frequency_hz - frequency_hz) / frequency_hz
}

/// Apparent radial (relativistic) velocity (km/s) of a frequency (Hz),
/// v = c (nu0^2 - nu^2)/(nu0^2 + nu^2).
pub fn relativistic_velocity_km_s(frequency_hz: f64, rest_frequency_hz: f64) -> f64 {
    let (nu, nu0) = (frequency_hz, rest_frequency_hz);
    SPEED_OF_LIGHT_KM_S * ((nu0 - nu) * (nu0 + nu)) / (nu0 * nu0 + nu * nu)
}

/// Frequency (Hz) of a radio-convention velocity (km/s), nu = nu0 (1 - v/c).
pub fn frequency_from_radio_hz(velocity_km_s: f64, rest_frequency_hz: f64) -> f64 {
    rest_frequency_hz * (1.0 - velocity_km_s / SPEED_OF_LIGHT_KM_S)
}

/// Frequency (Hz) of an optical-convention velocity (km/s), nu = nu0/(1 + v/c).
pub fn frequency_from_optical_hz(velocity_km_s: f64, rest_frequency_hz: f64) -> f64 {
    rest_frequency_hz / (1.0 + velocity_km_s / SPEED_OF_LIGHT_KM_S)
}

/// Frequency (Hz) of a relativistic velocity (km/s), nu = nu0 sqrt((1 - v/c)/(1 + v/c)).
pub fn frequency_from_relativistic_hz(velocity_km_s: f64, rest_frequency_hz: f64) -> f64 {
    let beta = velocity_km_s / SPEED_OF_LIGHT_KM_S;
    rest_frequency_hz * ((1.0 - beta) / (1.0 + beta)).sqrt()
}

/// Radio-convention velocity (km/s) of an optical-convention one, v/(1 + v/c); no rest frequency
/// enters.
pub fn radio_from_optical_km_s(velocity_km_s: f64) -> f64 {
    velocity_km_s / (1.0 + velocity_km_s / SPEED_OF_LIGHT_KM_S)
}

/// Radio-convention velocity (km/s) of a relativistic one; no rest frequency enters.
///
/// c (1 - r) with r = sqrt((1 - b)/(1 + b)) and b = v/c, written as
/// 2 v / ((1 + b)(1 + r)) so that nothing cancels near zero.
pub fn radio_from_relativistic_km_s(velocity_km_s: f64) -> f64 {
    let beta = velocity_km_s / SPEED_OF_LIGHT_KM_S;
    let ratio = ((1.0 - beta) / (1.0 + beta)).sqrt();
    2.0 * velocity_km_s / ((1.0 + beta) * (1.0 + ratio))
}

/// A radio-convention velocity (km/s) of one rest frequency, referred to another:
/// the frequency is kept, v' = (nu0/nu0') v + c (nu0' - nu0)/nu0'.
pub fn radio_with_other_rest_km_s(
    velocity_km_s: f64,
    rest_frequency_hz: f64,
    other_rest_frequency_hz: f64,
) -> f64 {
    let (old, new) = (rest_frequency_hz, other_rest_frequency_hz);
    old / new * velocity_km_s + SPEED_OF_LIGHT_KM_S * (new - old) / new
}

#[cfg(test)]
// Reference values stand as their source prints them.
#[allow(clippy::unreadable_literal)]
mod tests {
    use super::*;

    /// Rest and sky frequency (GHz), radio, optical and relativistic velocity (km/s):
    /// astropy 8.0.2 `doppler_radio`, `doppler_optical`, `doppler_relativistic`.
    const VELOCITIES: [[f64; 5]; 6] = [
        [
            89.1885247,
            89.185,
            11.847695432433614,
            11.84816366777224,
            11.84792954084917,
        ],
        [
            89.1885247,
            89.2,
            -38.57232087714621,
            -38.56735866914808,
            -38.56983945394503,
        ],
        [
            93.1733977,
            93.15,
            75.28387037181184,
            75.30278040310526,
            75.29332301279275,
        ],
        [
            97.9809533,
            97.9,
            247.69292370431023,
            247.89774045156736,
            247.79524743170904,
        ],
        [
            267.5576259,
            267.5,
            64.56855844553871,
            64.5824680578071,
            64.5755117536074,
        ],
        [
            115.2712018,
            115.0,
            705.3301515593644,
            706.9935150958685,
            706.1598743047111,
        ],
    ];

    /// Rest frequency (GHz), velocity (km/s), radio, optical and relativistic frequency (GHz):
    /// astropy 8.0.2, the same equivalencies inverted.
    const FREQUENCIES: [[f64; 5]; 5] = [
        [
            89.1885247,
            5.0,
            89.18703719552282,
            89.18703722033132,
            89.18703720792706,
        ],
        [
            89.1885247,
            -56.2,
            89.2052442503235,
            89.20524738520862,
            89.20524581776606,
        ],
        [
            93.1733977,
            7.2,
            93.17115999039278,
            93.1711600441337,
            93.17116001726325,
        ],
        [
            267.5576259,
            100.0,
            267.46837828260334,
            267.4684080424772,
            267.4683931625398,
        ],
        [
            89.1885247,
            5000.0,
            87.70102022281932,
            87.72542214678657,
            87.71322033622236,
        ],
    ];

    /// Velocities cancel digits of frequencies near c eps = 7e-11 km/s; astropy's own
    /// relativistic form squares first and loses a few times that.
    const VELOCITY_TOLERANCE_KM_S: f64 = 4e-10;

    #[test]
    fn velocities_agree_with_astropy() {
        for [rest, sky, radio, optical, relativistic] in VELOCITIES {
            let (rest, sky) = (rest * 1e9, sky * 1e9);
            for (ours, theirs) in [
                (radio_velocity_km_s(sky, rest), radio),
                (optical_velocity_km_s(sky, rest), optical),
                (relativistic_velocity_km_s(sky, rest), relativistic),
                (radio_from_optical_km_s(optical), radio),
                (radio_from_relativistic_km_s(relativistic), radio),
            ] {
                assert!(
                    (ours - theirs).abs() < VELOCITY_TOLERANCE_KM_S,
                    "{ours} {theirs}"
                );
            }
        }
    }

    #[test]
    fn frequencies_agree_with_astropy() {
        for [rest, velocity, radio, optical, relativistic] in FREQUENCIES {
            for (ours, theirs) in [
                (frequency_from_radio_hz(velocity, rest * 1e9), radio),
                (frequency_from_optical_hz(velocity, rest * 1e9), optical),
                (
                    frequency_from_relativistic_hz(velocity, rest * 1e9),
                    relativistic,
                ),
            ] {
                assert!(
                    (ours / (theirs * 1e9) - 1.0).abs() < 1e-15,
                    "{ours} {theirs}"
                );
            }
        }
    }

    #[test]
    fn another_rest_frequency_keeps_the_frequency() {
        let (old, new) = (89.1885247e9, 89.1884957e9);
        for velocity in [-120.0, 0.0, 3.5, 800.0] {
            let shifted = radio_with_other_rest_km_s(velocity, old, new);
            let through_frequency =
                radio_velocity_km_s(frequency_from_radio_hz(velocity, old), new);
            assert!((shifted - through_frequency).abs() < 2e-10);
        }
    }
}
