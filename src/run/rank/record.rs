//! What is kept of one line pair until all of the sample are done.

use super::sketch::Sketch;
use crate::derive::{FitDraws, Quantity, Sampled, SourceProperties, Tracers};
use crate::fit::hypotheses::{Hypothesis, Odds, Verdict, verdict};
use crate::fit::posterior::{Family, PairPosterior, PosteriorSettings, pair_posterior};
use crate::measure::ProfileClass;
use crate::numeric::Estimate;
use crate::rank::{Drawn, Finding, Profile};
use crate::report::{Row, Value};
use crate::run::{PairOutcome, RunError, pair_row};
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
    /// Takes what ranking needs of a pair. `formal` leaves posteriors and hypotheses out.
    pub fn of(
        outcome: &PairOutcome,
        source: &SourceProperties,
        seed: u64,
        formal: bool,
    ) -> Result<Self, RunError> {
        let judged = if formal { None } else { judged(outcome, seed) };
        let speeds = match &judged {
            Some((posterior, verdict)) => Some(Speeds::of_posterior(posterior, verdict)),
            None => Speeds::formal(outcome, seed),
        };
        let sampled = speeds
            .as_ref()
            .map(|speeds| speeds.sampled(outcome, source, seed))
            .transpose()?;
        let drawn = |quantity| sampled.as_ref().and_then(|sampled| kept(sampled, quantity));
        let measured = outcome.measures.profile;
        let finding = Finding {
            probabilities: judged.as_ref().map(|(_, verdict)| {
                Hypothesis::ALL.map(|hypothesis| verdict.probability(hypothesis))
            }),
            trusted: judged.as_ref().is_none_or(|(_, verdict)| verdict.trusted),
            detected: measured != ProfileClass::Undetected,
            rate_msun_yr: drawn(Quantity::MassRate),
            v_ff_km_s: drawn(Quantity::FreeFallSpeed),
            mass_msun: drawn(Quantity::Mass),
            v_in_km_s: speeds.as_ref().map(|speeds| speeds.v_in.clone()),
            sigma_km_s: speeds.map(|speeds| speeds.sigma),
            line_pairs: 1,
            disagreement: None,
        };
        let mut row = pair_row(outcome)?;
        set_finding(
            &mut row,
            &finding,
            if formal { None } else { Some("posterior") },
        )?;
        let lines = [&outcome.thick, &outcome.thin];
        Ok(Self {
            cells: row.values().to_vec(),
            finding,
            profile: match measured {
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

/// Posteriors and verdict; `None` where the pair allows none, such as too few channels.
fn judged(outcome: &PairOutcome, seed: u64) -> Option<(PairPosterior, Verdict)> {
    let settings = PosteriorSettings {
        seed,
        ..PosteriorSettings::default()
    };
    let posterior = pair_posterior(
        &outcome.thick.prepared,
        &outcome.thin.prepared,
        (&outcome.thick.line, &outcome.thin.line),
        outcome.thin_fit.line.as_ref(),
        &settings,
    )
    .ok()?;
    let verdict = verdict(&posterior, &Odds::default()).ok()?;
    Some((posterior, verdict))
}

/// Joint draws of inward speed and dispersion.
struct Speeds {
    v_in: Drawn,
    sigma: Drawn,
}

impl Speeds {
    /// Draws of the moving models, each as many as its share says.
    fn of_posterior(posterior: &PairPosterior, verdict: &Verdict) -> Self {
        let (mut v_in, mut sigma) = (Vec::with_capacity(ROWS), Vec::with_capacity(ROWS));
        let mut shares = 0.0;
        for (model, share) in &verdict.shares {
            let Some(family) = posterior.of(Family::Moving(*model)) else {
                continue;
            };
            shares += share;
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "a share of the rows"
            )]
            let until = (shares * ROWS as f64).round() as usize;
            let rows = until.saturating_sub(v_in.len()).min(ROWS - v_in.len());
            let at = |name: &str| family.names.iter().position(|known| *known == name);
            let (Some(speed), Some(dispersion)) = (at("v_in_km_s"), at("sigma_km_s")) else {
                continue;
            };
            for row in 0..rows {
                let draw = &family.draws[row * family.draws.len() / rows];
                v_in.push(draw[speed]);
                sigma.push(draw[dispersion]);
            }
        }
        Self {
            v_in: drawn(verdict.v_in_km_s.median, &v_in),
            sigma: drawn(middle(&sigma), &sigma),
        }
    }

    /// Normal draws about the adopted model's speed and dispersion.
    fn formal(outcome: &PairOutcome, seed: u64) -> Option<Self> {
        let fit = outcome.fit.adopted()?;
        let normal = |estimate: Estimate, stream: u64| {
            let mut generator = ChaCha8Rng::seed_from_u64(seed);
            generator.set_stream(FORMAL_STREAMS + stream);
            let draws: Vec<f64> = (0..ROWS)
                .map(|_| {
                    let deviate: f64 = StandardNormal.sample(&mut generator);
                    estimate.value + estimate.err * deviate
                })
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
        let draws = FitDraws::new(self.v_in.draws.len())
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

fn middle(values: &[f64]) -> f64 {
    crate::numeric::samples::median(values, 0.5).map_or(f64::NAN, |(median, _)| median)
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

/// Puts a finding's speed, and what is proportional to it, into a row of results.
pub fn set_finding(row: &mut Row, finding: &Finding, model: Option<&str>) -> Result<(), RunError> {
    for hypothesis in Hypothesis::ALL {
        let column = format!("p_{}", hypothesis.name());
        let probability = finding.probabilities.map(|all| all[hypothesis as usize]);
        row.set(&column, probability)?;
    }
    let Some(speed) = &finding.v_in_km_s else {
        return Ok(());
    };
    set_drawn(row, "v_in_km_s", Some(speed))?;
    row.set(
        "v_in_km_s_err",
        speed.moments().map(|(_, deviation)| deviation),
    )?;
    if let Some(model) = model {
        row.set("v_in_model", model)?;
    }
    let rate = finding.rate_msun_yr.as_ref();
    set_drawn(row, "mass_rate_msun_yr", rate)?;
    let doubling = ratio(finding.mass_msun.as_ref(), rate);
    set_drawn(row, "doubling_time_yr", doubling.as_ref())?;
    let of_free_fall = ratio(Some(speed), finding.v_ff_km_s.as_ref());
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
