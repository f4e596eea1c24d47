//! What a reader of a result has to know: typed, with a short code and a sentence.

use super::clump::{ClumpPosterior, Misfit};
use super::hypotheses::{Hypothesis, Speed, Verdict};
use super::posterior::{Family, PairPosterior, PosteriorError};
use super::{PairFit, ThinFit};
use crate::constants::FWHM_PER_SIGMA;
use crate::measure::Measures;
use crate::model::Model;
use crate::numeric::least_squares::Side;
use crate::numeric::sampling::Doubt;
use crate::prepare::{PairLine, Prepared};
use crate::spectrum::Window;
use statrs::distribution::{ChiSquared, ContinuousCDF};

/// A reason to take a result with care.
#[derive(Clone, Debug, PartialEq)]
pub enum Caution {
    /// A search did not end at a minimum.
    NotConverged {
        /// The model.
        model: Model,
    },
    /// A parameter sits at its bound.
    AtBound {
        /// The model.
        model: Model,
        /// The parameter.
        parameter: &'static str,
        /// The bound's value.
        value: f64,
        /// Which bound.
        side: Side,
    },
    /// The data do not determine a parameter: no formal errors.
    Undetermined {
        /// The model.
        model: Model,
    },
    /// A minimum of nearly the same chi2 has the other sign of `v_in`.
    SecondMinimum {
        /// The model.
        model: Model,
        /// Inward speed there, km/s.
        v_in_km_s: f64,
        /// How much higher its chi2 is.
        delta_chi2: f64,
    },
    /// A model's halves are transparent: its speed is the distance of two thin lines beside each other.
    Transparent {
        /// The model.
        model: Model,
        /// Optical depth of a half.
        tau: f64,
    },
    /// Two models find significant speeds of opposite signs.
    OppositeSpeeds {
        /// Each of the two with its inward speed, km/s.
        fits: [(Model, f64); 2],
    },
    /// The residuals of some models exceed the noise.
    PoorFit {
        /// Each of the models with its chi2 over the degrees of freedom.
        fits: Vec<(Model, f64)>,
    },
    /// The thick line is not detected.
    ThickUndetected,
    /// The thick line is in absorption as a whole.
    ThickAbsorbed {
        /// Integrated intensity in the window, K km/s.
        integral_k_km_s: f64,
    },
    /// The thin line is not detected: velocity and width rest on the thick line.
    ThinUndetected {
        /// Height over its error.
        significance: f64,
    },
    /// The thin line has two peaks: two clouds, or it is not thin.
    ThinTwoPeaked,
    /// The thick line's dip is not at the thin line's velocity.
    DipOffThin {
        /// Dip less thin line, km/s.
        offset_km_s: f64,
        /// Its standard error, km/s.
        offset_err_km_s: f64,
    },
    /// The thick line's peak signal-to-noise ratio is low.
    LowSignal {
        /// Peak over channel noise.
        signal_to_noise: f64,
    },
    /// Channels are wide against the dispersion.
    WideChannels {
        /// Which line.
        line: PairLine,
        /// Channel width over sigma.
        width_over_sigma: f64,
    },
    /// The line goes on beyond its window or the band.
    WindowCutsLine {
        /// Which line.
        line: PairLine,
    },
    /// There is significant signal apart from the line: it counts neither as noise nor in the fit.
    OtherSignal {
        /// Which line's spectrum.
        line: PairLine,
        /// Where it is.
        windows: Vec<Window>,
    },
    /// Noise is correlated between neighbouring channels (accounted for in chi2 and errors).
    CorrelatedNoise {
        /// Which line.
        line: PairLine,
        /// Correlation of adjacent channels.
        adjacent: f64,
    },
    /// The thick line is narrower or fainter than the thin one: they may be swapped.
    MaybeSwapped,
    /// There is neither posterior nor verdict, though they were asked for.
    NoPosterior {
        /// Why.
        reason: Unjudged,
    },
    /// Posterior and probabilities know nothing of some settings of the fit.
    SettingsUnheard {
        /// The settings.
        settings: Vec<String>,
    },
    /// Draws of families that carry weight do not describe their posterior.
    PosteriorUntrusted {
        /// Each family with what speaks against its draws.
        doubts: Vec<(Family, Doubt)>,
    },
    /// The data say hardly more of the speed than its prior does.
    SpeedUnconstrained,
    /// The speed is a limit in either direction.
    SpeedLimit {
        /// With 95 % probability the speed is below, km/s.
        limit_km_s: f64,
    },
    /// The models' speeds are farther from each other than the interval is wide.
    ModelsDiffer {
        /// Median inward speed of each, km/s.
        speeds: Vec<(Model, f64)>,
    },
    /// Two clouds are more probable than all else.
    TwoCloudsFavoured {
        /// Their probability.
        probability: f64,
    },
    /// Noise does not explain what the best sphere leaves.
    SphereMisfit {
        /// The likely reason.
        reason: Misfit,
    },
    /// Draws of the sphere do not describe its posterior.
    SphereUntrusted {
        /// What speaks against them.
        doubts: Vec<Doubt>,
    },
    /// Settings of the fit that the sphere knows nothing of.
    SphereUnheard {
        /// As run sheets name them.
        settings: Vec<String>,
    },
    /// There is no posterior of a sphere.
    NoSphere {
        /// Why.
        reason: PosteriorError,
    },
}

