//! One uniform layer, with a Gaussian or a multiplet as optical depth.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::slab::{BLOCK, padded, whole_lanes};
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
    let columns = jacobian.map(|jacobian| columns(jacobian, value.len()));
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
            let n = whole_lanes(channels);
            let centres = &padded(&self.sampling.velocity_km_s()[first..last])[..n];
            let widths = &padded(&self.sampling.width_km_s()[first..last])[..n];
            let mut absorbed = [0.0; BLOCK];
            let absorbed = &mut absorbed[..n];
            let mut by_v = [0.0; BLOCK];
            let by_v = &mut by_v[..n];
            let mut by_sigma = [0.0; BLOCK];
            let by_sigma = &mut by_sigma[..n];
            let mut by_tau = [0.0; BLOCK];
            let by_tau = &mut by_tau[..n];
            for (node, weight) in self.sampling.nodes() {
                let mut phi = [0.0; BLOCK];
                let phi = &mut phi[..n];
                let mut by_velocity = [0.0; BLOCK];
                let by_velocity = &mut by_velocity[..n];
                let mut by_width = [0.0; BLOCK];
                let by_width = &mut by_width[..n];
                for component in self.components {
                    let centre = self.v_lsr_km_s + component.offset_km_s;
                    for i in 0..n {
                        let z = (A::mul_add(*node, widths[i], centres[i]) - centre) * inverse;
                        let gauss = component.weight * exp_negative::<A>(0.5 * z * z);
                        let slope = gauss * z * inverse;
                        phi[i] += gauss;
                        by_velocity[i] += slope;
                        by_width[i] = A::mul_add(slope, z, by_width[i]);
                    }
                }
                for i in 0..n {
                    let through = exp_negative::<A>(self.tau_total * phi[i]);
                    absorbed[i] = A::mul_add(*weight, 1.0 - through, absorbed[i]);
                    let slope = weight * self.contrast_k * through;
                    by_v[i] = A::mul_add(slope * self.tau_total, by_velocity[i], by_v[i]);
                    by_sigma[i] = A::mul_add(slope * self.tau_total, by_width[i], by_sigma[i]);
                    by_tau[i] = A::mul_add(slope, phi[i], by_tau[i]);
                }
            }
            for (value, absorbed) in value[first..last].iter_mut().zip(&*absorbed) {
                *value = self.contrast_k * absorbed;
            }
            if let Some([column_v, column_sigma, column_tau, column_t_ex]) = &mut columns {
                column_v[first..last].copy_from_slice(&by_v[..channels]);
                column_sigma[first..last].copy_from_slice(&by_sigma[..channels]);
                column_tau[first..last].copy_from_slice(&by_tau[..channels]);
                for (target, absorbed) in column_t_ex[first..last].iter_mut().zip(&*absorbed) {
                    *target = self.contrast_slope * absorbed;
                }
            }
        }
    }
}
