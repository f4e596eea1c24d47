//! A clump into the spectra of a map: rays through it, a beam over them, noise.
//!
//! Rays lie on a fine lattice about the clump's centre; each is the transfer equation through gas with
//! given excitation (no statistical equilibrium). Everything follows from [`GridTruth`], its seed
//! included. Rays can be made one at a time ([`GridPlan::ray`]) and in any order, so that threads share
//! them out.

mod check;
mod clump;
mod noise;
mod ray;
mod truth;

pub use clump::{ClumpTruth, InfallTruth, OutflowTruth, RotationTruth};
pub use truth::GridTruth;

use super::{Axis, NoiseLevel, PairLine, SimulateError};
use crate::constants::FWHM_PER_SIGMA;
use crate::line::Line;
use clump::Clump;
use rand::RngExt as _;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use ray::{Buffers, RayLine};

/// What spoils a pointing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Flaw {
    /// No channel of either line holds a number.
    Blank,
    /// A standing wave through both spectra, half as high as the brightest channel of the map.
    Ripple,
}

impl Flaw {
    /// Name in tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Blank => "blank",
            Self::Ripple => "ripple",
        }
    }
}

/// A simulated map.
#[derive(Clone, Debug, PartialEq)]
pub struct SimulatedGrid {
    /// Its channels, km/s; those of both lines.
    pub velocity_km_s: Vec<f64>,
    /// Width of a channel, km/s.
    pub channel_km_s: f64,
    /// Row by row from the south, each from west to east: offsets in x ascend.
    pub pointings: Vec<SimulatedPointing>,
}

/// One pointing of a simulated map.
#[derive(Clone, Debug, PartialEq)]
pub struct SimulatedPointing {
    /// Offset to the east, arcsec.
    pub dx_arcsec: f64,
    /// Offset to the north, arcsec.
    pub dy_arcsec: f64,
    /// The thick line.
    pub thick: PointingLine,
    /// The thin line.
    pub thin: PointingLine,
    /// What is wrong with it.
    pub flaw: Option<Flaw>,
}

/// One line of a pointing.
#[derive(Clone, Debug, PartialEq)]
pub struct PointingLine {
    /// Line and noise, K; NaN where blank.
    pub temperature_k: Vec<f64>,
    /// The line alone, K.
    pub noiseless_k: Vec<f64>,
    /// Noise of one channel, K.
    pub noise_k: f64,
}

/// What a ray brings: its place and both lines, K in the parts of the channels.
#[derive(Clone, Debug, PartialEq)]
pub struct Ray {
    place: [f64; 2],
    lines: [Vec<f64>; 2],
}

/// A map made ready: where its rays go.
#[derive(Clone, Debug)]
pub struct GridPlan {
    truth: GridTruth,
    clump: Clump,
    lines: [RayLine; 2],
    axis: Axis,
    velocity_km_s: Vec<f64>,
    /// Parts that a channel is averaged over.
    parts: usize,
    spacing_arcsec: f64,
    /// Places of the rays relative to the clump's centre, arcsec.
    rays: Vec<[f64; 2]>,
}

/// Rays a full width of the beam's minor axis, and a radius of the clump's core.
const RAYS_PER_FWHM: f64 = 4.0;
const RAYS_PER_CORE: f64 = 2.0;

/// Parts of a channel a dispersion: midpoint sums over a Gaussian are then off by less than 0.002 of its
/// peak.
const PARTS_PER_SIGMA: f64 = 5.0;

/// Standard deviations of the beam beyond which it is nothing.
const BEAM_REACH: f64 = 5.0;

/// Most rays of a map.
const MOST_RAYS: f64 = 1e6;

/// Stream of what is bad; those of noise come after.
const FLAW_STREAM: u64 = 3;

/// Height of a ripple over the brightest channel, and its periods in the band.
const RIPPLE: f64 = 0.5;
const RIPPLE_PERIODS: f64 = 3.5;

/// Spectra of a map.
///
/// ```
/// use inrush::{line::find, simulate::grid::{GridTruth, simulate_grid}};
///
/// let mut truth = GridTruth { columns: 3, rows: 3, ..GridTruth::default() };
/// truth.clump.infall.speed_km_s = 0.4;
/// let grid = simulate_grid(&truth, (&find("HCO+ 1-0")?, &find("H13CO+ 1-0")?))?;
/// let centre = &grid.pointings[4].thick.noiseless_k;
/// let brightest = (0..centre.len()).max_by(|a, b| centre[*a].total_cmp(&centre[*b]));
/// assert!(brightest.is_some_and(|channel| grid.velocity_km_s[channel] < 0.0)); // infall is blue
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
///
/// # Errors
///
/// [`SimulateError`] where the truth is impossible.
pub fn simulate_grid(
    truth: &GridTruth,
    lines: (&Line, &Line),
) -> Result<SimulatedGrid, SimulateError> {
    let plan = GridPlan::new(truth, lines)?;
    let rays: Vec<Ray> = (0..plan.rays()).map(|index| plan.ray(index)).collect();
    plan.observe(&rays)
}

