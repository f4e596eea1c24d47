//! Evidences of families of profiles into probabilities of what a clump does, the speed averaged over
//! models, and what the data exclude and cannot.
//!
//! Not computed here: evidences (see `posterior`); sentences (they belong to the report).

use super::posterior::{Family, FamilyPosterior, Interval, PairPosterior, interval};
use crate::model::Model;
use crate::numeric::sampling::Doubt;

/// What a clump does.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Hypothesis {
    /// Its halves approach each other.
    Infall,
    /// They recede from each other.
    Expansion,
    /// It is at rest: a slab without motion, or a line that nothing absorbs.
    Static,
    /// Two clouds of two velocities lie on the line of sight, and both lines show both.
    TwoClouds,
}

impl Hypothesis {
    /// Every one.
    pub const ALL: [Self; 4] = [Self::Infall, Self::Expansion, Self::Static, Self::TwoClouds];

    /// Name in columns: `p_` and this.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Infall => "infall",
            Self::Expansion => "expansion",
            Self::Static => "static",
            Self::TwoClouds => "two_clouds",
        }
    }
}

/// Prior probabilities of the hypotheses, in the order of [`Hypothesis::ALL`]; any positive numbers.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Odds(pub [f64; 4]);

impl Default for Odds {
    fn default() -> Self {
        Self([1.0; 4])
    }
}

impl Odds {
    /// Refuses odds that are no probabilities.
    ///
    /// # Errors
    ///
    /// [`HypothesesError::Odds`].
    pub fn check(&self) -> Result<(), HypothesesError> {
        let total: f64 = self.0.iter().sum();
        let usable = self.0.iter().all(|one| *one >= 0.0) && total > 0.0 && total.is_finite();
        if usable {
            Ok(())
        } else {
            Err(HypothesesError::Odds { found: self.0 })
        }
    }
}

/// Why there are no probabilities.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum HypothesesError {
    /// Prior odds that are no probabilities.
    #[error("prior odds of {}, expected four numbers of at least 0, not all 0", named(*found))]
    Odds {
        /// The odds.
        found: [f64; 4],
    },
    /// Posteriors without a moving or without a static family.
    #[error("no posterior of a {missing} family, expected those of a whole pair")]
    Incomplete {
        /// What is missing.
        missing: &'static str,
    },
}

/// Numbers with the hypotheses that they belong to.
fn named(numbers: [f64; 4]) -> String {
    let each = Hypothesis::ALL.iter().zip(numbers);
    let each: Vec<String> = each
        .map(|(hypothesis, number)| format!("{} {number}", hypothesis.name()))
        .collect();
    each.join(", ")
}

impl HypothesesError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::Odds { .. } => {
                "leave the odds out: every hypothesis is then as likely".to_owned()
            }
            Self::Incomplete { .. } => "judge what pair_posterior returns".to_owned(),
        })
    }
}

/// What is known of the speed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Speed {
    /// Its 95 % interval excludes zero.
    Measured,
    /// It does not: with 95 % probability the speed is below, in either direction.
    Below {
        /// The limit, km/s.
        limit_km_s: f64,
    },
    /// The data say hardly more than the prior.
    Unconstrained,
}

/// What a hypothesis's odds against the most probable one say.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Standing {
    /// The hypothesis.
    pub hypothesis: Hypothesis,
    /// Its probability.
    pub probability: f64,
    /// ln of the most probable hypothesis's evidence over this one's: prior odds left out.
    pub ln_odds_against: f64,
}

impl Standing {
    /// Odds from which data exclude a hypothesis: 20 to 1, about 95 %.
    pub const EXCLUDED_AT: f64 = 20.0;

    /// Whether the data exclude it.
    #[must_use]
    pub fn is_excluded(&self) -> bool {
        self.ln_odds_against > Self::EXCLUDED_AT.ln()
    }
}

/// What one position cannot exclude, whatever the data.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Unseen {
    /// Rotation makes blue and red profiles on either side of the axis.
    Rotation,
    /// An outflow's lobes make them too.
    Outflow,
    /// A cold cloud in front that the thin line does not show, at a velocity of its own.
    Foreground,
}

