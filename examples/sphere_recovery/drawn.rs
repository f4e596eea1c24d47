//! Random clumps in statistical equilibrium into noiseless and into noisy pairs.

use inrush::line::{Component, Line, find};
use inrush::spectrum::Spectrum;
use inrush::sphere::{Beam, Clump, LineView, Mode, Molecule, PairView, SphereError, pair_spectra};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use serde::{Deserialize, Serialize};
use std::error::Error;

/// A noiseless pair and its truth.
#[derive(Clone, Debug, Deserialize, Serialize)]
pub struct Drawn {
    pub thick_line: String,
    pub thin_line: String,
    pub v_in_km_s: f64,
    pub v_lsr_km_s: f64,
    pub sigma_km_s: f64,
    pub depth: f64,
    pub ratio: f64,
    pub density_slope: f64,
    pub beam_over_radius: f64,
    pub t_kin_k: f64,
    pub temperature_slope: f64,
    pub n_h2_cm3: f64,
    pub snr: f64,
    pub thin_noise_ratio: f64,
    pub velocity_km_s: Vec<f64>,
    pub thick_k: Vec<f64>,
    pub thin_k: Vec<f64>,
    /// What excites the lines, in words.
    #[serde(default)]
    pub excitation: String,
}

/// What a pair has to be to be of use.
pub struct Wanted {
    pub snr: f64,
    pub thin_noise_ratio: f64,
    pub depth: f64,
}

fn peak(values: &[f64]) -> f64 {
    values.iter().copied().fold(0.0, f64::max)
}

impl Wanted {
    /// Whether the thick line is thick and bright, and the thin one's peak above four times its noise.
    pub fn holds(&self, thick_k: &[f64], thin_k: &[f64]) -> bool {
        let noise = peak(thick_k) / self.snr;
        (2.0..300.0).contains(&self.depth)
            && peak(thick_k) > 0.3
            && peak(thin_k) > 4.0 * noise * self.thin_noise_ratio
    }
}

const LINES: [(&str, usize, &str, &str); 5] = [
    ("HCO+", 0, "HCO+ 1-0", "H13CO+ 1-0"),
    ("HCO+", 2, "HCO+ 3-2", "H13CO+ 3-2"),
    ("HCO+", 3, "HCO+ 4-3", "H13CO+ 4-3"),
    ("HCO+", 0, "HCO+ 1-0", "H13CO+ 1-0"),
    ("CS", 1, "CS 2-1", "C34S 2-1"),
];

/// Clumps of broad ranges whose thick line is bright and thick and whose thin line stands out of the noise.
pub fn draw(
    pairs: usize,
    seed: u64,
    velocity_slope: f64,
) -> impl Iterator<Item = Result<Drawn, SphereError>> {
    accepted(pairs, seed, move |random| attempt(random, velocity_slope))
}

/// Attempts until there are as many clumps as asked for; one whose excitation does not converge is left out.
pub fn accepted(
    pairs: usize,
    seed: u64,
    mut attempt: impl FnMut(&mut ChaCha8Rng) -> Result<Option<Drawn>, SphereError>,
) -> impl Iterator<Item = Result<Drawn, SphereError>> {
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    std::iter::from_fn(move || {
        loop {
            match attempt(&mut random) {
                Ok(Some(drawn)) => return Some(Ok(drawn)),
                Ok(None) | Err(SphereError::NotConverged { .. }) => {}
                Err(error) => return Some(Err(error)),
            }
        }
    })
    .take(pairs)
}

