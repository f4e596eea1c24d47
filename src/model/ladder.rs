//! The slab models' functions for many candidates at once: all optical depths at one place and speed,
//! both shapes, and either sign of the inward speed share what they have in common.
#![allow(
    clippy::inline_always,
    reason = "has to be compiled inside each instruction-set copy"
)]

use super::{LineShape, Sampling};
use crate::line::Component;
use crate::numeric::dispatch::{Arithmetic, Kernel, dispatch};
use crate::numeric::exponential::exp_negative;

/// The functions of both shapes on a ladder of optical depths, for either sign of the inward speed: what
/// a scan of many candidates shares.
#[derive(Clone, Debug, Default)]
pub struct Ladder {
    /// Optical depth per unit tau of the half at `v_lsr` + speed and of that at `v_lsr` - speed, one
    /// quadrature node after the other.
    upper: Vec<f64>,
    lower: Vec<f64>,
}

/// F of a shape where the upper half is in front and where the lower one is, one number a channel.
#[derive(Debug)]
pub struct BothSigns<'a> {
    /// Inward speed positive.
    pub inward: &'a mut [f64],
    /// Inward speed negative.
    pub outward: &'a mut [f64],
}

impl Ladder {
    /// Places the halves of a line at `v_lsr` +- `speed` (km/s) with dispersion `sigma` (km/s).
    pub fn place(
        &mut self,
        line: &LineShape,
        sampling: &Sampling,
        (v_lsr_km_s, sigma_km_s, speed_km_s): (f64, f64, f64),
    ) {
        let points = sampling.len() * sampling.nodes().len();
        for (column, centre) in [
            (&mut self.upper, v_lsr_km_s + speed_km_s),
            (&mut self.lower, v_lsr_km_s - speed_km_s),
        ] {
            column.resize(points, 0.0);
            dispatch(PhiKernel {
                components: &line.components,
                sampling,
                centre_km_s: centre,
                sigma_km_s,
                phi: column,
            });
        }
    }

    /// F of the two-layer shape at an optical depth, and the absorbed share 1 - `E_f` `E_r` (the same for
    /// both signs), averaged over each channel.
    pub fn uniform(
        &self,
        sampling: &Sampling,
        tau: f64,
        shape: BothSigns<'_>,
        absorbed: &mut [f64],
    ) {
        dispatch(RungKernel::<false> {
            ladder: self,
            sampling,
            tau,
            shape,
            absorbed,
        });
    }

    /// The same of the hill's shape.
    pub fn peaked(
        &self,
        sampling: &Sampling,
        tau: f64,
        shape: BothSigns<'_>,
        absorbed: &mut [f64],
    ) {
        dispatch(RungKernel::<true> {
            ladder: self,
            sampling,
            tau,
            shape,
            absorbed,
        });
    }
}

struct PhiKernel<'a> {
    components: &'a [Component],
    sampling: &'a Sampling,
    centre_km_s: f64,
    sigma_km_s: f64,
    phi: &'a mut [f64],
}

impl Kernel for PhiKernel<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let inverse = 1.0 / self.sigma_km_s;
        let channels = self.sampling.len();
        let velocity = &self.sampling.velocity_km_s()[..channels];
        let width = &self.sampling.width_km_s()[..channels];
        for (k, (node, _)) in self.sampling.nodes().iter().enumerate() {
            let phi = &mut self.phi[k * channels..(k + 1) * channels];
            for (index, component) in self.components.iter().enumerate() {
                let centre = self.centre_km_s + component.offset_km_s;
                let first = index == 0;
                for i in 0..channels {
                    let z = (A::mul_add(*node, width[i], velocity[i]) - centre) * inverse;
                    let gauss = component.weight * exp_negative::<A>(0.5 * z * z);
                    phi[i] = if first { gauss } else { phi[i] + gauss };
                }
            }
        }
    }
}

struct RungKernel<'a, const PEAKED: bool> {
    ladder: &'a Ladder,
    sampling: &'a Sampling,
    tau: f64,
    shape: BothSigns<'a>,
    absorbed: &'a mut [f64],
}

/// Below, (1 - e^-x)/x of a scan is its series, good to 1e-7.
const SCAN_SERIES_BELOW: f64 = 1e-2;

impl<const PEAKED: bool> Kernel for RungKernel<'_, PEAKED> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let channels = self.sampling.len();
        let inward = &mut self.shape.inward[..channels];
        let outward = &mut self.shape.outward[..channels];
        let absorbed = &mut self.absorbed[..channels];
        for (k, (_, weight)) in self.sampling.nodes().iter().enumerate() {
            let upper = &self.ladder.upper[k * channels..(k + 1) * channels];
            let lower = &self.ladder.lower[k * channels..(k + 1) * channels];
            let before = |value: f64| if k == 0 { 0.0 } else { value };
            for i in 0..channels {
                let (tau_u, tau_l) = (self.tau * upper[i], self.tau * lower[i]);
                let (e_u, e_l) = (exp_negative::<A>(tau_u), exp_negative::<A>(tau_l));
                let (rising, falling) = if PEAKED {
                    let (g_u, g_l) = (scan_escape::<A>(tau_u, e_u), scan_escape::<A>(tau_l, e_l));
                    (g_u - e_u * g_l, g_l - e_l * g_u)
                } else {
                    (1.0 - e_u, 1.0 - e_l)
                };
                inward[i] = before(inward[i]) + weight * rising;
                outward[i] = before(outward[i]) + weight * falling;
                absorbed[i] = before(absorbed[i]) + weight * (1.0 - e_u * e_l);
            }
        }
    }
}

/// (1 - e^-x)/x, good enough to rank candidates.
#[inline(always)]
fn scan_escape<A: Arithmetic>(x: f64, exp_minus_x: f64) -> f64 {
    let series = A::mul_add(x, A::mul_add(x, 1.0 / 6.0, -0.5), 1.0);
    let direct = (1.0 - exp_minus_x) / x;
    if x < SCAN_SERIES_BELOW {
        series
    } else {
        direct
    }
}