impl GridPlan {
    /// Places the rays of a map; `lines` are the thick and the thin one.
    ///
    /// # Errors
    ///
    /// [`SimulateError`] where the truth is impossible.
    pub fn new(truth: &GridTruth, lines: (&Line, &Line)) -> Result<Self, SimulateError> {
        truth.check()?;
        let clump = Clump::new(&truth.clump);
        let axis = truth.axis(lines)?;
        let narrowest_km_s = truth.narrowest_km_s();
        let parts = parts(PARTS_PER_SIGMA * axis.channel_km_s / narrowest_km_s);
        let width_km_s = axis.channel_km_s / parts as f64;
        let velocity_km_s = axis.velocity_km_s();
        let fine = velocity_km_s
            .iter()
            .flat_map(|centre| {
                (0..parts).map(move |part| {
                    centre - 0.5 * axis.channel_km_s + width_km_s * (part as f64 + 0.5)
                })
            })
            .collect();
        let spacing_arcsec =
            (truth.beam_arcsec[1] / RAYS_PER_FWHM).min(truth.clump.core_arcsec / RAYS_PER_CORE);
        let reach = clump.reach_arcsec();
        let count = std::f64::consts::PI * (reach / spacing_arcsec).powi(2);
        if count > MOST_RAYS {
            return Err(SimulateError::Sample {
                quantity: "beam_arcsec",
                found: format!("{} for a reach of {reach:.0} arcsec", truth.beam_arcsec[1]),
                expected: format!(
                    "a beam and a core that ask for at most {MOST_RAYS:.0} rays, not {count:.0}"
                ),
            });
        }
        Ok(Self {
            lines: [
                RayLine::new(lines.0, 1.0),
                RayLine::new(lines.1, 1.0 / truth.clump.isotope_ratio),
            ],
            rays: lattice(reach, spacing_arcsec),
            truth: truth.clone(),
            clump,
            axis,
            velocity_km_s: fine,
            parts,
            spacing_arcsec,
        })
    }

    /// Number of rays.
    #[must_use]
    pub fn rays(&self) -> usize {
        self.rays.len()
    }

    /// One ray through the clump, counted from 0.
    #[must_use]
    pub fn ray(&self, index: usize) -> Ray {
        let place = self.rays[index];
        let mut buffers = Buffers::default();
        let v_lsr_km_s = self.truth.clump.v_lsr_km_s;
        let lines = self.lines.each_ref().map(|line| {
            let fine = line.brightness(
                &self.clump,
                v_lsr_km_s,
                &self.velocity_km_s,
                place,
                &mut buffers,
            );
            fine.chunks_exact(self.parts)
                .map(|parts| parts.iter().sum::<f64>() / parts.len() as f64)
                .collect()
        });
        Ray { place, lines }
    }

    /// Beam and noise over all rays, which are in their order.
    ///
    /// # Errors
    ///
    /// [`SimulateError::NoPeak`] for a signal-to-noise ratio of a line without signal.
    pub fn observe(&self, rays: &[Ray]) -> Result<SimulatedGrid, SimulateError> {
        let velocity_km_s = self.axis.velocity_km_s();
        let positions = self.truth.positions();
        let noiseless: Vec<[Vec<f64>; 2]> = positions
            .iter()
            .map(|at| self.in_beam(*at, rays, velocity_km_s.len()))
            .collect();
        let flaws = self.flaws(positions.len());
        let mut lines = [PairLine::Thick, PairLine::Thin]
            .into_iter()
            .map(|which| self.with_noise(which, &positions, &noiseless, &flaws, &velocity_km_s));
        let (Some(thick), Some(thin)) = (lines.next(), lines.next()) else {
            unreachable!("two lines");
        };
        let pointings = positions
            .iter()
            .zip(thick?)
            .zip(thin?)
            .zip(flaws)
            .map(|(((at, thick), thin), flaw)| SimulatedPointing {
                dx_arcsec: at[0],
                dy_arcsec: at[1],
                thick,
                thin,
                flaw,
            })
            .collect();
        Ok(SimulatedGrid {
            velocity_km_s,
            channel_km_s: self.axis.channel_km_s,
            pointings,
        })
    }

