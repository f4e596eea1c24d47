//! A prepared pair and priors into posteriors and evidences of families of profiles.
//!
//! Brightnesses, baselines and noise levels are integrated out in closed form; what is left, two to
//! six coordinates of kinematics and optical depth, is sampled. No least-squares fit is needed. The
//! probabilities of hypotheses are made from these in `hypotheses`.

mod constraints;
mod data;
mod family;
mod pair_data;
mod settings;
mod shapes;
mod starts;
mod target;

pub(in crate::fit) use data::LineData;
pub use data::ShapeErrors;
pub use family::Family;
pub(in crate::fit) use pair_data::{Choice, PairData};
pub use settings::{CONSTRAINED, PosteriorError, PosteriorSettings, SHAPE_ERROR};
pub(in crate::fit) use starts::{Kinematics, distinct};

use crate::constants::FWHM_PER_SIGMA;
use crate::line::Line;
use crate::measure::ThinLine;
use crate::model::Model;
use crate::numeric::sampling::{Draws, ImportanceSettings, Quality, sample};
use crate::prepare::Prepared;
use crate::spectrum::Window;
use constraints::Constraints;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use target::Target;

/// A median with its intervals.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// Half of the probability lies below.
    pub median: f64,
    /// Mean.
    pub mean: f64,
    /// 15.87 to 84.13 %.
    pub interval68: (f64, f64),
    /// 2.28 to 97.72 %.
    pub interval95: (f64, f64),
}

/// Shares below the ends of intervals: those of one and two standard deviations.
const ENDS: [f64; 4] = [0.022_750_13, 0.158_655_25, 0.841_344_75, 0.977_249_87];

/// Posterior of a family.
#[derive(Clone, Debug, PartialEq)]
pub struct FamilyPosterior {
    /// The family.
    pub family: Family,
    /// ln of the evidence; a constant of the data is common to all families.
    pub ln_evidence: f64,
    /// Standard error of it.
    pub ln_evidence_err: f64,
    /// Whether the draws can be trusted.
    pub quality: Quality,
    /// Evaluations of the posterior density, search for its peaks included.
    pub evaluations: usize,
    /// Evidence of motion inward over that of motion of either sign; 0 without an inward speed.
    pub inward: f64,
    /// The same outward. Where nothing is given of v_in each sign has half of the prior, and these are
    /// twice the shares of the posterior.
    pub outward: f64,
    /// Weighted draws of v_in (km/s), of weights of sum 1; empty without an inward speed.
    pub v_in: Vec<(f64, f64)>,
    /// Names of the physical parameters.
    pub names: Vec<&'static str>,
    /// Equal-weight draws of them.
    pub draws: Vec<Vec<f64>>,
}

impl FamilyPosterior {
    /// Probability of v_in > 0.
    #[must_use]
    pub fn share_inward(&self) -> f64 {
        let inward = self.v_in.iter().filter(|(v_in, _)| *v_in > 0.0);
        inward.map(|(_, weight)| weight).sum()
    }

    /// v_in, km/s.
    #[must_use]
    pub fn v_in_km_s(&self) -> Option<Interval> {
        interval(&self.v_in)
    }

    /// A physical parameter's marginal; `None` where the family has none of that name.
    #[must_use]
    pub fn marginal(&self, name: &str) -> Option<Interval> {
        if name == "v_in_km_s" {
            return self.v_in_km_s();
        }
        let index = self.names.iter().position(|known| *known == name)?;
        let equal = 1.0 / self.draws.len() as f64;
        let values: Vec<(f64, f64)> = self.draws.iter().map(|one| (one[index], equal)).collect();
        interval(&values)
    }

    /// Correlation of two physical parameters over the draws; `None` without them.
    #[must_use]
    pub fn correlation(&self, first: &str, second: &str) -> Option<f64> {
        let at = |name: &str| self.names.iter().position(|known| *known == name);
        let (i, j) = (at(first)?, at(second)?);
        let count = self.draws.len() as f64;
        let mean = |k: usize| self.draws.iter().map(|one| one[k]).sum::<f64>() / count;
        let (a, b) = (mean(i), mean(j));
        let product = |k: usize, mean_k: f64, l: usize, mean_l: f64| -> f64 {
            let terms = self.draws.iter();
            terms.map(|one| (one[k] - mean_k) * (one[l] - mean_l)).sum()
        };
        let scale = (product(i, a, i, a) * product(j, b, j, b)).sqrt();
        (scale > 0.0).then(|| product(i, a, j, b) / scale)
    }
}

/// Median, mean and intervals of weighted values; `None` where there are none.
#[must_use]
pub fn interval(values: &[(f64, f64)]) -> Option<Interval> {
    let mut sorted = values.to_vec();
    sorted.sort_by(|a, b| a.0.total_cmp(&b.0));
    let total: f64 = sorted.iter().map(|(_, weight)| weight).sum();
    if sorted.is_empty() || total.is_nan() || total <= 0.0 {
        return None;
    }
    let mean = sorted
        .iter()
        .map(|(value, weight)| value * weight)
        .sum::<f64>()
        / total;
    let quantile = |part: f64| {
        let mut below = 0.0;
        for (value, weight) in &sorted {
            below += weight / total;
            if below >= part {
                return *value;
            }
        }
        sorted[sorted.len() - 1].0
    };
    let [low95, low68, high68, high95] = ENDS.map(quantile);
    Some(Interval {
        median: quantile(0.5),
        mean,
        interval68: (low68, high68),
        interval95: (low95, high95),
    })
}

