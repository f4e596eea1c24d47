//! How well the speed and the verdict of one observation can be known: its best model, with its own
//! channels and noise, injected many times and fitted again.
//!
//! Beside the pairs that move as fitted there are as many of the same model at rest, and fewer of both
//! at other noise levels. Every injection goes the way of the pair itself: window, baseline and noise
//! are found anew.

mod products;
mod statistics;

pub use products::{calibration_summary, calibration_table, json_row, write_calibration};
#[cfg(feature = "figures")]
pub(super) use products::{found_label, needed, percent};
pub use statistics::{Level, NINE_IN_TEN, Needed, Share, Statistics};

use super::{
    BatchSettings, Judged, LineInput, LineOutcome, PairInput, PairOutcome, PairSettings, Progress,
    RunError, fit_spectra, pair_row,
};
use crate::derive::{DRAWS_LIMITS, SourceProperties};
use crate::fit::{ModelFit, Workspace};
use crate::model::{Model, Sampling};
use crate::prepare::PrepareSettings;
use crate::report::Row;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use std::ops::ControlFlow;

/// How an observation is calibrated.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct CalibrateSettings {
    /// Pairs that move, and as many at rest, at the observation's own noise.
    pub pairs: usize,
    /// Seed of the noise.
    pub seed: u64,
}

/// Fewest and most pairs: shares of fewer say nothing.
pub const PAIRS_LIMITS: (usize, usize) = (20, 100_000);

impl Default for CalibrateSettings {
    fn default() -> Self {
        Self {
            pairs: 200,
            seed: 0,
        }
    }
}

impl CalibrateSettings {
    /// Refuses a number of pairs outside [`PAIRS_LIMITS`].
    ///
    /// # Errors
    ///
    /// [`RunError::Setting`].
    pub fn check(&self) -> Result<(), RunError> {
        let (least, most) = PAIRS_LIMITS;
        if (least..=most).contains(&self.pairs) {
            return Ok(());
        }
        Err(RunError::setting(
            "pairs",
            &self.pairs.to_string(),
            &format!("{least} to {most}"),
        )
        .hinted("leave it out for the default"))
    }

    /// Pairs of each kind at another noise level.
    fn fewer(&self) -> usize {
        (self.pairs / 5).max(10)
    }
}

/// Noise levels over the observation's own.
pub const NOISE_FACTORS: [f64; 8] = [1.0, 0.125, 0.25, 0.5, 2.0, 4.0, 8.0, 16.0];

/// What an observation's calibration found.
#[derive(Clone, Debug)]
pub struct Calibration {
    /// Name of the source.
    pub source: String,
    /// Names of the lines.
    pub lines: (String, String),
    /// The injected model.
    pub model: Model,
    /// Its inward speed, km/s.
    pub v_in_km_s: f64,
    /// Peak of the thick line over the noise of a channel, as observed.
    pub signal_to_noise: f64,
    /// Whether speeds have formal errors in place of posteriors.
    pub formal: bool,
    /// One a noise level, the lowest signal-to-noise ratio first.
    pub levels: Vec<Level>,
    /// Every injection.
    pub injections: Vec<Injection>,
}

impl Calibration {
    /// The level of the observation itself.
    #[must_use]
    pub fn own(&self) -> Option<&Level> {
        self.levels.iter().find(|level| level.noise_factor == 1.0)
    }

    /// The signal-to-noise ratio from which a share of the pairs that move is found.
    #[must_use]
    pub fn needed(&self, share: f64) -> Needed {
        statistics::needed(&self.levels, share)
    }

    /// Integration time over the observation's own that a signal-to-noise ratio needs.
    #[must_use]
    pub fn time_factor(&self, signal_to_noise: f64) -> f64 {
        (signal_to_noise / self.signal_to_noise).powi(2)
    }
}

/// What is injected.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// The model as fitted.
    Moving,
    /// The same with no inward speed.
    AtRest,
}

