//! Every model's profile as a sum of a few functions of velocity with amplitudes:
//! `T(v) = sum_k a_k f_k(v)`, where the `f_k` depend on the nonlinear parameters alone.
//!
//! | model | nonlinear | amplitudes |
//! | --- | --- | --- |
//! | Gaussian | centre, dispersion | peak |
//! | two Gaussians | both centres and dispersions | both peaks |
//! | layer | centre, dispersion, tau | J(`T_ex`) - J(`T_bg`) |
//! | two-layer, hill with a surface | `v_lsr`, sigma, `v_in`, tau | J - J(`T_bg`) of both temperatures |
//! | hill | the same | J(`T_p`) - J(`T_bg`) |
//!
//! The continuum source's filling and temperature are neither: they are held.

use super::{LineShape, Model, Sampling, gaussian, layer, slabs};

/// Most amplitudes of a model.
pub const MOST_AMPLITUDES: usize = 2;

/// Smallest open share of the beam beside a continuum source for which the rear layer shows.
const LEAST_OPEN: f64 = 1e-6;

impl Model {
    /// Positions of the parameters that the `f_k` depend on.
    #[must_use]
    pub fn nonlinear(self) -> &'static [usize] {
        match self {
            Self::Gaussian => &[0, 1],
            Self::TwoGaussians => &[0, 1, 3, 4],
            Self::Layer => &[0, 1, 2],
            Self::TwoLayer | Self::TwoLayerContinuum | Self::Hill | Self::HillSurface => {
                &[0, 1, 2, 3]
            }
        }
    }

    /// Positions of the parameters that are amplitudes, or temperatures of which an amplitude is a
    /// function.
    #[must_use]
    pub fn linear(self) -> &'static [usize] {
        match self {
            Self::Gaussian => &[2],
            Self::TwoGaussians => &[2, 5],
            Self::Layer => &[3],
            Self::Hill => &[4],
            Self::TwoLayer | Self::TwoLayerContinuum | Self::HillSurface => &[4, 5],
        }
    }

    /// The amplitude, K, of the `k`-th linear parameter at a value; it rises with the value. Of the
    /// `parameters` those of a continuum source count.
    #[must_use]
    pub fn amplitude_k(self, line: &LineShape, parameters: &[f64], k: usize, value: f64) -> f64 {
        let scale = &line.radiation;
        match self {
            Self::Gaussian | Self::TwoGaussians => value,
            Self::Layer | Self::TwoLayer | Self::Hill | Self::HillSurface => {
                scale.at(value) - scale.background()
            }
            Self::TwoLayerContinuum if k == 0 => {
                let source = scale.at(parameters[7]) - scale.background();
                scale.at(value) - scale.background() - parameters[6] * source
            }
            Self::TwoLayerContinuum => {
                (1.0 - parameters[6]) * (scale.at(value) - scale.background())
            }
        }
    }

    /// The value of the `k`-th linear parameter at an amplitude, K.
    #[must_use]
    pub fn value_at_amplitude(
        self,
        line: &LineShape,
        parameters: &[f64],
        k: usize,
        amplitude_k: f64,
    ) -> f64 {
        let scale = &line.radiation;
        match self {
            Self::Gaussian | Self::TwoGaussians => amplitude_k,
            Self::Layer | Self::TwoLayer | Self::Hill | Self::HillSurface => {
                scale.inverse(scale.background() + amplitude_k)
            }
            Self::TwoLayerContinuum if k == 0 => {
                let source = scale.at(parameters[7]) - scale.background();
                scale.inverse(scale.background() + amplitude_k + parameters[6] * source)
            }
            Self::TwoLayerContinuum => {
                let open = (1.0 - parameters[6]).max(LEAST_OPEN);
                scale.inverse(scale.background() + amplitude_k / open)
            }
        }
    }

    /// The functions `f_k` and, where wanted, their slopes.
    ///
    /// `parameters` as in [`Model::parameters`], of which the nonlinear ones count; `functions` one
    /// column of [`Sampling::len`] numbers a function, no unit; `slopes` the derivative of `f_k` by the
    /// `p`-th nonlinear parameter in column `p K + k` of `K` functions.
    ///
    /// # Panics
    ///
    /// Where a slice has not the length stated.
    pub fn functions(
        self,
        line: &LineShape,
        sampling: &Sampling,
        parameters: &[f64],
        functions: &mut [f64],
        slopes: Option<&mut [f64]>,
    ) {
        let columns = self.linear().len();
        assert_eq!(
            functions.len(),
            columns * sampling.len(),
            "a column for each function"
        );
        if let Some(slopes) = &slopes {
            assert_eq!(
                slopes.len(),
                self.nonlinear().len() * functions.len(),
                "columns for each parameter"
            );
        }
        match self {
            Self::Gaussian => {
                gaussian::functions(line, sampling, &parameters[..2], functions, slopes);
            }
            Self::TwoGaussians => {
                gaussian::functions_of_two(line, sampling, parameters, functions, slopes);
            }
            Self::Layer => layer::functions(line, sampling, parameters, functions, slopes),
            Self::TwoLayer | Self::TwoLayerContinuum | Self::Hill | Self::HillSurface => {
                slabs::functions(self, line, sampling, parameters, functions, slopes);
            }
        }
    }
}