/// Posteriors of a pair.
#[derive(Clone, Debug, PartialEq)]
pub struct PairPosterior {
    /// One a family: each model moving, each at rest, unabsorbed, two clouds.
    pub families: Vec<FamilyPosterior>,
    /// Velocities whose channels hold the line.
    pub range: Window,
}

impl PairPosterior {
    /// The posterior of a family.
    #[must_use]
    pub fn of(&self, family: Family) -> Option<&FamilyPosterior> {
        self.families.iter().find(|one| one.family == family)
    }

    /// Share of each moving model's evidence in their sum.
    #[must_use]
    pub fn model_shares(&self) -> Vec<(Model, f64)> {
        let moving = || {
            self.families.iter().filter_map(|one| match one.family {
                Family::Moving(model) => Some((model, one.ln_evidence)),
                _ => None,
            })
        };
        let highest = moving().map(|(_, ln)| ln).fold(f64::NEG_INFINITY, f64::max);
        let total: f64 = moving().map(|(_, ln)| (ln - highest).exp()).sum();
        moving()
            .map(|(model, ln)| (model, (ln - highest).exp() / total))
            .collect()
    }
}

/// Posteriors and evidences of every family for a pair.
///
/// `thin_line` is the thin line's fit where it is detected: searches begin there.
///
/// # Errors
///
/// [`PosteriorError`] for settings that make no posterior, too few channels, or priors without mass
/// where the data are. Draws that cannot be trusted are no error: see [`FamilyPosterior::quality`].
pub fn pair_posterior(
    thick: &Prepared,
    thin: &Prepared,
    lines: (&Line, &Line),
    thin_line: Option<&ThinLine>,
    settings: &PosteriorSettings,
) -> Result<PairPosterior, PosteriorError> {
    settings.check()?;
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
    let constraints = Constraints::new(settings, range)?;
    let mut found: Vec<FamilyPosterior> = Vec::new();
    for (stream, family) in settings.families().into_iter().enumerate() {
        let mut target = Target::new(family, (&data[0], &data[1]), &constraints, settings);
        let mut generator = ChaCha8Rng::seed_from_u64(settings.seed);
        generator.set_stream(stream as u64 + 1);
        let best = found.iter().map(|one| one.ln_evidence);
        let sampling = sampling(
            family,
            settings.sampling,
            best.fold(f64::NEG_INFINITY, f64::max),
        );
        let draws = (sampling, settings.draws);
        found.push(family_posterior(
            family,
            &mut target,
            &kinematics,
            draws,
            &mut generator,
        )?);
    }
    let families = found;
    Ok(PairPosterior { families, range })
}

/// A family whose ln of the evidence is lower than another's by more than this has a probability below
/// 1e-5: its draws need not be many.
const NEGLIGIBLE: f64 = 12.0;

/// How much is drawn of a family, given the highest ln of an evidence so far: speeds need more draws
/// than evidences, many coordinates larger rounds than few.
fn sampling(family: Family, settings: ImportanceSettings, highest: f64) -> ImportanceSettings {
    let moving = matches!(family, Family::Moving(_));
    let coordinates = Family::Moving(Model::Hill).dimensions();
    ImportanceSettings {
        round: settings.round * family.dimensions() / coordinates,
        effective: if moving { 1.0 } else { 0.5 } * settings.effective,
        tails: if moving { settings.tails } else { 0.0 },
        negligible: if moving {
            f64::NEG_INFINITY
        } else {
            highest - NEGLIGIBLE
        },
        ..settings
    }
}

fn family_posterior(
    family: Family,
    target: &mut Target<'_>,
    kinematics: &[starts::Kinematics],
    (sampling, kept): (ImportanceSettings, usize),
    generator: &mut ChaCha8Rng,
) -> Result<FamilyPosterior, PosteriorError> {
    let (peaks, searched) = starts::peaks(family, target, kinematics);
    let broad = kinematics.iter().map(|about| target.broad(*about));
    let broad: Vec<_> = broad.collect();
    let draws: Draws = sample(target, &peaks, &broad, &sampling, generator).ok_or_else(|| {
        PosteriorError::NoMass {
            family: family.name(),
        }
    })?;
    let (mut inward, mut outward) = (0.0, 0.0);
    let mut v_in = Vec::new();
    if matches!(family, Family::Moving(_)) {
        for (point, weight) in draws.points.iter().zip(&draws.weights) {
            if *weight <= 0.0 {
                continue;
            }
            let full = target.full(point);
            let before = target.inward_before(&full);
            if full[2] > 0.0 {
                inward += weight / before;
            } else if full[2] < 0.0 {
                outward += weight / (1.0 - before);
            }
            v_in.push((target.v_in_km_s(&full), *weight));
        }
    }
    let physical = draws
        .equal(kept, generator)
        .iter()
        .map(|index| target.physical(&draws.points[*index], generator))
        .collect();
    Ok(FamilyPosterior {
        family,
        ln_evidence: draws.ln_integral,
        ln_evidence_err: draws.ln_integral_err,
        quality: draws.quality,
        evaluations: searched + draws.evaluations,
        inward,
        outward,
        v_in,
        names: target.names(),
        draws: physical,
    })
}

/// Dispersion of a thin line.
fn sigma_km_s(thin_line: &ThinLine) -> f64 {
    thin_line.fwhm_km_s.value / FWHM_PER_SIGMA
}