/// One injected pair and what was found of it.
#[derive(Clone, Debug, PartialEq)]
pub struct Injection {
    /// What it is.
    pub kind: Kind,
    /// Noise over the observation's own.
    pub noise_factor: f64,
    /// The injected inward speed, km/s; 0 at rest.
    pub true_v_in_km_s: f64,
    /// What was found; why nothing was, as an error's text.
    pub found: Result<Found, String>,
}

/// What was found of an injected pair.
#[derive(Clone, Debug, PartialEq)]
pub struct Found {
    /// Adopted inward speed, km/s.
    pub v_in_km_s: Option<f64>,
    /// Its standard error, km/s.
    pub err_km_s: Option<f64>,
    /// Its 68 % interval, km/s: of formal errors, one either way.
    pub interval68_km_s: Option<(f64, f64)>,
    /// Its 95 % interval, km/s: of formal errors, two either way.
    pub interval95_km_s: Option<(f64, f64)>,
    /// Whether speed and errors are formal.
    pub formal: bool,
    /// Probabilities of infall, expansion, rest and two clouds; `None` without posteriors.
    pub probabilities: Option<[f64; 4]>,
    /// Cautions.
    pub cautions: String,
}

/// Probability from which motion counts as found.
pub const FOUND_FROM: f64 = 0.9;

/// Formal errors beyond which a speed counts as found.
pub const FOUND_ERRORS: f64 = 3.0;

impl Found {
    /// Whether motion of a sign is found: its probability above [`FOUND_FROM`], or of formal fits the
    /// speed beyond [`FOUND_ERRORS`].
    #[must_use]
    pub fn moves(&self, inward: bool) -> bool {
        if let Some([infall, expansion, ..]) = self.probabilities
            && !self.formal
        {
            return if inward { infall } else { expansion } > FOUND_FROM;
        }
        let (Some(v_in), Some(err)) = (self.v_in_km_s, self.err_km_s) else {
            return false;
        };
        let along = if inward { v_in } else { -v_in };
        along > FOUND_ERRORS * err
    }

    fn of(row: &Row) -> Result<Self, RunError> {
        let number = |name: &str| -> Result<Option<f64>, RunError> { Ok(row.get(name)?.number()) };
        let (v_in_km_s, err_km_s) = (number("v_in_km_s")?, number("v_in_km_s_err")?);
        let ends = |percent: &str| -> Result<Option<(f64, f64)>, RunError> {
            let low = number(&format!("v_in_km_s_lo{percent}"))?;
            Ok(low.zip(number(&format!("v_in_km_s_hi{percent}"))?))
        };
        let (of68, of95) = (ends("68")?, ends("95")?);
        let formal = |errors: f64| {
            let (v_in, err) = v_in_km_s.zip(err_km_s)?;
            Some((v_in - errors * err, v_in + errors * err))
        };
        let probabilities = ["p_infall", "p_expansion", "p_static", "p_two_clouds"].map(number);
        let [infall, expansion, at_rest, two_clouds] = probabilities;
        let probabilities = match (infall?, expansion?, at_rest?, two_clouds?) {
            (Some(a), Some(b), Some(c), Some(d)) => Some([a, b, c, d]),
            _ => None,
        };
        Ok(Self {
            interval68_km_s: of68.or_else(|| formal(1.0)),
            interval95_km_s: of95.or_else(|| formal(2.0)),
            v_in_km_s,
            err_km_s,
            formal: row.get("v_in_errors")?.text() == Some("formal"),
            probabilities,
            cautions: row.get("cautions")?.text().unwrap_or_default().to_owned(),
        })
    }
}

/// What every injection is made from.
struct Mould {
    thick: LineMould,
    thin: LineMould,
    /// Both lines of the model as fitted, K.
    moving: (Vec<f64>, Vec<f64>),
    /// The same at rest.
    at_rest: (Vec<f64>, Vec<f64>),
}

/// One line of an observation.
struct LineMould {
    outcome: LineOutcome,
    prepare: PrepareSettings,
}

/// One injection to be made.
#[derive(Clone, Copy, Debug)]
struct Task {
    noise_factor: f64,
    kind: Kind,
    /// Its number among all; its noise follows from it.
    number: u64,
}

