//! What is kept of one line pair until all of the sample are done.

use super::sketch::Sketch;
use crate::derive::{FitDraws, Quantity, Sampled, SourceProperties, Tracers};
use crate::fit::ModelFit;
use crate::fit::averaged::Averaged;
use crate::fit::clump::ClumpPosterior;
use crate::fit::hypotheses::{Hypothesis, Speed};
use crate::measure::ProfileClass;
use crate::numeric::Estimate;
use crate::numeric::robust::median;
use crate::rank::{Drawn, Finding, Profile};
use crate::report::{Row, Value};
use crate::run::{Adopted, LineOutcome, PairOutcome, RunError, pair_row};
use rand::seq::SliceRandom;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, StandardNormal};
use serde::{Deserialize, Serialize};

/// What is kept of a line pair.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub struct PairRecord {
    /// Cells of the result columns.
    pub cells: Vec<Value>,
    /// What the pair says of its source.
    pub finding: Finding,
    /// Sense of the asymmetry.
    pub profile: Profile,
    /// Both lines, for figures.
    pub sketch: Sketch,
    /// What was assumed of its files.
    pub notes: Vec<String>,
}

/// Joint draws that are kept of a pair: ends of 68 % intervals are uncertain by 8 % of a standard deviation.
pub const ROWS: usize = 400;

/// Streams of normal deviates, far from all others of the same seed.
const FORMAL_STREAMS: u64 = 0x7261_6e6b_0000_0000;

impl PairRecord {
    /// Takes what ranking needs of a pair; `source` and `seed` are those that it was derived with.
    ///
    /// # Errors
    ///
    /// [`RunError`]: a defect, the pair has been through the whole chain.
    pub fn of(
        outcome: &PairOutcome,
        source: &SourceProperties,
        seed: u64,
    ) -> Result<Self, RunError> {
        let lines = [&outcome.thick, &outcome.thin];
        Ok(Self {
            cells: pair_row(outcome)?.values().to_vec(),
            finding: finding(outcome, source, seed)?,
            profile: match outcome.measures.profile {
                ProfileClass::Blue => Profile::Blue,
                ProfileClass::Red => Profile::Red,
                ProfileClass::Neither => Profile::Neither,
                ProfileClass::Undetected => Profile::Undetected,
            },
            sketch: Sketch::of(outcome),
            notes: (lines.iter())
                .flat_map(|line| line.notes.iter().map(ToString::to_string))
                .collect(),
        })
    }
}

fn finding(
    outcome: &PairOutcome,
    source: &SourceProperties,
    seed: u64,
) -> Result<Finding, RunError> {
    let judged = outcome.judged.as_ref();
    let adopted = outcome.adopted();
    let own = own_seed(outcome, seed);
    let speeds = match &adopted {
        Some(one) if one.speed() == Some(Speed::Unconstrained) => None,
        Some(Adopted::Sphere(sphere)) => Speeds::of_sphere(sphere, own),
        Some(Adopted::Slabs(averaged, _)) => Speeds::of(averaged, own),
        Some(Adopted::Formal(fit)) => Speeds::formal(fit, own),
        None => None,
    };
    let sampled = speeds
        .as_ref()
        .map(|speeds| speeds.sampled(outcome, source, seed))
        .transpose()?;
    let drawn = |quantity| sampled.as_ref().and_then(|sampled| kept(sampled, quantity));
    let verdict = judged.map(|judged| &judged.verdict);
    Ok(Finding {
        probabilities: verdict
            .map(|verdict| Hypothesis::ALL.map(|hypothesis| verdict.probability(hypothesis))),
        trusted: verdict.is_none_or(|verdict| verdict.trusted),
        detected: outcome.measures.profile != ProfileClass::Undetected,
        rate_msun_yr: drawn(Quantity::MassRate),
        v_ff_km_s: drawn(Quantity::FreeFallSpeed),
        mass_msun: drawn(Quantity::Mass),
        v_in_km_s: speeds.as_ref().map(|speeds| speeds.v_in.clone()),
        sigma_km_s: speeds.map(|speeds| speeds.sigma),
        line_pairs: 1,
        disagreement: None,
    })
}

/// Seed of a pair's own draws: two pairs of a source are independent, while what is given of the source is drawn
/// alike for both. No two spectra have the same noise.
fn own_seed(outcome: &PairOutcome, seed: u64) -> u64 {
    let noise = |line: &LineOutcome| line.prepared.noise.rms_k.to_bits();
    seed ^ noise(&outcome.thick) ^ noise(&outcome.thin).rotate_left(32)
}

/// Joint draws of inward speed and dispersion.
struct Speeds {
    v_in: Drawn,
    sigma: Drawn,
}

impl Speeds {
    /// Draws of the posterior averaged over models, in random order: row by row beside those of another pair, models
    /// would else meet their like.
    fn of(averaged: &Averaged<'_>, seed: u64) -> Option<Self> {
        let mut rows: Vec<_> = averaged.rows(ROWS).collect();
        rows.shuffle(&mut ChaCha8Rng::seed_from_u64(seed));
        let draws = |name: &str| -> Option<Drawn> {
            let draws: Vec<f64> = rows
                .iter()
                .map(|row| row.get(name))
                .collect::<Option<_>>()?;
            let value = averaged.marginal(name).map(|one| one.median);
            Some(drawn(value.unwrap_or_else(|| median(&draws)), &draws))
        };
        Some(Self {
            v_in: draws("v_in_km_s")?,
            sigma: draws("sigma_km_s")?,
        })
    }

