//! A slab in two stages, for searches that solve for the amplitudes: first the functions that its profile is
//! linear in, then, when the amplitudes are known, the slopes of the profile itself.
//!
//! Between the two stand the parts, [`PARTS`] columns a quadrature node. So the slopes of neither function
//! are ever formed, and what both stages need is computed once.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::slab::Shape;
use super::{LineShape, Sampling, columns};
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::exp_negative;

/// Columns of the parts of a node: of either half the optical depth per unit tau and its slopes by velocity
/// and dispersion, then dF/d`tau_f`, dF/d`tau_r` and `E_f` `E_r`, each times the node's weight.
pub(super) const PARTS: usize = 9;

/// F and, where `rest` has room for it, (1 - `E_f` `E_r`) - F, averaged over each channel, at `v_lsr`, sigma,
/// `v_in` and tau; and the parts.
pub(super) fn functions<S: Shape>(
    line: &LineShape,
    sampling: &Sampling,
    parameters: &[f64],
    (shape, rest): (&mut [f64], &mut [f64]),
    parts: &mut [f64],
) {
    dispatch(First::<S> {
        components: &line.components,
        sampling,
        parameters: [parameters[0], parameters[1], parameters[2], parameters[3]],
        functions: (shape, rest),
        parts,
        model: std::marker::PhantomData,
    });
}

/// Slopes of a F + b ((1 - `E_f` `E_r`) - F) by `v_lsr`, sigma, `v_in` and tau, from the parts.
pub(super) fn slopes(tau: f64, amplitudes: [f64; 2], parts: &[f64], slopes: &mut [f64]) {
    dispatch(Second {
        tau,
        amplitudes,
        parts,
        slopes,
    });
}

struct First<'a, S> {
    components: &'a [Component],
    sampling: &'a Sampling,
    parameters: [f64; 4],
    functions: (&'a mut [f64], &'a mut [f64]),
    parts: &'a mut [f64],
    model: std::marker::PhantomData<S>,
}

impl<S: Shape> Kernel for First<'_, S> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let [v_lsr, sigma, v_in, tau] = self.parameters;
        let (shape, rest) = self.functions;
        let channels = shape.len();
        let (centres, widths) = (self.sampling.velocity_km_s(), self.sampling.width_km_s());
        let nodes = self.sampling.nodes();
        let parts = self.parts.chunks_exact_mut(PARTS * channels);
        for (index, ((node, weight), parts)) in nodes.iter().zip(parts).enumerate() {
            let [
                phi_f,
                by_v_f,
                by_sigma_f,
                phi_r,
                by_v_r,
                by_sigma_r,
                by_f,
                by_r,
                through,
            ] = columns(parts, channels);
            for (component, first) in self.components.iter().zip((0..).map(|index| index == 0)) {
                let weight = component.weight;
                let centre = v_lsr + component.offset_km_s;
                let at = (*node, centre + v_in, 1.0 / sigma, weight);
                half::<A>(centres, widths, at, first, phi_f, by_v_f, by_sigma_f);
                let at = (*node, centre - v_in, 1.0 / sigma, weight);
                half::<A>(centres, widths, at, first, phi_r, by_v_r, by_sigma_r);
            }
            let at = (tau, *weight, index == 0);
            partial::<S, A>(at, phi_f, phi_r, shape, by_f, by_r, through);
            if !rest.is_empty() {
                let at = (*weight, index == 0, index + 1 == nodes.len());
                remainder(at, shape, through, rest);
            }
        }
    }
}

/// Optical depth per unit tau and its slopes by velocity and dispersion: set or added to.
#[inline(always)]
fn half<A: Arithmetic>(
    centres: &[f64],
    widths: &[f64],
    (node, centre, inverse, weight): (f64, f64, f64, f64),
    first: bool,
    phi: &mut [f64],
    by_v: &mut [f64],
    by_sigma: &mut [f64],
) {
    let n = phi.len();
    let (centres, widths) = (&centres[..n], &widths[..n]);
    let (by_v, by_sigma) = (&mut by_v[..n], &mut by_sigma[..n]);
    let before = |value: f64| if first { 0.0 } else { value };
    for i in 0..n {
        let z = (A::mul_add(node, widths[i], centres[i]) - centre) * inverse;
        let gauss = weight * exp_negative::<A>(0.5 * z * z);
        let slope = gauss * z * inverse;
        phi[i] = before(phi[i]) + gauss;
        by_v[i] = before(by_v[i]) + slope;
        by_sigma[i] = A::mul_add(slope, z, before(by_sigma[i]));
    }
}

