//! What the slab models share: two halves that approach each other, each with a Gaussian optical
//! depth (or a sum over a multiplet), and a brightness that is linear in two amplitudes.
//!
//! With E = e^-tau of the front (f) and rear (r) half, every slab model here is
//!
//! T(v) = A F(tau_f, tau_r) + B (1 - `E_f` `E_r`)
//!
//! | model | F | A | B |
//! | --- | --- | --- | --- |
//! | two-layer | 1 - `E_f` | J(`T_f`) - J(`T_r`) | J(`T_r`) - J(`T_bg`) |
//! | with a continuum source | 1 - `E_f` | J(`T_f`) - `J_cr` | (1 - Phi)(J(`T_r`) - J(`T_bg`)) |
//! | hill | g(`tau_f`) - `E_f` g(`tau_r`), g(x) = (1 - e^-x)/x | J(`T_p`) - J(`T_0`) | J(`T_0`) - J(`T_bg`) |
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::Sampling;
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::{escape_and_slope, exp_negative};

/// The function F of a slab model and its partial derivatives.
pub(super) trait Shape {
    /// (F, dF/d`tau_f`, dF/d`tau_r`) of the two optical depths and their e^-tau.
    fn value_and_slopes<A: Arithmetic>(
        tau_f: f64,
        tau_r: f64,
        e_f: f64,
        e_r: f64,
    ) -> (f64, f64, f64);
}

/// F = 1 - `E_f`: each half at one temperature.
pub(super) struct Uniform;

impl Shape for Uniform {
    #[inline(always)]
    fn value_and_slopes<A: Arithmetic>(_: f64, _: f64, e_f: f64, _: f64) -> (f64, f64, f64) {
        (1.0 - e_f, e_f, 0.0)
    }
}

/// F = g(`tau_f`) - `E_f` g(`tau_r`): temperature rising linearly with optical depth to the middle.
pub(super) struct Peaked;

impl Shape for Peaked {
    #[inline(always)]
    fn value_and_slopes<A: Arithmetic>(
        tau_f: f64,
        tau_r: f64,
        e_f: f64,
        e_r: f64,
    ) -> (f64, f64, f64) {
        let (g_f, slope_f) = escape_and_slope::<A>(tau_f, e_f);
        let (g_r, slope_r) = escape_and_slope::<A>(tau_r, e_r);
        (
            g_f - e_f * g_r,
            A::mul_add(e_f, g_r, slope_f),
            -e_f * slope_r,
        )
    }
}

/// Kinematics and optical depth of the two halves, and the two amplitudes.
#[derive(Clone, Copy, Debug)]
pub(super) struct Slab {
    pub v_lsr_km_s: f64,
    pub sigma_km_s: f64,
    pub v_in_km_s: f64,
    pub tau: f64,
    /// A, K.
    pub contrast_k: f64,
    /// B, K.
    pub excess_k: f64,
}

/// What a pass over the channels writes: one block of channels at one quadrature node at a time.
///
/// `block` has to be `#[inline(always)]` (and no closure), to be compiled for each instruction set.
pub(super) trait Sink {
    fn block<S: Shape, A: Arithmetic>(
        &mut self,
        slab: &Slab,
        block: &Block,
        front: &Half,
        rear: &Half,
    );
}

/// T only.
pub(super) struct Value<'a>(pub &'a mut [f64]);

/// The functions that T is linear in, F and (1 - `E_f` `E_r`) - F.
pub(super) struct Functions<'a> {
    pub shape: &'a mut [f64],
    /// The second function, where the model has it.
    pub rest: Option<&'a mut [f64]>,
}

/// T, and dT by `v_lsr`, sigma, `v_in`, tau, A and, where wanted, B: columns of one length.
pub(super) struct Slopes<'a> {
    pub value: &'a mut [f64],
    pub columns: [&'a mut [f64]; 5],
    pub by_excess: Option<&'a mut [f64]>,
}

/// Evaluates a slab on all channels, averaged over each.
pub(super) fn evaluate<S: Shape>(
    slab: Slab,
    components: &[Component],
    sampling: &Sampling,
    sink: impl Sink,
) {
    dispatch(SlabKernel::<S, _> {
        slab,
        components,
        sampling,
        sink,
        shape: std::marker::PhantomData,
    });
}

struct SlabKernel<'a, S, T> {
    slab: Slab,
    components: &'a [Component],
    sampling: &'a Sampling,
    sink: T,
    shape: std::marker::PhantomData<S>,
}

