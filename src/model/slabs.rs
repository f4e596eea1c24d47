//! The two-layer and hill models: their temperatures as the two amplitudes of a [`Slab`].

use super::slab::{Functions, Peaked, Shape, Slab, Slopes, Uniform, Value, evaluate};
use super::{LineShape, Model, Sampling, columns, staged};

fn slab(parameters: &[f64], contrast_k: f64, excess_k: f64) -> Slab {
    Slab {
        v_lsr_km_s: parameters[0],
        sigma_km_s: parameters[1],
        v_in_km_s: parameters[2],
        tau: parameters[3],
        contrast_k,
        excess_k,
    }
}

/// Replaces the columns of A and B by those of two parameters that both depend on.
fn recombine(by_a: &mut [f64], by_b: &mut [f64], first: (f64, f64), second: (f64, f64)) {
    for (a, b) in by_a.iter_mut().zip(by_b) {
        let (by_contrast, by_excess) = (*a, *b);
        *a = first.0 * by_contrast + first.1 * by_excess;
        *b = second.0 * by_contrast + second.1 * by_excess;
    }
}

fn scale(column: &mut [f64], factor: f64) {
    for value in column {
        *value *= factor;
    }
}

/// A slab whose fifth and sixth parameters are the temperatures of its amplitudes:
/// A = J(fifth) - J(sixth), B = J(sixth) - J(`T_bg`).
fn own_temperatures<S: Shape>(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    let scale_j = &line.radiation;
    let (first, second) = (scale_j.at(parameters[4]), scale_j.at(parameters[5]));
    let slab = slab(parameters, first - second, second - scale_j.background());
    let Some(jacobian) = jacobian else {
        return evaluate::<S>(slab, &line.components, sampling, Value(value));
    };
    let [by_v, by_sigma, by_v_in, by_tau, by_first, by_second] = columns(jacobian, value.len());
    evaluate::<S>(
        slab,
        &line.components,
        sampling,
        Slopes {
            value,
            columns: [by_v, by_sigma, by_v_in, by_tau, by_first],
            by_excess: Some(by_second),
        },
    );
    let (slope_first, slope_second) = (scale_j.slope(parameters[4]), scale_j.slope(parameters[5]));
    recombine(
        by_first,
        by_second,
        (slope_first, 0.0),
        (-slope_second, slope_second),
    );
}

/// Two layers; parameters `v_lsr`, sigma, `v_in`, tau, `T_f`, `T_r`.
///
/// T = J(`T_f`)(1 - `E_f`) + J(`T_r`)(1 - `E_r`)`E_f` - J(`T_bg`)(1 - `E_r` `E_f`)
/// (Myers et al. 1996, eq. 2, doi:10.1086/310146).
pub(super) fn two_layer(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    own_temperatures::<Uniform>(line, sampling, parameters, value, jacobian);
}

/// Two layers with an opaque continuum source of beam filling Phi and temperature `T_c` between
/// them; parameters `v_lsr`, sigma, `v_in`, tau, `T_f`, `T_r`, Phi, `T_c`.
///
/// T = (J(`T_f`) - `J_cr`)(1 - `E_f`) + (1 - Phi)(J(`T_r`) - J(`T_bg`))(1 - `E_r` `E_f`),
/// `J_cr` = Phi J(`T_c`) + (1 - Phi) J(`T_r`), above the continuum level
/// (Di Francesco et al. 2001, doi:10.1086/323854).
pub(super) fn two_layer_continuum(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    let scale_j = &line.radiation;
    let (filling, open) = (parameters[6], 1.0 - parameters[6]);
    let (front, rear, source) = (
        scale_j.at(parameters[4]),
        scale_j.at(parameters[5]),
        scale_j.at(parameters[7]),
    );
    let background = scale_j.background();
    let slab = slab(
        parameters,
        front - filling * source - open * rear,
        open * (rear - background),
    );
    let Some(jacobian) = jacobian else {
        return evaluate::<Uniform>(slab, &line.components, sampling, Value(value));
    };
    let [
        by_v,
        by_sigma,
        by_v_in,
        by_tau,
        by_front,
        by_rear,
        by_filling,
        by_source,
    ] = columns(jacobian, value.len());
    evaluate::<Uniform>(
        slab,
        &line.components,
        sampling,
        Slopes {
            value,
            columns: [by_v, by_sigma, by_v_in, by_tau, by_front],
            by_excess: Some(by_rear),
        },
    );
    by_filling.copy_from_slice(by_front);
    by_source.copy_from_slice(by_front);
    for (target, by_excess) in by_filling.iter_mut().zip(&*by_rear) {
        *target = (rear - source) * *target - (rear - background) * by_excess;
    }
    scale(by_source, -filling * scale_j.slope(parameters[7]));
    let (slope_front, slope_rear) = (
        scale_j.slope(parameters[4]),
        open * scale_j.slope(parameters[5]),
    );
    recombine(
        by_front,
        by_rear,
        (slope_front, 0.0),
        (-slope_rear, slope_rear),
    );
}

/// J linear in optical depth from J(`T_bg`) at both surfaces to J(`T_p`) at the middle; parameters
/// `v_lsr`, sigma, `v_in`, tau, `T_p` (De Vries & Myers 2005, doi:10.1086/427141).
pub(super) fn hill(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    let scale_j = &line.radiation;
    let slab = slab(
        parameters,
        scale_j.at(parameters[4]) - scale_j.background(),
        0.0,
    );
    let Some(jacobian) = jacobian else {
        return evaluate::<Peaked>(slab, &line.components, sampling, Value(value));
    };
    let [by_v, by_sigma, by_v_in, by_tau, by_peak] = columns(jacobian, value.len());
    evaluate::<Peaked>(
        slab,
        &line.components,
        sampling,
        Slopes {
            value,
            columns: [by_v, by_sigma, by_v_in, by_tau, by_peak],
            by_excess: None,
        },
    );
    scale(by_peak, scale_j.slope(parameters[4]));
}

/// The hill with a free surface temperature; parameters `v_lsr`, sigma, `v_in`, tau, `T_p`, `T_0`.
///
/// T = (J(`T_p`) - J(`T_0`)) [(1 - `E_f`)/`tau_f` - `E_f` (1 - `E_r`)/`tau_r`]
///     + (J(`T_0`) - J(`T_bg`))(1 - `E_r` `E_f`) (De Vries & Myers 2005, doi:10.1086/427141).
pub(super) fn hill_surface(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    value: &mut [f64],
    jacobian: Option<&mut [f64]>,
) {
    own_temperatures::<Peaked>(line, sampling, parameters, value, jacobian);
}

/// The functions that a slab's profile is linear in, laid out as in [`Model::functions`], and the parts
/// of its slopes where wanted.
pub(super) fn functions(
    model: Model,
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    functions: &mut [f64],
    parts: Option<&mut [f64]>,
) {
    let uniform = matches!(model, Model::TwoLayer | Model::TwoLayerContinuum);
    let (shape, rest) = functions.split_at_mut(sampling.len());
    if let Some(parts) = parts {
        let functions = (shape, rest);
        if uniform {
            staged::functions::<Uniform>(line, sampling, parameters, functions, parts);
        } else {
            staged::functions::<Peaked>(line, sampling, parameters, functions, parts);
        }
        return;
    }
    let slab = slab(parameters, 0.0, 0.0);
    let rest = Some(rest).filter(|rest| !rest.is_empty());
    let output = Functions { shape, rest };
    if uniform {
        evaluate::<Uniform>(slab, &line.components, sampling, output);
    } else {
        evaluate::<Peaked>(slab, &line.components, sampling, output);
    }
}
