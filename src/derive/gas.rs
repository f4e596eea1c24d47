//! Number density, mass density and mass of molecular gas with helium.
//!
//! Composition: helium is a tenth of hydrogen by number, all hydrogen in H2. Then one H2 molecule
//! stands for 2.8 hydrogen masses of gas, and a free particle (1.2 of them for each H2) for 2.33.

use crate::constants::{HYDROGEN_MASS, PARSEC, SOLAR_MASS};
use std::f64::consts::PI;

/// Mass of gas for each H2 molecule, in masses of the hydrogen atom: 2 + 4 * 0.2 (Kauffmann et al.
/// 2008, doi:10.1051/0004-6361:200809481, appendix A.1, from memory).
pub const MASS_PER_H2: f64 = 2.8;

/// Mean mass of a free particle, in masses of the hydrogen atom: 2.8/1.2, rounded as in common
/// practice. It belongs into the sound speed; [`MASS_PER_H2`] belongs into densities.
pub const MASS_PER_PARTICLE: f64 = 2.33;

/// Mass density of molecular gas.
///
/// rho = mu m_H n, in g cm-3
///
/// n: number density of H2, cm-3 (`n_h2_cm3`); mu = 2.8 ([`MASS_PER_H2`]).
/// Source: definition. Valid for any n >= 0.
///
/// ```
/// let rho = inrush::derive::mass_density_g_cm3(1e5);
/// assert!((rho / 4.685892e-19 - 1.0).abs() < 1e-6);
/// ```
#[must_use]
pub fn mass_density_g_cm3(n_h2_cm3: f64) -> f64 {
    MASS_PER_H2 * HYDROGEN_MASS.value * 1e3 * n_h2_cm3
}

/// Mean number density of H2 in a sphere.
///
/// n = M/((4/3) pi R^3 mu m_H), in cm-3
///
/// M: mass within R, solar masses (`mass_msun`); R: radius, pc (`radius_pc`).
/// Source: definition. Valid for positive values.
///
/// ```
/// let n = inrush::derive::mean_h2_density_cm3(350.0, 0.3);
/// assert!((n / 4.46969e4 - 1.0).abs() < 1e-3);
/// ```
#[must_use]
pub fn mean_h2_density_cm3(mass_msun: f64, radius_pc: f64) -> f64 {
    let volume_cm3 = 4.0 / 3.0 * PI * (radius_pc * PARSEC.value * 1e2).powi(3);
    mass_msun * SOLAR_MASS.value * 1e3 / (volume_cm3 * mass_density_g_cm3(1.0))
}

/// Number density of H2 at the radius of a sphere whose density falls as a power of the radius.
///
/// n(R) = (1 - p/3) n_mean, from rho(R) = (3 - p) M/(4 pi R^3), in cm-3
///
/// M: mass within R, solar masses (`mass_msun`); R: radius, pc (`radius_pc`); p: rho ~ r^-p
/// (`density_slope`). Source: integral of the power law. Valid for p < 3, beyond which the mass is
/// infinite.
///
/// ```
/// let n = inrush::derive::h2_density_at_radius_cm3(350.0, 0.3, 1.5);
/// assert!((n / 2.23485e4 - 1.0).abs() < 1e-3); // half the mean
/// ```
#[must_use]
pub fn h2_density_at_radius_cm3(mass_msun: f64, radius_pc: f64, density_slope: f64) -> f64 {
    (1.0 - density_slope / 3.0) * mean_h2_density_cm3(mass_msun, radius_pc)
}

/// Mass within the radius of such a sphere from the density at it.
///
/// M = 4 pi R^3 mu m_H n(R)/(3 - p), in solar masses
///
/// R: radius, pc (`radius_pc`); n(R): density of H2 there, cm-3 (`n_h2_cm3`); p: rho ~ r^-p
/// (`density_slope`). Source and range: as [`h2_density_at_radius_cm3`], which it undoes.
///
/// ```
/// let mass = inrush::derive::mass_from_density_msun(0.3, 2.23485e4, 1.5);
/// assert!((mass / 350.0 - 1.0).abs() < 1e-3);
/// ```
#[must_use]
pub fn mass_from_density_msun(radius_pc: f64, n_h2_cm3: f64, density_slope: f64) -> f64 {
    n_h2_cm3 / h2_density_at_radius_cm3(1.0, radius_pc, density_slope)
}