impl<S: Shape, T: Sink> Kernel for SlabKernel<'_, S, T> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let Self {
            slab,
            components,
            sampling,
            mut sink,
            ..
        } = self;
        let (all_velocities, all_widths) = (sampling.velocity_km_s(), sampling.width_km_s());
        let mut front = Half {
            phi: [0.0; BLOCK],
            by_velocity: [0.0; BLOCK],
            by_sigma: [0.0; BLOCK],
        };
        let mut rear = Half {
            phi: [0.0; BLOCK],
            by_velocity: [0.0; BLOCK],
            by_sigma: [0.0; BLOCK],
        };
        for start in (0..all_velocities.len()).step_by(BLOCK) {
            let end = (start + BLOCK).min(all_velocities.len());
            let channels = end - start;
            let n = whole_lanes(channels);
            let centres = padded(&all_velocities[start..end]);
            let widths = padded(&all_widths[start..end]);
            for (index, (node, weight)) in sampling.nodes().iter().enumerate() {
                let mut velocity = [0.0; BLOCK];
                let velocity = &mut velocity[..n];
                let (centres, widths) = (&centres[..n], &widths[..n]);
                for i in 0..n {
                    velocity[i] = A::mul_add(*node, widths[i], centres[i]);
                }
                front.fill::<A>(
                    velocity,
                    slab.v_lsr_km_s + slab.v_in_km_s,
                    slab.sigma_km_s,
                    components,
                );
                rear.fill::<A>(
                    velocity,
                    slab.v_lsr_km_s - slab.v_in_km_s,
                    slab.sigma_km_s,
                    components,
                );
                let block = Block {
                    start,
                    channels,
                    weight: *weight,
                    first: index == 0,
                };
                sink.block::<S, A>(&slab, &block, &front, &rear);
            }
        }
    }
}

/// A run of channels at one quadrature node.
pub(super) struct Block {
    start: usize,
    channels: usize,
    weight: f64,
    /// Whether this is the first node: values are set, at the others added.
    first: bool,
}

impl Block {
    /// Writes the block's values into a column of all channels.
    #[inline(always)]
    fn write(&self, column: &mut [f64], values: &[f64]) {
        let values = &values[..self.channels];
        let target = &mut column[self.start..self.start + self.channels];
        if self.first {
            target.copy_from_slice(values);
        } else {
            for (target, value) in target.iter_mut().zip(values) {
                *target += value;
            }
        }
    }
}

/// Channels that are worked on at a time. Loops run over slices of arrays of their own, all of one
/// length that is a multiple of [`LANES`]: so the compiler needs no checks inside and vectorises them.
pub(super) const BLOCK: usize = 64;

/// Numbers in a register of the widest instructions.
const LANES: usize = 8;

/// The length of the slices that hold `channels` (at most [`BLOCK`]).
#[inline(always)]
pub(super) fn whole_lanes(channels: usize) -> usize {
    channels.next_multiple_of(LANES).min(BLOCK)
}

/// Up to [`BLOCK`] values, the last one repeated to fill the block.
#[inline(always)]
pub(super) fn padded(values: &[f64]) -> [f64; BLOCK] {
    let mut block = [values[values.len() - 1]; BLOCK];
    block[..values.len()].copy_from_slice(values);
    block
}

/// Optical depth per unit tau of one half in a block of channels, and its slopes.
pub(super) struct Half {
    phi: [f64; BLOCK],
    by_velocity: [f64; BLOCK],
    by_sigma: [f64; BLOCK],
}

impl Half {
    #[inline(always)]
    fn fill<A: Arithmetic>(
        &mut self,
        velocity: &[f64],
        centre: f64,
        sigma: f64,
        components: &[Component],
    ) {
        let inverse = 1.0 / sigma;
        let n = velocity.len();
        let phi = &mut self.phi[..n];
        let by_velocity = &mut self.by_velocity[..n];
        let by_sigma = &mut self.by_sigma[..n];
        phi.fill(0.0);
        by_velocity.fill(0.0);
        by_sigma.fill(0.0);
        for component in components {
            let centre = centre + component.offset_km_s;
            for i in 0..n {
                let z = (velocity[i] - centre) * inverse;
                let gauss = component.weight * exp_negative::<A>(0.5 * z * z);
                let slope = gauss * z * inverse;
                phi[i] += gauss;
                by_velocity[i] += slope;
                by_sigma[i] = A::mul_add(slope, z, by_sigma[i]);
            }
        }
    }
}

/// T and its partial derivatives in one channel.
struct Point {
    value: f64,
    front: f64,
    rear: f64,
    shape: f64,
    absorbed: f64,
}

#[inline(always)]
fn point<S: Shape, A: Arithmetic>(slab: &Slab, phi_f: f64, phi_r: f64) -> Point {
    let (tau_f, tau_r) = (slab.tau * phi_f, slab.tau * phi_r);
    let (e_f, e_r) = (exp_negative::<A>(tau_f), exp_negative::<A>(tau_r));
    let (shape, shape_f, shape_r) = S::value_and_slopes::<A>(tau_f, tau_r, e_f, e_r);
    let through = e_f * e_r;
    let absorbed = 1.0 - through;
    Point {
        value: A::mul_add(slab.contrast_k, shape, slab.excess_k * absorbed),
        front: A::mul_add(slab.contrast_k, shape_f, slab.excess_k * through),
        rear: A::mul_add(slab.contrast_k, shape_r, slab.excess_k * through),
        shape,
        absorbed,
    }
}

