//! A prepared pair into the inward speed of a spherical clump, everything that a pair cannot tell
//! integrated out.
//!
//! The clump is that of [`crate::sphere::ReducedPair`]. Opacity, excitation, beam and isotope ratio have
//! priors ([`ClumpPriors`]) that the known properties of a source narrow.

mod priors;
mod target;

pub use priors::{ClumpPriors, Normal};

use super::Averaging;
use super::posterior::{
    Interval, Kinematics, LineData, PosteriorError, distinct, interval, kinematics, shape_errors,
};
use crate::line::Line;
use crate::measure::ThinLine;
use crate::model::LineShape;
use crate::numeric::sampling::{
    Density, Draws, ImportanceSettings, MOST_DIMENSIONS, Peak, Point, Quality, ascend, sample,
};
use crate::prepare::Prepared;
use crate::spectrum::Window;
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
    /// How the speed depends on the radius.
    pub law: SpeedLaw,
    /// Priors.
    pub priors: ClumpPriors,
    /// FWHM of the thin line's beam over the thick line's.
    pub beam_ratio: f64,
    /// Standard deviation of smooth departures from any sphere, over each line's peak.
    pub shape_error: f64,
    /// How the model's value in a channel is formed.
    pub averaging: Averaging,
    /// How much is drawn.
    pub sampling: ImportanceSettings,
    /// Seed of all draws.
    pub seed: u64,
}

/// Departure of clumps from the reduced sphere, over the peak.
pub const SHAPE_ERROR: f64 = 0.015;

impl Default for ClumpSettings {
    fn default() -> Self {
        Self {
            law: SpeedLaw::Constant,
            priors: ClumpPriors::default(),
            beam_ratio: 1.0,
            shape_error: SHAPE_ERROR,
            averaging: Averaging::Channel,
            sampling: ImportanceSettings::default(),
            seed: 1,
        }
    }
}

/// Posterior of a clump's inward speed.
#[derive(Clone, Debug, PartialEq)]
pub struct ClumpPosterior {
    /// How the speed depends on the radius.
    pub law: SpeedLaw,
    /// Inward speed at the outer radius, km/s.
    pub v_in_km_s: Interval,
    /// ln of the evidence.
    pub ln_evidence: f64,
    /// Standard error of it.
    pub ln_evidence_err: f64,
    /// Whether the draws can be trusted.
    pub quality: Quality,
    /// Evaluations of the posterior density.
    pub evaluations: usize,
    /// Weighted points.
    pub draws: Draws,
    /// Most probable point.
    pub best: Point,
}

/// Posterior of the inward speed.
///
/// # Errors
///
/// [`PosteriorError`] for too few channels or priors without mass where the data are.
pub fn clump_posterior(
    thick: &Prepared,
    thin: &Prepared,
    lines: (&Line, &Line),
    thin_line: Option<&ThinLine>,
    settings: &ClumpSettings,
) -> Result<ClumpPosterior, PosteriorError> {
    let range = {
        let low = thick.window.low_km_s.min(thin.window.low_km_s);
        let high = thick.window.high_km_s.max(thin.window.high_km_s);
        let margin = high - low;
        Window {
            low_km_s: low - margin,
            high_km_s: high + margin,
        }
    };
    let kinematics = kinematics(thick, thin, thin_line);
    let about = kinematics[0];
    let line_data = |prepared: &Prepared, line: &Line| {
        let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
        let errors = shape_errors(prepared, settings.shape_error, about);
        LineData::new(
            prepared,
            &shape,
            range,
            settings.averaging,
            0.6 * about.sigma_km_s,
            &errors,
        )
    };
    let data = [line_data(thick, lines.0), line_data(thin, lines.1)];
    let mut target = Target::new(
        [&data[0], &data[1]],
        range,
        &settings.priors,
        settings.law.slope(),
        settings.beam_ratio,
    );
    let mut generator = ChaCha8Rng::seed_from_u64(settings.seed);
    let scales = scales(about.sigma_km_s);
    let starts = starts(&mut target, &kinematics);
    let peaks: Vec<Peak> = starts
        .iter()
        .filter_map(|start| ascend(&mut target, start, &scales, 40))
        .collect();
    let peaks = distinct(peaks, DIMENSIONS);
    let draws =
        sample(&mut target, &peaks, &[], &settings.sampling, &mut generator).ok_or_else(|| {
            PosteriorError::NoMass {
                family: "sphere".to_owned(),
            }
        })?;
    let v_in: Vec<(f64, f64)> = draws
        .points
        .iter()
        .zip(&draws.weights)
        .map(|(point, weight)| (point[place::V_IN] * point[place::LN_SIGMA].exp(), *weight))
        .collect();
    Ok(ClumpPosterior {
        law: settings.law,
        v_in_km_s: interval(&v_in).ok_or_else(|| PosteriorError::NoMass {
            family: "sphere".to_owned(),
        })?,
        ln_evidence: draws.ln_integral,
        ln_evidence_err: draws.ln_integral_err,
        quality: draws.quality,
        evaluations: target.evaluations,
        best: peaks[0].point,
        draws,
    })
}

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

/// Candidates of each sign that are followed to a peak.
const FOLLOWED: usize = 1;

fn starts(target: &mut Target<'_>, kinematics: &[Kinematics]) -> Vec<Point> {
    let middle = target.densities().map(|density| density.mean);
    let mut candidates: Vec<(f64, Point)> = Vec::new();
    for about in kinematics {
        for speed in [-1.2, -0.6, -0.25, 0.25, 0.6, 1.2] {
            for depth in [3.0f64, 12.0, 40.0] {
                for collisions in [0.005f64, 0.05, 0.4] {
                    for factor in [0.85f64, 0.65] {
                        let mut point = [0.0; MOST_DIMENSIONS];
                        point[1..DIMENSIONS].copy_from_slice(&middle);
                        point[place::V_LSR] = about.v_km_s;
                        point[place::LN_SIGMA] = (factor * about.sigma_km_s).ln();
                        point[place::V_IN] = speed;
                        point[place::LN_DEPTH] = depth.ln();
                        point[place::LN_COLLISIONS] = collisions.ln();
                        let ln = target.ln(&point);
                        if ln.is_finite() {
                            candidates.push((ln, point));
                        }
                    }
                }
            }
        }
    }
    candidates.sort_by(|a, b| b.0.total_cmp(&a.0));
    let mut kept: Vec<Point> = Vec::new();
    for (_, point) in candidates {
        let of_sign = kept
            .iter()
            .filter(|other| other[place::V_IN] * point[place::V_IN] > 0.0);
        if of_sign.count() < FOLLOWED {
            kept.push(point);
        }
    }
    kept
}
