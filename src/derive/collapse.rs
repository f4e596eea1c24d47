//! Rates and time scales of collapse.

use super::gas::mass_density_g_cm3;
use crate::constants::{GRAVITATION, PARSEC, SOLAR_MASS, YEAR};
use std::f64::consts::PI;

/// G M/R in km2 s-2 for one solar mass and one parsec.
pub(super) const GRAVITY_KM2_S2: f64 = GRAVITATION.value * SOLAR_MASS.value / PARSEC.value * 1e-6;

/// km/s over pc in 1/yr.
const KM_S_PER_PC_IN_PER_YR: f64 = 1e3 / PARSEC.value * YEAR.value;

/// (km/s)^3/G in solar masses a year.
const KM3_S3_PER_G_IN_MSUN_YR: f64 = 1e9 / GRAVITATION.value / SOLAR_MASS.value * YEAR.value;

/// Mass infall rate through a sphere from the density at it.
///
/// dM/dt = 4 pi R^2 mu m_H n v_in, in solar masses a year
///
/// R: radius, pc (`radius_pc`); n: number density of H2 at R, cm-3 (`n_h2_cm3`), mu = 2.8;
/// v_in: inward speed at R, km/s (`v_in_km_s`), positive for infall; a negative one gives a loss.
/// Source: conservation of mass. Valid for spherical flow.
///
/// ```
/// let rate = inrush::derive::mass_rate_from_density_msun_yr(0.1, 1e5, 0.5);
/// assert!((rate / 4.449090972e-4 - 1.0).abs() < 1e-9);
/// ```
#[must_use]
pub fn mass_rate_from_density_msun_yr(radius_pc: f64, n_h2_cm3: f64, v_in_km_s: f64) -> f64 {
    let radius_cm = radius_pc * PARSEC.value * 1e2;
    let g_per_s = 4.0 * PI * radius_cm.powi(2) * mass_density_g_cm3(n_h2_cm3) * (v_in_km_s * 1e5);
    g_per_s * 1e-3 / SOLAR_MASS.value * YEAR.value
}

/// Mass infall rate through a sphere from the mass within it.
///
/// dM/dt = (3 - p) M v_in/R, in solar masses a year
///
/// M: mass within R, solar masses (`mass_msun`); R: radius, pc (`radius_pc`); p: rho ~ r^-p
/// (`density_slope`); v_in: inward speed at R, km/s (`v_in_km_s`).
/// Source: [`mass_rate_from_density_msun_yr`] with rho(R) = (3 - p) M/(4 pi R^3). Valid for p < 3.
///
/// ```
/// let rate = inrush::derive::mass_rate_from_mass_msun_yr(1000.0, 0.5, 0.0, 1.0);
/// assert!((rate / 6.136272990e-3 - 1.0).abs() < 1e-9);
/// ```
#[must_use]
pub fn mass_rate_from_mass_msun_yr(
    mass_msun: f64,
    radius_pc: f64,
    density_slope: f64,
    v_in_km_s: f64,
) -> f64 {
    (3.0 - density_slope) * mass_msun * v_in_km_s / radius_pc * KM_S_PER_PC_IN_PER_YR
}

/// Free-fall speed at the surface of a sphere, from rest at infinity.
///
/// v_ff = sqrt(2 G M/R), in km/s
///
/// M: mass within R, solar masses (`mass_msun`); R: radius, pc (`radius_pc`).
/// Source: energy conservation. Valid for positive values.
///
/// ```
/// let speed = inrush::derive::free_fall_speed_km_s(100.0, 0.1);
/// assert!((speed - 2.932888).abs() < 5e-7);
/// ```
#[must_use]
pub fn free_fall_speed_km_s(mass_msun: f64, radius_pc: f64) -> f64 {
    (2.0 * GRAVITY_KM2_S2 * mass_msun / radius_pc).sqrt()
}

/// Free-fall time of a sphere of uniform density from rest.
///
/// t_ff = sqrt(3 pi/(32 G rho)), rho = mu m_H n, in years
///
/// n: mean number density of H2, cm-3 (`n_h2_mean_cm3`), mu = 2.8.
/// Source: textbook. Valid for n > 0, pressure and field neglected.
///
/// ```
/// let time = inrush::derive::free_fall_time_yr(1e5);
/// assert!((time - 97242.83).abs() < 5e-3);
/// ```
#[must_use]
pub fn free_fall_time_yr(n_h2_mean_cm3: f64) -> f64 {
    let rho_kg_m3 = mass_density_g_cm3(n_h2_mean_cm3) * 1e3;
    (3.0 * PI / (32.0 * GRAVITATION.value * rho_kg_m3)).sqrt() / YEAR.value
}

/// Time in which a steady rate brings in as much mass as is there.
///
/// t_2 = M/(dM/dt), in years
///
/// M: solar masses (`mass_msun`); dM/dt: solar masses a year (`mass_rate_msun_yr`).
/// Source: definition. A rate of zero or less never doubles the mass: infinite.
///
/// ```
/// let time = inrush::derive::doubling_time_yr(750.0, 2.5e-3);
/// assert!((time - 3e5).abs() < 1e-6);
/// ```
#[must_use]
pub fn doubling_time_yr(mass_msun: f64, mass_rate_msun_yr: f64) -> f64 {
    if mass_rate_msun_yr > 0.0 {
        mass_msun / mass_rate_msun_yr
    } else {
        f64::INFINITY
    }
}

/// Rate at which a singular isothermal sphere collapses from the inside.
///
/// dM/dt = 0.975 a^3/G, in solar masses a year
///
/// a: effective sound speed, km/s. Source: Shu 1977, doi:10.1086/155274 (0.975 for the critical
/// sphere). Valid for a > 0; where turbulence is put into a, it has to act as a pressure.
///
/// ```
/// let rate = inrush::derive::isothermal_rate_msun_yr(inrush::derive::sound_speed_km_s(20.0));
/// assert!((rate / 4.369e-6 - 1.0).abs() < 1e-4);
/// ```
#[must_use]
pub fn isothermal_rate_msun_yr(effective_sound_speed_km_s: f64) -> f64 {
    0.975 * effective_sound_speed_km_s.powi(3) * KM3_S3_PER_G_IN_MSUN_YR
}