impl Sink for Value<'_> {
    #[inline(always)]
    fn block<S: Shape, A: Arithmetic>(
        &mut self,
        slab: &Slab,
        block: &Block,
        front: &Half,
        rear: &Half,
    ) {
        let n = whole_lanes(block.channels);
        let (phi_f, phi_r) = (&front.phi[..n], &rear.phi[..n]);
        let mut value = [0.0; BLOCK];
        let value = &mut value[..n];
        for i in 0..n {
            value[i] = block.weight * point::<S, A>(slab, phi_f[i], phi_r[i]).value;
        }
        block.write(self.0, value);
    }
}

/// Writes the slopes of a function by `v_lsr`, sigma, `v_in` and tau, from its partial derivatives by
/// the optical depths of the two halves.
#[inline(always)]
fn write_slopes<A: Arithmetic>(
    block: &Block,
    tau: f64,
    (by_front, by_rear): (&[f64], &[f64]),
    (front, rear): (&Half, &Half),
    columns: &mut [&mut [f64]; 4],
) {
    let n = by_front.len();
    let by_rear = &by_rear[..n];
    let (phi_f, phi_r) = (&front.phi[..n], &rear.phi[..n]);
    let (dv_f, dv_r) = (&front.by_velocity[..n], &rear.by_velocity[..n]);
    let (ds_f, ds_r) = (&front.by_sigma[..n], &rear.by_sigma[..n]);
    let mut by_v = [0.0; BLOCK];
    let by_v = &mut by_v[..n];
    let mut by_sigma = [0.0; BLOCK];
    let by_sigma = &mut by_sigma[..n];
    let mut by_v_in = [0.0; BLOCK];
    let by_v_in = &mut by_v_in[..n];
    let mut by_tau = [0.0; BLOCK];
    let by_tau = &mut by_tau[..n];
    for i in 0..n {
        let (f, r) = (by_front[i], by_rear[i]);
        let (tau_f, tau_r) = (tau * f, tau * r);
        by_v[i] = A::mul_add(tau_f, dv_f[i], tau_r * dv_r[i]);
        by_v_in[i] = A::mul_add(tau_f, dv_f[i], -tau_r * dv_r[i]);
        by_sigma[i] = A::mul_add(tau_f, ds_f[i], tau_r * ds_r[i]);
        by_tau[i] = A::mul_add(f, phi_f[i], r * phi_r[i]);
    }
    let buffers = [by_v, by_sigma, by_v_in, by_tau];
    for (column, buffer) in columns.iter_mut().zip(buffers) {
        block.write(column, buffer);
    }
}

impl Sink for Functions<'_> {
    #[inline(always)]
    fn block<S: Shape, A: Arithmetic>(
        &mut self,
        slab: &Slab,
        block: &Block,
        front: &Half,
        rear: &Half,
    ) {
        let n = whole_lanes(block.channels);
        let (phi_f, phi_r) = (&front.phi[..n], &rear.phi[..n]);
        let mut shape = [0.0; BLOCK];
        let shape = &mut shape[..n];
        let mut through = [0.0; BLOCK];
        let through = &mut through[..n];
        let weight = block.weight;
        for i in 0..n {
            let (tau_f, tau_r) = (slab.tau * phi_f[i], slab.tau * phi_r[i]);
            let (e_f, e_r) = (exp_negative::<A>(tau_f), exp_negative::<A>(tau_r));
            let (value, ..) = S::value_and_slopes::<A>(tau_f, tau_r, e_f, e_r);
            shape[i] = weight * value;
            through[i] = weight * (e_f * e_r);
        }
        block.write(self.shape, shape);
        let Some(rest) = &mut self.rest else { return };
        for i in 0..n {
            shape[i] = (weight - through[i]) - shape[i];
        }
        block.write(rest, shape);
    }
}

impl Sink for Slopes<'_> {
    #[inline(always)]
    fn block<S: Shape, A: Arithmetic>(
        &mut self,
        slab: &Slab,
        block: &Block,
        front: &Half,
        rear: &Half,
    ) {
        let n = whole_lanes(block.channels);
        let (phi_f, phi_r) = (&front.phi[..n], &rear.phi[..n]);
        let mut value = [0.0; BLOCK];
        let value = &mut value[..n];
        let mut by_front = [0.0; BLOCK];
        let by_front = &mut by_front[..n];
        let mut by_rear = [0.0; BLOCK];
        let by_rear = &mut by_rear[..n];
        let mut by_a = [0.0; BLOCK];
        let by_a = &mut by_a[..n];
        let mut by_b = [0.0; BLOCK];
        let by_b = &mut by_b[..n];
        for i in 0..n {
            let point = point::<S, A>(slab, phi_f[i], phi_r[i]);
            value[i] = block.weight * point.value;
            by_front[i] = block.weight * point.front;
            by_rear[i] = block.weight * point.rear;
            by_a[i] = block.weight * point.shape;
            by_b[i] = block.weight * point.absorbed;
        }
        block.write(self.value, value);
        let [kinematics @ .., contrast] = &mut self.columns;
        write_slopes::<A>(
            block,
            slab.tau,
            (by_front, by_rear),
            (front, rear),
            kinematics,
        );
        block.write(contrast, by_a);
        if let Some(by_excess) = &mut self.by_excess {
            block.write(by_excess, by_b);
        }
    }
}