/// Why a pair has no posterior.
#[derive(Clone, Debug, PartialEq)]
pub enum Unjudged {
    /// No fitted model has one.
    NoModel,
    /// The thick line is in absorption.
    Absorbed,
    /// It failed.
    Failed(PosteriorError),
}

impl Unjudged {
    fn text(&self) -> String {
        match self {
            Self::NoModel => {
                "none of the fitted models has a posterior (two-layer, hill and hill-surface have)"
                    .to_owned()
            }
            Self::Absorbed => "no posterior describes a line in absorption".to_owned(),
            Self::Failed(error) => format!("no posterior: {error}"),
        }
    }
}

/// Each in words, with commas between.
fn listed<T>(all: &[T], words: impl Fn(&T) -> String) -> String {
    all.iter().map(words).collect::<Vec<String>>().join(", ")
}

fn word(line: PairLine) -> &'static str {
    match line {
        PairLine::Thick => "thick",
        PairLine::Thin => "thin",
    }
}

impl Caution {
    /// The short code of the tables.
    #[must_use]
    pub fn code(&self) -> &'static str {
        match self {
            Self::NotConverged { .. } => "not-converged",
            Self::AtBound { .. } => "parameter-at-bound",
            Self::Undetermined { .. } => "parameter-undetermined",
            Self::SecondMinimum { .. } => "second-minimum",
            Self::Transparent { .. } => "transparent-fit",
            Self::OppositeSpeeds { .. } => "opposite-speeds",
            Self::PoorFit { .. } => "poor-fit",
            Self::ThickUndetected => "thick-undetected",
            Self::ThickAbsorbed { .. } => "thick-absorbed",
            Self::ThinUndetected { .. } => "thin-undetected",
            Self::ThinTwoPeaked => "thin-two-peaked",
            Self::DipOffThin { .. } => "dip-off-thin",
            Self::LowSignal { .. } => "low-signal",
            Self::WideChannels { .. } => "wide-channels",
            Self::WindowCutsLine { .. } => "window-cuts-line",
            Self::OtherSignal { .. } => "other-signal",
            Self::CorrelatedNoise { .. } => "correlated-noise",
            Self::MaybeSwapped => "maybe-swapped",
            Self::NoPosterior { .. } => "no-posterior",
            Self::SettingsUnheard { .. } => "settings-unheard",
            Self::PosteriorUntrusted { .. } => "posterior-untrusted",
            Self::SpeedUnconstrained => "speed-unconstrained",
            Self::SphereMisfit { .. } => "sphere-misfit",
            Self::SphereUntrusted { .. } => "sphere-untrusted",
            Self::SphereUnheard { .. } => "sphere-unheard",
            Self::NoSphere { .. } => "no-sphere",
            Self::SpeedLimit { .. } => "speed-limit",
            Self::ModelsDiffer { .. } => "models-differ",
            Self::TwoCloudsFavoured { .. } => "two-clouds-favoured",
        }
    }

    /// The sentence for people.
    #[must_use]
    #[expect(clippy::too_many_lines, reason = "a sentence a caution")]
    pub fn text(&self) -> String {
        match self {
            Self::NotConverged { model } => format!("the {} search did not converge", model.name()),
            Self::AtBound { model, parameter, value, side } => {
                let side = match side {
                    Side::Lower => "lower",
                    Side::Upper => "upper",
                    Side::Fixed => "fixed",
                };
                format!("{parameter} of {} sits at its {side} bound, {value:.4}", model.name())
            }
            Self::Undetermined { model } => {
                format!("the data do not determine every parameter of {}: it has no formal errors", model.name())
            }
            Self::SecondMinimum { model, v_in_km_s, delta_chi2 } => format!(
                "{} also fits with v_in = {v_in_km_s:.3} km/s, the other sign, at a chi2 only {delta_chi2:.1} higher",
                model.name()
            ),
            Self::Transparent { model, tau } => format!(
                "{} finds an optical depth of only {tau:.2}: two transparent components beside each other, as two clouds would make, or a line that is not thick",
                model.name()
            ),
            Self::OppositeSpeeds { fits: [one, other] } => format!(
                "{} finds {:+.3} km/s and {} {:+.3} km/s: the data do not tell infall from expansion",
                one.0.name(),
                one.1,
                other.0.name(),
                other.1
            ),
            Self::PoorFit { fits } => format!(
                "residuals exceed the noise, so formal errors are too small: reduced chi2 of {}",
                listed(fits, |(model, chi2_reduced)| format!("{} {chi2_reduced:.2}", model.name()))
            ),
            Self::ThickUndetected => "the thick line is not detected".to_owned(),
            Self::ThickAbsorbed { integral_k_km_s } => format!(
                "the thick line is in absorption ({integral_k_km_s:.2} K km/s): only two-layer-continuum, with the continuum source given, describes that"
            ),
            Self::ThinUndetected { significance } => format!(
                "the thin line is not detected ({significance:.1} standard errors): velocity and width rest on the thick line"
            ),
            Self::ThinTwoPeaked => {
                "the thin line has two peaks: two clouds on one line of sight, or a line that is not thin".to_owned()
            }
            Self::DipOffThin { offset_km_s, offset_err_km_s } => format!(
                "the thick line's dip is {offset_km_s:+.3} km/s (error {offset_err_km_s:.3}) from the thin line: not the picture of infall"
            ),
            Self::LowSignal { signal_to_noise } => format!(
                "peak signal-to-noise {signal_to_noise:.0} of the thick line is below {LOW_SIGNAL:.0}: profile shapes are hard to tell"
            ),
            Self::WideChannels { line, width_over_sigma } => format!(
                "{} line's channels are {width_over_sigma:.1} dispersions wide: they blur the profile",
                word(*line)
            ),
            Self::WindowCutsLine { line } => {
                format!("the {} line goes on beyond its window or the band", word(*line))
            }
            Self::OtherSignal { line, windows } => format!(
                "the {} spectrum holds signal apart from the line, at {} km/s: left out of baseline, noise and fit",
                word(*line),
                listed(windows, |one| format!("{:.2} to {:.2}", one.low_km_s, one.high_km_s))
            ),
            Self::CorrelatedNoise { line, adjacent } => format!(
                "{} line's noise is correlated from channel to channel ({adjacent:.2} between neighbours): taken into account",
                word(*line)
            ),
            Self::MaybeSwapped => {
                "the thick line is fainter than the thin one: are the two files swapped?".to_owned()
            }
            Self::NoPosterior { reason } => format!(
                "{}: there are no probabilities, and errors are formal",
                reason.text()
            ),
            Self::SettingsUnheard { settings } => format!(
                "the posterior knows nothing of {}: the adopted speed is the least-squares one with its formal error, the probabilities are those without",
                settings.join(", ")
            ),
            Self::PosteriorUntrusted { doubts } => format!(
                "draws do not describe the posterior well ({}): intervals and probabilities may be off",
                listed(doubts, |(family, doubt)| format!("{}: {}", family.name(), doubt.text()))
            ),
            Self::SpeedUnconstrained => {
                "the data do not constrain the inward speed: they say hardly more than its prior".to_owned()
            }
            Self::SpeedLimit { limit_km_s } => format!(
                "no motion is measured: the speed is below {limit_km_s:.3} km/s in either direction with 95 % probability"
            ),
            Self::ModelsDiffer { speeds } => format!(
                "the models differ by more than their interval is wide ({} km/s): quote v_in_systematic_km_s beside it",
                listed(speeds, |(model, v_in_km_s)| format!("{} {v_in_km_s:+.3}", model.name()))
            ),
            Self::TwoCloudsFavoured { probability } => format!(
                "two clouds on one line of sight explain the pair best (probability {probability:.2}): the speed holds only if it is one clump"
            ),
            Self::SphereMisfit { reason } => format!(
                "noise does not explain what the best sphere leaves ({}): the slabs' speed is adopted",
                reason.text()
            ),
            Self::SphereUntrusted { doubts } => format!(
                "draws do not describe the sphere's posterior well ({}): the slabs' speed is adopted",
                listed(doubts, Doubt::text)
            ),
            Self::SphereUnheard { settings } => format!(
                "the sphere knows nothing of {}: the slabs' speed is adopted",
                listed(settings, Clone::clone)
            ),
            Self::NoSphere { reason } => {
                format!("no sphere: {reason}; the slabs' speed is adopted")
            }
        }
    }
}

