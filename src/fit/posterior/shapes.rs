//! Shapes that brightness steps multiply: columns over the channels where a line is, no unit.
//!
//! Not computed here: slopes (see `model`), and anything of the noise.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use crate::line::Component;
use crate::model::{LineShape, Sampling};
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::{escape_and_slope, exp_negative};
use std::marker::PhantomData;
use std::ops::Range;

/// A Gaussian of height `depth`, or a multiplet of such ones.
#[derive(Clone, Copy, Debug)]
pub(super) struct Part {
    pub v_km_s: f64,
    pub sigma_km_s: f64,
    pub depth: f64,
}

/// Values below this share of a brightness step count as zero.
const NEGLIGIBLE: f64 = 1e-6;

/// Numbers in a register of the widest instructions: loops over whole registers have no remainder.
const LANES: usize = 8;

impl Part {
    /// Velocities beyond which it is negligible.
    fn reach(&self, components: &[Component]) -> (f64, f64) {
        let half = self.sigma_km_s * (2.0 * (self.depth.max(1.0) / NEGLIGIBLE).ln()).sqrt();
        let offsets = || components.iter().map(|one| one.offset_km_s);
        (
            self.v_km_s + offsets().fold(f64::INFINITY, f64::min) - half,
            self.v_km_s + offsets().fold(f64::NEG_INFINITY, f64::max) + half,
        )
    }
}

/// The channels where any of the parts is not negligible, `margin` more on either side.
pub(super) fn channels_of(
    parts: &[Part],
    line: &LineShape,
    sampling: &Sampling,
    margin: usize,
) -> Range<usize> {
    let velocity = sampling.velocity_km_s();
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for part in parts {
        let (from, to) = part.reach(&line.components);
        (low, high) = (low.min(from), high.max(to));
    }
    let first = velocity.partition_point(|v| *v < low);
    let end = velocity.partition_point(|v| *v <= high);
    let first = first.saturating_sub(margin);
    let length = (end + margin - first).next_multiple_of(LANES);
    first..(first + length).min(velocity.len())
}

/// How two optical depths, front and rear, become two shapes.
pub(super) trait Combine {
    fn shapes<A: Arithmetic>(tau_f: f64, tau_r: f64, e_f: f64, e_r: f64) -> (f64, f64);
}

/// 1 - `E_f` `E_r` of both layers, (1 - `E_r`) `E_f` of the rear one alone.
pub(super) struct TwoLayers;

/// 1 - `E_f` of the front cloud, (1 - `E_r`) `E_f` of the rear one.
pub(super) struct TwoClouds;

/// What a hill has above its surfaces; nothing.
pub(super) struct Hill;

/// 1 - `E_f` `E_r` of both surfaces, what a hill has above them.
pub(super) struct HillSurface;

impl Combine for TwoLayers {
    #[inline(always)]
    fn shapes<A: Arithmetic>(_: f64, _: f64, e_f: f64, e_r: f64) -> (f64, f64) {
        (1.0 - e_f * e_r, (1.0 - e_r) * e_f)
    }
}

impl Combine for TwoClouds {
    #[inline(always)]
    fn shapes<A: Arithmetic>(_: f64, _: f64, e_f: f64, e_r: f64) -> (f64, f64) {
        (1.0 - e_f, (1.0 - e_r) * e_f)
    }
}

impl Combine for Hill {
    #[inline(always)]
    fn shapes<A: Arithmetic>(tau_f: f64, tau_r: f64, e_f: f64, e_r: f64) -> (f64, f64) {
        let (g_f, _) = escape_and_slope::<A>(tau_f, e_f);
        let (g_r, _) = escape_and_slope::<A>(tau_r, e_r);
        (g_f - e_f * g_r, 0.0)
    }
}

impl Combine for HillSurface {
    #[inline(always)]
    fn shapes<A: Arithmetic>(tau_f: f64, tau_r: f64, e_f: f64, e_r: f64) -> (f64, f64) {
        let (above, _) = Hill::shapes::<A>(tau_f, tau_r, e_f, e_r);
        (1.0 - e_f * e_r, above)
    }
}

/// Sets both shapes of a front and a rear part in some channels, averaged over each.
pub(super) fn absorbing<C: Combine>(
    line: &LineShape,
    (sampling, channels): (&Sampling, Range<usize>),
    parts: [Part; 2],
    (first, second): (&mut [f64], &mut [f64]),
) {
    dispatch(Absorbing::<C> {
        components: &line.components,
        sampling,
        channels,
        parts,
        shapes: [first, second],
        combine: PhantomData,
    });
}