/// Fits a pair, injects its best model, and fits every injection.
///
/// `progress` is told how many are done.
///
/// # Errors
///
/// [`RunError`] for settings or spectra that cannot be used, and where no model with an inward speed
/// describes the pair. Injections that cannot be fitted are results.
pub fn calibrate(
    pair: PairInput,
    settings: &PairSettings,
    how: &CalibrateSettings,
    batch: &BatchSettings,
    mut progress: impl FnMut(Progress) + Send,
) -> Result<(Calibration, PairOutcome), RunError> {
    how.check()?;
    let prepare = (pair.thick.prepare.clone(), pair.thin.prepare.clone());
    let outcome = fit_spectra(pair, settings, &mut Workspace::new())?;
    let fit = best(&outcome).ok_or_else(|| {
        RunError::setting(
            "fit.models",
            "no model with an inward speed that describes the pair",
            "one to inject",
        )
        .hinted("see what inrush fit says of the pair; two-layer and hill have an inward speed")
    })?;
    let mould = mould(&outcome, fit, prepare);
    let v_in_km_s = fit.parameter("v_in_km_s").map_or(0.0, |one| one.value);
    let signal_to_noise = peak(&mould.moving.0) / outcome.thick.prepared.noise.rms_k;
    let tasks = tasks(how);
    let total = tasks.len();
    let settings = injected_settings(settings);
    let mut injections = Vec::with_capacity(total);
    let _ = batch.run(
        tasks.iter().copied(),
        Workspace::new,
        |workspace, task: Task| {
            let found = injected(&mould, task, how.seed, &settings, workspace);
            Ok(task.injection(v_in_km_s, found))
        },
        |number, injection| {
            let task = usize::try_from(number)
                .ok()
                .and_then(|index| tasks.get(index));
            // a panic is that injection's error
            let failed = |error: RunError| Some(task?.injection(v_in_km_s, Err(error)));
            injections.extend(injection.map_or_else(failed, Some));
            progress(Progress {
                done: injections.len() as u64,
                before: 0,
                items: total as u64,
            });
            ControlFlow::<()>::Continue(())
        },
    )?;
    let levels = statistics::levels(&injections, v_in_km_s, signal_to_noise);
    let calibration = Calibration {
        source: outcome.name.clone(),
        lines: (
            outcome.thick.line.name.clone(),
            outcome.thin.line.name.clone(),
        ),
        model: fit.model,
        v_in_km_s,
        signal_to_noise,
        formal: outcome.judged.as_ref().and_then(Judged::adopted).is_none(),
        levels,
        injections,
    };
    Ok((calibration, outcome))
}

/// The fitted model of most evidence; of a formal fit, or where the adopted speed is formal, the adopted
/// one.
fn best(outcome: &PairOutcome) -> Option<&ModelFit> {
    let shares = outcome
        .judged
        .iter()
        .flat_map(|judged| &judged.verdict.shares);
    let of_most = shares.max_by(|a, b| a.1.total_cmp(&b.1));
    let by_evidence = of_most.and_then(|(model, _)| {
        let mut fits = outcome.fit.models.iter();
        fits.find(|fit| fit.model == *model && fit.converged())
    });
    by_evidence.or_else(|| outcome.fit.adopted())
}

fn mould(
    outcome: &PairOutcome,
    fit: &ModelFit,
    prepare: (PrepareSettings, PrepareSettings),
) -> Mould {
    let mut still = fit.clone();
    for parameter in &mut still.parameters {
        if parameter.name == "v_in_km_s" {
            parameter.value = 0.0;
        }
    }
    let sampling = |line: &LineOutcome| {
        let spectrum = &line.prepared.spectrum;
        Sampling::new(
            spectrum.velocity_km_s().to_vec(),
            spectrum.width_km_s().to_vec(),
            Sampling::MOST_POINTS,
        )
    };
    let (thick, thin) = (sampling(&outcome.thick), sampling(&outcome.thin));
    let profiles = |fit: &ModelFit| (fit.thick_profile_k(&thick), fit.thin_profile_k(&thin));
    // the channels are those after averaging
    let line = |outcome: &LineOutcome, prepare| LineMould {
        outcome: outcome.clone(),
        prepare: PrepareSettings {
            smooth_to_km_s: None,
            ..prepare
        },
    };
    Mould {
        moving: profiles(fit),
        at_rest: profiles(&still),
        thick: line(&outcome.thick, prepare.0),
        thin: line(&outcome.thin, prepare.1),
    }
}