/// Peak signal-to-noise ratio below which a caution is given. De Vries & Myers 2005 asked for 30
/// (published abstract); at 10 formal errors are known to be far too small.
const LOW_SIGNAL: f64 = 30.0;
/// Integral over its error from which absorption is one.
const DETECTION: f64 = 5.0;
/// Channel width over sigma above which a caution is given.
const WIDE: f64 = 1.0;
/// chi2 difference of a second minimum below which a caution is given: three standard deviations.
const SECOND_MINIMUM: f64 = 9.0;
/// Offset of dip and thin line, in standard errors and in FWHM, above which a caution is given: the
/// front half absorbs at `v_lsr` + `v_in`, so the dip of an infalling clump is redward of the thin
/// line's centre, but well within the line.
const DIP_SIGNIFICANCE: f64 = 3.0;
const DIP_OFFSET: f64 = 0.5;
/// Optical depth of a half below which a model is no longer one of self-absorption: of 80 simulated
/// spheres the hill goes below on six of ten pairs of two clouds and on one of the other 70.
const TRANSPARENT: f64 = 0.5;
/// Speed over its formal error from which its sign counts.
const SIGN: f64 = 3.0;
/// Probability above which a hypothesis is more probable than all others together.
const EVEN: f64 = 0.5;
/// Probability of a chi2 as high by chance below which a caution is given.
const POOR_FIT: f64 = 1e-3;