fn attempt(random: &mut ChaCha8Rng, velocity_slope: f64) -> Result<Option<Drawn>, SphereError> {
    let mut log = |low: f64, high: f64| (random.random_range(low.ln()..high.ln())).exp();
    let sigma_km_s = log(0.2, 1.2);
    let outer_radius_pc = log(0.05, 0.8);
    let n_h2_cm3 = log(1e3, 2e5);
    let abundance = log(1e-10, 2e-8);
    let inner_radius_pc = outer_radius_pc * log(0.01, 0.05);
    let beam_over_radius = log(0.2, 3.0);
    let speed = log(0.1, 1.3);
    let ratio = log(20.0, 100.0);
    let t_kin_k = log(8.0, 60.0);
    let snr = log(10.0, 100.0);
    let thin_noise_ratio = log(0.2, 1.0);
    let step = sigma_km_s * log(0.1, 0.4);
    let clump = Clump {
        inner_radius_pc,
        outer_radius_pc,
        n_h2_cm3,
        density_slope: random.random_range(1.0..2.5),
        t_kin_k,
        temperature_slope: random.random_range(0.0..0.4),
        v_in_km_s: speed * sigma_km_s * if random.random_bool(0.25) { -1.0 } else { 1.0 },
        velocity_slope,
        sigma_km_s,
        abundance,
    };
    let v_lsr_km_s = random.random_range(-50.0..50.0);
    let (name, transition, thick_line, thin_line) = LINES[random.random_range(0..LINES.len())];
    let molecule = Molecule::built_in(name)?;
    let (velocity, near) = Drawn::velocities(&clump, step, random.random_range(-0.5..0.5));
    let line = LineView {
        transition,
        components: vec![Component::SINGLE],
        beam: Beam::Gaussian {
            fwhm_pc: beam_over_radius * outer_radius_pc,
            offset_pc: 0.0,
        },
        velocity_km_s: near.clone(),
    };
    let view = PairView {
        thin_molecule: molecule.isotopologue(0.973),
        thick_molecule: molecule,
        thick: line.clone(),
        thin: line,
    };
    let mut mode = Mode::fast();
    let rough = pair_spectra(&clump, ratio, &view, &mode, None)?;
    let wanted = Wanted {
        snr,
        thin_noise_ratio,
        depth: rough.thick_depth,
    };
    if rough.thick_depth > 100.0 || !wanted.holds(&rough.thick_k, &rough.thin_k) {
        return Ok(None);
    }
    mode = Mode::full();
    let exact = pair_spectra(&clump, ratio, &view, &mode, None)?;
    let whole = |values: &[f64]| Drawn::whole(&velocity, &near, values);
    Ok(Some(Drawn {
        thick_line: thick_line.to_owned(),
        thin_line: thin_line.to_owned(),
        v_in_km_s: clump.v_in_km_s,
        v_lsr_km_s,
        sigma_km_s,
        depth: exact.thick_depth,
        ratio,
        density_slope: clump.density_slope,
        beam_over_radius,
        t_kin_k,
        temperature_slope: clump.temperature_slope,
        n_h2_cm3,
        snr,
        thin_noise_ratio,
        thick_k: whole(&exact.thick_k),
        thin_k: whole(&exact.thin_k),
        velocity_km_s: velocity.iter().map(|v| v + v_lsr_km_s).collect(),
        excitation: "equilibrium".to_owned(),
    }))
}

impl Drawn {
    /// Velocities relative to the clump, and those that its lines reach.
    pub fn velocities(clump: &Clump, step: f64, shift: f64) -> (Vec<f64>, Vec<f64>) {
        #[expect(clippy::cast_possible_truncation, reason = "a few hundred channels")]
        let count = (20.0 * clump.sigma_km_s / step).ceil() as i32;
        let velocity: Vec<f64> = (-count..=count)
            .map(|index| (f64::from(index) + shift) * step)
            .collect();
        let motion = clump.v_in_km_s.abs() * (1.0 + 4.0 * clump.velocity_slope);
        let reach = 5.0 * clump.sigma_km_s + motion;
        let near = velocity.iter().copied().filter(|v| v.abs() < reach);
        let near = near.collect();
        (velocity, near)
    }

    /// Values at some of the velocities, zeros at the others.
    pub fn whole(velocity: &[f64], near: &[f64], values: &[f64]) -> Vec<f64> {
        let before = velocity.iter().filter(|v| **v < near[0]).count();
        let mut all = vec![0.0; velocity.len()];
        all[before..before + values.len()].copy_from_slice(values);
        all
    }

    /// Both lines with white noise.
    pub fn observed(&self, snr: f64, seed: u64) -> Result<(Spectrum, Spectrum), Box<dyn Error>> {
        let mut random = ChaCha8Rng::seed_from_u64(1000 + seed);
        let noise = self.thick_k.iter().copied().fold(0.0, f64::max) / snr;
        let width = self.velocity_km_s[1] - self.velocity_km_s[0];
        let mut noisy = |values: &[f64], noise: f64| {
            let values: Vec<f64> = values
                .iter()
                .map(|value| {
                    let z: f64 = StandardNormal.sample(&mut random);
                    value + noise * z
                })
                .collect();
            let widths = vec![width; values.len()];
            Spectrum::new(self.velocity_km_s.clone(), widths, values)
        };
        Ok((
            noisy(&self.thick_k, noise)?,
            noisy(&self.thin_k, noise * self.thin_noise_ratio)?,
        ))
    }

    pub fn lines(&self) -> Result<(Line, Line), Box<dyn Error>> {
        let line = |name: &str| Ok::<Line, Box<dyn Error>>(find(name)?);
        Ok((line(&self.thick_line)?, line(&self.thin_line)?))
    }

    pub fn text(&self) -> String {
        format!(
            "{} {} depth {:.1} v/sigma {:+.2} ratio {:.0} p {:.2} beam {:.2} T {:.0} m {:.2} n {:.0}",
            self.thick_line,
            self.excitation,
            self.depth,
            self.v_in_km_s / self.sigma_km_s,
            self.ratio,
            self.density_slope,
            self.beam_over_radius,
            self.t_kin_k,
            self.temperature_slope,
            self.n_h2_cm3
        )
    }
}
