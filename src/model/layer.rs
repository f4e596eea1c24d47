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
    let contrast_k = line.radiation.at(parameters[3]) - line.radiation.background();
    let Some(jacobian) = jacobian else {
        run(line, sampling, parameters, contrast_k, value, None);
        for value in value {
            *value *= contrast_k;
        }
        return;
    };
    let [by_v, by_sigma, by_tau, by_t_ex] = columns(jacobian, value.len());
    let slopes = Some([by_v, by_sigma, by_tau]);
    run(line, sampling, parameters, contrast_k, by_t_ex, slopes);
    let contrast_slope = line.radiation.slope(parameters[3]);
    for (value, by_t_ex) in value.iter_mut().zip(by_t_ex) {
        *value = contrast_k * *by_t_ex;
        *by_t_ex *= contrast_slope;
    }
}

/// 1 - e^-tau(v), and its slopes by centre, dispersion and `tau_total`, as in
/// [`Model::functions`](super::Model::functions).
pub(super) fn functions(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    functions: &mut [f64],
    slopes: Option<&mut [f64]>,
) {
    let slopes = slopes.map(|slopes| columns(slopes, sampling.len()));
    run(line, sampling, parameters, 1.0, functions, slopes);
}

/// 1 - e^-tau(v), and its slopes times `slope_factor`.
fn run(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    slope_factor: f64,
    absorbed: &mut [f64],
    slopes: Option<[&mut [f64]; 3]>,
) {
    dispatch(LayerKernel {
        components: &line.components,
        sampling,
        v_lsr_km_s: parameters[0],
        sigma_km_s: parameters[1],
        tau_total: parameters[2],
        slope_factor,
        absorbed,
        slopes,
    });
}

struct LayerKernel<'a> {
    components: &'a [Component],
    sampling: &'a Sampling,
    v_lsr_km_s: f64,
    sigma_km_s: f64,
    tau_total: f64,
    slope_factor: f64,
    absorbed: &'a mut [f64],
    slopes: Option<[&'a mut [f64]; 3]>,
}

impl Kernel for LayerKernel<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let inverse = 1.0 / self.sigma_km_s;
        let all_absorbed = self.absorbed;
        let mut slopes = self.slopes;
        for first in (0..all_absorbed.len()).step_by(BLOCK) {
            let last = (first + BLOCK).min(all_absorbed.len());
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
                    let slope = weight * self.slope_factor * through;
                    by_v[i] = A::mul_add(slope * self.tau_total, by_velocity[i], by_v[i]);
                    by_sigma[i] = A::mul_add(slope * self.tau_total, by_width[i], by_sigma[i]);
                    by_tau[i] = A::mul_add(slope, phi[i], by_tau[i]);
                }
            }
            all_absorbed[first..last].copy_from_slice(&absorbed[..channels]);
            if let Some([column_v, column_sigma, column_tau]) = &mut slopes {
                column_v[first..last].copy_from_slice(&by_v[..channels]);
                column_sigma[first..last].copy_from_slice(&by_sigma[..channels]);
                column_tau[first..last].copy_from_slice(&by_tau[..channels]);
            }
        }
    }
}