    /// Mean over the beam of a pointing, both lines.
    fn in_beam(&self, at: [f64; 2], rays: &[Ray], channels: usize) -> [Vec<f64>; 2] {
        let truth = &self.truth;
        let [major, minor] = truth.beam_arcsec.map(|fwhm| fwhm / FWHM_PER_SIGMA);
        let (sin, cos) = truth.beam_angle_deg.to_radians().sin_cos();
        let share = self.spacing_arcsec.powi(2) / (std::f64::consts::TAU * major * minor);
        let mut sums = [vec![0.0; channels], vec![0.0; channels]];
        for ray in rays {
            let x = ray.place[0] + truth.centre_arcsec[0] - at[0];
            let y = ray.place[1] + truth.centre_arcsec[1] - at[1];
            let square =
                ((x * sin + y * cos) / major).powi(2) + ((x * cos - y * sin) / minor).powi(2);
            if square > BEAM_REACH * BEAM_REACH {
                continue;
            }
            let weight = share * (-0.5 * square).exp();
            for (sum, line) in sums.iter_mut().zip(&ray.lines) {
                for (sum, value) in sum.iter_mut().zip(line) {
                    *sum += weight * value;
                }
            }
        }
        sums
    }

    fn with_noise(
        &self,
        which: PairLine,
        positions: &[[f64; 2]],
        noiseless: &[[Vec<f64>; 2]],
        flaws: &[Option<Flaw>],
        velocity_km_s: &[f64],
    ) -> Result<Vec<PointingLine>, SimulateError> {
        let truth = &self.truth;
        let (line, level) = match which {
            PairLine::Thick => (0, truth.noise),
            PairLine::Thin => (1, truth.noise_thin),
        };
        let brightest_k = noiseless
            .iter()
            .flat_map(|lines| &lines[line])
            .fold(0.0f64, |peak, value| peak.max(value.abs()));
        let central_k = match level {
            NoiseLevel::RmsK(rms_k) => rms_k,
            NoiseLevel::SignalToNoise(_) if brightest_k == 0.0 => {
                return Err(SimulateError::NoPeak { line: which });
            }
            NoiseLevel::SignalToNoise(ratio) => brightest_k / ratio,
        };
        let noise = noise::unit_noise(truth, which, velocity_km_s.len());
        let farthest = positions
            .iter()
            .map(|[x, y]| x.hypot(*y))
            .fold(0.0, f64::max);
        let band_km_s = velocity_km_s[velocity_km_s.len() - 1] - velocity_km_s[0];
        let lines = (0..positions.len()).map(|index| {
            let share = positions[index][0].hypot(positions[index][1]) / farthest.max(1e-300);
            let noise_k = central_k * (1.0 + (truth.noise_edge_ratio - 1.0) * share * share);
            let spoilt_k = |velocity: f64| match flaws[index] {
                None => 0.0,
                Some(Flaw::Blank) => f64::NAN,
                Some(Flaw::Ripple) => {
                    let turns = RIPPLE_PERIODS * (velocity - velocity_km_s[0]) / band_km_s;
                    RIPPLE * brightest_k * (std::f64::consts::TAU * turns).sin()
                }
            };
            let noiseless_k = noiseless[index][line].clone();
            let temperature_k = noiseless_k
                .iter()
                .zip(&noise[index])
                .zip(velocity_km_s)
                .map(|((value, noise), velocity)| value + noise_k * noise + spoilt_k(*velocity))
                .collect();
            PointingLine {
                temperature_k,
                noiseless_k,
                noise_k,
            }
        });
        Ok(lines.collect())
    }

    /// Which pointings are bad, blank and rippled in turn.
    fn flaws(&self, pointings: usize) -> Vec<Option<Flaw>> {
        let mut generator = ChaCha8Rng::seed_from_u64(self.truth.seed);
        generator.set_stream(FLAW_STREAM);
        let mut flaws = vec![None; pointings];
        let mut left: Vec<usize> = (0..pointings).collect();
        for number in 0..self.truth.bad_pointings {
            let place = generator.random_range(0..left.len() as u64);
            let index = left.swap_remove(usize::try_from(place).unwrap_or_default());
            flaws[index] = Some([Flaw::Blank, Flaw::Ripple][number % 2]);
        }
        flaws
    }

    /// Inward speed (km/s) at a distance from the clump's centre, arcsec.
    #[must_use]
    pub fn inward_km_s(&self, distance_arcsec: f64) -> f64 {
        self.clump.inward_km_s(distance_arcsec)
    }
}

/// Places of a square lattice about the origin within a reach, row by row.
fn lattice(reach: f64, spacing: f64) -> Vec<[f64; 2]> {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "at most the root of MOST_RAYS"
    )]
    let half = (reach / spacing).floor() as i32;
    (-half..=half)
        .flat_map(|row| (-half..=half).map(move |column| [column, row]))
        .map(|place| place.map(|step| spacing * f64::from(step)))
        .filter(|[x, y]| x.hypot(*y) <= reach)
        .collect()
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a whole number between 1 and 1000"
)]
fn parts(number: f64) -> usize {
    number.ceil().clamp(1.0, 1000.0) as usize
}
