//! Thermal and turbulent support: dispersions, Mach number, virial parameter.

use super::collapse::GRAVITY_KM2_S2;
use super::gas::MASS_PER_PARTICLE;
use crate::constants::{ATOMIC_MASS, BOLTZMANN, HYDROGEN_MASS};

/// Isothermal sound speed of molecular gas.
///
/// c_s = sqrt(k T/(mu m_H)), in km/s
///
/// T: kinetic temperature, K (`t_kin_k`); mu = 2.33 ([`MASS_PER_PARTICLE`]).
/// Source: textbook. Valid for T >= 0.
///
/// ```
/// let speed = inrush::derive::sound_speed_km_s(20.0);
/// assert!((speed - 0.26611).abs() < 1e-5);
/// ```
#[must_use]
pub fn sound_speed_km_s(t_kin_k: f64) -> f64 {
    (BOLTZMANN.value * t_kin_k / (MASS_PER_PARTICLE * HYDROGEN_MASS.value)).sqrt() * 1e-3
}

/// Thermal dispersion of a molecule along the line of sight.
///
/// sigma_th = sqrt(k T/m), in km/s
///
/// T: kinetic temperature, K (`t_kin_k`); m: mass of the molecule, atomic mass units.
/// Source: textbook (Maxwell's distribution). Valid for T >= 0.
///
/// ```
/// let dispersion = inrush::derive::thermal_dispersion_km_s(18.0, 30.0); // H13CO+
/// assert!((dispersion - 0.07063).abs() < 1e-5);
/// ```
#[must_use]
pub fn thermal_dispersion_km_s(t_kin_k: f64, mass_u: f64) -> f64 {
    (BOLTZMANN.value * t_kin_k / (mass_u * ATOMIC_MASS.value)).sqrt() * 1e-3
}

/// Dispersion of the gas's motions, without the molecule's own thermal motion.
///
/// sigma_nt = sqrt(sigma^2 - sigma_th^2), in km/s; 0 where the line is narrower than sigma_th
///
/// sigma: dispersion of the line, km/s (`sigma_km_s`); sigma_th: [`thermal_dispersion_km_s`].
/// Source: variances of independent motions add.
///
/// ```
/// let dispersion = inrush::derive::non_thermal_dispersion_km_s(0.7, 0.0706);
/// assert!((dispersion - 0.69643).abs() < 1e-5);
/// ```
#[must_use]
pub fn non_thermal_dispersion_km_s(sigma_km_s: f64, thermal_km_s: f64) -> f64 {
    (sigma_km_s.powi(2) - thermal_km_s.powi(2)).max(0.0).sqrt()
}

/// One-dimensional dispersion of the mean particle: of all the gas.
///
/// sigma_tot = sqrt(sigma_nt^2 + c_s^2), in km/s
///
/// sigma_nt: [`non_thermal_dispersion_km_s`]; c_s: [`sound_speed_km_s`]. Source: variances of
/// independent motions add. It is the effective sound speed of [`super::isothermal_rate_msun_yr`]
/// and the dispersion of [`virial_parameter`].
///
/// ```
/// assert_eq!(inrush::derive::total_dispersion_km_s(0.4, 0.3), 0.5);
/// ```
#[must_use]
pub fn total_dispersion_km_s(non_thermal_km_s: f64, sound_speed_km_s: f64) -> f64 {
    non_thermal_km_s.hypot(sound_speed_km_s)
}

/// One-dimensional sonic Mach number.
///
/// Mach = sigma_nt/c_s
///
/// sigma_nt: [`non_thermal_dispersion_km_s`]; c_s: [`sound_speed_km_s`], km/s both. Source:
/// definition; in three dimensions it is sqrt(3) times as large.
///
/// ```
/// assert_eq!(inrush::derive::mach_number(0.75, 0.25), 3.0);
/// ```
#[must_use]
pub fn mach_number(non_thermal_km_s: f64, sound_speed_km_s: f64) -> f64 {
    non_thermal_km_s / sound_speed_km_s
}

/// Virial parameter of a sphere; its thermal or non-thermal part with that part's dispersion.
///
/// alpha = 5 sigma^2 R/(G M)
///
/// sigma: one-dimensional dispersion, km/s; R: radius, pc (`radius_pc`); M: mass within it, solar
/// masses (`mass_msun`). Source: Bertoldi & McKee 1992, doi:10.1086/171638, for a uniform sphere
/// without surface pressure and field. Below about 2 a sphere is bound, near 1 in equilibrium.
///
/// ```
/// let alpha = inrush::derive::virial_parameter(0.7, 0.3, 350.0);
/// assert!((alpha - 0.4883).abs() < 1e-4);
/// ```
#[must_use]
pub fn virial_parameter(sigma_km_s: f64, radius_pc: f64, mass_msun: f64) -> f64 {
    5.0 * sigma_km_s.powi(2) * radius_pc / (GRAVITY_KM2_S2 * mass_msun)
}
