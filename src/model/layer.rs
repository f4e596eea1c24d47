//! One uniform layer, with a Gaussian or a multiplet as optical depth.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::{LineShape, Sampling, columns};
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::exp_negative;

/// A layer of parameters `v_lsr`, sigma, `tau_total`, `T_ex`.
///
/// tau(v) = `tau_total` sum_i w_i exp(-(v - `v_lsr` - d_i)^2 / (2 sigma^2));
/// T(v) = (J(`T_ex`) - J(`T_bg`)) (1 - e^-tau(v)).
pub(super) fn evaluate(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    let columns = jacobian.map(|jacobian| {
        jacobian.fill(0.0);
        columns(jacobian, value.len())
    });
    dispatch(LayerKernel {
        components: &line.components,
        sampling,
        v_lsr_km_s: parameters[0],
        sigma_km_s: parameters[1],
        tau_total: parameters[2],
        contrast_k: line.radiation.at(parameters[3]) - line.radiation.background(),
        contrast_slope: line.radiation.slope(parameters[3]),
        value,
        columns,
    });
}

struct LayerKernel<'a> {
    components: &'a [Component],
    sampling: &'a Sampling,
    v_lsr_km_s: f64,
    sigma_km_s: f64,
    tau_total: f64,
    contrast_k: f64,
    contrast_slope: f64,
    value: &'a mut [f64],
    columns: Option<[&'a mut [f64]; 4]>,
}

/// Channels that are worked on at a time.
const BLOCK: usize = 64;

impl Kernel for LayerKernel<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let inverse = 1.0 / self.sigma_km_s;
        let value = self.value;
        let mut columns = self.columns;
        for first in (0..value.len()).step_by(BLOCK) {
            let last = (first + BLOCK).min(value.len());
            let channels = last - first;
            let velocity = &self.sampling.velocity_km_s()[first..last];
            let width = &self.sampling.width_km_s()[first..last];
            let value = &mut value[first..last];
            let mut absorbed = [0.0; BLOCK];
            for (node, weight) in self.sampling.nodes() {
                let mut phi = [0.0; BLOCK];
                let mut by_velocity = [0.0; BLOCK];
                let mut by_width = [0.0; BLOCK];
                for component in self.components {
                    let centre = self.v_lsr_km_s + component.offset_km_s;
                    for i in 0..channels {
                        let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                        let gauss = component.weight * exp_negative::<A>(0.5 * z * z);
                        phi[i] += gauss;
                        by_velocity[i] += gauss * z * inverse;
                        by_width[i] += gauss * z * z * inverse;
                    }
                }
                for i in 0..channels {
                    let through = exp_negative::<A>(self.tau_total * phi[i]);
                    absorbed[i] = A::mul_add(*weight, 1.0 - through, absorbed[i]);
                    // the same optical depths serve the slopes below
                    phi[i] *= weight * self.contrast_k * through;
                    by_velocity[i] *= weight * self.contrast_k * self.tau_total * through;
                    by_width[i] *= weight * self.contrast_k * self.tau_total * through;
                }
                if let Some([by_v, by_sigma, by_tau, _]) = &mut columns {
                    let (by_v, by_sigma, by_tau) = (
                        &mut by_v[first..last],
                        &mut by_sigma[first..last],
                        &mut by_tau[first..last],
                    );
                    for i in 0..channels {
                        by_v[i] += by_velocity[i];
                        by_sigma[i] += by_width[i];
                        by_tau[i] += phi[i];
                    }
                }
            }
            for i in 0..channels {
                value[i] = self.contrast_k * absorbed[i];
            }
            if let Some([_, _, _, by_t_ex]) = &mut columns {
                for (target, absorbed) in by_t_ex[first..last].iter_mut().zip(&absorbed) {
                    *target = self.contrast_slope * absorbed;
                }
            }
        }
    }
}
