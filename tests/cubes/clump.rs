//! An invented clump over the sky: it falls in, turns a little, and fades outward.
#![allow(dead_code)] // Each test file uses its part.

use inrush::line::find;
use inrush::model::{LineShape, Model, Sampling};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use std::cell::RefCell;

/// The clump, and how it is observed.
#[derive(Clone, Copy, Debug)]
pub struct Clump {
    pub v_in_km_s: f64,
    /// Gradient of the velocity toward the east, km/s an arcsec.
    pub gradient: f64,
    /// Standard deviation of the brightness over the sky, arcsec.
    pub size_arcsec: f64,
    pub noise_thick_k: f64,
    pub noise_thin_k: f64,
}

impl Default for Clump {
    fn default() -> Self {
        Self {
            v_in_km_s: 0.35,
            gradient: 0.004,
            size_arcsec: 30.0,
            noise_thick_k: 0.03,
            noise_thin_k: 0.015,
        }
    }
}

pub const SIGMA_KM_S: f64 = 0.5;
/// Peak of the thin line in the middle, K.
pub const THIN_PEAK_K: f64 = 0.6;

impl Clump {
    pub fn velocity_km_s(&self, east: f64) -> f64 {
        self.gradient * east
    }

    fn brightness(&self, [east, north]: [f64; 2]) -> f64 {
        (-(east * east + north * north) / (2.0 * self.size_arcsec.powi(2))).exp()
    }

    /// Noiseless temperatures (K) at velocities (km/s), thick or thin.
    pub fn line_k(&self, at: [f64; 2], thick: bool, velocity_km_s: &[f64]) -> Vec<f64> {
        let name = if thick { "HCO+ 1-0" } else { "H13CO+ 1-0" };
        let line = find(name).unwrap();
        let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
        let sampling = Sampling::at(velocity_km_s.to_vec());
        let v = self.velocity_km_s(at[0]);
        let (model, parameters) = if thick {
            (Model::Hill, vec![v, SIGMA_KM_S, self.v_in_km_s, 4.0, 14.0])
        } else {
            (Model::Gaussian, vec![v, SIGMA_KM_S, THIN_PEAK_K])
        };
        let mut values = vec![0.0; velocity_km_s.len()];
        model.evaluate(&shape, &sampling, &parameters, &mut values, None);
        let brightness = self.brightness(at);
        values.into_iter().map(|value| brightness * value).collect()
    }

    /// A function of offsets and channel for [`super::Plan::write`], with noise of a seed.
    pub fn seen(
        &self,
        plan: &super::Plan,
        thick: bool,
        seed: u64,
    ) -> impl Fn([f64; 2], usize) -> f64 + use<> {
        let velocities: Vec<f64> = (0..plan.channels)
            .map(|channel| plan.first_km_s + plan.channel_km_s * channel as f64)
            .collect();
        let clump = *self;
        let noise_k = if thick {
            self.noise_thick_k
        } else {
            self.noise_thin_k
        };
        let random = RefCell::new(ChaCha8Rng::seed_from_u64(seed));
        let kept: RefCell<std::collections::HashMap<[u64; 2], Vec<f64>>> = RefCell::default();
        move |at, channel| {
            let mut kept = kept.borrow_mut();
            let key = at.map(f64::to_bits);
            let line = kept
                .entry(key)
                .or_insert_with(|| clump.line_k(at, thick, &velocities));
            let noise: f64 = StandardNormal.sample(&mut *random.borrow_mut());
            line[channel] + noise_k * noise
        }
    }
}

/// Rest frequencies of both lines, Hz.
pub fn rest_hz(thick: bool) -> f64 {
    let name = if thick { "HCO+ 1-0" } else { "H13CO+ 1-0" };
    find(name).unwrap().rest_frequency_ghz * 1e9
}