/// Rotation and outflow, which a map tells, and a cold foreground, which lines of other excitation
/// do.
pub const UNSEEN: [Unseen; 3] = [Unseen::Rotation, Unseen::Outflow, Unseen::Foreground];

/// The verdict on a pair.
#[derive(Clone, Debug, PartialEq)]
pub struct Verdict {
    /// Every hypothesis, in the order of [`Hypothesis::ALL`].
    pub standings: [Standing; 4],
    /// Inward speed given that there is one, of either sign, averaged over the models by evidence.
    pub v_in_km_s: Interval,
    /// Half the difference of the highest and the lowest of the models' medians: a systematic beside
    /// the interval.
    pub between_models_km_s: f64,
    /// Share of each model in the average.
    pub shares: Vec<(Model, f64)>,
    /// What is known of the speed.
    pub speed: Speed,
    /// Whether every posterior that carries weight can be trusted.
    pub trusted: bool,
    /// Why posteriors that carry weight cannot be.
    pub doubts: Vec<(Family, Doubt)>,
}

impl Verdict {
    /// Probability of a hypothesis.
    #[must_use]
    pub fn probability(&self, hypothesis: Hypothesis) -> f64 {
        let of = |standing: &&Standing| standing.hypothesis == hypothesis;
        self.standings
            .iter()
            .find(of)
            .map_or(0.0, |one| one.probability)
    }

    /// The most probable hypothesis.
    #[must_use]
    pub fn favoured(&self) -> Hypothesis {
        let best = self.standings.iter();
        best.max_by(|a, b| a.probability.total_cmp(&b.probability))
            .map_or(Hypothesis::Static, |standing| standing.hypothesis)
    }
}

/// Probability below which a family's draws need not be trusted.
const NEGLIGIBLE: f64 = 0.01;

/// The verdict on a pair from its posteriors and prior odds.
///
/// With Z_m the evidence of a slab model m with v_in of either sign, f_m the share of its posterior at
/// v_in > 0, and means over models:
///
/// Z_infall = mean 2 Z_m f_m, Z_expansion = mean 2 Z_m (1 - f_m),
/// Z_static = mean over slabs at rest and the unabsorbed Gaussian.
///
/// Where v_in is given or bounded, each sign's own share of its prior stands in the place of 1/2.
///
/// # Errors
///
/// [`HypothesesError`] for odds that are no probabilities, or posteriors without the families needed.
pub fn verdict(posterior: &PairPosterior, odds: &Odds) -> Result<Verdict, HypothesesError> {
    odds.check()?;
    let highest = posterior
        .families
        .iter()
        .map(|one| one.ln_evidence)
        .fold(f64::NEG_INFINITY, f64::max);
    let relative = |one: &FamilyPosterior| (one.ln_evidence - highest).exp();
    let mean = |belongs: fn(Family) -> bool,
                missing: &'static str,
                value: &dyn Fn(&FamilyPosterior) -> f64| {
        let values: Vec<f64> = posterior
            .families
            .iter()
            .filter(|one| belongs(one.family))
            .map(value)
            .collect();
        if values.is_empty() {
            return Err(HypothesesError::Incomplete { missing });
        }
        Ok(values.iter().sum::<f64>() / values.len() as f64)
    };
    let inward = |one: &FamilyPosterior| relative(one) * one.inward;
    let outward = |one: &FamilyPosterior| relative(one) * one.outward;
    let evidence = [
        mean(is_moving, "moving", &inward)?,
        mean(is_moving, "moving", &outward)?,
        mean(is_static, "static", &relative)?,
        mean(|family| family == Family::TwoClouds, "two-cloud", &relative)?,
    ];
    let weighted: f64 = evidence.iter().zip(&odds.0).map(|(z, odds)| z * odds).sum();
    let best = evidence.iter().copied().fold(0.0, f64::max);
    let standings = std::array::from_fn(|index| Standing {
        hypothesis: Hypothesis::ALL[index],
        probability: evidence[index] * odds.0[index] / weighted,
        ln_odds_against: (best / evidence[index]).ln(),
    });
    let moving: Vec<&FamilyPosterior> = posterior
        .families
        .iter()
        .filter(|one| is_moving(one.family))
        .collect();
    let shares = shares(&moving);
    let average = average(&moving, &shares);
    let Some(v_in_km_s) = interval(&average) else {
        return Err(HypothesesError::Incomplete { missing: "moving" });
    };
    let medians = moving
        .iter()
        .filter_map(|one| Some(one.v_in_km_s()?.median));
    let (low, high) = medians.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), median| {
        (low.min(median), high.max(median))
    });
    let all: f64 = posterior.families.iter().map(&relative).sum();
    let doubts: Vec<(Family, Doubt)> = posterior
        .families
        .iter()
        .filter(|one| relative(one) >= NEGLIGIBLE * all)
        .flat_map(|one| {
            one.quality
                .doubts()
                .into_iter()
                .map(|doubt| (one.family, doubt))
        })
        .collect();
    Ok(Verdict {
        standings,
        v_in_km_s,
        between_models_km_s: 0.5 * (high - low),
        speed: speed(&average, &v_in_km_s, &moving),
        shares,
        trusted: doubts.is_empty(),
        doubts,
    })
}

