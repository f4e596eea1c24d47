//! One or two Gaussians; for a multiplet each is the sum of its components.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::{LineShape, Sampling, columns};
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::exp_negative;

/// One Gaussian of parameters `v_lsr`, sigma, peak.
///
/// T(v) = peak sum_i w_i/w_max exp(-(v - v_lsr - d_i)^2 / (2 sigma^2)): for a multiplet in the
/// thin limit, `peak` is that of the strongest component alone.
pub(super) fn evaluate(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    let columns = jacobian.map(|jacobian| columns(jacobian, value.len()));
    run(line, sampling, parameters, value, columns, false);
}

/// Two Gaussians of parameters `v_lsr`, sigma, peak, and the same of the second.
pub(super) fn evaluate_two(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    let (first, second) = match jacobian.map(|jacobian| columns::<6>(jacobian, value.len())) {
        Some([a, b, c, d, e, f]) => (Some([a, b, c]), Some([d, e, f])),
        None => (None, None),
    };
    run(line, sampling, &parameters[..3], value, first, false);
    run(line, sampling, &parameters[3..], value, second, true);
}

fn run(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    columns: Option<[&mut [f64]; 3]>,
    add: bool,
) {
    if !add {
        value.fill(0.0);
    }
    let strongest = line
        .components
        .iter()
        .map(|component| component.weight)
        .fold(0.0, f64::max);
    let mut columns = columns;
    if let Some(columns) = &mut columns {
        for column in columns.iter_mut() {
            column.fill(0.0);
        }
    }
    dispatch(GaussianKernel {
        components: &line.components,
        strongest,
        sampling,
        v_lsr_km_s: parameters[0],
        sigma_km_s: parameters[1],
        peak_k: parameters[2],
        value,
        columns,
    });
}

struct GaussianKernel<'a> {
    components: &'a [Component],
    strongest: f64,
    sampling: &'a Sampling,
    v_lsr_km_s: f64,
    sigma_km_s: f64,
    peak_k: f64,
    value: &'a mut [f64],
    columns: Option<[&'a mut [f64]; 3]>,
}

impl Kernel for GaussianKernel<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let channels = self.value.len();
        let (velocity, width) = (
            &self.sampling.velocity_km_s()[..channels],
            &self.sampling.width_km_s()[..channels],
        );
        let inverse = 1.0 / self.sigma_km_s;
        let value = self.value;
        let mut columns = self.columns;
        for component in self.components {
            let centre = self.v_lsr_km_s + component.offset_km_s;
            for (node, weight) in self.sampling.nodes() {
                let share = weight * component.weight / self.strongest;
                let Some([by_v, by_sigma, by_peak]) = &mut columns else {
                    for i in 0..channels {
                        let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                        let gauss = share * exp_negative::<A>(0.5 * z * z);
                        value[i] = A::mul_add(self.peak_k, gauss, value[i]);
                    }
                    continue;
                };
                let (by_v, by_sigma, by_peak) = (
                    &mut by_v[..channels],
                    &mut by_sigma[..channels],
                    &mut by_peak[..channels],
                );
                for i in 0..channels {
                    let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                    let gauss = share * exp_negative::<A>(0.5 * z * z);
                    let slope = self.peak_k * gauss * z * inverse;
                    value[i] = A::mul_add(self.peak_k, gauss, value[i]);
                    by_v[i] += slope;
                    by_sigma[i] = A::mul_add(slope, z, by_sigma[i]);
                    by_peak[i] += gauss;
                }
            }
        }
    }
}