struct Absorbing<'a, C> {
    components: &'a [Component],
    sampling: &'a Sampling,
    channels: Range<usize>,
    parts: [Part; 2],
    shapes: [&'a mut [f64]; 2],
    combine: PhantomData<C>,
}

impl<C: Combine> Kernel for Absorbing<'_, C> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let Self {
            components,
            sampling,
            channels,
            parts: [front, rear],
            shapes: [first, second],
            ..
        } = self;
        let velocities = &sampling.velocity_km_s()[channels.clone()];
        let widths = &sampling.width_km_s()[channels.clone()];
        for start in (0..channels.len()).step_by(BLOCK) {
            let n = BLOCK.min(channels.len() - start);
            let block = start..start + n;
            let velocity = &velocities[block.clone()][..n];
            let width = &widths[block.clone()][..n];
            let first = &mut first[block.clone()][..n];
            let second = &mut second[block][..n];
            for (node, (at, weight)) in sampling.nodes().iter().enumerate() {
                let mut tau_f = [0.0; BLOCK];
                let tau_f = &mut tau_f[..n];
                let mut tau_r = [0.0; BLOCK];
                let tau_r = &mut tau_r[..n];
                add_depth::<A>(&front, components, (velocity, width, *at), tau_f);
                add_depth::<A>(&rear, components, (velocity, width, *at), tau_r);
                let keep = if node == 0 { 0.0 } else { 1.0 };
                for i in 0..n {
                    let (e_f, e_r) = (exp_negative::<A>(tau_f[i]), exp_negative::<A>(tau_r[i]));
                    let (one, two) = C::shapes::<A>(tau_f[i], tau_r[i], e_f, e_r);
                    first[i] = A::mul_add(*weight, one, keep * first[i]);
                    second[i] = A::mul_add(*weight, two, keep * second[i]);
                }
            }
        }
    }
}

/// Channels that are worked on at a time.
const BLOCK: usize = 64;

/// Adds a part's optical depth at one place of each channel.
#[inline(always)]
fn add_depth<A: Arithmetic>(
    part: &Part,
    components: &[Component],
    (velocity, width, at): (&[f64], &[f64], f64),
    tau: &mut [f64],
) {
    let n = tau.len();
    let (velocity, width) = (&velocity[..n], &width[..n]);
    let inverse = 1.0 / part.sigma_km_s;
    for component in components {
        let centre = part.v_km_s + component.offset_km_s;
        let depth = part.depth * component.weight;
        for i in 0..n {
            let z = (A::mul_add(at, width[i], velocity[i]) - centre) * inverse;
            tau[i] = A::mul_add(depth, exp_negative::<A>(0.5 * z * z), tau[i]);
        }
    }
}

/// Sets the sum of Gaussians in some channels, averaged over each; `depth` is the height of the
/// strongest component, for a multiplet in the thin limit.
pub(super) fn emitting(
    line: &LineShape,
    (sampling, channels): (&Sampling, Range<usize>),
    parts: &[Part],
    shape: &mut [f64],
) {
    let components = &line.components;
    let strongest = components
        .iter()
        .map(|component| component.weight)
        .fold(0.0, f64::max);
    shape[..channels.len()].fill(0.0);
    dispatch(Emitting {
        components,
        strongest,
        sampling,
        channels,
        parts,
        shape,
    });
}

struct Emitting<'a> {
    components: &'a [Component],
    strongest: f64,
    sampling: &'a Sampling,
    channels: Range<usize>,
    parts: &'a [Part],
    shape: &'a mut [f64],
}

impl Kernel for Emitting<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let n = self.channels.len();
        let velocity = &self.sampling.velocity_km_s()[self.channels.clone()][..n];
        let width = &self.sampling.width_km_s()[self.channels][..n];
        let shape = &mut self.shape[..n];
        for part in self.parts {
            let inverse = 1.0 / part.sigma_km_s;
            for component in self.components {
                let centre = part.v_km_s + component.offset_km_s;
                for (node, weight) in self.sampling.nodes() {
                    let height = weight * part.depth * component.weight / self.strongest;
                    for i in 0..n {
                        let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                        shape[i] = A::mul_add(height, exp_negative::<A>(0.5 * z * z), shape[i]);
                    }
                }
            }
        }
    }
}