fn is_moving(family: Family) -> bool {
    matches!(family, Family::Moving(_))
}

fn is_static(family: Family) -> bool {
    matches!(family, Family::Still(_) | Family::Unabsorbed)
}

/// Share of each model's evidence in the sum over models.
fn shares(moving: &[&FamilyPosterior]) -> Vec<(Model, f64)> {
    let highest = moving
        .iter()
        .map(|one| one.ln_evidence)
        .fold(f64::NEG_INFINITY, f64::max);
    let relative = |one: &FamilyPosterior| (one.ln_evidence - highest).exp();
    let total: f64 = moving.iter().map(|one| relative(one)).sum();
    moving
        .iter()
        .filter_map(|one| match one.family {
            Family::Moving(model) => Some((model, relative(one) / total)),
            _ => None,
        })
        .collect()
}

/// Weighted speeds of all models, each model with its share.
fn average(moving: &[&FamilyPosterior], shares: &[(Model, f64)]) -> Vec<(f64, f64)> {
    shares
        .iter()
        .zip(moving)
        .flat_map(|((_, share), one)| one.v_in.iter().map(move |(v, weight)| (*v, share * weight)))
        .collect()
}

/// Part of the prior's width that a constrained speed's 68 % interval is narrower than.
const CONSTRAINED: f64 = 0.7;

/// What the averaged speeds say.
fn speed(average: &[(f64, f64)], interval: &Interval, moving: &[&FamilyPosterior]) -> Speed {
    let dispersion = moving
        .iter()
        .filter_map(|one| Some(one.marginal("sigma_km_s")?.median))
        .fold(0.0, f64::max);
    Speed::of(average, interval, dispersion)
}

impl Speed {
    /// What weighted speeds and their interval say, against a prior whose deviation is about the
    /// dispersion.
    pub(super) fn of(speeds: &[(f64, f64)], interval: &Interval, dispersion_km_s: f64) -> Self {
        let (low, high) = interval.interval95;
        if low > 0.0 || high < 0.0 {
            return Self::Measured;
        }
        let (low, high) = interval.interval68;
        if high - low > 2.0 * CONSTRAINED * dispersion_km_s {
            return Self::Unconstrained;
        }
        let sizes: Vec<(f64, f64)> = speeds
            .iter()
            .map(|(v, weight)| (v.abs(), *weight))
            .collect();
        Self::Below {
            limit_km_s: upper(sizes, 0.95),
        }
    }
}

/// The value below which a share of the weighted values lies.
fn upper(mut values: Vec<(f64, f64)>, share: f64) -> f64 {
    values.sort_by(|a, b| a.0.total_cmp(&b.0));
    let total: f64 = values.iter().map(|(_, weight)| weight).sum();
    let mut below = 0.0;
    for (value, weight) in &values {
        below += weight;
        if below >= share * total {
            return *value;
        }
    }
    values.last().map_or(0.0, |(value, _)| *value)
}
