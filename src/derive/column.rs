//! Column density of the tracer from its optical depth.

use super::molecules::Emitter;
use crate::constants::{BACKGROUND_TEMPERATURE, SPEED_OF_LIGHT, photon_temperature_k};
use std::f64::consts::{PI, TAU};

/// Column density of a species from one line of it.
///
/// N = (8 pi nu^3/(c^3 A)) (Q/g_u) exp(E_u/(k T_ex))/(exp(h nu/(k T_ex)) - 1) sqrt(2 pi) sigma tau, in
/// cm-2
///
/// tau: optical depth at the line's peak (of a multiplet: summed over its components), sigma: its
/// dispersion, km/s; T_ex: excitation temperature, K; nu, A, g_u, E_u and Q(T_ex): see [`Emitter`].
/// Source: Mangum & Shirley 2015, doi:10.1086/680323, with A in place of the dipole moment. Valid
/// where one T_ex holds for all states of the molecule.
///
/// ```
/// let line = inrush::line::find("H13CO+ 1-0")?;
/// let emitter = inrush::derive::Emitter::of(&line).expect("a linear molecule");
/// let column = inrush::derive::column_density_cm2(&emitter, 0.147, 0.7, 11.0);
/// assert!((column / 2.428e12 - 1.0).abs() < 1e-3);
/// # Ok::<(), inrush::line::LineError>(())
/// ```
#[must_use]
pub fn column_density_cm2(emitter: &Emitter, tau: f64, sigma_km_s: f64, t_ex_k: f64) -> f64 {
    let per_cm = emitter.frequency_ghz * 1e9 / (SPEED_OF_LIGHT.value * 1e2);
    let photon = photon_temperature_k(emitter.frequency_ghz);
    let integral_cm_s = TAU.sqrt() * sigma_km_s * 1e5 * tau;
    8.0 * PI * per_cm.powi(3) / emitter.einstein_a_per_s
        * (emitter.molecule.partition_function(t_ex_k) / emitter.upper_weight)
        * ((emitter.upper_energy_k / t_ex_k).exp() / (photon / t_ex_k).exp_m1())
        * integral_cm_s
}

/// Optical depth of a uniform layer from its brightness and excitation temperature.
///
/// tau = -ln(1 - T/(J(T_ex) - J(T_bg)))
///
/// T: peak of the line, K (`peak_k`), at the frequency nu, GHz; T_ex: excitation temperature, K; J:
/// radiation temperature; T_bg = 2.72548 K. Source: the transfer equation of a uniform layer.
/// Infinite where T reaches J(T_ex) - J(T_bg): no depth makes such a line.
///
/// ```
/// let tau = inrush::derive::depth_from_brightness(86.7542884, 1.079_298_7, 11.0);
/// assert!((tau - 0.147).abs() < 1e-7);
/// ```
#[must_use]
pub fn depth_from_brightness(frequency_ghz: f64, peak_k: f64, t_ex_k: f64) -> f64 {
    let photon = photon_temperature_k(frequency_ghz);
    let radiation = |t: f64| photon / (photon / t).exp_m1();
    let brightest = radiation(t_ex_k) - radiation(BACKGROUND_TEMPERATURE.value);
    if peak_k >= brightest {
        return f64::INFINITY;
    }
    -(-peak_k / brightest).ln_1p()
}
