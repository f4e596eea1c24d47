//! Values that a truth starts from: a clump that falls in, seen at 3 mm.

use crate::model::Model;

/// Velocity dispersion of both lines, km/s.
const SIGMA_KM_S: f64 = 0.62;

/// Inward speed of the hill, km/s.
const V_IN_HILL_KM_S: f64 = 0.45;

/// Inward speed of the two layers, km/s: they lose their red peak at lower speeds than the hill.
const V_IN_TWO_LAYER_KM_S: f64 = 0.2;

/// A default of each parameter of a model, in the model's order.
///
/// Slab models make a two-peaked line with the brighter peak in the blue; the layer is an isotopologue
/// 68 times rarer than the hill's.
pub(super) fn parameters(model: Model) -> &'static [f64] {
    match model {
        Model::Gaussian => &[0.0, SIGMA_KM_S, 0.9],
        Model::TwoGaussians => &[-0.6, SIGMA_KM_S, 0.9, 1.2, SIGMA_KM_S, 0.5],
        Model::Layer => &[0.0, SIGMA_KM_S, 0.118, 11.0],
        Model::TwoLayer => &[0.0, SIGMA_KM_S, V_IN_TWO_LAYER_KM_S, 4.0, 6.0, 14.0],
        Model::TwoLayerContinuum => &[
            0.0,
            SIGMA_KM_S,
            V_IN_TWO_LAYER_KM_S,
            4.0,
            6.0,
            14.0,
            0.05,
            15.0,
        ],
        Model::Hill => &[0.0, SIGMA_KM_S, V_IN_HILL_KM_S, 4.0, 16.0],
        Model::HillSurface => &[0.0, SIGMA_KM_S, V_IN_HILL_KM_S, 4.0, 16.0, 3.5],
    }
}

/// Peak over noise of the thick line.
pub(super) const SIGNAL_TO_NOISE_THICK: f64 = 60.0;

/// Peak over noise of the thin line.
pub(super) const SIGNAL_TO_NOISE_THIN: f64 = 30.0;

/// Channel width, km/s.
pub(super) const CHANNEL_KM_S: f64 = 0.1;

/// Band beyond the outermost component on either side, in dispersions.
pub(super) const BAND_SIGMAS: f64 = 20.0;
