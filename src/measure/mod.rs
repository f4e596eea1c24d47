//! Asymmetry measures of a pair, straight from the channels: no model here.

use crate::numeric::Estimate;

/// The thin line's velocity and width that every measure is relative to, from its fit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ThinLine {
    /// Centre velocity, km/s.
    pub v_km_s: Estimate,
    /// Full width at half maximum, km/s.
    pub fwhm_km_s: Estimate,
    /// Covariance of the two, (km/s)^2.
    pub covariance_v_fwhm: f64,
    /// Peak temperature, K.
    pub peak_k: Estimate,
}

/// Sense of the thick line's asymmetry (Mardones et al. 1997).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ProfileClass {
    /// Normalised velocity difference below -0.25.
    Blue,
    /// Normalised velocity difference above 0.25.
    Red,
    /// In between.
    Neither,
    /// One of the lines is not detected.
    Undetected,
}

/// Minimum between two peaks of the thick line, and the peaks.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TwoPeaks {
    /// Velocity of the blue peak, km/s.
    pub v_blue_km_s: Estimate,
    /// Velocity of the red peak, km/s.
    pub v_red_km_s: Estimate,
    /// Velocity of the dip, km/s.
    pub v_dip_km_s: Estimate,
    /// Temperature of the blue peak, K.
    pub blue_k: Estimate,
    /// Temperature of the red peak, K.
    pub red_k: Estimate,
    /// Temperature of the dip, K.
    pub dip_k: Estimate,
}

/// All model-free measures of a pair; `None` where one cannot be had.
#[derive(Clone, Debug, PartialEq)]
pub struct Measures {
    /// Peak of the thick line, K.
    pub peak_thick_k: Option<Estimate>,
    /// Peak of the thin line, K.
    pub peak_thin_k: Option<Estimate>,
    /// Integrated intensity of the thick line in its window, K km/s.
    pub integral_thick_k_km_s: Estimate,
    /// Integrated intensity of the thin line in its window, K km/s.
    pub integral_thin_k_km_s: Estimate,
    /// Velocity of the thick line's peak, km/s.
    pub v_thick_km_s: Option<Estimate>,
    /// Normalised velocity difference (`v_thick` - `v_thin`)/`FWHM_thin`.
    pub delta_v: Option<Estimate>,
    /// Systematic of `delta_v` from the rest frequencies' uncertainties.
    pub delta_v_systematic: Option<f64>,
    /// `T_blue`/`T_red` of a two-peak line.
    pub peak_ratio: Option<Estimate>,
    /// The two peaks and the dip of a two-peak thick line.
    pub two_peaks: Option<TwoPeaks>,
    /// Whether the thin line shows two significant peaks.
    pub thin_two_peaked: bool,
    /// (`I_blue` - `I_red`)/(`I_blue` + `I_red`) about the thin line's velocity.
    pub asymmetry: Option<Estimate>,
    /// Skewness of the thick line about the thin line's velocity.
    pub skewness: Option<Estimate>,
    /// Sense of the asymmetry.
    pub profile: ProfileClass,
    /// Closed-form infall velocity of a two-peak line (Myers et al. 1996, eq. 9), km/s.
    pub v_closed_form_km_s: Option<Estimate>,
}
