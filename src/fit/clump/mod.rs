//! A prepared pair into the inward speed of a spherical clump, everything that a pair cannot tell
//! integrated out.
//!
//! The clump is that of [`crate::sphere::ReducedPair`]. Opacity, excitation, beam and isotope ratio have
//! priors ([`ClumpPriors`]) that the known properties of a source narrow. Brightness, baseline, noise
//! level and smooth departures from any sphere are integrated out in closed form.

mod known;
mod priors;
mod residuals;
mod target;

pub use known::KnownClump;
pub use priors::{ClumpPriors, Normal};
pub use residuals::{ClumpResiduals, LineResiduals, Misfit};

use super::hypotheses::Speed;
use super::posterior::{
    Choice, Interval, Kinematics, PairData, PosteriorError, distinct, interval,
};
use super::{Averaging, FitRange};
use crate::constants::photon_temperature_k;
use crate::line::Line;
use crate::measure::ThinLine;
use crate::numeric::sampling::{
    Density, Draws, EnsembleSettings, ImportanceSettings, MOST_DIMENSIONS, Peak, Point, Quality,
    ascend, sample, settle,
};
use crate::prepare::Prepared;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use target::{DIMENSIONS, Target, place};

/// How the inward speed depends on the radius.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum SpeedLaw {
    /// The same everywhere.
    Constant,
    /// As r^-1/2: free fall toward a central mass.
    FreeFall,
}

impl SpeedLaw {
    /// Both.
    pub const ALL: [Self; 2] = [Self::Constant, Self::FreeFall];

    /// q of v ~ r^-q.
    #[must_use]
    pub fn slope(self) -> f64 {
        match self {
            Self::Constant => 0.0,
            Self::FreeFall => 0.5,
        }
    }

    /// Name for tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Constant => "constant",
            Self::FreeFall => "free fall",
        }
    }
}

/// How a clump's posterior is found.
#[derive(Clone, Debug, PartialEq)]
pub struct ClumpSettings {
    /// Priors; `None` takes [`ClumpPriors::of_line`].
    pub priors: Option<ClumpPriors>,
    /// What is known of the clump: narrows the priors.
    pub known: KnownClump,
    /// Full width at half maximum of the thick line's beam, arcsec, where it is known.
    pub beam_arcsec: Option<f64>,
    /// FWHM of the thin line's beam over the thick line's.
    pub beam_ratio: f64,
    /// Standard deviation of smooth departures from any sphere, over each line's peak.
    pub shape_error: f64,
    /// Velocities whose channels hold the lines; `None` takes the windows and as much on either side.
    pub range: Option<FitRange>,
    /// How the model's value in a channel is formed.
    pub averaging: Averaging,
    /// How long walkers settle before draws.
    pub ensemble: EnsembleSettings,
    /// How much is drawn.
    pub sampling: ImportanceSettings,
    /// Seed of all draws.
    pub seed: u64,
}

/// Departure of clumps from the reduced sphere, over the peak: what coverage on clumps in statistical
/// equilibrium asks for.
pub const SHAPE_ERROR: f64 = 0.025;

impl Default for ClumpSettings {
    fn default() -> Self {
        Self {
            priors: None,
            known: KnownClump::default(),
            beam_arcsec: None,
            beam_ratio: 1.0,
            shape_error: SHAPE_ERROR,
            range: None,
            averaging: Averaging::Channel,
            ensemble: EnsembleSettings {
                walkers: 48,
                steps: 120,
            },
            sampling: ImportanceSettings {
                round: 500,
                most_rounds: 12,
                wider: 1.6,
                ..ImportanceSettings::default()
            },
            seed: 1,
        }
    }
}

/// The best sphere's profile of a line.
#[derive(Clone, Debug, PartialEq)]
pub struct ClumpProfile {
    /// Velocities of the channels, km/s.
    pub velocity_km_s: Vec<f64>,
    /// Brightness, K.
    pub temperature_k: Vec<f64>,
}