/// F, set or added to, and its partial derivatives.
#[inline(always)]
fn partial<S: Shape, A: Arithmetic>(
    (tau, weight, first): (f64, f64, bool),
    phi_f: &[f64],
    phi_r: &[f64],
    shape: &mut [f64],
    by_f: &mut [f64],
    by_r: &mut [f64],
    through: &mut [f64],
) {
    let n = shape.len();
    let (phi_f, phi_r) = (&phi_f[..n], &phi_r[..n]);
    let (by_f, by_r, through) = (&mut by_f[..n], &mut by_r[..n], &mut through[..n]);
    for i in 0..n {
        let (tau_f, tau_r) = (tau * phi_f[i], tau * phi_r[i]);
        let (e_f, e_r) = (exp_negative::<A>(tau_f), exp_negative::<A>(tau_r));
        let (value, front, rear) = S::value_and_slopes::<A>(tau_f, tau_r, e_f, e_r);
        let before = if first { 0.0 } else { shape[i] };
        shape[i] = A::mul_add(weight, value, before);
        by_f[i] = weight * front;
        by_r[i] = weight * rear;
        through[i] = weight * (e_f * e_r);
    }
}

/// (1 - `E_f` `E_r`), set or added to, less F at the last node.
#[inline(always)]
fn remainder(
    (weight, first, last): (f64, bool, bool),
    shape: &[f64],
    through: &[f64],
    rest: &mut [f64],
) {
    let n = rest.len();
    let (shape, through) = (&shape[..n], &through[..n]);
    for i in 0..n {
        let before = if first { 0.0 } else { rest[i] };
        let shape = if last { shape[i] } else { 0.0 };
        rest[i] = before + (weight - through[i]) - shape;
    }
}

struct Second<'a> {
    tau: f64,
    amplitudes: [f64; 2],
    parts: &'a [f64],
    slopes: &'a mut [f64],
}

impl Kernel for Second<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let [a, b] = self.amplitudes;
        let channels = self.slopes.len() / 4;
        let [by_v, by_sigma, by_v_in, by_tau] = columns(self.slopes, channels);
        for (index, parts) in self.parts.chunks_exact(PARTS * channels).enumerate() {
            let at = (self.tau, a - b, b, index == 0);
            combine::<A>(at, parts, by_v, by_sigma, by_v_in, by_tau);
        }
    }
}

/// Sets or adds the slopes of one node.
#[inline(always)]
fn combine<A: Arithmetic>(
    (tau, of_shape, of_through, first): (f64, f64, f64, bool),
    parts: &[f64],
    by_v: &mut [f64],
    by_sigma: &mut [f64],
    by_v_in: &mut [f64],
    by_tau: &mut [f64],
) {
    let n = by_v.len();
    let (by_sigma, by_v_in, by_tau) = (&mut by_sigma[..n], &mut by_v_in[..n], &mut by_tau[..n]);
    let part = |column: usize| &parts[column * n..(column + 1) * n];
    let (phi_f, by_v_f, by_sigma_f) = (part(0), part(1), part(2));
    let (phi_r, by_v_r, by_sigma_r) = (part(3), part(4), part(5));
    let (by_f, by_r, through) = (part(6), part(7), part(8));
    let before = |value: f64| if first { 0.0 } else { value };
    for i in 0..n {
        let both = of_through * through[i];
        let front = A::mul_add(of_shape, by_f[i], both);
        let rear = A::mul_add(of_shape, by_r[i], both);
        let (tau_f, tau_r) = (tau * front, tau * rear);
        let (front_v, rear_v) = (tau_f * by_v_f[i], tau_r * by_v_r[i]);
        by_v[i] = before(by_v[i]) + (front_v + rear_v);
        by_v_in[i] = before(by_v_in[i]) + (front_v - rear_v);
        by_sigma[i] = before(by_sigma[i]) + A::mul_add(tau_f, by_sigma_f[i], tau_r * by_sigma_r[i]);
        by_tau[i] = before(by_tau[i]) + A::mul_add(front, phi_f[i], rear * phi_r[i]);
    }
}
