//! Magnetic support. Gaussian units inside, so that the equations read as in the papers.

use super::gas::mass_density_g_cm3;
use crate::constants::{GRAVITATION, PARSEC, SOLAR_MASS};
use std::f64::consts::PI;

/// Correction of the Davis-Chandrasekhar-Fermi relation (Ostriker, Stone & Gammie 2001,
/// doi:10.1086/318290: 0.46 to 0.51 for dispersions below 25 degrees, from memory; rounded as in common
/// practice).
pub const FIELD_CORRECTION: f64 = 0.5;

/// Dispersion of field angles above which the Davis-Chandrasekhar-Fermi relation fails, degrees (same
/// source as [`FIELD_CORRECTION`]).
pub const LARGEST_ANGLE_DISPERSION_DEG: f64 = 25.0;

/// Field strength in the plane of the sky from the dispersion of its angles.
///
/// B = Q sqrt(4 pi rho) sigma_nt/sigma_phi, rho = mu m_H n, in microgauss
///
/// n: mean number density of H2, cm-3 (`n_h2_mean_cm3`), mu = 2.8; sigma_nt: non-thermal dispersion,
/// km/s (`sigma_nonthermal_km_s`); sigma_phi: dispersion of the field's angles, degrees here, radian
/// in the equation (`angle_dispersion_deg`); Q = 0.5 ([`FIELD_CORRECTION`]).
/// Source: Davis 1951, doi:10.1103/PhysRev.81.890; Chandrasekhar & Fermi 1953,
/// doi:10.1086/145731. Valid for angles that scatter by less than 25 degrees; beyond, B is
/// only an upper limit of what the relation means.
///
/// ```
/// let field = inrush::derive::field_from_angles_ug(1e4, 0.5, 10.0);
/// assert!((field / 109.9 - 1.0).abs() < 1e-3);
/// ```
#[must_use]
pub fn field_from_angles_ug(
    n_h2_mean_cm3: f64,
    non_thermal_km_s: f64,
    angle_dispersion_deg: f64,
) -> f64 {
    let root = (4.0 * PI * mass_density_g_cm3(n_h2_mean_cm3)).sqrt();
    FIELD_CORRECTION * root * (non_thermal_km_s * 1e5) / angle_dispersion_deg.to_radians() * 1e6
}

/// Mass-to-flux ratio in units of the critical one.
///
/// lambda = (M/(pi R^2 B))/(1/(2 pi sqrt(G))) = 2 sqrt(G) M/(R^2 B)
///
/// M: mass, solar masses (`mass_msun`); R: radius, pc (`radius_pc`); B: field, microgauss
/// (`field_ug`). Source: Nakano & Nakamura 1978, PASJ 30, 671. Above 1 the field alone cannot stop
/// the collapse. A field measured in the plane of the sky is less than the whole, which makes lambda
/// too large.
///
/// ```
/// let ratio = inrush::derive::mass_to_flux(100.0, 0.3, 100.0);
/// assert!((ratio / 1.199 - 1.0).abs() < 1e-3);
/// ```
#[must_use]
pub fn mass_to_flux(mass_msun: f64, radius_pc: f64, field_ug: f64) -> f64 {
    let root_g = (GRAVITATION.value * 1e3).sqrt();
    let radius_cm = radius_pc * PARSEC.value * 1e2;
    2.0 * root_g * mass_msun * SOLAR_MASS.value * 1e3 / (radius_cm.powi(2) * field_ug * 1e-6)
}

/// Alfven speed.
///
/// v_A = B/sqrt(4 pi rho), rho = mu m_H n, in km/s
///
/// B: field, microgauss (`field_ug`); n: mean number density of H2, cm-3 (`n_h2_mean_cm3`), mu =
/// 2.8. Source: textbook. Valid for n > 0; neutrals and ions are taken to move together.
///
/// ```
/// let speed = inrush::derive::alfven_speed_km_s(100.0, 1e4);
/// assert!((speed - 1.3031).abs() < 1e-3);
/// ```
#[must_use]
pub fn alfven_speed_km_s(field_ug: f64, n_h2_mean_cm3: f64) -> f64 {
    field_ug * 1e-6 / (4.0 * PI * mass_density_g_cm3(n_h2_mean_cm3)).sqrt() * 1e-5
}