fn peak(profile_k: &[f64]) -> f64 {
    profile_k.iter().copied().fold(0.0, f64::max)
}

/// Fewest draws for what nobody reads: nothing is given of an injection's source.
fn injected_settings(settings: &PairSettings) -> PairSettings {
    let mut settings = settings.clone();
    settings.derive.draws = DRAWS_LIMITS.0;
    settings
}

impl Task {
    fn injection(self, v_in_km_s: f64, found: Result<Found, RunError>) -> Injection {
        Injection {
            kind: self.kind,
            noise_factor: self.noise_factor,
            true_v_in_km_s: match self.kind {
                Kind::Moving => v_in_km_s,
                Kind::AtRest => 0.0,
            },
            found: found.map_err(|error| error.to_string()),
        }
    }
}

fn tasks(how: &CalibrateSettings) -> Vec<Task> {
    let mut tasks = Vec::new();
    for noise_factor in NOISE_FACTORS {
        let pairs = if noise_factor == 1.0 {
            how.pairs
        } else {
            how.fewer()
        };
        for kind in [Kind::Moving, Kind::AtRest] {
            for _ in 0..pairs {
                tasks.push(Task {
                    noise_factor,
                    kind,
                    number: tasks.len() as u64,
                });
            }
        }
    }
    tasks
}

/// Streams of the noise, far from those that posteriors and derived quantities draw from.
const NOISE_STREAMS: u64 = 0x696e_6a65_6374_0000_u64 << 8;

fn injected(
    mould: &Mould,
    task: Task,
    seed: u64,
    settings: &PairSettings,
    workspace: &mut Workspace,
) -> Result<Found, RunError> {
    let (thick_k, thin_k) = match task.kind {
        Kind::Moving => &mould.moving,
        Kind::AtRest => &mould.at_rest,
    };
    let line = |line: &LineMould, profile_k: &[f64], stream: u64| -> Result<LineInput, RunError> {
        let prepared = &line.outcome.prepared;
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream(NOISE_STREAMS + 2 * task.number + stream);
        let noise_k = task.noise_factor * prepared.noise.rms_k;
        let process = &prepared.noise.process;
        let noise = process.unit_noise(&mut generator, profile_k.len());
        let observed = prepared.spectrum.temperature_k();
        let temperature_k = (profile_k.iter().zip(noise).zip(observed))
            .map(|((profile, noise), observed)| {
                if observed.is_nan() {
                    f64::NAN
                } else {
                    profile + noise_k * noise
                }
            })
            .collect();
        let spectrum = prepared.spectrum.with_temperature_k(temperature_k);
        let spectrum = spectrum.map_err(|error| RunError::Internal(error.to_string()))?;
        Ok(LineInput {
            prepare: line.prepare.clone(),
            ..LineInput::in_memory(
                line.outcome.line.clone(),
                spectrum,
                &format!("injection {}", task.number),
            )
        })
    };
    let pair = PairInput {
        name: Some(format!("injection {}", task.number)),
        source: SourceProperties::default(),
        thick: line(&mould.thick, thick_k, 0)?,
        thin: line(&mould.thin, thin_k, 1)?,
    };
    let mut settings = settings.clone();
    if let Some(verdict) = &mut settings.verdict {
        // the posteriors' own randomness is averaged over too
        verdict.posterior.seed = seed.wrapping_add(task.number);
    }
    Found::of(&pair_row(&fit_spectra(pair, &settings, workspace)?)?)
}
