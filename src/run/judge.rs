//! A prepared pair into posteriors and a verdict, with the settings of the fit that both know.

use crate::fit::averaged::Averaged;
use crate::fit::conflict::{PriorConflict, conflict, replaced};
use crate::fit::hypotheses::{HypothesesError, Odds, Speed, Verdict, verdict};
use crate::fit::posterior::{
    Family, PairPosterior, PosteriorError, PosteriorSettings, pair_posterior,
};
use crate::fit::priors::Priors;
use crate::fit::{FitSettings, Unjudged, is_absorbed};
use crate::line::Line;
use crate::measure::{Measures, ThinLine};
use crate::model::RadiationTemperature;
use crate::prepare::Prepared;

/// How a pair is judged.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct VerdictSettings {
    /// Posteriors; models, range and averaging are those of the fit.
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
}

/// Posteriors and verdict, or why there are none.
///
/// # Errors
///
/// [`JudgeError`] for odds that are no probabilities, settings that make no posterior, and replaced
/// priors without mass where the data are. What lies in the data is no error, but an [`Unjudged`].
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
    let settings_of = |priors: &Priors, hypotheses: bool| PosteriorSettings {
        models: models.clone(),
        hypotheses,
        priors: priors.clone(),
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
        Err(error @ (PosteriorError::TooFewDraws { .. } | PosteriorError::NoPosterior { .. })) => {
            return Err(error.into());
        }
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

/// Settings of a fit that posteriors know nothing of, as run sheets name them.
fn unheard(fit: &FitSettings) -> Vec<String> {
    let switches = [
        (fit.free_thin_velocity, "free_thin_velocity"),
        (fit.free_thin_sigma, "free_thin_sigma"),
        (fit.isotope_ratio.is_some(), "isotope_ratio"),
    ];
    let switched = switches
        .into_iter()
        .filter(|(on, _)| *on)
        .map(|(_, name)| name.to_owned());
    let given = fit.given.keys().map(|name| format!("given {name}"));
    let bounds = fit.bounds.keys().map(|name| format!("bounds of {name}"));
    switched.chain(given).chain(bounds).collect()
}