/// Everything that cautions are drawn from.
#[derive(Clone, Copy, Debug)]
pub struct PairFacts<'a> {
    /// Thick line.
    pub thick: &'a Prepared,
    /// Thin line.
    pub thin: &'a Prepared,
    /// Thin line's own fit.
    pub thin_fit: &'a ThinFit,
    /// Asymmetry measures.
    pub measures: &'a Measures,
    /// Joint fits.
    pub fit: &'a PairFit,
    /// What posteriors say.
    pub judgement: Judgement<'a>,
    /// The sphere whose speed is adopted.
    pub sphere: Option<&'a ClumpPosterior>,
}

/// What posteriors say of a pair.
#[derive(Clone, Copy, Debug)]
pub enum Judgement<'a> {
    /// They were not asked.
    NotAsked,
    /// There is none.
    Missing(&'a Unjudged),
    /// Posteriors, their verdict, what is known of the speed, and settings of the fit that they know
    /// nothing of.
    Found(&'a PairPosterior, &'a Verdict, Speed, &'a [String]),
}

/// All cautions of a pair, the gravest first.
#[must_use]
pub fn cautions(facts: &PairFacts<'_>) -> Vec<Caution> {
    let mut found = Vec::new();
    of_detection(facts, &mut found);
    of_judgement(facts, &mut found);
    of_fits(facts.fit, &mut found);
    of_spectra(facts, &mut found);
    found
}

/// What limits the speed of the sphere that a pair prefers.
#[must_use]
pub fn sphere_cautions(
    found: Result<&ClumpPosterior, &PosteriorError>,
    unheard: &[String],
) -> Vec<Caution> {
    let sphere = match found {
        Ok(sphere) => sphere,
        Err(error) => {
            return vec![Caution::NoSphere {
                reason: error.clone(),
            }];
        }
    };
    let misfit = sphere.residuals.misfit;
    let misfit = misfit.map(|reason| Caution::SphereMisfit { reason });
    let doubts = sphere.quality.doubts();
    let untrusted = (!doubts.is_empty()).then_some(Caution::SphereUntrusted { doubts });
    let unheard = (!unheard.is_empty()).then(|| Caution::SphereUnheard {
        settings: unheard.to_vec(),
    });
    misfit.into_iter().chain(untrusted).chain(unheard).collect()
}

/// Whether the thick line as a whole is in absorption.
#[must_use]
pub fn is_absorbed(measures: &Measures) -> bool {
    let integral = measures.integral_thick_k_km_s;
    measures.peak_thick_k.is_none() && integral.value < -DETECTION * integral.err
}

fn of_detection(facts: &PairFacts<'_>, found: &mut Vec<Caution>) {
    let measures = facts.measures;
    match measures.peak_thick_k {
        None => {
            found.push(if is_absorbed(measures) {
                Caution::ThickAbsorbed {
                    integral_k_km_s: measures.integral_thick_k_km_s.value,
                }
            } else {
                Caution::ThickUndetected
            });
        }
        Some(peak) => {
            let signal_to_noise = peak.value / facts.thick.noise.rms_k;
            if signal_to_noise < LOW_SIGNAL {
                found.push(Caution::LowSignal { signal_to_noise });
            }
        }
    }
    match &facts.thin_fit.line {
        None => found.push(Caution::ThinUndetected {
            significance: facts.thin_fit.significance,
        }),
        Some(thin) => {
            let fainter = |thick_k: f64| thin.peak_k.value > thick_k + 3.0 * thin.peak_k.err;
            if measures
                .peak_thick_k
                .is_some_and(|peak| fainter(peak.value))
            {
                found.push(Caution::MaybeSwapped);
            }
            if let Some(peaks) = &measures.two_peaks {
                let offset_km_s = peaks.v_dip_km_s.value - thin.v_km_s.value;
                let offset_err_km_s = peaks.v_dip_km_s.err.hypot(thin.v_km_s.err);
                let far = offset_km_s.abs() > DIP_OFFSET * thin.fwhm_km_s.value;
                if far && offset_km_s.abs() > DIP_SIGNIFICANCE * offset_err_km_s {
                    found.push(Caution::DipOffThin {
                        offset_km_s,
                        offset_err_km_s,
                    });
                }
            }
        }
    }
    if measures.thin_two_peaked {
        found.push(Caution::ThinTwoPeaked);
    }
}

fn of_judgement(facts: &PairFacts<'_>, found: &mut Vec<Caution>) {
    let (posterior, verdict, speed, unheard) = match facts.judgement {
        Judgement::NotAsked => return,
        Judgement::Missing(reason) => {
            found.push(Caution::NoPosterior {
                reason: reason.clone(),
            });
            return;
        }
        Judgement::Found(posterior, verdict, speed, unheard) => {
            (posterior, verdict, speed, unheard)
        }
    };
    let probability = verdict.probability(Hypothesis::TwoClouds);
    if probability > EVEN {
        found.push(Caution::TwoCloudsFavoured { probability });
    }
    if !verdict.trusted {
        found.push(Caution::PosteriorUntrusted {
            doubts: verdict.doubts.clone(),
        });
    }
    if !unheard.is_empty() {
        found.push(Caution::SettingsUnheard {
            settings: unheard.to_vec(),
        });
        return;
    }
    let (low, high) = verdict.v_in_km_s.interval68;
    match facts.sphere.map_or(speed, ClumpPosterior::speed) {
        Speed::Unconstrained => found.push(Caution::SpeedUnconstrained),
        Speed::Below { limit_km_s } => found.push(Caution::SpeedLimit { limit_km_s }),
        Speed::Measured if facts.sphere.is_some() => {}
        Speed::Measured if 2.0 * verdict.between_models_km_s > high - low => {
            let of = |model| Some(posterior.of(Family::Moving(model))?.v_in_km_s()?.median);
            let models = verdict.shares.iter();
            found.push(Caution::ModelsDiffer {
                speeds: models
                    .filter_map(|(model, _)| Some((*model, of(*model)?)))
                    .collect(),
            });
        }
        Speed::Measured => {}
    }
}

fn of_fits(pair: &PairFit, found: &mut Vec<Caution>) {
    let mut poor = Vec::new();
    for fit in &pair.models {
        let model = fit.model;
        if !fit.converged() {
            found.push(Caution::NotConverged { model });
        }
        for parameter in &fit.parameters {
            if let Some(side) = parameter.at_bound {
                found.push(Caution::AtBound {
                    model,
                    parameter: parameter.name,
                    value: parameter.value,
                    side,
                });
            }
        }
        if !fit.determined() {
            found.push(Caution::Undetermined { model });
        }
        let rival = fit
            .rival
            .filter(|rival| fit.determined() && rival.delta_chi2 < SECOND_MINIMUM);
        if let Some(rival) = rival {
            found.push(Caution::SecondMinimum {
                model,
                v_in_km_s: rival.v_in_km_s,
                delta_chi2: rival.delta_chi2,
            });
        }
        if let Some(tau) = fit.parameter("tau").filter(|tau| tau.value < TRANSPARENT) {
            found.push(Caution::Transparent {
                model,
                tau: tau.value,
            });
        }
        let by_chance = ChiSquared::new(fit.degrees_of_freedom.max(1) as f64)
            .map_or(1.0, |chi2| chi2.sf(fit.chi2));
        if by_chance < POOR_FIT {
            poor.push((model, fit.chi2_reduced()));
        }
    }
    if let Some(fits) = opposite_speeds(pair) {
        found.push(Caution::OppositeSpeeds { fits });
    }
    if !poor.is_empty() {
        found.push(Caution::PoorFit { fits: poor });
    }
}

fn of_spectra(facts: &PairFacts<'_>, found: &mut Vec<Caution>) {
    let sigma_km_s = facts
        .thin_fit
        .line
        .map(|thin| thin.fwhm_km_s.value / FWHM_PER_SIGMA)
        .or_else(|| {
            facts
                .fit
                .adopted()?
                .parameter("sigma_km_s")
                .map(|parameter| parameter.value)
        });
    for (line, prepared) in [(PairLine::Thick, facts.thick), (PairLine::Thin, facts.thin)] {
        if let Some(sigma_km_s) = sigma_km_s {
            let width_over_sigma = prepared.spectrum.channel_width_km_s() / sigma_km_s;
            if width_over_sigma > WIDE {
                found.push(Caution::WideChannels {
                    line,
                    width_over_sigma,
                });
            }
        }
        if prepared.window_cuts_line {
            found.push(Caution::WindowCutsLine { line });
        }
        if !prepared.other_signal.is_empty() {
            found.push(Caution::OtherSignal {
                line,
                windows: prepared.other_signal.clone(),
            });
        }
        if !prepared.noise.process.is_white() {
            let adjacent = prepared.noise.process.adjacent_correlation();
            found.push(Caution::CorrelatedNoise { line, adjacent });
        }
    }
}

/// The fastest significant speed of either sign, where there are both.
fn opposite_speeds(pair: &PairFit) -> Option<[(Model, f64); 2]> {
    let speeds = || {
        pair.models.iter().filter_map(|fit| {
            let v_in = fit.estimate("v_in_km_s")?;
            (v_in.value.abs() > SIGN * v_in.err).then_some((fit.model, v_in.value))
        })
    };
    let inward = speeds().max_by(|a, b| a.1.total_cmp(&b.1))?;
    let outward = speeds().min_by(|a, b| a.1.total_cmp(&b.1))?;
    (inward.1 > 0.0 && outward.1 < 0.0).then_some([inward, outward])
}
