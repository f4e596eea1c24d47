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
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::{LineShape, Model, Sampling, gaussian, layer, slabs, staged};
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};

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

    /// The functions `f_k` and, where wanted, the parts of which [`Model::slopes`] makes the profile's.
    ///
    /// `parameters` as in [`Model::parameters`], of which the nonlinear ones count; `functions` one
    /// column of [`Sampling::len`] numbers a function, no unit; `parts` of the length
    /// [`Model::parts`].
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
        parts: Option<&mut [f64]>,
    ) {
        let columns = self.linear().len();
        assert_eq!(
            functions.len(),
            columns * sampling.len(),
            "a column for each function"
        );
        if let Some(parts) = &parts {
            assert_eq!(parts.len(), self.parts(sampling), "all parts");
        }
        match self {
            Self::Gaussian => {
                gaussian::functions(line, sampling, &parameters[..2], functions, parts);
            }
            Self::TwoGaussians => {
                gaussian::functions_of_two(line, sampling, parameters, functions, parts);
            }
            Self::Layer => layer::functions(line, sampling, parameters, functions, parts),
            Self::TwoLayer | Self::TwoLayerContinuum | Self::Hill | Self::HillSurface => {
                slabs::functions(self, line, sampling, parameters, functions, parts);
            }
        }
    }

    /// How many numbers the parts of the slopes are: of a slab a few columns a quadrature node, else the
    /// derivative of each function by each nonlinear parameter.
    #[must_use]
    pub fn parts(self, sampling: &Sampling) -> usize {
        let columns = if self.has_infall() {
            staged::PARTS * sampling.nodes().len()
        } else {
            self.linear().len() * self.nonlinear().len()
        };
        columns * sampling.len()
    }

    /// The derivatives of `sum_k a_k f_k` by the nonlinear parameters, a column each, from the parts that
    /// [`Model::functions`] left at the same `parameters`; `a_k` in any unit.
    pub fn slopes(
        self,
        parameters: &[f64],
        amplitudes: [f64; MOST_AMPLITUDES],
        parts: &[f64],
        slopes: &mut [f64],
    ) {
        if self.has_infall() {
            staged::slopes(parameters[3], amplitudes, parts, slopes);
        } else {
            dispatch(Weighted {
                functions: self.linear().len(),
                parameters: self.nonlinear().len(),
                amplitudes,
                parts,
                slopes,
            });
        }
    }
}

/// Sums of the functions' derivatives with the amplitudes as weights.
struct Weighted<'a> {
    functions: usize,
    parameters: usize,
    amplitudes: [f64; MOST_AMPLITUDES],
    parts: &'a [f64],
    slopes: &'a mut [f64],
}

impl Kernel for Weighted<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let channels = self.slopes.len() / self.parameters;
        let of_parameters = self.parts.chunks_exact(self.functions * channels);
        for (slope, parts) in self.slopes.chunks_exact_mut(channels).zip(of_parameters) {
            let (first, second) = parts.split_at(channels);
            let [a, b] = self.amplitudes;
            if second.is_empty() {
                for (slope, part) in slope.iter_mut().zip(first) {
                    *slope = a * part;
                }
            } else {
                for ((slope, one), other) in slope.iter_mut().zip(first).zip(second) {
                    *slope = A::mul_add(a, *one, b * other);
                }
            }
        }
    }
}
