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
    add_one(line, sampling, parameters, value, columns, true);
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
    add_one(line, sampling, &parameters[..3], value, first, true);
    add_one(line, sampling, &parameters[3..], value, second, false);
}

/// Sets or adds one Gaussian, and sets its columns by centre, dispersion and peak.
fn add_one(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    columns: Option<[&mut [f64]; 3]>,
    set: bool,
) {
    let slopes = columns.map(|[by_v, by_sigma, by_peak]| Slopes {
        factor: parameters[2],
        by_v,
        by_sigma,
        unit: Some(by_peak),
    });
    run(
        line,
        sampling,
        parameters,
        (parameters[2], set),
        value,
        slopes,
    );
}

/// The Gaussian of height 1, and its slopes by centre and dispersion, as in
/// [`Model::functions`](super::Model::functions).
pub(super) fn functions(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    functions: &mut [f64],
    slopes: Option<&mut [f64]>,
) {
    let slopes = slopes.map(|slopes| {
        let [by_v, by_sigma] = columns(slopes, sampling.len());
        Slopes::of_unit(by_v, by_sigma)
    });
    run(line, sampling, parameters, (1.0, true), functions, slopes);
}

/// The same of two Gaussians.
pub(super) fn functions_of_two(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    functions: &mut [f64],
    slopes: Option<&mut [f64]>,
) {
    let channels = sampling.len();
    let (first, second) = functions.split_at_mut(channels);
    let (of_first, of_second) = match slopes {
        Some(slopes) => {
            slopes.fill(0.0);
            let [a, _, b, _, _, c, _, d] = columns::<8>(slopes, channels);
            (Some(Slopes::of_unit(a, b)), Some(Slopes::of_unit(c, d)))
        }
        None => (None, None),
    };
    let unit = (1.0, true);
    run(line, sampling, &parameters[..2], unit, first, of_first);
    run(line, sampling, &parameters[3..5], unit, second, of_second);
}

/// Columns that are set beside the value.
struct Slopes<'a> {
    /// Factor of the slopes by centre and dispersion.
    factor: f64,
    by_v: &'a mut [f64],
    by_sigma: &'a mut [f64],
    /// The Gaussian of height 1, where it is not the value.
    unit: Option<&'a mut [f64]>,
}

impl<'a> Slopes<'a> {
    fn of_unit(by_v: &'a mut [f64], by_sigma: &'a mut [f64]) -> Self {
        Self {
            factor: 1.0,
            by_v,
            by_sigma,
            unit: None,
        }
    }
}

/// Sets or adds `factor` times the Gaussian of height 1, and sets its slopes.
fn run(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    (factor, set): (f64, bool),
    value: &mut [f64],
    slopes: Option<Slopes<'_>>,
) {
    let strongest = line
        .components
        .iter()
        .map(|component| component.weight)
        .fold(0.0, f64::max);
    dispatch(GaussianKernel {
        components: &line.components,
        strongest,
        sampling,
        v_lsr_km_s: parameters[0],
        sigma_km_s: parameters[1],
        factor,
        set,
        value,
        slopes,
    });
}

struct GaussianKernel<'a> {
    components: &'a [Component],
    strongest: f64,
    sampling: &'a Sampling,
    v_lsr_km_s: f64,
    sigma_km_s: f64,
    factor: f64,
    set: bool,
    value: &'a mut [f64],
    slopes: Option<Slopes<'a>>,
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
        let mut slopes = self.slopes;
        let mut first = true;
        for component in self.components {
            let centre = self.v_lsr_km_s + component.offset_km_s;
            for (node, weight) in self.sampling.nodes() {
                let share = weight * component.weight / self.strongest;
                let height = self.factor * share;
                let keep = !(first && self.set);
                let keep_slopes = !first;
                first = false;
                let Some(slopes) = &mut slopes else {
                    for i in 0..channels {
                        let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                        let before = if keep { value[i] } else { 0.0 };
                        value[i] = A::mul_add(height, exp_negative::<A>(0.5 * z * z), before);
                    }
                    continue;
                };
                let by_v = &mut slopes.by_v[..channels];
                let by_sigma = &mut slopes.by_sigma[..channels];
                let steepness = slopes.factor * share * inverse;
                for i in 0..channels {
                    let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                    let gauss = exp_negative::<A>(0.5 * z * z);
                    let slope = steepness * gauss * z;
                    let before = if keep { value[i] } else { 0.0 };
                    value[i] = A::mul_add(height, gauss, before);
                    let before = if keep_slopes { by_v[i] } else { 0.0 };
                    by_v[i] = before + slope;
                    let before = if keep_slopes { by_sigma[i] } else { 0.0 };
                    by_sigma[i] = A::mul_add(slope, z, before);
                }
                let Some(unit) = &mut slopes.unit else {
                    continue;
                };
                let unit = &mut unit[..channels];
                for i in 0..channels {
                    let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                    let before = if keep_slopes { unit[i] } else { 0.0 };
                    unit[i] = A::mul_add(share, exp_negative::<A>(0.5 * z * z), before);
                }
            }
        }
    }
}
