//! A prepared pair into posteriors and a verdict, with the settings of the fit that both know.

use crate::fit::averaged::Averaged;
use crate::fit::conflict::{PriorConflict, conflict, replaced};
use crate::fit::hypotheses::{HypothesesError, Odds, Speed, Verdict, verdict};
use crate::fit::posterior::{
    CONSTRAINED, Family, PairPosterior, PosteriorError, PosteriorSettings, pair_posterior,
};
use crate::fit::priors::Priors;
use crate::fit::{FitSettings, Judgement, Unjudged, is_absorbed};
use crate::line::Line;
use crate::measure::{Measures, ThinLine};
use crate::model::RadiationTemperature;
use crate::prepare::Prepared;
use std::collections::BTreeMap;

/// How a pair is judged.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct VerdictSettings {
    /// Posteriors; models, range, averaging, bounds, given values and the isotope ratio are those of the
    /// fit, and the errors of the lines' efficiencies are added to those of the calibration.
    pub posterior: PosteriorSettings,
    /// Prior odds of the hypotheses.
    pub odds: Odds,
}

/// Posteriors of a pair and what follows from them.
#[derive(Clone, Debug, PartialEq)]
pub struct Judged {
    /// One posterior a family.
    pub posterior: PairPosterior,
    /// The verdict.
    pub verdict: Verdict,
    /// What is known of the speed: of a thick line that is not detected, a limit or nothing.
    pub speed: Speed,
    /// Settings of the fit that posteriors know nothing of; with any the least-squares speed is adopted.
    pub unheard: Vec<String>,
}

impl Judged {
    /// The posterior averaged over models, where the adopted speed comes from it.
    #[must_use]
    pub fn adopted(&self) -> Option<Averaged<'_>> {
        if self.unheard.is_empty() {
            Averaged::new(&self.posterior, &self.verdict)
        } else {
            None
        }
    }
}

/// A prepared pair.
pub(super) struct PreparedPair<'a> {
    pub thick: &'a Prepared,
    pub thin: &'a Prepared,
    pub lines: (&'a Line, &'a Line),
    pub thin_line: Option<&'a ThinLine>,
    pub measures: &'a Measures,
    /// Relative errors of both efficiencies.
    pub calibration_error: (f64, f64),
}

/// Posteriors and verdict, or why there are none.
///
/// # Errors
///
/// [`JudgeError`] for odds that are no probabilities, settings that make no posterior, and bounds, given
/// values or replaced priors without mass where the data are. What lies in the data is no error, but an [`Unjudged`].
pub(super) fn judge(
    pair: &PreparedPair<'_>,
    fit: &FitSettings,
    settings: &VerdictSettings,
) -> Result<Result<Judged, Unjudged>, JudgeError> {
    let models: Vec<_> = fit
        .models
        .iter()
        .copied()
        .filter(|model| Family::Moving(*model).is_known())
        .collect();
    if models.is_empty() {
        return Ok(Err(Unjudged::NoModel));
    }
    if is_absorbed(pair.measures) {
        return Ok(Err(Unjudged::Absorbed));
    }
    let own_error = settings.posterior.calibration_error;
    let settings_of = |priors: &Priors, hypotheses: bool| PosteriorSettings {
        models: models.clone(),
        hypotheses,
        priors: priors.clone(),
        bounds: heard(&fit.bounds),
        given: heard(&fit.given),
        isotope_ratio: fit.isotope_ratio,
        calibration_error: (
            own_error.0.hypot(pair.calibration_error.0),
            own_error.1.hypot(pair.calibration_error.1),
        ),
        range: fit.range,
        averaging: fit.averaging,
        ..settings.posterior.clone()
    };
    let sampled = |own: &PosteriorSettings| {
        pair_posterior(pair.thick, pair.thin, pair.lines, pair.thin_line, own)
    };
    let priors = &settings.posterior.priors;
    if !replaced(priors).is_empty()
        && let Ok(by_default) = sampled(&settings_of(&Priors::default(), false))
    {
        let radiation = RadiationTemperature::new(pair.lines.0.rest_frequency_ghz);
        if let Some(conflict) = conflict(priors, &by_default, &radiation) {
            return Err(conflict.into());
        }
    }
    let posterior = sampled(&settings_of(priors, true));
    let posterior = match posterior {
        Ok(posterior) => posterior,
        Err(error) if error.is_of_settings() => return Err(error.into()),
        Err(error) => return Ok(Err(Unjudged::Failed(error))),
    };
    let verdict = verdict(&posterior, &settings.odds)?;
    let mut judged = Judged {
        speed: verdict.speed,
        posterior,
        verdict,
        unheard: unheard(fit),
    };
    if pair.measures.peak_thick_k.is_none() && judged.speed == Speed::Measured {
        judged.speed = Speed::Unconstrained;
    }
    Ok(Ok(judged))
}

/// What cautions are drawn from.
pub(super) fn judgement(judged: Option<&Result<Judged, Unjudged>>) -> Judgement<'_> {
    match judged {
        None => Judgement::NotAsked,
        Some(Err(reason)) => Judgement::Missing(reason),
        Some(Ok(judged)) => Judgement::Found(
            &judged.posterior,
            &judged.verdict,
            judged.speed,
            &judged.unheard,
        ),
    }
}

/// Why a pair cannot be judged.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum JudgeError {
    /// Settings that make no posterior.
    #[error(transparent)]
    Posterior(#[from] PosteriorError),
    /// Odds that are no probabilities.
    #[error(transparent)]
    Hypotheses(#[from] HypothesesError),
    /// A replaced prior without mass where the data are.
    #[error(transparent)]
    Prior(#[from] PriorConflict),
}

impl JudgeError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        match self {
            Self::Posterior(error) => error.hint(),
            Self::Hypotheses(error) => error.hint(),
            Self::Prior(error) => Some(error.hint()),
        }
    }
}

/// Bounds or given values of what posteriors know.
fn heard<T: Copy>(of_fit: &BTreeMap<String, T>) -> BTreeMap<String, T> {
    let known = |(name, _): &(&String, &T)| CONSTRAINED.contains(&name.as_str());
    let heard = of_fit.iter().filter(known);
    heard.map(|(name, value)| (name.clone(), *value)).collect()
}

/// Settings of a fit that posteriors know nothing of, as run sheets name them.
fn unheard(fit: &FitSettings) -> Vec<String> {
    let switches = [
        (fit.free_thin_velocity, "free_thin_velocity"),
        (fit.free_thin_sigma, "free_thin_sigma"),
    ];
    let switched = switches
        .into_iter()
        .filter(|(on, _)| *on)
        .map(|(_, name)| name.to_owned());
    let unknown = |name: &&String| !CONSTRAINED.contains(&name.as_str());
    let given = fit.given.keys().filter(unknown);
    let given = given.map(|name| format!("given {name}"));
    let bounds = fit.bounds.keys().filter(unknown);
    let bounds = bounds.map(|name| format!("bounds of {name}"));
    switched.chain(given).chain(bounds).collect()
}
