//! Mass of gas from the thermal emission of its dust.

use crate::constants::{BOLTZMANN, PARSEC, PLANCK, SOLAR_MASS, SPEED_OF_LIGHT};

/// Planck function.
///
/// B_nu(T) = 2 h nu^3/c^2/(exp(h nu/(k T)) - 1), in W m-2 Hz-1 sr-1
///
/// nu: frequency, GHz; T: temperature, K. Source: textbook. Valid for T > 0.
///
/// ```
/// let intensity = inrush::derive::planck_w_m2_hz_sr(89.1885247, 10.0);
/// assert!((intensity / 1.9580885736610022e-17 - 1.0).abs() < 1e-13); // astropy 8.0.2
/// ```
#[must_use]
pub fn planck_w_m2_hz_sr(frequency_ghz: f64, temperature_k: f64) -> f64 {
    let nu = frequency_ghz * 1e9;
    let x = PLANCK.value * nu / (BOLTZMANN.value * temperature_k);
    2.0 * PLANCK.value * nu.powi(3) / SPEED_OF_LIGHT.value.powi(2) / x.exp_m1()
}

/// Mass of gas from a flux of its dust.
///
/// M = S d^2/(kappa B_nu(T_d)), in solar masses
///
/// S: flux, Jy (`dust_flux_jy`); d: distance, kpc (`distance_kpc`); kappa: opacity per gram of gas
/// and dust together, cm2 g-1 (`dust_kappa_cm2_g`); nu: frequency, GHz (`dust_freq_ghz`); T_d: dust
/// temperature, K (`dust_temperature_k`).
/// Source: Hildebrand 1983, QJRAS 24, 267. Valid for optically thin emission of one temperature;
/// an opacity per gram of dust has to be divided by the mass ratio of gas to dust first.
///
/// ```
/// let mass = inrush::derive::dust_mass_msun(1.0, 1.0, 0.01, 230.0, 20.0);
/// assert!((mass / 19.65994 - 1.0).abs() < 1e-6);
/// ```
#[must_use]
pub fn dust_mass_msun(
    flux_jy: f64,
    distance_kpc: f64,
    kappa_cm2_g: f64,
    frequency_ghz: f64,
    temperature_k: f64,
) -> f64 {
    let distance_m = distance_kpc * 1e3 * PARSEC.value;
    let kappa_m2_kg = kappa_cm2_g * 0.1;
    let intensity = planck_w_m2_hz_sr(frequency_ghz, temperature_k);
    flux_jy * 1e-26 * distance_m.powi(2) / (kappa_m2_kg * intensity) / SOLAR_MASS.value
}