    /// Draws of the sphere.
    fn of_sphere(sphere: &ClumpPosterior, seed: u64) -> Option<Self> {
        let draws = sphere.speeds_and_dispersions(ROWS, seed);
        let (speeds, dispersions): (Vec<f64>, Vec<f64>) = draws.into_iter().unzip();
        let of = |name: &str, draws: &[f64]| Some(drawn(sphere.physical(name)?.median, draws));
        Some(Self {
            v_in: of("v_in_km_s", &speeds)?,
            sigma: of("sigma_km_s", &dispersions)?,
        })
    }

    /// Normal draws about the adopted model's speed and dispersion.
    fn formal(fit: &ModelFit, seed: u64) -> Option<Self> {
        let normal = |estimate: Estimate, stream: u64| {
            let mut generator = ChaCha8Rng::seed_from_u64(seed);
            generator.set_stream(FORMAL_STREAMS + stream);
            let deviates = StandardNormal.sample_iter(generator).take(ROWS);
            let draws: Vec<f64> = deviates
                .map(|deviate: f64| estimate.value + estimate.err * deviate)
                .collect();
            drawn(estimate.value, &draws)
        };
        Some(Self {
            v_in: normal(fit.estimate("v_in_km_s")?, 0),
            sigma: normal(fit.estimate("sigma_km_s")?, 1),
        })
    }

    fn sampled(
        &self,
        outcome: &PairOutcome,
        source: &SourceProperties,
        seed: u64,
    ) -> Result<Sampled, RunError> {
        let column = |drawn: &Drawn| drawn.draws.iter().map(|draw| f64::from(*draw)).collect();
        let draws = FitDraws::new(ROWS)
            .with("v_in_km_s", self.v_in.value, column(&self.v_in))?
            .with("sigma_km_s", self.sigma.value, column(&self.sigma))?;
        let tracers = Tracers {
            thick: &outcome.thick.line,
            thin: &outcome.thin.line,
            model: None,
        };
        Ok(crate::derive::sample(source, &draws, &tracers, seed)?)
    }
}

#[allow(
    clippy::cast_possible_truncation,
    reason = "as all draws that are kept"
)]
fn drawn(value: f64, draws: &[f64]) -> Drawn {
    Drawn {
        value,
        draws: draws.iter().map(|draw| *draw as f32).collect(),
    }
}

fn kept(sampled: &Sampled, quantity: Quantity) -> Option<Drawn> {
    let quantity = sampled.get(quantity).ok()?;
    quantity
        .value
        .is_finite()
        .then(|| drawn(quantity.value, &quantity.draws))
}

/// Puts what several line pairs say together into a row of results: probabilities, the speed, and what
/// is proportional to it.
pub fn set_combined(row: &mut Row, finding: &Finding) -> Result<(), RunError> {
    for hypothesis in Hypothesis::ALL {
        let column = format!("p_{}", hypothesis.name());
        let probability = finding.probabilities.map(|all| all[hypothesis as usize]);
        row.set(&column, probability)?;
    }
    for column in ["v_in_systematic_km_s", "v_in_limit_km_s"] {
        row.set(column, Value::Empty)?;
    }
    // Worked out from the speed of one pair; the Alfven speed's draws are not kept.
    set_drawn(row, "v_in_over_v_alfven", None)?;
    let speed = finding.v_in_km_s.as_ref();
    set_drawn(row, "v_in_km_s", speed)?;
    let moments = speed.and_then(Drawn::moments);
    row.set("v_in_km_s_err", moments.map(|(_, deviation)| deviation))?;
    row.set("v_in_model", "several line pairs")?;
    let rate = finding.rate_msun_yr.as_ref();
    set_drawn(row, "mass_rate_msun_yr", rate)?;
    let doubling = ratio(finding.mass_msun.as_ref(), rate);
    set_drawn(row, "doubling_time_yr", doubling.as_ref())?;
    let of_free_fall = ratio(speed, finding.v_ff_km_s.as_ref());
    set_drawn(row, "v_in_over_v_ff", of_free_fall.as_ref())
}

fn ratio(above: Option<&Drawn>, below: Option<&Drawn>) -> Option<Drawn> {
    let (above, below) = (above?, below?);
    let value = above.value / below.value;
    value.is_finite().then(|| Drawn {
        value,
        draws: (above.draws.iter().zip(&below.draws))
            .map(|(above, below)| above / below)
            .collect(),
    })
}

/// A value and its intervals; empty without one.
fn set_drawn(row: &mut Row, column: &str, drawn: Option<&Drawn>) -> Result<(), RunError> {
    row.set(column, drawn.map(|drawn| drawn.value))?;
    for (percent, interval) in [
        ("68", drawn.and_then(Drawn::interval68)),
        ("95", drawn.and_then(Drawn::interval95)),
    ] {
        row.set(
            &format!("{column}_lo{percent}"),
            interval.map(|ends| ends[0]),
        )?;
        row.set(
            &format!("{column}_hi{percent}"),
            interval.map(|ends| ends[1]),
        )?;
    }
    Ok(())
}