/// Posterior of a clump's inward speed.
#[derive(Clone, Debug, PartialEq)]
pub struct ClumpPosterior {
    /// How the speed depends on the radius.
    pub law: SpeedLaw,
    /// Inward speed at the outer radius, km/s.
    pub v_in_km_s: Interval,
    /// ln of the evidence; comparable between laws for the same pair.
    pub ln_evidence: f64,
    /// Standard error of it.
    pub ln_evidence_err: f64,
    /// Whether the draws can be trusted.
    pub quality: Quality,
    /// Evaluations of the posterior density.
    pub evaluations: usize,
    /// Weighted points: v_lsr (km/s) and the coordinates of [`ClumpPosterior::COORDINATES`].
    pub draws: Draws,
    /// Highest point that was found.
    pub best: Point,
    /// Its profiles of the thick and of the thin line.
    pub profiles: [ClumpProfile; 2],
    /// Whether it fits.
    pub residuals: ClumpResiduals,
}

impl ClumpPosterior {
    /// Whether the sphere describes the pair and its draws describe the posterior.
    #[must_use]
    pub fn stands(&self) -> bool {
        self.residuals.misfit.is_none() && self.quality.holds()
    }

    /// What is known of the speed.
    #[must_use]
    pub fn speed(&self) -> Speed {
        let sigma = self.physical("sigma_km_s").map_or(0.0, |one| one.median);
        Speed::of(&self.weighted_speeds(), &self.v_in_km_s, sigma)
    }

    /// Median and intervals of `v_lsr_km_s`, `sigma_km_s` or `v_in_km_s`; `None` for another name.
    #[must_use]
    pub fn physical(&self, name: &str) -> Option<Interval> {
        interval(&self.weighted(physical(name)?))
    }

    /// Standard deviation of one of them.
    #[must_use]
    pub fn deviation(&self, name: &str) -> Option<f64> {
        Some(self.draws.moments(physical(name)?).1)
    }

    /// All draws of the inward speed, km/s, with their weights.
    #[must_use]
    pub fn weighted_speeds(&self) -> Vec<(f64, f64)> {
        self.weighted(speed)
    }

    /// As many draws of equal weight of inward speed and dispersion, km/s; deterministic for a seed.
    #[must_use]
    pub fn speeds_and_dispersions(&self, count: usize, seed: u64) -> Vec<(f64, f64)> {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream(DRAW_STREAM);
        let chosen = self.draws.equal(count, &mut generator);
        let points = chosen.iter().map(|index| &self.draws.points[*index]);
        points
            .map(|point| (speed(point), dispersion(point)))
            .collect()
    }

    /// Names of the coordinates of a draw, in their order.
    pub const COORDINATES: [&'static str; DIMENSIONS] = [
        "v_lsr_km_s",
        "ln_sigma",
        "v_in_over_sigma",
        "ln_depth",
        "opacity_slope",
        "ln_collision_ratio",
        "excess_slope",
        "temperature_slope",
        "ln_isotope_ratio",
        "ln_beam_over_radius",
        "opacity_response",
        "shared_trapping",
    ];

    /// Median and intervals of a coordinate; `None` for a name that is none.
    #[must_use]
    pub fn marginal(&self, name: &str) -> Option<Interval> {
        let index = Self::COORDINATES.iter().position(|known| *known == name)?;
        interval(&self.weighted(|point| point[index]))
    }

    fn weighted(&self, value: impl Fn(&Point) -> f64) -> Vec<(f64, f64)> {
        let pairs = self.draws.points.iter().zip(&self.draws.weights);
        pairs
            .map(|(point, weight)| (value(point), *weight))
            .collect()
    }

    /// Correlation of the inward speed with each coordinate that is not of the motion itself, the
    /// strongest first: what the speed depends on and the pair cannot tell.
    #[must_use]
    pub fn speed_depends_on(&self) -> Vec<(&'static str, f64)> {
        let (mean_v, deviation_v) = self.draws.moments(speed);
        let mut found: Vec<(&'static str, f64)> = (0..DIMENSIONS)
            .filter(|index| *index != place::V_IN)
            .map(|index| {
                let (mean, deviation) = self.draws.moments(|point| point[index]);
                let product = |point: &Point| (point[index] - mean) * (speed(point) - mean_v);
                let scale = (deviation * deviation_v).max(f64::MIN_POSITIVE);
                (
                    Self::COORDINATES[index],
                    self.draws.moments(product).0 / scale,
                )
            })
            .collect();
        found.sort_by(|a, b| b.1.abs().total_cmp(&a.1.abs()));
        found
    }
}

fn speed(point: &Point) -> f64 {
    point[place::V_IN] * dispersion(point)
}

fn dispersion(point: &Point) -> f64 {
    point[place::LN_SIGMA].exp()
}

/// How a quantity in km/s follows from a point.
fn physical(name: &str) -> Option<fn(&Point) -> f64> {
    match name {
        "v_lsr_km_s" => Some(|point| point[place::V_LSR]),
        "sigma_km_s" => Some(dispersion),
        "v_in_km_s" => Some(speed),
        _ => None,
    }
}

/// Stream of the draws that others are handed: far from those of what is derived of a source.
const DRAW_STREAM: u64 = 0x7370_6865_7265_0000;

/// Posteriors of both speed laws.
#[derive(Clone, Debug, PartialEq)]
pub struct ClumpPosteriors {
    /// One speed everywhere.
    pub constant: ClumpPosterior,
    /// Free fall.
    pub free_fall: ClumpPosterior,
}

impl ClumpPosteriors {
    /// ln of the odds of free fall against a constant speed, as likely before.
    #[must_use]
    pub fn ln_odds_of_free_fall(&self) -> f64 {
        self.free_fall.ln_evidence - self.constant.ln_evidence
    }

    fn prefer_free_fall(&self) -> bool {
        self.ln_odds_of_free_fall() > Self::PREFERRED_AT.ln()
    }

    /// The law that the pair prefers. The constant speed, which has less to explain, unless free fall
    /// is more probable by [`ClumpPosteriors::PREFERRED_AT`].
    #[must_use]
    pub fn preferred(&self) -> &ClumpPosterior {
        if self.prefer_free_fall() {
            &self.free_fall
        } else {
            &self.constant
        }
    }

    /// The same, without the other.
    #[must_use]
    pub fn into_preferred(self) -> ClumpPosterior {
        if self.prefer_free_fall() {
            self.free_fall
        } else {
            self.constant
        }
    }

    /// Odds from which free fall is preferred.
    pub const PREFERRED_AT: f64 = 3.0;
}

/// Posteriors of the inward speed for both laws.
///
/// # Errors
///
/// As of [`clump_posterior`].
pub fn clump_posteriors(
    thick: &Prepared,
    thin: &Prepared,
    lines: (&Line, &Line),
    thin_line: Option<&ThinLine>,
    settings: &ClumpSettings,
) -> Result<ClumpPosteriors, PosteriorError> {
    let of = |law| clump_posterior(thick, thin, lines, thin_line, law, settings);
    Ok(ClumpPosteriors {
        constant: of(SpeedLaw::Constant)?,
        free_fall: of(SpeedLaw::FreeFall)?,
    })
}

/// Posterior of the inward speed for one law.
///
/// `thin_line` is the thin line's fit where it is detected: searches begin there.
///
/// # Errors
///
/// [`PosteriorError`] for too few channels or priors without mass where the data are. Draws that cannot
/// be trusted are no error: see [`ClumpPosterior::quality`].
pub fn clump_posterior(
    thick: &Prepared,
    thin: &Prepared,
    lines: (&Line, &Line),
    thin_line: Option<&ThinLine>,
    law: SpeedLaw,
    settings: &ClumpSettings,
) -> Result<ClumpPosterior, PosteriorError> {
    let no_mass = || PosteriorError::NoMass {
        family: "sphere".to_owned(),
    };
    let choice = Choice {
        range: settings.range,
        averaging: settings.averaging,
        shape_error: settings.shape_error,
    };
    let PairData {
        lines: data,
        range,
        kinematics,
    } = PairData::new(thick, thin, lines, thin_line, &choice)?;
    let priors = settings
        .priors
        .unwrap_or_else(|| ClumpPriors::of_line(lines.0.rest_frequency_ghz, is_to_ground(lines.0)))
        .narrowed(&settings.known);
    let both = [&data[0], &data[1]];
    let mut target = Target::new(both, range, &priors, law.slope(), settings.beam_ratio);
    let mut generator = ChaCha8Rng::seed_from_u64(settings.seed);
    let scales = scales(kinematics[0].sigma_km_s);
    let peaks: Vec<Peak> = starts(&mut target, &kinematics)
        .iter()
        .filter_map(|start| ascend(&mut target, start, &scales, MOST_STEPS))
        .collect();
    let peaks = distinct(peaks, DIMENSIONS);
    let settled = settle(&mut target, &peaks, &settings.ensemble, &mut generator);
    let draws = sample(
        &mut target,
        &settled,
        &[],
        &settings.sampling,
        &mut generator,
    )
    .ok_or_else(no_mass)?;
    let best = peaks.first().map(|peak| peak.point).ok_or_else(no_mass)?;
    let pairs = draws.points.iter().zip(&draws.weights);
    let v_in: Vec<(f64, f64)> = pairs
        .map(|(point, weight)| (speed(point), *weight))
        .collect();
    let residuals = residuals::residuals(&mut target, &best);
    let [thick_k, thin_k] = target.best_profiles_k(&best);
    let profile = |line: usize, temperature_k: Vec<f64>| ClumpProfile {
        velocity_km_s: target.velocities(line).to_vec(),
        temperature_k,
    };
    Ok(ClumpPosterior {
        law,
        v_in_km_s: interval(&v_in).ok_or_else(no_mass)?,
        ln_evidence: draws.ln_integral,
        ln_evidence_err: draws.ln_integral_err,
        quality: draws.quality,
        evaluations: target.evaluations,
        best,
        profiles: [profile(0, thick_k), profile(1, thin_k)],
        residuals,
        draws,
    })
}

/// Whether a line's lower state is known to be the ground state: its energy is below that of a photon by
/// far.
fn is_to_ground(line: &Line) -> bool {
    const SHARE: f64 = 0.1;
    let photon_k = photon_temperature_k(line.rest_frequency_ghz);
    line.transition()
        .and_then(|transition| transition.upper_energy_k)
        .is_some_and(|upper_k| upper_k - photon_k < SHARE * photon_k)
}

/// Most steps toward a peak.
const MOST_STEPS: usize = 40;

/// Rough sizes of the coordinates.
fn scales(sigma_km_s: f64) -> Point {
    [
        0.3 * sigma_km_s,
        0.2,
        0.2,
        0.5,
        0.4,
        0.8,
        0.4,
        0.2,
        0.4,
        0.5,
        0.4,
        0.3,
    ]
}

/// The most promising candidate of each sign of the speed.
fn starts(target: &mut Target<'_>, kinematics: &[Kinematics]) -> Vec<Point> {
    let middle = target.densities().map(|density| density.mean);
    let mut best: [Option<(f64, Point)>; 2] = [None; 2];
    for about in kinematics {
        for speed in [-1.2, -0.6, -0.25, 0.25, 0.6, 1.2] {
            for depth in [3.0f64, 12.0, 40.0] {
                for thermal in [-0.75, 0.0, 0.75] {
                    for factor in [0.85f64, 0.65] {
                        let mut point = [0.0; MOST_DIMENSIONS];
                        point[1..DIMENSIONS].copy_from_slice(&middle);
                        point[place::V_LSR] = about.v_km_s;
                        point[place::LN_SIGMA] = (factor * about.sigma_km_s).ln();
                        point[place::V_IN] = speed;
                        point[place::LN_DEPTH] = depth.ln();
                        let collisions = target.densities()[place::LN_COLLISIONS - 1];
                        point[place::LN_COLLISIONS] += thermal * collisions.deviation;
                        let ln = target.ln(&point);
                        let kept = &mut best[usize::from(speed > 0.0)];
                        if ln.is_finite() && kept.is_none_or(|(highest, _)| ln > highest) {
                            *kept = Some((ln, point));
                        }
                    }
                }
            }
        }
    }
    best.into_iter().flatten().map(|(_, point)| point).collect()
}
